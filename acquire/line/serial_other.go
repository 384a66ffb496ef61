//go:build !linux

package line

import (
	"errors"
	"syscall"
	"time"

	"go.bug.st/serial"
)

// hold does on Linux what the serial library does not offer. Elsewhere there is
// nothing to hold, and kernel flow control is refused.
type hold struct{}

var errBusy = errors.New("another program holds the port exclusively")

var errFlow = errors.New("flow control can be set on Linux only")

func beforeOpen(string) (hold, error) { return hold{}, nil }

func (h *hold) afterOpen(flow string) error {
	if flow != "none" {
		return errFlow
	}
	return nil
}

// write waits for the library at most writeTimeout. A write that is still blocked
// then ends when the port is closed or unplugged.
func (h *hold) write(port serial.Port, p []byte) (int, error) {
	type result struct {
		n   int
		err error
	}
	done := make(chan result, 1)
	bytes := append([]byte(nil), p...)
	go func() {
		n, err := port.Write(bytes)
		done <- result{n, err}
	}()
	timer := time.NewTimer(writeTimeout)
	defer timer.Stop()
	select {
	case r := <-done:
		return r.n, r.err
	case <-timer.C:
		return 0, errStalled
	}
}

func (h *hold) release() {}

func isDeviceLost(err error) bool {
	return errors.Is(err, syscall.EIO) || errors.Is(err, syscall.ENXIO) || errors.Is(err, syscall.ENODEV)
}
