package line

import (
	"context"
	"fmt"
	"net"
	"time"
)

// tcpWire is a connection to a serial device server. Keep-alive probes notice a
// server that vanished without a word.
type tcpWire struct{ *net.TCPConn }

func dial(ctx context.Context, address string) (*tcpWire, error) {
	d := net.Dialer{
		Timeout:         dialTimeout,
		KeepAliveConfig: net.KeepAliveConfig{Enable: true, Idle: 10 * time.Second, Interval: 5 * time.Second, Count: 3},
	}
	c, err := d.DialContext(ctx, "tcp", address)
	if err != nil {
		return nil, fmt.Errorf("dial: %w", err)
	}
	return &tcpWire{c.(*net.TCPConn)}, nil
}

func (w *tcpWire) Write(p []byte) (int, error) {
	if err := w.SetWriteDeadline(time.Now().Add(writeTimeout)); err != nil {
		return 0, err
	}
	n, err := w.TCPConn.Write(p)
	if e, ok := err.(net.Error); ok && e.Timeout() {
		return n, errStalled
	}
	return n, err
}

// interrupt wakes a Read that waits, so that Close need not wait for bytes.
func (w *tcpWire) interrupt() {
	// An error means that the connection is closed, and then nobody waits.
	_ = w.SetDeadline(time.Unix(1, 0))
}
