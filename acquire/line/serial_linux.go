package line

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"go.bug.st/serial"
	"golang.org/x/sys/unix"
)

// hold is a second descriptor on the port, opened before the library's, and the
// number of the library's own. With them we set kernel flow control (which the
// library clears and does not offer), keep child processes from inheriting the port,
// and write without ever blocking for good.
type hold struct {
	own  int // our descriptor, -1 when released
	port int // the library's descriptor, -1 when not found
	rdev uint64
	old  map[int]bool // descriptors on the same device from before
}

// selectLimit is FD_SETSIZE: the library's Read panics on a descriptor beyond it.
const selectLimit = 1024

// beforeOpen opens our own descriptor, while the port is not exclusive yet.
func beforeOpen(path string) (hold, error) {
	fd, err := unix.Open(path, unix.O_RDWR|unix.O_NOCTTY|unix.O_NONBLOCK|unix.O_CLOEXEC, 0)
	if err != nil {
		return hold{}, openError(path, err)
	}
	h := hold{own: fd, port: -1}
	var st unix.Stat_t
	if err := unix.Fstat(fd, &st); err != nil {
		h.release()
		return hold{}, fmt.Errorf("open %s: %w", path, err)
	}
	h.rdev = uint64(st.Rdev)
	if st.Mode&unix.S_IFMT != unix.S_IFCHR {
		h.release()
		return hold{}, fmt.Errorf("open %s: %w", path, errNotSerial)
	}
	if h.lockedElsewhere(path) {
		h.release()
		return hold{}, fmt.Errorf("open %s: %w", path, errBusy)
	}
	h.old = descriptorsOn(h.rdev)
	return h, nil
}

// errBusy is what the library says for a port that is exclusive, in words of our own.
var errBusy = errors.New("another program holds the port exclusively")

func openError(path string, err error) error {
	if errors.Is(err, unix.EBUSY) {
		err = errBusy
	}
	return fmt.Errorf("open %s: %w", path, err)
}

// lockedElsewhere: the superuser may open an exclusive port and would take its
// settings away from the other program. On a pseudo-terminal the mark outlives a
// killed program, so it says nothing there.
func (h *hold) lockedElsewhere(path string) bool {
	real, err := filepath.EvalSymlinks(path)
	if err != nil || strings.HasPrefix(real, "/dev/pts/") {
		return false
	}
	exclusive, err := unix.IoctlGetInt(h.own, unix.TIOCGEXCL)
	return err == nil && exclusive != 0
}

// descriptorsOn lists this process's descriptors on a character device.
func descriptorsOn(rdev uint64) map[int]bool {
	found := map[int]bool{}
	entries, err := os.ReadDir("/proc/self/fd")
	if err != nil {
		return found
	}
	for _, e := range entries {
		fd, err := strconv.Atoi(e.Name())
		var st unix.Stat_t
		if err == nil && unix.Fstat(fd, &st) == nil && st.Mode&unix.S_IFMT == unix.S_IFCHR && uint64(st.Rdev) == rdev {
			found[fd] = true
		}
	}
	return found
}

// afterOpen finds the library's descriptor and sets what the library does not.
func (h *hold) afterOpen(flow string) error {
	for fd := range descriptorsOn(h.rdev) {
		if !h.old[fd] {
			h.port = fd
		}
	}
	if h.port >= selectLimit {
		return errMany
	}
	if h.port >= 0 {
		unix.CloseOnExec(h.port)
		if err := unix.SetNonblock(h.port, true); err != nil {
			return fmt.Errorf("nonblocking: %w", err)
		}
	}
	return h.setFlow(flow)
}

func (h *hold) setFlow(flow string) error {
	if flow == "none" {
		return nil
	}
	t, err := unix.IoctlGetTermios(h.own, unix.TCGETS)
	if err != nil {
		return fmt.Errorf("flow control: %w", err)
	}
	switch flow {
	case "xonxoff":
		t.Iflag |= unix.IXON | unix.IXOFF
		t.Cc[unix.VSTART], t.Cc[unix.VSTOP] = 0x11, 0x13
	case "rtscts":
		t.Cflag |= unix.CRTSCTS
	}
	if err := unix.IoctlSetTermios(h.own, unix.TCSETS, t); err != nil {
		return fmt.Errorf("flow control: %w", err)
	}
	return nil
}

// write sends all of p through the library. The descriptor does not block; between
// attempts we wait until it takes bytes again, at most writeTimeout in all.
func (h *hold) write(port serial.Port, p []byte) (int, error) {
	deadline := time.Now().Add(writeTimeout)
	sent := 0
	for sent < len(p) {
		n, err := port.Write(p[sent:])
		sent += n
		switch {
		case err == nil, errors.Is(err, unix.EINTR):
		case !errors.Is(err, unix.EAGAIN):
			return sent, err
		case !time.Now().Before(deadline):
			return sent, errStalled
		default:
			fds := []unix.PollFd{{Fd: int32(h.own), Events: unix.POLLOUT}}
			if _, err := unix.Poll(fds, 50); err != nil && !errors.Is(err, unix.EINTR) {
				return sent, err
			}
		}
	}
	return sent, nil
}

func (h *hold) release() {
	if h.own >= 0 {
		unix.Close(h.own)
		h.own = -1
	}
}

// isDeviceLost: what reads and writes say after an adapter was unplugged.
func isDeviceLost(err error) bool {
	for _, lost := range []error{unix.EIO, unix.ENXIO, unix.ENODEV, unix.EBADF} {
		if errors.Is(err, lost) {
			return true
		}
	}
	return false
}
