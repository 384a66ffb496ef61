package virtual

import (
	"errors"
	"fmt"
	"os"
	"sync"
	"time"

	"github.com/creack/pty"
	"golang.org/x/sys/unix"
)

// PTY is the balance's end of a pseudo-terminal. The other end has a path that a
// program opens like a serial port.
type PTY struct {
	Path string // "/dev/pts/7"

	master *os.File
	slave  *os.File // kept open, so that a client that leaves does not end the line
	fd     int      // of the slave
	once   sync.Once
	err    error
}

// OpenPTY makes a pseudo-terminal and gives its path.
//
// The slave is made raw before anybody can open it: a fresh one echoes, and a balance
// would take its own lines for commands. The master is made non-blocking, because the
// library that opens it leaves it in a state in which deadlines and Close do not end a
// Read.
func OpenPTY() (*PTY, error) {
	master, slave, err := pty.Open()
	if err != nil {
		return nil, fmt.Errorf("pseudo-terminal: %w", err)
	}
	p := &PTY{Path: slave.Name(), master: master, slave: slave, fd: int(slave.Fd())}
	if err := makeRaw(p.fd); err != nil {
		return nil, errors.Join(fmt.Errorf("pseudo-terminal: %w", err), p.Close())
	}
	if err := unix.SetNonblock(int(master.Fd()), true); err != nil {
		return nil, errors.Join(fmt.Errorf("pseudo-terminal: %w", err), p.Close())
	}
	return p, nil
}

func makeRaw(fd int) error {
	t, err := unix.IoctlGetTermios(fd, unix.TCGETS)
	if err != nil {
		return err
	}
	t.Iflag &^= unix.IGNBRK | unix.BRKINT | unix.PARMRK | unix.ISTRIP | unix.INLCR | unix.IGNCR | unix.ICRNL | unix.IXON
	t.Oflag &^= unix.OPOST
	t.Lflag &^= unix.ECHO | unix.ECHONL | unix.ICANON | unix.ISIG | unix.IEXTEN
	t.Cc[unix.VMIN], t.Cc[unix.VTIME] = 1, 0
	return unix.IoctlSetTermios(fd, unix.TCSETS, t)
}

// Read waits for what the client sends.
func (p *PTY) Read(b []byte) (int, error) { return p.master.Read(b) }

// mostUnread: a client that left so much unread is none.
const mostUnread = 2048

// Write sends to the client. What nobody reads is lost as a whole line, with
// ErrNobodyReads, so that the one who opens the port later finds no heap of old lines.
func (p *PTY) Write(b []byte) (int, error) {
	unread, err := unix.IoctlGetInt(p.fd, unix.TIOCINQ)
	if err == nil && unread > mostUnread {
		return 0, ErrNobodyReads
	}
	if err := p.master.SetWriteDeadline(time.Now().Add(time.Second)); err != nil {
		return 0, err
	}
	n, err := p.master.Write(b)
	if errors.Is(err, os.ErrDeadlineExceeded) {
		return n, ErrNobodyReads
	}
	return n, err
}

// Unlock takes back the exclusive mark that a killed client leaves on the terminal.
func (p *PTY) Unlock() error { return unix.IoctlSetInt(p.fd, unix.TIOCNXCL, 0) }

// Flush drops what the client has not read.
func (p *PTY) Flush() error { return unix.IoctlSetInt(p.fd, unix.TCFLSH, unix.TCIFLUSH) }

// Close takes the terminal away: for the client that is the adapter being unplugged.
func (p *PTY) Close() error {
	p.once.Do(func() { p.err = errors.Join(p.master.Close(), p.slave.Close()) })
	return p.err
}
