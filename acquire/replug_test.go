//go:build linux

package acquire

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"tenthmark/acquire/virtual"
)

var replugLong = flag.Bool("replug.long", false, "unplug and replug 10,000 times instead of 200")

// usage is what a leak would make grow.
type usage struct {
	goroutines, descriptors int
	heapKiB                 uint64
	residentKiB             int
}

func (u usage) String() string {
	return fmt.Sprintf("%d goroutines, %d descriptors, %d KiB heap, %d KiB resident", u.goroutines, u.descriptors, u.heapKiB, u.residentKiB)
}

func measure(t *testing.T) usage {
	t.Helper()
	runtime.GC()
	runtime.GC()
	var m runtime.MemStats
	runtime.ReadMemStats(&m)
	fds, err := os.ReadDir("/proc/self/fd")
	if err != nil {
		t.Skipf("no /proc here: %v", err)
	}
	return usage{runtime.NumGoroutine(), len(fds), m.HeapAlloc / 1024, residentKiB(t)}
}

func residentKiB(t *testing.T) int {
	t.Helper()
	text, err := os.ReadFile("/proc/self/status")
	if err != nil {
		t.Fatal(err)
	}
	for line := range strings.Lines(string(text)) {
		var kib int
		if n, _ := fmt.Sscanf(line, "VmRSS: %d kB", &kib); n == 1 {
			return kib
		}
	}
	return 0
}

// An adapter that is pulled and plugged in again and again, at a path that stays the
// same as /dev/serial/by-id does: the station comes back each time, and nothing grows.
func TestReplugging(t *testing.T) {
	cycles := 200
	if *replugLong {
		cycles = 10000
	}
	port := filepath.Join(t.TempDir(), "balance0")
	b, err := virtual.New(virtual.Options{Seed: 1, Pace: 20})
	if err != nil {
		t.Fatal(err)
	}
	cfg := fast(port)
	no := false
	cfg.AskIdentity, cfg.ListenS = &no, number("0")
	sink := newBench()
	s, err := NewStation(cfg, Options{Sink: sink})
	if err != nil {
		t.Fatal(err)
	}
	s.pause = backoff{first: time.Millisecond, longest: time.Millisecond}
	ctx, cancel := context.WithCancel(t.Context())
	ended := make(chan error, 1)
	go func() { ended <- s.Run(ctx) }()

	var before usage
	for i := range cycles {
		replug(t, b, port, sink)
		if i == cycles/10 {
			before = measure(t)
		}
	}
	after := measure(t)
	t.Logf("after %d cycles: %v", cycles/10, before)
	t.Logf("after %d cycles: %v", cycles, after)
	if after.goroutines > before.goroutines || after.descriptors > before.descriptors || after.heapKiB > before.heapKiB+256 || after.residentKiB > before.residentKiB+8192 {
		t.Error("something grows with the cycles")
	}
	cancel()
	if err := next(t, "the station's end", ended); !errors.Is(err, context.Canceled) {
		t.Errorf("Run: %v", err)
	}
}

// replug plugs the balance in, waits until the station is online and hears it, and
// pulls it out again.
func replug(t *testing.T, b *virtual.Balance, port string, sink *bench) {
	t.Helper()
	pty, err := virtual.OpenPTY()
	if err != nil {
		t.Skipf("no pseudo-terminal here: %v", err)
	}
	served := make(chan error, 1)
	go func() { served <- b.Serve(t.Context(), pty) }()
	beside := port + ".new"
	if err := os.Symlink(pty.Path, beside); err != nil {
		t.Fatal(err)
	}
	if err := os.Rename(beside, port); err != nil {
		t.Fatal(err)
	}
	next(t, "online", sink.online)
	pty.Close()
	next(t, "the balance's end", served)
	for next(t, "offline", sink.offline).Code == "port-absent" { // of the moment before it was plugged in
	}
	sink.forget()
}

// forget drops what was remembered of live values and weights.
func (b *bench) forget() {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.live = b.live[:0]
	for len(b.weights) > 0 {
		<-b.weights
	}
}
