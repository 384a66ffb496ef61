package settle

import (
	"fmt"
	"math"
	"testing"
	"time"

	"pgregory.net/rapid"

	"tenthmark/calc/decimal"
)

// film is a series of lines, written as a person would describe it.
type film struct {
	t        *testing.T
	detector *Detector
	now      time.Duration
	step     time.Duration
	taken    []string
	last     Settled
}

func newFilm(t *testing.T, change ...func(*Options)) *film {
	t.Helper()
	opt := DefaultOptions(0.0001, 0.0001)
	for _, c := range change {
		c(&opt)
	}
	d, err := New(opt)
	if err != nil {
		t.Fatal(err)
	}
	return &film{t: t, detector: d, step: 100 * time.Millisecond}
}

func (f *film) see(s Sample) *film {
	f.now += f.step
	s.Raw = fmt.Appendf(nil, "%s %v\r\n", s.MassG, f.now)
	if settled, ok := f.detector.Observe(f.now, s); ok {
		f.taken = append(f.taken, settled.MassG.String())
		f.last = settled
	}
	return f
}

// rest shows a value, marked stable, for so many seconds; digits are added in turn to
// its last place.
func (f *film) rest(seconds float64, mass string, digits ...int64) *film {
	return f.show(seconds, mass, true, digits...)
}

// moving shows a value without the mark of stability.
func (f *film) moving(seconds float64, mass string, digits ...int64) *film {
	return f.show(seconds, mass, false, digits...)
}

func (f *film) show(seconds float64, mass string, stable bool, digits ...int64) *film {
	m := decimal.MustParse(mass)
	for i := range int(math.Round(seconds / f.step.Seconds())) {
		n := m
		if len(digits) > 0 {
			n = decimal.New(m.Unscaled()+digits[i%len(digits)], m.Decimals())
		}
		f.see(Sample{MassG: n, Unit: "g", Stable: stable})
	}
	return f
}

// drift shows a value that runs evenly by so many digits a second.
func (f *film) drift(seconds float64, mass string, digitsS float64) *film {
	m := decimal.MustParse(mass)
	for i := range int(math.Round(seconds / f.step.Seconds())) {
		d := int64(math.Round(digitsS * float64(i) * f.step.Seconds()))
		f.see(Sample{MassG: decimal.New(m.Unscaled()+d, m.Decimals()), Unit: "g", Stable: true})
	}
	return f
}

func (f *film) kind(k Kind) *film     { return f.see(Sample{Kind: k}) }
func (f *film) pause(s float64) *film { f.now += time.Duration(s * float64(time.Second)); return f }

func (f *film) want(masses ...string) {
	f.t.Helper()
	if fmt.Sprint(f.taken) != fmt.Sprint(masses) {
		f.t.Errorf("taken %v, want %v", f.taken, masses)
	}
}

func TestWhatIsTaken(t *testing.T) {
	tests := []struct {
		name string
		play func(f *film)
		want []string
	}{
		{"a vessel is put on and taken off", func(f *film) {
			f.rest(3, "0.0000").moving(1, "30.0000").rest(3, "45.1234").moving(1, "20.0000").rest(3, "0.0001")
		}, []string{"0.0000", "45.1234", "0.0001"}},
		{"one load at rest is taken once, for hours", func(f *film) { f.rest(7200, "45.1234") }, []string{"45.1234"}},
		{"too short a rest is none", func(f *film) { f.rest(1.9, "45.1234").moving(1, "45.2000").rest(1.9, "46.0000") }, nil},
		{"the same vessel is taken off and put back", func(f *film) {
			f.rest(3, "45.1234").moving(1, "10.0000").rest(3, "45.1234")
		}, []string{"45.1234", "45.1234"}},
		{"it is put back before the empty pan came to rest", func(f *film) {
			f.rest(3, "45.1234").moving(0.6, "3.0000").rest(3, "45.1234")
		}, []string{"45.1234", "45.1234"}},
		{"a bumped table is no new load", func(f *film) {
			f.rest(3, "45.1234").moving(0.3, "46.9000").moving(0.1, "44.0000").moving(2, "45.1238").rest(5, "45.1234")
		}, []string{"45.1234"}},
		{"one drop is a new load", func(f *film) { f.rest(3, "45.1234").moving(0.8, "45.1500").rest(3, "45.1614") }, []string{"45.1234", "45.1614"}},
		{"drops that fall faster than the dwell are one load", func(f *film) {
			f.rest(3, "0.0000")
			for _, m := range []string{"9.80", "9.84", "9.88", "9.92", "9.96"} {
				f.moving(0.7, m+"00").rest(0.8, m+"31")
			}
			f.rest(3, "9.9631")
		}, []string{"0.0000", "9.9631"}},
		{"a display that flickers gives its middle", func(f *film) { f.rest(5, "45.1230", 4, 5, 4, 3, 4) }, []string{"45.1234"}},
		{"a unit that flickers never rests", func(f *film) {
			for range 60 {
				f.rest(0.7, "45.1234").moving(0.1, "45.1234")
			}
		}, nil},
		{"an evaporating vessel is taken once", func(f *film) { f.drift(600, "45.1234", -0.8) }, []string{"45.1233"}},
		{"a thin stream is not mistaken for drift for ever", func(f *film) { f.drift(300, "45.0000", 3).rest(3, "45.0900") }, []string{"45.0900"}},
		{"the tail of a filter waits", func(f *film) {
			for i := range 100 {
				f.rest(0.1, "45.0000", int64(math.Round(24*math.Exp(-float64(i)/20))))
			}
		}, []string{"45.0001"}},
		{"an overload is another load", func(f *film) {
			f.rest(3, "45.1234").kind(Beyond).rest(3, "45.1234")
		}, []string{"45.1234", "45.1234"}},
		{"damage starts the dwell anew", func(f *film) {
			for range 20 {
				f.rest(1.5, "45.1234").kind(Disturbed)
			}
		}, nil},
		{"damage does not re-arm", func(f *film) { f.rest(3, "45.1234").kind(Disturbed).rest(30, "45.1234") }, []string{"45.1234"}},
		{"a gap starts the dwell anew", func(f *film) {
			for range 20 {
				f.rest(1.5, "45.1234").pause(3)
			}
		}, nil},
		{"an outage over the same load does not re-arm", func(f *film) { f.rest(3, "45.1234").pause(600).rest(9, "45.1235") }, []string{"45.1234"}},
		{"an outage in which the load changed does", func(f *film) { f.rest(3, "45.1234").pause(600).rest(9, "55.1235") }, []string{"45.1234", "55.1235"}},
		{"a small tare after a dark display counts", func(f *film) {
			f.rest(3, "0.0041").kind(Blank).rest(3, "0.0000")
		}, []string{"0.0041", "0.0000"}},
		{"a dark display alone does not", func(f *film) { f.rest(3, "0.0041").kind(Blank).rest(30, "0.0042") }, []string{"0.0041"}},
		{"an absent number is no weight", func(f *film) {
			for range 100 {
				f.see(Sample{Stable: true})
			}
		}, nil},
		{"a decimal that comes and goes is one load", func(f *film) {
			f.rest(3, "45.1234").moving(1, "45.123").rest(3, "45.1234")
		}, []string{"45.1234"}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			f := newFilm(t)
			tt.play(f)
			f.want(tt.want...)
		})
	}
}

func TestSlowPrinterNeedsThreeLines(t *testing.T) {
	f := newFilm(t)
	f.step = 10 * time.Second
	f.rest(20, "45.1234").want()
	f.rest(20, "45.1234").want("45.1234")
}

func TestCommandedTareTakesItsZeroOnce(t *testing.T) {
	f := newFilm(t)
	f.rest(3, "0.0001")
	f.detector.Tared()
	f.rest(9, "0.0000").want("0.0001", "0.0000")
}

func TestPrintTakesEachPress(t *testing.T) {
	f := newFilm(t, func(o *Options) { o.Mode = Print })
	f.step = 2 * time.Second
	f.rest(6, "45.1234").moving(2, "46.0000").rest(2, "45.1235").want("45.1234", "45.1234", "45.1234", "45.1235")
}

func TestPrintNoticesAStream(t *testing.T) {
	f := newFilm(t, func(o *Options) { o.Mode = Print })
	f.rest(600, "45.1234")
	if len(f.taken) > handPresses || !f.detector.Streaming() {
		t.Errorf("%d weights taken from a stream, streaming %v", len(f.taken), f.detector.Streaming())
	}
	f.pause(10).rest(0.1, "45.1239")
	if f.taken[len(f.taken)-1] != "45.1239" || f.detector.Streaming() {
		t.Error("after the stream ended, a press was not taken")
	}
}

func TestWithoutMarkOfStability(t *testing.T) {
	f := newFilm(t, func(o *Options) { o.NoFlag = true })
	f.moving(2.9, "45.1234").want()
	f.moving(0.5, "45.1234").want("45.1234")
	f.moving(1, "30.0000").moving(4, "0.0000").want("45.1234", "0.0000")
}

func TestSettledTellsWhatItRestsOn(t *testing.T) {
	f := newFilm(t)
	f.moving(1, "44.0000").rest(5, "45.1234", 0, 1)
	s := f.last
	if s.Dwell.Length != 2*time.Second || s.Dwell.Lines != 21 || s.Dwell.Waiting != time.Second || s.Dwell.Beyond != 0 {
		t.Errorf("dwell %+v", s.Dwell)
	}
	if math.Abs(s.Dwell.NoiseG-0.00005) > 0.00001 || math.Abs(s.Dwell.SlopeGS) > 0.00002 {
		t.Errorf("noise %g g, slope %g g/s; want 0.00005 and about 0", s.Dwell.NoiseG, s.Dwell.SlopeGS)
	}
	if len(s.Trace) != 31 || s.Trace[0].Stable || !s.Trace[30].Stable {
		t.Errorf("trace of %d points", len(s.Trace))
	}
	if want := fmt.Sprintf("%s %v\r\n", s.MassG, s.At); string(s.Raw) != want {
		t.Errorf("raw %q, want %q", s.Raw, want)
	}
}

func TestSlopeOfADriftIsMeasured(t *testing.T) {
	f := newFilm(t)
	f.drift(10, "45.1234", -0.8)
	if got := f.last.Dwell.SlopeGS; math.Abs(got+0.00008) > 0.000015 {
		t.Errorf("slope %g g/s, want -0.00008 to a fifth", got)
	}
}

// Whatever comes: a taken weight is a line that was sent and marked stable, and two in
// a row are apart by more than the re-arm step or have something else between them.
func TestOnlySentStableLinesAreTaken(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		d, err := New(DefaultOptions(0.0001, 0.0001))
		if err != nil {
			rt.Fatal(err)
		}
		sent := map[string]bool{}
		now := time.Duration(0)
		for range rapid.IntRange(1, 40).Draw(rt, "phases") {
			base := rapid.Int64Range(-1000, 2000000).Draw(rt, "mass")
			stable := rapid.Bool().Draw(rt, "stable")
			kind := rapid.SampledFrom([]Kind{Weight, Weight, Weight, Weight, Blank, Beyond, Disturbed}).Draw(rt, "kind")
			for range rapid.IntRange(1, 60).Draw(rt, "lines") {
				now += time.Duration(rapid.IntRange(0, 300).Draw(rt, "ms")) * time.Millisecond
				n := decimal.New(base+rapid.Int64Range(-1, 1).Draw(rt, "flicker"), 4)
				raw := fmt.Sprint(n, now)
				if stable && kind == Weight {
					sent[raw] = true
				}
				s, ok := d.Observe(now, Sample{Kind: kind, MassG: n, Stable: stable, Raw: []byte(raw)})
				if ok && !sent[string(s.Raw)] {
					rt.Fatalf("taken %q, which was never sent as stable", s.Raw)
				}
				if p := d.Progress(); p < 0 || p > 1 {
					rt.Fatalf("progress %g", p)
				}
			}
		}
	})
}

func TestOptionsAreChecked(t *testing.T) {
	for name, spoil := range map[string]func(*Options){
		"mode":    func(o *Options) { o.Mode = "guess" },
		"digit":   func(o *Options) { o.DigitG = 0 },
		"band":    func(o *Options) { o.BandG = o.DigitG / 2 },
		"re-arm":  func(o *Options) { o.ReArmG = o.BandG },
		"dwell":   func(o *Options) { o.Dwell = 0 },
		"lines":   func(o *Options) { o.MinLines = 1 },
		"drift":   func(o *Options) { o.DriftGS = math.NaN() },
		"NaN":     func(o *Options) { o.BandG = math.NaN() },
		"neg gap": func(o *Options) { o.Gap = -1 },
	} {
		opt := DefaultOptions(0.0001, 0.0001)
		spoil(&opt)
		if _, err := New(opt); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}

func TestDefaultsFitEveryBalance(t *testing.T) {
	for _, d := range []float64{1e-6, 1e-5, 1e-4, 1e-3, 1e-2, 0.1, 1} {
		for _, r := range []float64{0.2, 1, 5} {
			opt := DefaultOptions(d, d*r)
			if err := opt.Check(); err != nil {
				t.Errorf("readability %g g, repeatability %g g: %v", d, d*r, err)
			}
		}
	}
}

func BenchmarkObserve(b *testing.B) {
	for _, state := range []string{"waiting", "taken"} {
		b.Run("state="+state, func(b *testing.B) {
			d, err := New(DefaultOptions(0.0001, 0.0001))
			if err != nil {
				b.Fatal(err)
			}
			s := Sample{MassG: decimal.MustParse("45.1234"), Unit: "g", Stable: true, Raw: []byte("N     +  45.1234 g  \r\n")}
			now := time.Duration(0)
			for range 100 {
				now += 50 * time.Millisecond
				d.Observe(now, s)
			}
			d.arm.armed = state == "waiting"
			b.ReportAllocs()
			for b.Loop() {
				now += 50 * time.Millisecond
				if state == "waiting" {
					s.Stable = !s.Stable
				}
				d.Observe(now, s)
			}
		})
	}
}
