//go:build linux

package acquire

import (
	"bufio"
	"context"
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"os/exec"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"tenthmark/acquire/virtual"
)

var stationsLong = flag.Duration("stations.long", 0, "run 64 stations for so long and hold them to the budgets of processor and memory")

const stationCount = 64

// feederEnv makes this test binary a feeder: a process of its own, so that what the
// stations cost is measured without what their balances cost.
const feederEnv = "TENTHMARK_TEST_FEEDER"

func TestMain(m *testing.M) {
	if spec := os.Getenv(feederEnv); spec != "" {
		if err := feed(spec, os.Stdin, os.Stdout); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		os.Exit(0)
	}
	os.Exit(m.Run())
}

// feed opens a terminal for each word of spec (good, dead, flood, noise), prints their
// paths, feeds them from the first line on its input to the second, and prints how
// many lines each good one was sent.
func feed(spec string, in io.Reader, out io.Writer) error {
	lines := bufio.NewScanner(in)
	var ptys []*virtual.PTY
	words := strings.Fields(spec)
	for range words {
		p, err := virtual.OpenPTY()
		if err != nil {
			return err
		}
		defer p.Close()
		ptys = append(ptys, p)
		fmt.Fprintln(out, p.Path)
	}
	lines.Scan()
	stop := make(chan struct{})
	sent := make([]int, len(words))
	var all sync.WaitGroup
	for i, p := range ptys {
		all.Go(func() { sent[i] = feedOne(words[i], p, stop) })
	}
	lines.Scan()
	close(stop)
	all.Wait()
	for _, n := range sent {
		fmt.Fprintln(out, n)
	}
	lines.Scan() // keep the terminals until everything is read
	return nil
}

func feedOne(how string, p *virtual.PTY, stop chan struct{}) (sent int) {
	every := map[string]time.Duration{"good": 50 * time.Millisecond, "dead": time.Hour, "flood": 100 * time.Microsecond, "noise": time.Millisecond}[how]
	text := map[string]string{
		"good": "N     +  45.1234 g  \r\n", "flood": strings.Repeat("N     +  45.1234 g  \r\n", 20), "noise": "\x00\xff\x13N   + 9999\x00\x7f 12",
	}[how]
	tick := time.NewTicker(every)
	defer tick.Stop()
	for {
		select {
		case <-stop:
			return sent
		case <-tick.C:
			if _, err := io.WriteString(p, text); err == nil {
				sent++
			}
		}
	}
}

// feeder is the process with the balances.
type feeder struct {
	t     *testing.T
	in    io.WriteCloser
	out   *bufio.Scanner
	ports []string
	words []string
}

func startFeeder(t *testing.T, words []string) *feeder {
	t.Helper()
	cmd := exec.CommandContext(t.Context(), os.Args[0])
	cmd.Env = append(os.Environ(), feederEnv+"="+strings.Join(words, " "))
	cmd.Stderr = os.Stderr
	in, err := cmd.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	f := &feeder{t: t, in: in, out: bufio.NewScanner(out), words: words}
	t.Cleanup(func() { in.Close(); _ = cmd.Wait() }) // its exit code says nothing once its input is closed
	for range words {
		if !f.out.Scan() {
			t.Skip("no pseudo-terminals here")
		}
		f.ports = append(f.ports, f.out.Text())
	}
	return f
}

func (f *feeder) say() { fmt.Fprintln(f.in) }

// sent gives how many lines each balance sent.
func (f *feeder) sent() []int {
	counts := make([]int, len(f.words))
	for i := range counts {
		if !f.out.Scan() {
			f.t.Fatal("the feeder died")
		}
		if _, err := fmt.Sscan(f.out.Text(), &counts[i]); err != nil {
			f.t.Fatal(err)
		}
	}
	return counts
}

// TestManyStations: each good balance's every line is decoded, whatever the others do.
func TestManyStations(t *testing.T) {
	words := make([]string, stationCount)
	for i := range words {
		words[i] = "good"
	}
	duration := 3 * time.Second
	if *stationsLong > 0 {
		duration = *stationsLong
	} else {
		words[10], words[20], words[30] = "dead", "flood", "noise"
	}
	f := startFeeder(t, words)
	sink := newBench()
	stations := make([]*Station, len(words))
	ctx, cancel := context.WithCancel(t.Context())
	var all sync.WaitGroup
	for i, port := range f.ports {
		cfg := fast(port)
		no := false
		cfg.Name, cfg.AskIdentity, cfg.ListenS = fmt.Sprintf("bench-%d", i), &no, number("0")
		s, err := NewStation(cfg, Options{Sink: quiet{sink}})
		if err != nil {
			t.Fatal(err)
		}
		stations[i] = s
		all.Go(func() {
			if err := s.Run(ctx); !errors.Is(err, context.Canceled) {
				t.Errorf("%s: %v", s.Name(), err)
			}
		})
	}
	for range stations {
		next(t, "online", sink.online)
	}
	spent := processorTime(t)
	began := time.Now()
	f.say()
	time.Sleep(duration) // real terminals keep real time
	share := 100 * float64(processorTime(t)-spent) / float64(time.Since(began))
	resident := residentKiB(t)
	f.say()
	checkLines(t, f, stations)
	t.Logf("%d stations for %v: %.2f %% of one core, %.1f MiB resident", stationCount, duration, share, float64(resident)/1024)
	if *stationsLong > 0 && (share > 5 || resident > 64*1024) {
		t.Error("beyond the budget of 5 % and 64 MiB")
	}
	cancel()
	all.Wait()
}

// checkLines waits until every line was decoded. The first line after opening is
// dropped, as it may be the tail of one.
func checkLines(t *testing.T, f *feeder, stations []*Station) {
	t.Helper()
	total := 0
	for i, n := range f.sent() {
		if f.words[i] != "good" {
			continue
		}
		total += n
		deadline := time.Now().Add(time.Minute)
		for stations[i].Snapshot().Lines < int64(n-1) && time.Now().Before(deadline) {
			time.Sleep(10 * time.Millisecond)
		}
		if got := stations[i].Snapshot(); got.Lines != int64(n-1) || got.Weights != 1 {
			t.Errorf("station %d: %d lines decoded of %d, %d weights", i, got.Lines, n-1, got.Weights)
		}
	}
	t.Logf("%d lines sent to good stations", total)
}

// quiet is a sink that remembers no live values.
type quiet struct{ *bench }

func (quiet) Live(string, Live)           {}
func (quiet) Diagnosis(string, Diagnosis) {}

func (q quiet) Weight(context.Context, Settled) {}

func processorTime(t *testing.T) time.Duration {
	t.Helper()
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		t.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}
