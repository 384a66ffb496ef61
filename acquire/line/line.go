// Package line opens the way to a balance: a serial port by path or by the adapter's
// USB numbers, a TCP connection to a serial device server, or a recorded line with
// its timing. It can record what passes.
//
// It moves bytes and knows nothing of what they mean. It does not reopen by itself
// (the station does), never lists ports while one is open, never blocks for ever in
// a write, and says in the operator's words why a line cannot be opened.
package line

import (
	"context"
	"errors"
	"fmt"
	"io"
	"sync"
	"sync/atomic"
	"syscall"
	"time"
)

// Spec names a line. Exactly one of Port, USB, TCP and Replay is set.
type Spec struct {
	Port   string // path of a serial device
	USB    string // "VID:PID" or "VID:PID:SERIAL", hexadecimal numbers
	TCP    string // "host:port"
	Replay string // file that was recorded

	Baud     int    // 0: 9600
	DataBits int    // 7 or 8; 0: 8
	Parity   string // none, odd, even, mark or space; "": none
	StopBits int    // 1 or 2; 0: 1
	Flow     string // none, xonxoff or rtscts; "": none

	Record string  // file to record into, "" for none
	Pace   float64 // how much faster than recorded a replay runs; 0: 1
}

// The limits of a line's waiting.
const (
	readSlice    = 200 * time.Millisecond // a serial Read returns at least so often, so that Close can wait for it
	writeTimeout = 2 * time.Second        // a command has a few bytes; a line that does not take them has stalled
	dialTimeout  = 5 * time.Second
)

// wire is what moves the bytes. Read returns (0, nil) when nothing came for a while.
type wire interface {
	Read(p []byte) (int, error)
	Write(p []byte) (int, error)
	Close() error
}

// Source opens one line again and again. It is used by one goroutine.
type Source struct {
	spec   Spec
	replay *replay
	record *recorder
}

// NewSource checks the spec and reads a recording or begins one.
func NewSource(spec Spec) (*Source, error) {
	spec = spec.withDefaults()
	if err := spec.Check(); err != nil {
		return nil, err
	}
	s := &Source{spec: spec}
	var err error
	if spec.Replay != "" {
		if s.replay, err = openReplay(spec.Replay, spec.Pace); err != nil {
			return nil, err
		}
	}
	if spec.Record != "" {
		if s.record, err = openRecorder(spec.Record, spec.String()); err != nil {
			return nil, errors.Join(err, s.Close())
		}
	}
	return s, nil
}

// Close ends recording and replaying. Connections are closed apart from it.
func (s *Source) Close() error {
	var errs []error
	if s.replay != nil {
		errs = append(errs, s.replay.Close())
	}
	if s.record != nil {
		errs = append(errs, s.record.Close())
	}
	return errors.Join(errs...)
}

// Open opens the line. Its error is a *session.Fault. What lay in the computer's
// buffers from before is dropped as far as the system allows; the first line may
// still be the tail of one.
func (s *Source) Open(ctx context.Context) (*Conn, error) {
	w, name, err := s.open(ctx)
	if err != nil {
		return nil, fault(s.spec, err)
	}
	s.record.mark("open " + name)
	return &Conn{wire: w, name: name, spec: s.spec, record: s.record}, nil
}

func (s *Source) open(ctx context.Context) (wire, string, error) {
	switch {
	case s.replay != nil:
		w, err := s.replay.next()
		return w, s.spec.Replay, err
	case s.spec.TCP != "":
		w, err := dial(ctx, s.spec.TCP)
		return w, s.spec.TCP, err
	case s.spec.USB != "":
		path, err := findUSB(s.spec.USB)
		if err != nil {
			return nil, "", err
		}
		w, err := openSerial(path, s.spec)
		return w, path, err
	}
	w, err := openSerial(s.spec.Port, s.spec)
	return w, s.spec.Port, err
}

// Open opens a line once; the recording, if there is one, ends with the connection.
func Open(ctx context.Context, spec Spec) (*Conn, error) {
	s, err := NewSource(spec)
	if err != nil {
		return nil, err
	}
	c, err := s.Open(ctx)
	if err != nil {
		return nil, errors.Join(err, s.Close())
	}
	c.source = s
	return c, nil
}

// Conn is an open line. One goroutine reads; Write and Close may be called from
// others.
type Conn struct {
	wire   wire
	name   string
	spec   Spec
	record *recorder
	source *Source // closed with the connection, when Open made it

	closing atomic.Bool
	// inUse is held for reading by Read and Write, for writing by Close: the number
	// of a closed descriptor may belong to another file a moment later.
	inUse   sync.RWMutex
	writing sync.Mutex // one Write at a time
}

// Name gives what was opened: the path, the address or the file.
func (c *Conn) Name() string { return c.name }

// Read waits for bytes. It returns (0, nil) when none came for a while, net.ErrClosed
// or os.ErrClosed never: after Close it is io.ErrClosedPipe, and when the device went
// away a *session.Fault. A recording that is over gives io.EOF.
func (c *Conn) Read(p []byte) (int, error) {
	c.inUse.RLock()
	defer c.inUse.RUnlock()
	if c.closing.Load() {
		return 0, io.ErrClosedPipe
	}
	n, err := c.wire.Read(p)
	if n > 0 {
		c.record.bytes('<', p[:n])
		return n, nil
	}
	return 0, c.readError(err)
}

func (c *Conn) readError(err error) error {
	switch {
	case err == nil, errors.Is(err, syscall.EAGAIN): // the library saw bytes that a flush took away
		return nil
	case c.closing.Load():
		return io.ErrClosedPipe
	case errors.Is(err, errReplayOver):
		return io.EOF
	}
	c.record.mark("gone")
	if errors.Is(err, io.EOF) { // of a server or a device: not the end of a recording
		err = io.ErrUnexpectedEOF
	}
	return fault(c.spec, fmt.Errorf("%w: %w", errGone, err))
}

// Write sends a command whole or gives an error; a line that does not take it within
// two seconds has stalled and should be closed.
func (c *Conn) Write(p []byte) error {
	c.writing.Lock()
	defer c.writing.Unlock()
	c.inUse.RLock()
	defer c.inUse.RUnlock()
	if c.closing.Load() {
		return io.ErrClosedPipe
	}
	n, err := c.wire.Write(p)
	c.record.bytes('>', p[:n])
	if err != nil && !c.closing.Load() {
		return fault(c.spec, fmt.Errorf("write: %w", err))
	}
	return err
}

// Close closes the line and waits for Read and Write to return. It may be called
// more than once.
func (c *Conn) Close() error {
	if c.closing.Swap(true) {
		return nil
	}
	if w, ok := c.wire.(interface{ interrupt() }); ok {
		w.interrupt()
	}
	c.inUse.Lock()
	defer c.inUse.Unlock()
	err := c.wire.Close()
	c.record.mark("close")
	if c.source != nil {
		err = errors.Join(err, c.source.Close())
	}
	return err
}
