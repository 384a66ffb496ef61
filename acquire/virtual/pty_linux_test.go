package virtual

import (
	"bytes"
	"context"
	"errors"
	"io"
	"os"
	"testing"
	"time"
)

// A fresh terminal must not echo: what the balance prints before anybody listens would
// come back to it as commands.
func TestTerminalIsRawBeforeAnybodyOpensIt(t *testing.T) {
	p, err := OpenPTY()
	if err != nil {
		t.Skipf("no pseudo-terminal here: %v", err)
	}
	defer p.Close()
	if _, err := p.Write([]byte("\x1bT\r\n")); err != nil {
		t.Fatal(err)
	}
	if err := p.master.SetReadDeadline(time.Now().Add(50 * time.Millisecond)); err != nil {
		t.Fatal(err)
	}
	if n, err := p.Read(make([]byte, 10)); !errors.Is(err, os.ErrDeadlineExceeded) {
		t.Errorf("the terminal echoed %d bytes, %v", n, err)
	}
	client, err := os.OpenFile(p.Path, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	defer client.Close()
	got := make([]byte, 4)
	if _, err := io.ReadFull(client, got); err != nil || !bytes.Equal(got, []byte("\x1bT\r\n")) {
		t.Errorf("the client got %q, %v", got, err)
	}
}

func TestNobodyReadsAndNothingBlocks(t *testing.T) {
	p, err := OpenPTY()
	if err != nil {
		t.Skipf("no pseudo-terminal here: %v", err)
	}
	defer p.Close()
	line := []byte("N     +  45.1234 g  \r\n")
	var last error
	for range 10_000 {
		_, last = p.Write(line)
	}
	if !errors.Is(last, ErrNobodyReads) {
		t.Errorf("ten thousand lines to nobody: %v, want ErrNobodyReads", last)
	}
	if err := p.Flush(); err != nil {
		t.Fatal(err)
	}
	if _, err := p.Write(line); err != nil {
		t.Errorf("after the heap was flushed: %v", err)
	}
}

func TestServeEndsWithItsContextAndWithTheLine(t *testing.T) {
	for _, how := range []string{"context", "line"} {
		b, err := New(Options{Pace: 10})
		if err != nil {
			t.Fatal(err)
		}
		p, err := OpenPTY()
		if err != nil {
			t.Skipf("no pseudo-terminal here: %v", err)
		}
		ctx, cancel := context.WithCancel(context.Background())
		ended := make(chan error, 1)
		go func() { ended <- b.Serve(ctx, p) }()
		if how == "context" {
			cancel()
		} else {
			p.Close()
		}
		err = <-ended
		if how == "context" && !errors.Is(err, context.Canceled) || how == "line" && (err == nil || errors.Is(err, context.Canceled)) {
			t.Errorf("%s: %v", how, err)
		}
		cancel()
	}
}
