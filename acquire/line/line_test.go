package line

import (
	"context"
	"errors"
	"io"
	"io/fs"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tenthmark/session"
)

func TestSpecNamesWhatIsWrong(t *testing.T) {
	tests := []struct {
		name string
		spec Spec
		want string // part of the message, "" for a good spec
	}{
		{"port", Spec{Port: "/dev/ttyUSB0"}, ""},
		{"usb", Spec{USB: "0403:6001:A1B2"}, ""},
		{"usb without serial number", Spec{USB: "0403:6001"}, ""},
		{"tcp", Spec{TCP: "192.0.2.10:4001"}, ""},
		{"older factory setting", Spec{Port: "x", Baud: 1200, DataBits: 7, Parity: "odd", StopBits: 1, Flow: "rtscts"}, ""},
		{"none", Spec{}, "exactly one"},
		{"two", Spec{Port: "a", TCP: "b:1"}, "exactly one"},
		{"baud", Spec{Port: "x", Baud: -1}, "baud = -1"},
		{"data bits", Spec{Port: "x", DataBits: 9}, "data_bits = 9"},
		{"stop bits", Spec{Port: "x", StopBits: 3}, "stop_bits = 3"},
		{"parity", Spec{Port: "x", Parity: "strange"}, "parity"},
		{"flow", Spec{Port: "x", Flow: "hope"}, "flow"},
		{"usb of three digits", Spec{USB: "403:6001"}, "usb"},
		{"tcp without port", Spec{TCP: "192.0.2.10"}, "tcp"},
		{"tcp with a word", Spec{TCP: "host:serial"}, "tcp"},
	}
	for _, tt := range tests {
		err := tt.spec.Check()
		if (tt.want == "") != (err == nil) || err != nil && !strings.Contains(err.Error(), tt.want) {
			t.Errorf("%s: %v, want %q", tt.name, err, tt.want)
		}
	}
}

func openFault(t *testing.T, spec Spec) *session.Fault {
	t.Helper()
	c, err := Open(context.Background(), spec)
	if err == nil {
		c.Close()
		t.Fatalf("%v was opened", spec)
	}
	var f *session.Fault
	if !errors.As(err, &f) {
		t.Fatalf("%v: %v is no fault", spec, err)
	}
	return f
}

func TestOpenSaysWhyNot(t *testing.T) {
	dir := t.TempDir()
	file := filepath.Join(dir, "file")
	if err := os.WriteFile(file, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	closed, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	nobody := closed.Addr().String()
	closed.Close()
	tests := []struct {
		name string
		spec Spec
		code string
	}{
		{"absent", Spec{Port: filepath.Join(dir, "ttyUSB9")}, CodeAbsent},
		{"a file", Spec{Port: file}, CodeNotSerial},
		{"usb absent", Spec{USB: "FFFF:FFFF:NONE"}, CodeAbsent},
		{"no server", Spec{TCP: nobody}, CodeServer},
		{"no recording", Spec{Replay: filepath.Join(dir, "none.rec")}, CodeRecording},
		{"not a recording", Spec{Replay: file}, CodeRecording},
	}
	for _, tt := range tests {
		f := openFault(t, tt.spec)
		if f.Code != tt.code || f.Message == "" || f.Hint == "" || f.Err == nil {
			t.Errorf("%s: %+v, want code %s with message, hint and cause", tt.name, f, tt.code)
		}
	}
}

func TestCausesAreClassified(t *testing.T) {
	tests := []struct {
		cause error
		code  string
	}{
		{fs.ErrPermission, CodeDenied},
		{&fs.PathError{Op: "open", Path: "/dev/ttyS0", Err: fs.ErrPermission}, CodeDenied},
		{errBusy, CodeBusy},
		{errStalled, CodeStalled},
		{errMany, CodeMany},
		{io.ErrUnexpectedEOF, CodeFailed},
	}
	for _, tt := range tests {
		if got := fault(Spec{Port: "/dev/ttyUSB0"}, tt.cause); got.Code != tt.code || !strings.Contains(got.Message, "/dev/ttyUSB0") {
			t.Errorf("%v: %+v, want code %s", tt.cause, got, tt.code)
		}
	}
}

// tcpPair gives a connection and the server's end of it.
func tcpPair(t *testing.T, spec Spec) (*Conn, net.Conn) {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	spec.TCP = l.Addr().String()
	c, err := Open(t.Context(), spec)
	if err != nil {
		t.Fatal(err)
	}
	server, err := l.Accept()
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Close(); server.Close() })
	return c, server
}

func TestServerThatClosesIsGone(t *testing.T) {
	c, server := tcpPair(t, Spec{})
	server.Close()
	_, err := c.Read(make([]byte, 10))
	if session.FaultCode(err) != CodeGone {
		t.Errorf("read after the server closed: %v, want %s", err, CodeGone)
	}
	if errors.Is(err, io.EOF) {
		t.Errorf("a server that closed looks like a recording that is over: the station would not come back")
	}
}

func TestCloseWakesTheReader(t *testing.T) {
	c, _ := tcpPair(t, Spec{})
	ended := make(chan error)
	go func() {
		_, err := c.Read(make([]byte, 10))
		ended <- err
	}()
	if err := c.Close(); err != nil {
		t.Error(err)
	}
	if err := <-ended; !errors.Is(err, io.ErrClosedPipe) {
		t.Errorf("read after Close: %v, want io.ErrClosedPipe", err)
	}
	if err := c.Write([]byte("x")); !errors.Is(err, io.ErrClosedPipe) {
		t.Errorf("write after Close: %v, want io.ErrClosedPipe", err)
	}
	if err := c.Close(); err != nil {
		t.Errorf("second Close: %v", err)
	}
}

func TestRecordedLineReplays(t *testing.T) {
	path := filepath.Join(t.TempDir(), "line.rec")
	c, server := tcpPair(t, Spec{Record: path})
	sent := []string{"N     +  45.1234 g  \r\n", "\xab\x20\x31\x8d\x8a", "quote \" and \\ back", "\x00\xff\u00e9"}
	buf := make([]byte, 100)
	for _, s := range sent {
		if _, err := server.Write([]byte(s)); err != nil {
			t.Fatal(err)
		}
		for got := ""; got != s; {
			n, err := c.Read(buf)
			if err != nil {
				t.Fatal(err)
			}
			got += string(buf[:n])
		}
	}
	if err := c.Write([]byte("\x1bP\r\n")); err != nil {
		t.Fatal(err)
	}
	server.Close()
	if _, err := c.Read(buf); err == nil {
		t.Fatal("no end")
	}
	if err := c.Close(); err != nil {
		t.Fatal(err)
	}
	replayed(t, path, strings.Join(sent, ""))
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{recordHeader + "\n", ` > "\x1bP\r\n"` + "\n", " gone\n", " open 127.0.0.1:", `"\xab 1\x8d\x8a"`} {
		if !strings.Contains(string(text), want) {
			t.Errorf("the recording lacks %q:\n%s", want, text)
		}
	}
}

// replayed checks what a recording gives: its bytes, then the line being gone, then
// the end.
func replayed(t *testing.T, path, want string) {
	t.Helper()
	s, err := NewSource(Spec{Replay: path, Pace: 1000})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	c, err := s.Open(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	got, buf := "", make([]byte, 7)
	for {
		n, err := c.Read(buf)
		got += string(buf[:n])
		if err == nil {
			continue
		}
		if session.FaultCode(err) != CodeGone {
			t.Errorf("end of the first connection: %v, want %s", err, CodeGone)
		}
		break
	}
	if got != want {
		t.Errorf("replayed %q, want %q", got, want)
	}
	c.Close()
	if c, err = s.Open(t.Context()); err != nil {
		t.Fatal(err)
	}
	if _, err := c.Read(buf); !errors.Is(err, io.EOF) {
		t.Errorf("end of the recording: %v, want io.EOF", err)
	}
	c.Close()
}

func TestBadRecordingIsNamedByLine(t *testing.T) {
	for _, bad := range []string{"x < \"a\"", "1.0 ? \"a\"", "1.0 < a", "-1 < \"a\"", "1e3 < \"a\"", "99999999999999999999 gone"} {
		path := filepath.Join(t.TempDir(), "bad.rec")
		if err := os.WriteFile(path, []byte(recordHeader+"\n# a comment\n\n"+bad+"\n"), 0o600); err != nil {
			t.Fatal(err)
		}
		c, err := Open(t.Context(), Spec{Replay: path})
		if err != nil {
			t.Fatal(err)
		}
		_, err = c.Read(make([]byte, 10))
		if err == nil || !strings.Contains(err.Error(), "line 4") {
			t.Errorf("%q: %v, want line 4 named", bad, err)
		}
		c.Close()
	}
}

func TestReplayKeepsTheTiming(t *testing.T) {
	e, ok, err := parseEntry(`12.345678 < "a"`)
	if err != nil || !ok || e.at != 12345678*time.Microsecond || string(e.data) != "a" {
		t.Errorf("entry %+v, %v, %v", e, ok, err)
	}
}

func TestFullDiskDoesNotTakeTheLineAway(t *testing.T) {
	if _, err := os.Stat("/dev/full"); err != nil {
		t.Skip("no /dev/full here")
	}
	c, server := tcpPair(t, Spec{Record: "/dev/full"})
	if _, err := server.Write([]byte("abc")); err != nil {
		t.Fatal(err)
	}
	if n, err := c.Read(make([]byte, 10)); n == 0 || err != nil {
		t.Errorf("read %d, %v", n, err)
	}
	if err := c.Close(); err == nil {
		t.Error("the failed recording was not reported at the end")
	}
}
