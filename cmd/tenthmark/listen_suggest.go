package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"

	"tenthmark/acquire/line"
	"tenthmark/protocol"
)

// usualBauds are tried in this order: today's usual rate first, then the factory
// setting of older balances.
var usualBauds = []int{9600, 1200, 19200, 2400, 4800, 38400, 57600, 115200, 600, 300}

// port is an open line as suggest needs it.
type port interface {
	io.Reader
	Close() error
}

func openPort(ctx context.Context, spec line.Spec) (port, error) { return line.Open(ctx, spec) }

// trial is what came at one setting.
type trial struct {
	spec       line.Spec
	bytes      int
	understood int // weights, status lines, errors
	damaged    int
	other      int
	diagnosis  string
}

// good: several lines, and hardly one of them damaged.
func (t trial) good() bool { return t.understood >= 3 && t.damaged*10 <= t.understood }

// better compares by the lines understood, less what was damaged.
func (t trial) better(than trial) bool {
	return t.understood-2*t.damaged > than.understood-2*than.damaged
}

// suggest tries the usual speeds, listening alone. Eight data bits without parity
// receive seven with any parity, too: the parity then stands in bit 7, and so one
// trial for each speed is enough.
func suggest(ctx context.Context, opt listenOptions, open func(context.Context, line.Spec) (port, error), std stdio) int {
	if !opt.json {
		fmt.Fprintf(std.out, "Listening at each speed for up to %v. Switch automatic printing on at the balance, or keep pressing PRINT.\n", opt.wait)
	}
	var best trial
	for _, baud := range usualBauds {
		spec := opt.spec
		spec.Baud, spec.DataBits, spec.Parity, spec.StopBits = baud, 8, "none", 1
		t, err := try(ctx, opt, spec, open)
		if err != nil {
			return complain(std.err, err)
		}
		t.show(opt, std.out)
		if t.better(best) {
			best = t
		}
		if ctx.Err() != nil || best.good() {
			break
		}
	}
	return best.tell(opt, std)
}

// try listens at one setting until enough came or the time is over.
func try(ctx context.Context, opt listenOptions, spec line.Spec, open func(context.Context, line.Spec) (port, error)) (trial, error) {
	t := trial{spec: spec}
	p, err := open(ctx, spec)
	if err != nil {
		return t, err
	}
	defer p.Close()
	ctx, cancel := context.WithTimeout(ctx, opt.wait)
	defer cancel()
	stop := context.AfterFunc(ctx, func() { p.Close() })
	defer stop()
	d := protocol.NewDecoder(protocol.Options{Pattern: opt.pattern, MaxLine: opt.maxLine})
	d.Resync()
	buf := make([]byte, 4096)
	for ctx.Err() == nil && t.understood < 6 && t.bytes < 2000 {
		n, err := p.Read(buf)
		t.bytes += n
		switch {
		case n > 0:
			d.Feed(buf[:n], t.count)
		case ctx.Err() != nil || errors.Is(err, io.EOF):
			cancel()
		case err != nil:
			return t, err
		default:
			d.Gap(t.count)
		}
	}
	t.judge(d)
	return t, nil
}

func (t *trial) count(f *protocol.Frame) {
	switch f.Kind {
	case protocol.Weight, protocol.Status, protocol.Error:
		t.understood++
	case protocol.Damaged:
		t.damaged++
	default:
		t.other++
	}
}

// judge reads the setting off the bytes.
func (t *trial) judge(d *protocol.Decoder) {
	t.diagnosis = d.Diagnosis()
	if p := d.Parity(); p != protocol.NoParity && t.understood > 0 {
		t.spec.DataBits, t.spec.Parity, t.diagnosis = 7, p.String(), ""
	}
}

func (t trial) setting() string {
	return fmt.Sprintf("%d %d-%s-%d", t.spec.Baud, t.spec.DataBits, strings.ToUpper(t.spec.Parity[:1]), t.spec.StopBits)
}

func (t trial) show(opt listenOptions, w io.Writer) {
	if opt.json {
		fmt.Fprintf(w, `{"baud":%d,"data_bits":%d,"parity":%q,"stop_bits":%d,"bytes":%d,"understood":%d,"damaged":%d,"other":%d,"decodes":%t}`+"\n",
			t.spec.Baud, t.spec.DataBits, t.spec.Parity, t.spec.StopBits, t.bytes, t.understood, t.damaged, t.other, t.good())
		return
	}
	fmt.Fprintf(w, "%-14s %5d bytes  %3d lines understood  %3d damaged  %3d other  %s\n", t.setting(), t.bytes, t.understood, t.damaged, t.other, t.diagnosis)
}

// tell gives the advice, in the words of the configuration.
func (t trial) tell(opt listenOptions, std stdio) int {
	if !t.better(trial{}) {
		fmt.Fprintln(std.err, "No setting decodes.")
		fmt.Fprintln(std.err, "    Check that the balance prints while this runs, its data output, the cable and the handshake (--flow); a balance that prints another form needs --pattern.")
		return exitFailed
	}
	if opt.json {
		return exitDone
	}
	fmt.Fprintf(std.out, "\nThis one decodes:\n\nbaud = %d\ndata_bits = %d\nparity = %q\nstop_bits = %d\n", t.spec.Baud, t.spec.DataBits, t.spec.Parity, t.spec.StopBits)
	if !t.good() {
		fmt.Fprintln(std.out, "\nOnly few lines came, so try again to be sure (--wait 20s).")
	}
	return exitDone
}
