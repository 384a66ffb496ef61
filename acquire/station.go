// Package acquire is a station: one balance with its line, its decoder and its settle
// detector. It opens the line and keeps it open, asks the balance who it is, polls
// where that is wanted, and hands settled weights to a Sink.
//
// It decides nothing about what a weight is for: that is the session's. It sends a
// balance nothing that moves or adjusts it but the tare that it was told to send. A
// station that fails, floods or falls silent disturbs no other.
package acquire

import (
	"context"
	"errors"
	"fmt"
	"io"
	"sync"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/acquire/line"
	"tenthmark/acquire/settle"
	"tenthmark/protocol"
	"tenthmark/session"
)

// Conn is an open line as the station needs it. Read may return (0, nil) after a
// while without bytes; it ends with an error after Close.
type Conn interface {
	Read(p []byte) (int, error)
	Write(p []byte) error
	Close() error
	Name() string
}

// Options are what a station needs beside its configuration.
type Options struct {
	Sink Sink
	Log  zerolog.Logger // its zero value logs nothing
	// Open opens the line; nil opens what the configuration names.
	Open func(ctx context.Context) (Conn, error)
	// Wall tells the time of day for what is shown and recorded; nil is time.Now.
	Wall func() time.Time
}

// State of a station.
type State string

// The states.
const (
	Online  State = "online"  // the line is open
	Offline State = "offline" // the line is closed, and opened again and again
)

// Snapshot is a station at a moment.
type Snapshot struct {
	Name      string
	State     State
	Identity  session.Identity
	Live      *Live          // nil before the first line
	Reason    *session.Fault // why it is offline
	Diagnosis *Diagnosis     // what is wrong while it is online, nil for nothing
	Lines     int64          // lines decoded since the start
	Weights   int64          // weights taken since the start
}

// Station is one balance. Run does the work; the other methods may be called from
// anywhere while it runs.
type Station struct {
	cfg     Config
	sink    Sink
	log     zerolog.Logger
	wall    func() time.Time
	opener  func(ctx context.Context) (Conn, error)
	source  *line.Source // nil when Options.Open is given
	pattern *protocol.Pattern
	tare    chan chan error
	pause   backoff

	mu   sync.Mutex // over snap alone, never held while anything waits
	snap Snapshot
}

// NewStation checks everything and gives a station that is ready to run.
func NewStation(cfg Config, opt Options) (*Station, error) {
	if err := cfg.Check(); err != nil {
		return nil, fmt.Errorf("station %s: %w", cfg.Name, err)
	}
	cfg = cfg.WithDefaults()
	s := &Station{
		cfg: cfg, sink: opt.Sink, wall: opt.Wall, opener: opt.Open, tare: make(chan chan error),
		pause: backoff{first: 250 * time.Millisecond, longest: 5 * time.Second},
		log:   opt.Log.With().Str("station", cfg.Name).Logger(),
		snap:  Snapshot{Name: cfg.Name, State: Offline},
	}
	if s.sink == nil {
		return nil, fmt.Errorf("station %s: there is no sink", cfg.Name)
	}
	if s.wall == nil {
		s.wall = time.Now
	}
	var err error
	if cfg.Pattern != "" {
		if s.pattern, err = protocol.NewPattern(cfg.Pattern); err != nil {
			return nil, fmt.Errorf("station %s: %w", cfg.Name, err)
		}
	}
	if s.opener == nil {
		if s.source, err = line.NewSource(cfg.Spec()); err != nil {
			return nil, fmt.Errorf("station %s: %w", cfg.Name, err)
		}
		s.opener = func(ctx context.Context) (Conn, error) { return s.source.Open(ctx) }
	}
	return s, nil
}

// Name gives the station's name.
func (s *Station) Name() string { return s.cfg.Name }

// Config gives the configuration with its defaults filled in.
func (s *Station) Config() Config { return s.cfg }

// Snapshot gives the station as it stands.
func (s *Station) Snapshot() Snapshot {
	s.mu.Lock()
	defer s.mu.Unlock()
	snap := s.snap
	if snap.Live != nil {
		live := *snap.Live
		snap.Live = &live
	}
	return snap
}

func (s *Station) change(f func(*Snapshot)) {
	s.mu.Lock()
	defer s.mu.Unlock()
	f(&s.snap)
}

// Tare sends the balance the tare command. It returns when the command was sent; that
// the balance obeyed shows in the next weight. Its error is a *session.Fault when the
// station is offline.
func (s *Station) Tare(ctx context.Context) error {
	done := make(chan error, 1)
	ctx, cancel := context.WithTimeout(ctx, 5*time.Second)
	defer cancel()
	select {
	case s.tare <- done:
	case <-ctx.Done():
		return s.offlineFault(ctx.Err())
	}
	select {
	case err := <-done:
		return err
	case <-ctx.Done():
		return s.offlineFault(ctx.Err())
	}
}

func (s *Station) offlineFault(cause error) error {
	return &session.Fault{
		Code: "station-offline", Message: fmt.Sprintf("The balance of station %s cannot be reached.", s.cfg.Name),
		Hint: "Check its cable and power, then try again.", Err: cause,
	}
}

// Run keeps the line open and works until ctx ends, and gives ctx's error then. A
// recording that is over ends Run with nil.
func (s *Station) Run(ctx context.Context) (err error) {
	if s.source != nil {
		defer func() { err = errors.Join(err, s.source.Close()) }()
	}
	detector, err := settle.New(s.cfg.settleOptions())
	if err != nil {
		return fmt.Errorf("station %s: %w", s.cfg.Name, err)
	}
	work := &work{Station: s, detector: detector, began: time.Now()}
	pause := s.pause
	for {
		err := work.once(ctx)
		switch {
		case ctx.Err() != nil:
			return ctx.Err()
		case errors.Is(err, io.EOF):
			s.goOffline(&session.Fault{Code: "recording-over", Message: "The recording is over.", Hint: "Start the daemon again to replay it."})
			return nil
		}
		s.goOffline(asFault(err))
		if work.lasted > stableLine {
			pause.reset()
		}
		if err := pause.wait(ctx); err != nil {
			return err
		}
	}
}

// stableLine: a line that stood for so long has recovered, and the next outage begins
// with short pauses again.
const stableLine = 10 * time.Second

func asFault(err error) *session.Fault {
	var f *session.Fault
	if errors.As(err, &f) {
		return f
	}
	return &session.Fault{Code: line.CodeFailed, Message: "The balance line cannot be used.", Hint: "Check the cable and the [[station]] section; the log has the cause.", Err: err}
}

// goOffline tells once why the station is offline, not at each attempt.
func (s *Station) goOffline(reason *session.Fault) {
	before := s.Snapshot()
	s.change(func(snap *Snapshot) { snap.State, snap.Reason, snap.Diagnosis = Offline, reason, nil })
	if before.State == Offline && before.Reason != nil && before.Reason.Code == reason.Code {
		return
	}
	s.log.Warn().Str("code", reason.Code).Err(reason.Err).Msg("station offline")
	s.sink.Offline(s.cfg.Name, reason)
}

func (s *Station) goOnline(name string, id session.Identity) {
	s.change(func(snap *Snapshot) { snap.State, snap.Identity, snap.Reason = Online, id, nil })
	s.log.Info().Str("line", name).Str("model", id.Model).Str("serial", id.Serial).Str("firmware", id.Firmware).Msg("station online")
	s.sink.Online(s.cfg.Name, id)
}

// diagnose tells a diagnosis once, until another takes its place.
func (s *Station) diagnose(d Diagnosis) {
	before := s.Snapshot().Diagnosis
	if before != nil && *before == d {
		return
	}
	s.change(func(snap *Snapshot) { snap.Diagnosis = &d })
	s.log.Warn().Str("code", d.Code).Msg("station diagnosis")
	s.sink.Diagnosis(s.cfg.Name, d)
}

// well takes a diagnosis back.
func (s *Station) well(codes ...string) {
	s.change(func(snap *Snapshot) {
		for _, code := range codes {
			if snap.Diagnosis != nil && snap.Diagnosis.Code == code {
				snap.Diagnosis = nil
			}
		}
	})
}

// backoff is the pause between attempts, half as long again each time.
type backoff struct{ first, longest, next time.Duration }

func (b *backoff) reset() { b.next = 0 }

func (b *backoff) wait(ctx context.Context) error {
	b.next = min(max(b.first, b.next*3/2), b.longest)
	timer := time.NewTimer(b.next)
	defer timer.Stop()
	select {
	case <-timer.C:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}
