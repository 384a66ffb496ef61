package line

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"os"
	"strconv"
	"strings"
	"sync"
	"time"

	"tenthmark/session"
)

// A recorded line is a text file that a person can read and write:
//
//	# tenthmark line 1
//	# 2026-12-01T16:28:06.123Z /dev/ttyUSB0 9600 8-N-1
//	0.000 open /dev/ttyUSB0
//	1.203 < "N     +  45.1234 g  \r\n"
//	1.500 > "\x1bP\r\n"
//	9.100 gone
//
// Each entry is the time in seconds since the recording began, then what happened:
// bytes from the balance (<) or to it (>) as a quoted string in the notation of Go,
// or the line being opened, closed, or gone. Lines that begin with # and empty lines
// do not count. A file that is recorded into again goes on with a second header.
const recordHeader = "# tenthmark line 1"

// recorder writes a recording. Its methods may be called on nil and then do nothing.
// After a failed write it stops: a full disk must not take the balance away.
type recorder struct {
	mu    sync.Mutex
	file  *os.File
	began time.Time
	err   error
	buf   []byte
}

func openRecorder(path, what string) (*recorder, error) {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_APPEND, 0o640)
	if err != nil {
		return nil, &session.Fault{
			Code: CodeRecording, Message: fmt.Sprintf("The line cannot be recorded into %s.", path),
			Hint: "Choose a file in a folder that can be written, or leave record out.", Err: err,
		}
	}
	r := &recorder{file: f, began: time.Now()}
	_, r.err = fmt.Fprintf(f, "%s\n# %s %s\n", recordHeader, r.began.UTC().Format("2006-01-02T15:04:05.000Z"), what)
	return r, nil
}

func (r *recorder) bytes(direction byte, p []byte) {
	if r == nil || len(p) == 0 {
		return
	}
	r.entry(func(b []byte) []byte {
		return strconv.AppendQuoteToASCII(append(b, direction, ' '), string(p))
	})
}

func (r *recorder) mark(what string) {
	if r != nil {
		r.entry(func(b []byte) []byte { return append(b, what...) })
	}
}

func (r *recorder) entry(fill func([]byte) []byte) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.err != nil {
		return
	}
	b := strconv.AppendFloat(r.buf[:0], time.Since(r.began).Seconds(), 'f', 6, 64)
	r.buf = append(fill(append(b, ' ')), '\n')
	_, r.err = r.file.Write(r.buf)
}

// Close closes the file and gives the first error of the recording.
func (r *recorder) Close() error {
	r.mu.Lock()
	defer r.mu.Unlock()
	err := r.err
	r.err = os.ErrClosed
	if err := errors.Join(err, r.file.Close()); err != nil {
		return fmt.Errorf("recording: %w", err)
	}
	return nil
}

// entry is one line of a recording.
type entry struct {
	at   time.Duration
	what string // "<", ">", "open", "close" or "gone"
	data []byte
}

// parseEntry reads one line; ok is false for a comment.
func parseEntry(text string) (e entry, ok bool, err error) {
	if text == "" || strings.HasPrefix(text, "#") {
		return entry{}, false, nil
	}
	at, rest, _ := strings.Cut(text, " ")
	if e.at, err = parseSeconds(at); err != nil {
		return entry{}, false, err
	}
	word, rest, _ := strings.Cut(rest, " ")
	switch e.what = word; word {
	case "open", "close", "gone":
		return e, true, nil
	case "<", ">":
		data, err := strconv.Unquote(rest)
		if err != nil {
			return entry{}, false, fmt.Errorf("the bytes %s are not a quoted string", rest)
		}
		e.data = []byte(data)
		return e, true, nil
	}
	return entry{}, false, fmt.Errorf("%q is none of <, >, open, close and gone", word)
}

// parseSeconds reads "12.345678", at most nine digits each side of the mark.
func parseSeconds(text string) (time.Duration, error) {
	whole, fraction, _ := strings.Cut(text, ".")
	if len(whole) > 9 || len(fraction) > 9 {
		return 0, fmt.Errorf("%q is no time in seconds", text)
	}
	n, err := strconv.ParseUint(whole+fraction+strings.Repeat("0", 9-len(fraction)), 10, 63)
	if err != nil {
		return 0, fmt.Errorf("%q is no time in seconds", text)
	}
	return time.Duration(n), nil
}

var errReplayOver = errors.New("the recording is over")

// replay reads a recording and gives its bytes at their times.
type replay struct {
	path    string
	file    io.ReadCloser
	scan    *bufio.Scanner
	lineNo  int
	pace    float64
	last    time.Duration
	pending *entry
	over    bool
}

func openReplay(path string, pace float64) (*replay, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, badRecording(path, err)
	}
	r := &replay{path: path, file: f, scan: bufio.NewScanner(f), pace: pace}
	if !r.scan.Scan() || strings.TrimSpace(r.scan.Text()) != recordHeader {
		return nil, errors.Join(badRecording(path, fmt.Errorf("the first line is not %q", recordHeader)), f.Close())
	}
	r.lineNo = 1
	return r, nil
}

func badRecording(path string, err error) error {
	return &session.Fault{
		Code: CodeRecording, Message: fmt.Sprintf("The recording %s cannot be replayed.", path),
		Hint: "Name a file that tenthmark recorded with the record key.", Err: err,
	}
}

// next begins the following connection of the recording.
func (r *replay) next() (wire, error) {
	if r.over {
		return nil, badRecording(r.path, errReplayOver)
	}
	return &replayWire{replay: r, wake: make(chan struct{})}, nil
}

// step reads the next entry that concerns the reader.
func (r *replay) step() (entry, error) {
	for r.scan.Scan() {
		r.lineNo++
		text := r.scan.Text()
		if text == recordHeader {
			r.last = 0 // a second recording in the same file has its own time
		}
		e, ok, err := parseEntry(text)
		if err != nil {
			return entry{}, badRecording(r.path, fmt.Errorf("line %d: %w", r.lineNo, err))
		}
		if ok && (e.what == "<" || e.what == "gone") {
			return e, nil
		}
	}
	r.over = true
	if err := r.scan.Err(); err != nil {
		return entry{}, badRecording(r.path, err)
	}
	return entry{}, errReplayOver
}

func (r *replay) Close() error { return r.file.Close() }

// replayWire is one connection of a recording.
type replayWire struct {
	replay *replay
	wake   chan struct{}
	once   sync.Once
}

// Read gives the bytes of one entry after the pause that the recording has before it.
func (w *replayWire) Read(p []byte) (int, error) {
	r := w.replay
	if r.pending == nil {
		e, err := r.step()
		if err != nil {
			return 0, err
		}
		pause := max(0, time.Duration(float64(e.at-r.last)/r.pace))
		r.last, r.pending = e.at, &e
		if !w.sleep(pause) {
			return 0, os.ErrClosed
		}
	}
	if r.pending.what == "gone" {
		r.pending = nil
		return 0, errGone
	}
	n := copy(p, r.pending.data)
	if r.pending.data = r.pending.data[n:]; len(r.pending.data) == 0 {
		r.pending = nil
	}
	return n, nil
}

func (w *replayWire) sleep(d time.Duration) bool {
	if d <= 0 {
		return true
	}
	timer := time.NewTimer(d)
	defer timer.Stop()
	select {
	case <-timer.C:
		return true
	case <-w.wake:
		return false
	}
}

// Write is accepted and goes nowhere: nobody listens at the other end of a recording.
func (w *replayWire) Write(p []byte) (int, error) { return len(p), nil }

func (w *replayWire) interrupt() { w.once.Do(func() { close(w.wake) }) }

func (w *replayWire) Close() error { w.interrupt(); return nil }
