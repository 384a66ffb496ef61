package acquire

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"

	"tenthmark/acquire/line"
	"tenthmark/session"
)

// wire is a line in memory with a balance's answers at its end.
type wire struct {
	in     chan string
	closed chan struct{}
	once   sync.Once
	answer func(command string) string // nil: a balance that never answers

	mu    sync.Mutex
	heard []string
}

func newWire(answer func(string) string) *wire { return &wire{answer: answer} }

// plug makes the channels, which must be born inside the bubble.
func (w *wire) plug() {
	if w != nil {
		w.in, w.closed = make(chan string, 1000), make(chan struct{})
	}
}

func (w *wire) Name() string { return "memory" }

func (w *wire) Close() error {
	w.once.Do(func() { close(w.closed) })
	return nil
}

func (w *wire) Read(p []byte) (int, error) {
	select {
	case s := <-w.in:
		if s == "gone" {
			return 0, &session.Fault{Code: line.CodeGone, Message: "gone", Hint: "plug it in"}
		}
		return copy(p, s), nil
	case <-w.closed:
		return 0, io.ErrClosedPipe
	}
}

func (w *wire) Write(p []byte) error {
	command := strings.TrimSuffix(strings.TrimPrefix(string(p), "\x1b"), "\r\n")
	w.mu.Lock()
	w.heard = append(w.heard, command)
	w.mu.Unlock()
	if w.answer != nil {
		if reply := w.answer(command); reply != "" {
			w.in <- reply
		}
	}
	return nil
}

// commands gives what the balance heard since the last call.
func (w *wire) commands() string {
	w.mu.Lock()
	defer w.mu.Unlock()
	s := strings.Join(w.heard, " ")
	w.heard = nil
	return s
}

func weightLine(mass string) string { return fmt.Sprintf("N     +%9s g  \r\n", mass) }

// live runs a station on the given wires, one for each opening, inside a bubble of
// synctest, in which time passes only when everybody waits.
func live(t *testing.T, cfg Config, wires []*wire, play func(s *Station, b *bench)) {
	t.Helper()
	synctest.Test(t, func(t *testing.T) {
		b := newBench()
		for _, w := range wires {
			w.plug()
		}
		opened := 0
		cfg.Name, cfg.Port = "bench-1", "memory"
		s, err := NewStation(cfg, Options{Sink: b, Open: func(context.Context) (Conn, error) {
			opened++
			if opened > len(wires) || wires[opened-1] == nil {
				return nil, &session.Fault{Code: line.CodeAbsent, Message: "absent", Hint: "plug it in"}
			}
			return wires[opened-1], nil
		}})
		if err != nil {
			t.Fatal(err)
		}
		ctx, cancel := context.WithCancel(t.Context())
		ended := make(chan error, 1)
		go func() { ended <- s.Run(ctx) }()
		play(s, b)
		cancel()
		if err := <-ended; !errors.Is(err, context.Canceled) {
			t.Errorf("Run ended with %v", err)
		}
	})
}

func pass(d time.Duration) {
	time.Sleep(d) // in the bubble
	synctest.Wait()
}

// stream sends a line ten times a second.
func (w *wire) stream(d time.Duration, text string) {
	for range int(d / (100 * time.Millisecond)) {
		w.in <- text
		pass(100 * time.Millisecond)
	}
}

func count[T any](c chan T) int { return len(c) }

func codes(b *bench) string {
	var all []string
	for len(b.diagnoses) > 0 {
		all = append(all, (<-b.diagnoses).Code)
	}
	return strings.Join(all, " ")
}

func TestListensBeforeItAsksAndBearsSilence(t *testing.T) {
	w := newWire(nil)
	live(t, Config{}, []*wire{w}, func(s *Station, b *bench) {
		pass(1400 * time.Millisecond)
		if got := w.commands(); got != "" {
			t.Errorf("before it had listened it sent %q", got)
		}
		pass(3 * time.Second)
		if got := w.commands(); got != "x1_ x2_ x3_" {
			t.Errorf("it asked %q, want model, serial number and software", got)
		}
		if count(b.online) != 0 {
			t.Error("online before the last window was over")
		}
		pass(200 * time.Millisecond)
		if id := <-b.online; id != (session.Identity{}) || s.Snapshot().State != Online {
			t.Errorf("identity %+v, state %s", id, s.Snapshot().State)
		}
		pass(30 * time.Second)
		if got := w.commands(); got != "" {
			t.Errorf("in capture mode settle it sent %q", got)
		}
		if got := codes(b); got != DiagnoseSilent {
			t.Errorf("diagnoses %q, want %s", got, DiagnoseSilent)
		}
		w.stream(time.Second, weightLine("45.1234"))
		if d := s.Snapshot().Diagnosis; d != nil {
			t.Errorf("after lines came the diagnosis stayed: %+v", d)
		}
	})
}

func identityOf(serial string) func(string) string {
	return func(command string) string {
		return map[string]string{"x1_": "Model    VB-220\r\n", "x2_": serial + "\r\n", "x3_": "00-42-01\r\n"}[command]
	}
}

func TestIdentityIsReadAmongTheLines(t *testing.T) {
	for _, tt := range []struct{ name, reply, want string }{
		{"plain", "0012345678", "0012345678"},
		{"with commas", "001,234,567", "001,234,567"},
		{"labelled", "Ser.no.  12345678", "12345678"},
		{"padded to a line", "    0012345678", "0012345678"},
	} {
		w := newWire(identityOf(tt.reply))
		live(t, Config{}, []*wire{w}, func(s *Station, b *bench) {
			w.stream(3*time.Second, weightLine("45.1234"))
			id := <-b.online
			if id.Serial != tt.want || id.Model != "VB-220" || id.Firmware != "00-42-01" {
				t.Errorf("%s: identity %+v, want serial number %s", tt.name, id, tt.want)
			}
			if count(b.weights) != 0 {
				t.Errorf("%s: a weight was taken before the balance was known", tt.name)
			}
			w.stream(3*time.Second, weightLine("45.1234"))
			if got := <-b.weights; got.MassG.String() != "45.1234" || got.Identity.Serial != tt.want {
				t.Errorf("%s: %s g from %+v", tt.name, got.MassG, got.Identity)
			}
		})
	}
}

func TestOutageIsToldOnceAndTheIdentityAskedAgain(t *testing.T) {
	first, second := newWire(identityOf("111")), newWire(identityOf("222"))
	live(t, Config{}, []*wire{first, nil, nil, nil, second}, func(s *Station, b *bench) {
		first.stream(8*time.Second, weightLine("45.1234"))
		<-b.online
		<-b.weights
		first.in <- "gone"
		pass(4 * time.Second)
		if why := <-b.offline; why.Code != line.CodeGone {
			t.Errorf("offline because of %+v", why)
		}
		if why := <-b.offline; why.Code != line.CodeAbsent || count(b.offline) != 0 {
			t.Errorf("then %+v and %d more; want absent, once", why, count(b.offline))
		}
		second.stream(8*time.Second, weightLine("45.1235"))
		if id := <-b.online; id.Serial != "222" {
			t.Errorf("after the outage: %+v", id)
		}
		if count(b.weights) != 0 {
			t.Error("the same load was taken again after the outage")
		}
		second.stream(4*time.Second, weightLine("55.0000"))
		if w := <-b.weights; w.Identity.Serial != "222" {
			t.Errorf("the weight says it is from %+v", w.Identity)
		}
	})
}

func TestAttemptsGrowRarer(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		attempts := 0
		b := newBench()
		s, err := NewStation(Config{Name: "bench-1", Port: "memory"}, Options{Sink: b, Open: func(context.Context) (Conn, error) {
			attempts++
			return nil, &session.Fault{Code: line.CodeAbsent}
		}})
		if err != nil {
			t.Fatal(err)
		}
		ctx, cancel := context.WithCancel(t.Context())
		ended := make(chan error, 1)
		go func() { ended <- s.Run(ctx) }()
		pass(10 * time.Minute)
		cancel()
		<-ended
		if attempts < 120 || attempts > 135 || count(b.offline) != 1 {
			t.Errorf("%d attempts in ten minutes and %d reports; want one each 5 s, and one", attempts, count(b.offline))
		}
	})
}

func TestPollingAsksOnceAndWaits(t *testing.T) {
	w := newWire(nil)
	live(t, Config{Capture: "poll"}, []*wire{w}, func(s *Station, b *bench) {
		pass(4600 * time.Millisecond)
		w.commands()
		pass(14 * time.Second)
		if got := w.commands(); got != "" {
			t.Errorf("while an answer is owed it sent %q", got)
		}
		w.in <- weightLine("45.1234")
		pass(600 * time.Millisecond)
		if got := w.commands(); got != "P" {
			t.Errorf("after the answer it sent %q, want P", got)
		}
	})
}

func TestPollingTellsSilenceFromUnrest(t *testing.T) {
	for _, tt := range []struct {
		name   string
		answer func(string) string
		want   string
	}{
		{"off", nil, DiagnoseSilent},
		{"unstable", identityOf("123"), DiagnoseNotStable},
	} {
		w := newWire(tt.answer)
		live(t, Config{Capture: "poll"}, []*wire{w}, func(s *Station, b *bench) {
			pass(21 * time.Second)
			if got := codes(b); !strings.HasPrefix(got, tt.want) {
				t.Errorf("%s: diagnoses %q, want %s", tt.name, got, tt.want)
			}
			w.commands()
			w.in <- weightLine("45.1234")
			w.in <- weightLine("45.1234")
			pass(time.Second)
			if s.Snapshot().Diagnosis != nil {
				t.Errorf("%s: after a weight the diagnosis stayed", tt.name)
			}
		})
	}
}

// A balance that answers the first request when the second one was sent as well sends
// two lines. The station must not then believe that it is one answer ahead.
func TestLateAnswersAreCountedOff(t *testing.T) {
	w := newWire(nil)
	live(t, Config{Capture: "poll"}, []*wire{w}, func(s *Station, b *bench) {
		pass(55 * time.Second) // the first request was given up and a second one sent
		if got := strings.Count(w.commands(), "P"); got != 2 {
			t.Errorf("%d requests, want 2", got)
		}
		w.in <- weightLine("45.1234")
		pass(time.Second)
		if got := w.commands(); got != "" {
			t.Errorf("with one answer still owed it sent %q", got)
		}
		w.in <- weightLine("45.1234")
		pass(3 * time.Second)
		if got := w.commands(); got != "P" {
			t.Errorf("after both answers it sent %q, want one P", got)
		}
	})
}

func TestPollingTakesAWeight(t *testing.T) {
	var mass atomic.Value
	mass.Store("0.0000")
	w := newWire(func(command string) string {
		if command == "P" {
			return weightLine(mass.Load().(string))
		}
		return ""
	})
	live(t, Config{Capture: "poll"}, []*wire{w}, func(s *Station, b *bench) {
		pass(10 * time.Second)
		mass.Store("45.1234")
		pass(10 * time.Second)
		if got := count(b.weights); got != 2 {
			t.Fatalf("%d weights, want 2", got)
		}
		if first, second := <-b.weights, <-b.weights; first.MassG.String() != "0.0000" || second.MassG.String() != "45.1234" {
			t.Errorf("taken %s and %s", first.MassG, second.MassG)
		}
	})
}

func TestBalanceThatPrintsByItselfIsNotAsked(t *testing.T) {
	w := newWire(nil)
	live(t, Config{Capture: "poll"}, []*wire{w}, func(s *Station, b *bench) {
		w.stream(12*time.Second, weightLine("45.1234"))
		if got := w.commands(); got != "x1_ x2_ x3_" {
			t.Errorf("it sent %q; a P would toggle the printing", got)
		}
		if got := codes(b); got != DiagnoseAutoPrint {
			t.Errorf("diagnoses %q, want %s", got, DiagnoseAutoPrint)
		}
		if count(b.weights) != 1 {
			t.Errorf("%d weights, want 1", count(b.weights))
		}
	})
}

func TestReportInTheMiddleIsNoWeight(t *testing.T) {
	w := newWire(nil)
	dash := strings.Repeat("-", 20) + "\r\n"
	live(t, Config{}, []*wire{w}, func(s *Station, b *bench) {
		w.stream(8*time.Second, weightLine("0.0000"))
		<-b.weights
		w.in <- dash + "02.12.2026     09:43\r\nSer.no.   0021600412\r\n" + dash + "Cal. Ext.\r\n"
		for range 40 {
			w.in <- "Nom.  +  200.0000 g  \r\n"
			pass(100 * time.Millisecond)
		}
		w.in <- dash + "Name:\r\n\r\n" + dash
		w.stream(4*time.Second, weightLine("0.0001"))
		if count(b.weights) != 0 {
			t.Errorf("%s g was taken out of a report", (<-b.weights).MassG)
		}
	})
}

func TestCutOffLineIsNoWeight(t *testing.T) {
	w := newWire(nil)
	live(t, Config{}, []*wire{w}, func(s *Station, b *bench) {
		pass(5 * time.Second)
		for range 50 {
			w.in <- "N     +   5.1234 g"
			pass(time.Second)
			w.in <- "  \r\n"
			pass(time.Second)
		}
		if count(b.weights) != 0 {
			t.Error("a line that was torn by silence was taken")
		}
	})
}

func TestWrongParityIsNamed(t *testing.T) {
	w := newWire(nil)
	odd := func(s string) string {
		out := []byte(s)
		for i, c := range out {
			ones := 0
			for c > 0 {
				ones += int(c & 1)
				c >>= 1
			}
			if ones%2 == 0 {
				out[i] |= 0x80
			}
		}
		return string(out)
	}
	live(t, Config{}, []*wire{w}, func(s *Station, b *bench) {
		w.stream(10*time.Second, odd(weightLine("45.1234")))
		d := <-b.diagnoses
		if d.Code != DiagnoseSetting || !strings.Contains(d.Message, "odd parity") {
			t.Errorf("diagnosis %+v", d)
		}
		if got := <-b.weights; got.MassG.String() != "45.1234" {
			t.Errorf("taken %s", got.MassG)
		}
	})
}

func TestTareOfAnOfflineStationIsRefused(t *testing.T) {
	live(t, Config{}, nil, func(s *Station, b *bench) {
		if err := s.Tare(context.Background()); session.FaultCode(err) != "station-offline" {
			t.Errorf("tare while offline: %v", err)
		}
	})
}

func TestPatternStation(t *testing.T) {
	w := newWire(nil)
	cfg := Config{Pattern: `^(?P<stable>S?)\s*(?P<sign>[+-]?)(?P<value>\d+\.\d+)\s*(?P<unit>g)$`}
	live(t, cfg, []*wire{w}, func(s *Station, b *bench) {
		w.stream(8*time.Second, "S 45.1234 g\r\n")
		if got := <-b.weights; got.MassG.String() != "45.1234" {
			t.Errorf("taken %s", got.MassG)
		}
	})
}

func TestConfigNamesTheKey(t *testing.T) {
	for _, tt := range []struct {
		name string
		cfg  Config
		want string
	}{
		{"no line", Config{}, "exactly one"},
		{"capture", Config{Port: "x", Capture: "guess"}, "guess"},
		{"pattern", Config{Port: "x", Pattern: "("}, "pattern"},
		{"pattern without value", Config{Port: "x", Pattern: "(?P<unit>g)"}, "value"},
		{"readability", Config{Port: "x", ReadabilityG: number("0")}, "readability_g"},
		{"dwell", Config{Port: "x", DwellS: number("-2")}, "dwell_s"},
		{"re-arm below band", Config{Port: "x", BandG: number("0.01"), ReArmG: number("0.005")}, "re-arm"},
		{"listen", Config{Port: "x", ListenS: number("-1")}, "listen_s"},
	} {
		err := tt.cfg.Check()
		var f *session.Fault
		if !errors.As(err, &f) || f.Hint == "" || !strings.Contains(f.Message, tt.want) {
			t.Errorf("%s: %v, want a fault that names %q", tt.name, err, tt.want)
		}
	}
	if err := (Config{Port: "/dev/ttyUSB0"}).Check(); err != nil {
		t.Errorf("defaults: %v", err)
	}
}
