package acquire

import (
	"context"
	"sync"
	"testing"
	"time"

	"tenthmark/session"
)

// bench is a sink that remembers.
type bench struct {
	weights   chan Settled
	online    chan session.Identity
	offline   chan *session.Fault
	diagnoses chan Diagnosis

	mu   sync.Mutex
	live []Live
}

func newBench() *bench {
	return &bench{
		weights: make(chan Settled, 4096), online: make(chan session.Identity, 64), offline: make(chan *session.Fault, 64),
		diagnoses: make(chan Diagnosis, 64),
	}
}

func (b *bench) Weight(_ context.Context, w Settled) { b.weights <- w }

func (b *bench) Live(_ string, l Live) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.live = append(b.live, l)
}

func (b *bench) Online(_ string, id session.Identity) { b.online <- id }
func (b *bench) Offline(_ string, why *session.Fault) { b.offline <- why }
func (b *bench) Diagnosis(_ string, d Diagnosis)      { b.diagnoses <- d }

// next waits for something that must come; a minute is far beyond what any machine
// needs for it.
func next[T any](t *testing.T, what string, c <-chan T) T {
	t.Helper()
	select {
	case v := <-c:
		return v
	case <-time.After(time.Minute):
		t.Fatalf("waited in vain for %s", what)
		panic("unreachable")
	}
}

// start runs a station until the test ends, and waits for its end.
func start(t *testing.T, cfg Config, opt Options) *Station {
	t.Helper()
	s, err := NewStation(cfg, opt)
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- s.Run(ctx) }()
	t.Cleanup(func() {
		cancel()
		if err := next(t, "the station's end", ended); err != nil && ctx.Err() == nil {
			t.Errorf("Run: %v", err)
		}
	})
	return s
}
