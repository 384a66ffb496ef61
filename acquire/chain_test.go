package acquire

import (
	"context"
	"path/filepath"
	"strings"
	"testing"

	"tenthmark/acquire/virtual"
	"tenthmark/calc/decimal"
)

// fast is a station for a virtual balance whose world runs twenty times as fast.
func fast(port string) Config {
	return Config{
		Name: "bench-1", Port: port, DwellS: decimal.MustParse("0.1"), ListenS: decimal.MustParse("0.05"),
		ReplyS: decimal.MustParse("0.5"),
	}
}

// serve lets a virtual balance live on a new pseudo-terminal until the test ends.
func serve(t *testing.T, opt virtual.Options) (*virtual.Balance, *virtual.PTY) {
	t.Helper()
	b, err := virtual.New(opt)
	if err != nil {
		t.Fatal(err)
	}
	pty, err := virtual.OpenPTY()
	if err != nil {
		t.Skipf("no pseudo-terminal here: %v", err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- b.Serve(ctx, pty) }()
	t.Cleanup(func() {
		cancel()
		next(t, "the balance's end", ended)
	})
	return b, pty
}

// A whole chain: cell, pseudo-terminal, serial library, decoder, detector.
func TestVesselOnAndOffIsTakenOverARealTerminal(t *testing.T) {
	b, pty := serve(t, virtual.Options{Seed: 7, Pace: 20})
	sink := newBench()
	start(t, fast(pty.Path), Options{Sink: sink})

	id := next(t, "online", sink.online)
	if id.Model != "VB-220" || id.Serial != "0021600412" || id.Firmware != "00-42-01" {
		t.Errorf("identity = %+v", id)
	}
	if w := next(t, "the empty pan", sink.weights); w.MassG.String() != "0.0000" {
		t.Errorf("empty pan: %s", w.MassG)
	}
	for _, load := range []float64{45.1234, 0, 55.0987, 0} {
		b.SetLoad(load)
		w := next(t, "a weight", sink.weights)
		if d := w.MassG.Float() - load; d > 0.0004 || d < -0.0004 {
			t.Errorf("load %.4f g: taken %s g", load, w.MassG)
		}
		if !strings.HasSuffix(string(w.Raw), " g  \r\n") || w.Identity.Serial != id.Serial || w.Dwell.Lines < 3 {
			t.Errorf("load %.4f g: raw %q, identity %+v, %d lines", load, w.Raw, w.Identity, w.Dwell.Lines)
		}
	}
}

// The demo must repeat exactly for a seed, however busy the machine is.
func TestTakenValuesRepeatForASeed(t *testing.T) {
	run := func() string {
		b, pty := serve(t, virtual.Options{Seed: 42, Pace: 30})
		sink := newBench()
		start(t, fast(pty.Path), Options{Sink: sink})
		taken := []string{next(t, "the empty pan", sink.weights).MassG.String()}
		for _, load := range []float64{45.1234, 0, 55.0987, 0, 45.12345, 0.00005, 65.43215} {
			b.SetLoad(load)
			taken = append(taken, next(t, "a weight", sink.weights).MassG.String())
		}
		return strings.Join(taken, " ")
	}
	if first, second := run(), run(); first != second {
		t.Errorf("seed 42 gave\n%s, then\n%s", first, second)
	}
}

func TestTareOnCommandIsTakenAsZero(t *testing.T) {
	b, pty := serve(t, virtual.Options{Seed: 3, Pace: 20})
	sink := newBench()
	s := start(t, fast(pty.Path), Options{Sink: sink})
	next(t, "the empty pan", sink.weights)
	b.SetLoad(45.5)
	next(t, "the vessel", sink.weights)
	for range 2 { // the second tare changes nothing on the display, and its zero counts all the same
		if err := s.Tare(t.Context()); err != nil {
			t.Fatal(err)
		}
		if w := next(t, "the tared zero", sink.weights); w.MassG.String() != "0.0000" {
			t.Errorf("after tare: %s g", w.MassG)
		}
	}
}

// A balance that prints only when asked, and answers at stability.
func TestPollingOverARealTerminal(t *testing.T) {
	b, pty := serve(t, virtual.Options{Seed: 11, Pace: 20, Output: virtual.OnRequest, Form: 16})
	sink := newBench()
	cfg := fast(pty.Path)
	cfg.Capture, cfg.PollIntervalS = "poll", decimal.MustParse("0.03")
	start(t, cfg, Options{Sink: sink})
	next(t, "the empty pan", sink.weights)
	for _, load := range []float64{45.1234, 0} {
		b.SetLoad(load)
		if w := next(t, "a weight", sink.weights); w.MassG.Float()-load > 0.0004 || load-w.MassG.Float() > 0.0004 {
			t.Errorf("load %.4f g: taken %s g", load, w.MassG)
		}
	}
}

// Each press of PRINT is one weight, and nothing else is.
func TestPrintOverARealTerminal(t *testing.T) {
	b, pty := serve(t, virtual.Options{Seed: 12, Pace: 20, Output: virtual.OnRequest})
	sink := newBench()
	cfg := fast(pty.Path)
	cfg.Capture = "print"
	start(t, cfg, Options{Sink: sink})
	next(t, "online", sink.online)
	b.SetLoad(45.1234)
	b.PressPrint()
	first := next(t, "the first press", sink.weights)
	b.PressPrint()
	second := next(t, "the second press", sink.weights)
	if first.MassG != second.MassG || first.Weight().Trace != nil {
		t.Errorf("taken %s and %s, trace %v", first.MassG, second.MassG, first.Weight().Trace)
	}
	if len(sink.weights) != 0 {
		t.Error("a weight was taken that nobody printed")
	}
}

// What was recorded from a line gives the same weights when it is replayed.
func TestRecordingGivesTheSameWeights(t *testing.T) {
	b, pty := serve(t, virtual.Options{Seed: 13, Pace: 20})
	sink := newBench()
	cfg := fast(pty.Path)
	cfg.Record = filepath.Join(t.TempDir(), "line.rec")
	recorded, err := NewStation(cfg, Options{Sink: sink})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	ended := make(chan error, 1)
	go func() { ended <- recorded.Run(ctx) }()
	var want, got []string
	for _, load := range []float64{0, 45.1234, 0, 54.9876} {
		if load != 0 || len(want) > 0 {
			b.SetLoad(load)
		}
		want = append(want, next(t, "a weight", sink.weights).MassG.String())
	}
	cancel()
	next(t, "the station's end", ended)
	again := newBench()
	replay := fast("")
	replay.Port, replay.Replay = "", cfg.Record
	s, err := NewStation(replay, Options{Sink: again})
	if err != nil {
		t.Fatal(err)
	}
	if err := s.Run(t.Context()); err != nil {
		t.Errorf("the end of a recording: %v, want nil", err)
	}
	for len(again.weights) > 0 {
		got = append(got, (<-again.weights).MassG.String())
	}
	if strings.Join(got, " ") != strings.Join(want, " ") {
		t.Errorf("replayed %v, want %v", got, want)
	}
}
