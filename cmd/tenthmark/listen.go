package main

import (
	"bufio"
	"context"
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"tenthmark/acquire/line"
	"tenthmark/protocol"
	"tenthmark/session"
)

const listenUse = `Shows each line of a balance as it was understood, with the raw bytes.

Use: tenthmark listen [FLAGS] PORT|FILE|-|tcp:HOST:PORT|usb:VENDOR:PRODUCT[:SERIAL]

A FILE holds raw bytes or a recording; - is standard input. Nothing is sent to the
balance: press PRINT or switch its automatic printing on.`

// listenOptions is what the call of listen says.
type listenOptions struct {
	spec    line.Spec
	json    bool
	suggest bool
	wait    time.Duration // with suggest, for each setting
	pattern *protocol.Pattern
	maxLine int
	target  string
}

// runListen is the tool for the first ten minutes with a new balance.
func runListen(ctx context.Context, args []string, std stdio) int {
	opt, code, done := listenArguments(args, std.err)
	if done {
		return code
	}
	if opt.suggest {
		return suggest(ctx, opt, openPort, std)
	}
	out := bufio.NewWriter(std.out)
	l := newListener(opt, out)
	err := l.run(ctx, opt, std.in)
	l.finish()
	if flushed := out.Flush(); err == nil {
		err = flushed
	}
	if err != nil {
		return complain(std.err, err)
	}
	l.summary(std.err)
	return exitDone
}

// listenArguments reads flags before and after the target.
func listenArguments(args []string, w io.Writer) (opt listenOptions, code int, done bool) {
	f := newFlags("listen", listenUse, w)
	f.BoolVar(&opt.json, "json", false, "one JSON object for each line")
	f.BoolVar(&opt.suggest, "suggest", false, "try the usual line settings and say which one decodes")
	f.DurationVar(&opt.wait, "wait", 4*time.Second, "with -suggest, how long to listen at each speed")
	f.IntVar(&opt.spec.Baud, "baud", 9600, "speed of the line")
	f.IntVar(&opt.spec.DataBits, "data-bits", 8, "7 or 8")
	f.StringVar(&opt.spec.Parity, "parity", "none", "none, odd, even, mark or space")
	f.IntVar(&opt.spec.StopBits, "stop-bits", 1, "1 or 2")
	f.StringVar(&opt.spec.Flow, "flow", "none", "handshake: none, xonxoff or rtscts")
	f.StringVar(&opt.spec.Record, "record", "", "`file` to record the line into, with its timing")
	f.IntVar(&opt.maxLine, "max-line", 64, "longest line in characters")
	pattern := f.String("pattern", "", "regular `expression` with the groups value, sign, unit and stable, for balances that print another form")
	if code, done = parse(f, args); done {
		return opt, code, true
	}
	if opt.target = f.Arg(0); f.NArg() > 1 {
		if code, done = parse(f, f.Args()[1:]); done {
			return opt, code, true
		}
		if f.NArg() > 0 {
			return opt, wrongCall(f, "name one line, not %q too", f.Arg(0)), true
		}
	}
	if err := opt.check(*pattern); err != nil {
		return opt, wrongCall(f, "%v", err), true
	}
	return opt, exitDone, false
}

func wrongCall(f *flag.FlagSet, format string, args ...any) int {
	fmt.Fprintf(f.Output(), "%s: %s\n    `%s -h` shows how it is called.\n", f.Name(), fmt.Sprintf(format, args...), f.Name())
	return exitUsage
}

func (opt *listenOptions) check(pattern string) (err error) {
	if opt.maxLine < 14 || opt.maxLine > 1024 {
		return fmt.Errorf("max-line %d: use 14 to 1024", opt.maxLine)
	}
	if pattern != "" {
		if opt.pattern, err = protocol.NewPattern(pattern); err != nil {
			return err
		}
	}
	return opt.aim()
}

// aim says what kind of thing the target is.
func (opt *listenOptions) aim() error {
	tcp, isTCP := strings.CutPrefix(opt.target, "tcp:")
	usb, isUSB := strings.CutPrefix(opt.target, "usb:")
	switch {
	case opt.target == "":
		return errors.New("name a port, a file, tcp:HOST:PORT, or - for standard input")
	case isTCP:
		opt.spec.TCP = tcp
	case isUSB:
		opt.spec.USB = usb
	case opt.target == "-" || isPlainFile(opt.target):
		if opt.suggest {
			return errors.New("suggest tries the settings of a port; a file and standard input have none")
		}
		return nil
	default:
		opt.spec.Port = opt.target
	}
	if opt.suggest && isTCP {
		return errors.New("suggest cannot set the speed of a serial device server; set it on the server and listen")
	}
	return opt.spec.Check()
}

// isPlainFile: a file or a pipe, which have no line settings.
func isPlainFile(path string) bool {
	info, err := os.Stat(path)
	return err == nil && (info.Mode().IsRegular() || info.Mode()&os.ModeNamedPipe != 0)
}

// run listens until the line is over or ctx is.
func (l *listener) run(ctx context.Context, opt listenOptions, in io.Reader) error {
	switch {
	case opt.target == "-":
		return l.read(ctx, in)
	case opt.spec.Port == "" && opt.spec.TCP == "" && opt.spec.USB == "":
		return l.readFile(ctx, opt.target)
	}
	return l.readLine(ctx, opt.spec)
}

// recordingHead begins every recorded line.
const recordingHead = "# tenthmark line "

func (l *listener) readFile(ctx context.Context, path string) error {
	f, err := os.Open(path)
	if err != nil {
		return &session.Fault{Code: "file-unreadable", Message: fmt.Sprintf("The file %s cannot be read.", path), Hint: "Check its name and who may read it.", Err: err}
	}
	defer f.Close()
	begin := bufio.NewReader(f)
	if head, _ := begin.Peek(len(recordingHead)); string(head) == recordingHead {
		return l.readRecording(ctx, path)
	}
	return l.read(ctx, begin)
}

// read takes plain bytes. A terminal or pipe cannot be woken, so the reader is left
// behind when ctx ends; the process ends with it.
func (l *listener) read(ctx context.Context, in io.Reader) error {
	chunks, failed := make(chan []byte), make(chan error, 1)
	go func() {
		for {
			buf := make([]byte, 4096)
			n, err := in.Read(buf)
			if n > 0 {
				select {
				case chunks <- buf[:n]:
				case <-ctx.Done():
					return
				}
			}
			if err != nil {
				failed <- err
				return
			}
		}
	}()
	for {
		select {
		case chunk := <-chunks:
			l.take(chunk)
		case err := <-failed:
			if errors.Is(err, io.EOF) {
				return nil
			}
			return fmt.Errorf("listen: %w", err)
		case <-ctx.Done():
			return nil
		}
	}
}

// readRecording takes the connections of a recording one after another, as fast as
// they can be read.
func (l *listener) readRecording(ctx context.Context, path string) error {
	source, err := line.NewSource(line.Spec{Replay: path, Pace: 1e6})
	if err != nil {
		return err
	}
	defer source.Close()
	for {
		conn, err := source.Open(ctx)
		if err != nil {
			return err
		}
		err = l.readConn(ctx, conn)
		l.lost()
		var fault *session.Fault
		if !errors.As(err, &fault) || fault.Code != line.CodeGone {
			return err
		}
	}
}

func (l *listener) readLine(ctx context.Context, spec line.Spec) error {
	conn, err := line.Open(ctx, spec)
	if err != nil {
		return err
	}
	l.live(time.Now())
	return l.readConn(ctx, conn)
}

// silence is longer than any pause inside a line, also at 150 baud.
const silence = 300 * time.Millisecond

func (l *listener) readConn(ctx context.Context, conn *line.Conn) error {
	stop := context.AfterFunc(ctx, func() { conn.Close() })
	defer stop()
	defer conn.Close()
	buf, last := make([]byte, 4096), time.Now()
	for {
		n, err := conn.Read(buf)
		now := time.Now()
		switch {
		case n > 0:
			last = now
			l.at(now)
			l.take(buf[:n])
		case ctx.Err() != nil || errors.Is(err, io.EOF):
			return nil
		case err != nil:
			return err
		case now.Sub(last) >= silence:
			l.at(now)
			l.quiet(now.Sub(last))
		}
	}
}
