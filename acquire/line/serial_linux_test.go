package line

import (
	"errors"
	"io"
	"os"
	"os/exec"
	"strings"
	"testing"
	"time"

	"github.com/creack/pty"
	"golang.org/x/sys/unix"

	"tenthmark/session"
)

// terminal gives the balance's end of a raw pseudo-terminal and the path of the other.
func terminal(t *testing.T) (master, slave *os.File) {
	t.Helper()
	master, slave, err := pty.Open()
	if err != nil {
		t.Skipf("no pseudo-terminal here: %v", err)
	}
	term, err := unix.IoctlGetTermios(int(slave.Fd()), unix.TCGETS)
	if err != nil {
		t.Fatal(err)
	}
	term.Iflag, term.Oflag, term.Lflag = 0, 0, 0
	if err := unix.IoctlSetTermios(int(slave.Fd()), unix.TCSETS, term); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { master.Close(); slave.Close() })
	return master, slave
}

func openPort(t *testing.T, spec Spec) *Conn {
	t.Helper()
	c, err := Open(t.Context(), spec)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Close() })
	return c
}

func readAll(t *testing.T, c *Conn, want int) string {
	t.Helper()
	got, buf := "", make([]byte, 100)
	for len(got) < want {
		n, err := c.Read(buf)
		if err != nil {
			t.Fatalf("after %q: %v", got, err)
		}
		got += string(buf[:n])
	}
	return got
}

func TestSerialPortMovesBytesBothWays(t *testing.T) {
	master, slave := terminal(t)
	if _, err := master.WriteString("an old line\r\n"); err != nil {
		t.Fatal(err)
	}
	c := openPort(t, Spec{Port: slave.Name(), Baud: 1200, DataBits: 7, Parity: "odd"})
	if n, err := c.Read(make([]byte, 100)); n != 0 || err != nil {
		t.Errorf("after opening: %d bytes, %v; what lay in the buffer should be gone", n, err)
	}
	if _, err := master.WriteString("+  45.1234 g  \r\n"); err != nil {
		t.Fatal(err)
	}
	if got := readAll(t, c, 16); got != "+  45.1234 g  \r\n" {
		t.Errorf("read %q", got)
	}
	if err := c.Write([]byte("\x1bP\r\n")); err != nil {
		t.Fatal(err)
	}
	buf := make([]byte, 4)
	if _, err := io.ReadFull(master, buf); err != nil || string(buf) != "\x1bP\r\n" {
		t.Errorf("the balance got %q, %v", buf, err)
	}
}

func TestUnpluggedPortIsGone(t *testing.T) {
	master, slave := terminal(t)
	c := openPort(t, Spec{Port: slave.Name()})
	slave.Close()
	master.Close()
	for range 3 { // at once, and again each time
		if _, err := c.Read(make([]byte, 10)); session.FaultCode(err) != CodeGone {
			t.Fatalf("read: %v, want %s", err, CodeGone)
		}
	}
	if err := c.Write([]byte("x")); session.FaultCode(err) != CodeGone {
		t.Errorf("write: %v, want %s", err, CodeGone)
	}
}

func TestCloseWaitsForTheReaderAndIsNoOutage(t *testing.T) {
	_, slave := terminal(t)
	c := openPort(t, Spec{Port: slave.Name()})
	ended := make(chan error)
	go func() {
		for {
			if n, err := c.Read(make([]byte, 10)); n == 0 && err != nil {
				ended <- err
				return
			}
		}
	}()
	if err := c.Close(); err != nil {
		t.Error(err)
	}
	if err := <-ended; !errors.Is(err, io.ErrClosedPipe) {
		t.Errorf("the reader ended with %v, want io.ErrClosedPipe", err)
	}
}

// A balance that nobody empties the buffer of must not hold the daemon for ever.
func TestStalledWriteEnds(t *testing.T) {
	if testing.Short() {
		t.Skip("waits for the write's own limit of two seconds")
	}
	_, slave := terminal(t)
	c := openPort(t, Spec{Port: slave.Name()})
	err := c.Write(make([]byte, 100_000))
	if session.FaultCode(err) != CodeStalled {
		t.Errorf("write to a full line: %v, want %s", err, CodeStalled)
	}
}

func TestFlowControlIsSetInTheKernel(t *testing.T) {
	for _, tt := range []struct {
		flow         string
		input, modes uint32
	}{{"none", 0, 0}, {"xonxoff", unix.IXON | unix.IXOFF, 0}, {"rtscts", 0, unix.CRTSCTS}} {
		master, slave := terminal(t)
		openPort(t, Spec{Port: slave.Name(), Flow: tt.flow})
		term, err := unix.IoctlGetTermios(int(slave.Fd()), unix.TCGETS)
		if err != nil {
			t.Fatal(err)
		}
		if got := term.Iflag & (unix.IXON | unix.IXOFF); got != tt.input {
			t.Errorf("%s: input flags %#x, want %#x", tt.flow, got, tt.input)
		}
		if got := term.Cflag & unix.CRTSCTS; got != tt.modes {
			t.Errorf("%s: control flags %#x, want %#x", tt.flow, got, tt.modes)
		}
		if tt.flow == "xonxoff" {
			buf := make([]byte, 1)
			if _, err := io.ReadFull(master, buf); err != nil || buf[0] != 0x11 {
				t.Errorf("after opening the balance got %#x, %v; want XON", buf, err)
			}
		}
	}
}

// A child process that is started while the port is open must not keep it open.
func TestChildrenDoNotInheritThePort(t *testing.T) {
	_, slave := terminal(t)
	c := openPort(t, Spec{Port: slave.Name()})
	out, err := exec.CommandContext(t.Context(), "ls", "-l", "/proc/self/fd").Output()
	if err != nil {
		t.Skipf("no ls or no /proc here: %v", err)
	}
	if strings.Contains(string(out), slave.Name()+"\n") {
		t.Errorf("a child holds %s:\n%s", slave.Name(), out)
	}
	c.Close()
}

// The library's Read panics on a descriptor of 1024 or more; we must refuse it.
func TestDescriptorBeyondSelectIsRefused(t *testing.T) {
	_, slave := terminal(t)
	var held []*os.File
	defer func() {
		for _, f := range held {
			f.Close()
		}
	}()
	for range 1100 {
		f, err := os.Open("/dev/null")
		if err != nil {
			t.Skipf("so many files cannot be opened here: %v", err)
		}
		held = append(held, f)
	}
	if f := openFault(t, Spec{Port: slave.Name()}); f.Code != CodeMany {
		t.Errorf("opened as %v, want %s", f, CodeMany)
	}
}

func TestPortHeldExclusivelyIsBusy(t *testing.T) {
	if os.Geteuid() == 0 {
		t.Skip("the superuser may open an exclusive port")
	}
	_, slave := terminal(t)
	openPort(t, Spec{Port: slave.Name()})
	if f := openFault(t, Spec{Port: slave.Name()}); f.Code != CodeBusy {
		t.Errorf("second opening: %v, want %s", f, CodeBusy)
	}
}

func TestNothingIsReadForAWhileIsNoError(t *testing.T) {
	_, slave := terminal(t)
	c := openPort(t, Spec{Port: slave.Name()})
	start := time.Now()
	n, err := c.Read(make([]byte, 10))
	if n != 0 || err != nil {
		t.Errorf("read %d, %v after %v; want 0, nil", n, err, time.Since(start))
	}
}
