// Package bench is the daemon's door: the HTTP API, its description, the stream of
// events and the page at the bench. It turns calls into orders for the desk and the
// desk's answers into JSON.
//
// It decides no rule of the trade (package session does), keeps nothing of its own but
// who is signed in, and refuses whatever has no identified person behind it, comes from
// another site, or is not in the form that the description gives.
//
// Where to look: routes.go lists every call, problem.go is how refusals look, who.go
// decides who acts, stream.go is the live stream, page/ is what the browser gets.
package bench

import (
	"context"
	"errors"
	"net/http"
	"sync"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/session"
	"tenthmark/session/desk"
)

// Options is what a bench needs. Desk, Stations, Records and Setting must be there.
type Options struct {
	Desk      *desk.Desk
	Stations  Stations
	Records   Records
	Documents Documents                            // nil: documents are not handed out
	Backup    Backup                               // nil: no copy of the ledger on request
	Setting   func(station string) session.Setting // what a run on the station rests on
	Secrets   *desk.Secrets                        // must be there when SignIn is on
	SignIn    bool                                 // people sign in with a secret
	Idle      time.Duration                        // a session ends after so long without a call; 0: 15 minutes
	TLS       bool                                 // the page is served encrypted: cookies say so
	Hosts     []string                             // further names it may be called by without encryption: behind a proxy
	Zone      *time.Location                       // of the bench; nil: the computer's
	Now       func() time.Time                     // nil: the computer's clock
	Version   string
	Log       zerolog.Logger
}

// Bench serves the API and the page.
type Bench struct {
	Options
	guests  *guests
	curves  *curveShelf
	mux     *http.ServeMux
	closing chan struct{}
	once    sync.Once // closes closing
}

// New checks the options and gives a bench that can serve.
func New(o Options) (*Bench, error) {
	if o.Desk == nil || o.Stations == nil || o.Records == nil || o.Setting == nil {
		return nil, errors.New("new bench: desk, stations, records and setting are needed")
	}
	if o.SignIn && o.Secrets == nil {
		return nil, errors.New("new bench: sign-in needs the secrets that it is checked against")
	}
	if o.Zone == nil {
		o.Zone = time.Local
	}
	if o.Now == nil {
		o.Now = time.Now
	}
	if o.Idle == 0 {
		o.Idle = 15 * time.Minute
	}
	b := &Bench{Options: o, guests: newGuests(o.Idle, o.Now), curves: newCurveShelf(), closing: make(chan struct{})}
	b.mux = b.newMux()
	return b, nil
}

// Close ends the open streams, so that they do not hold up a shutdown.
func (b *Bench) Close() { b.once.Do(func() { close(b.closing) }) }

// Limits on time and size of calls.
const (
	headerTimeout = 10 * time.Second
	readTimeout   = 30 * time.Second
	writeTimeout  = 60 * time.Second
	idleTimeout   = 2 * time.Minute
	maxHeader     = 32 << 10
)

// Server gives an HTTP server for the bench with its time limits. Its Shutdown ends the
// streams.
func (b *Bench) Server() *http.Server {
	s := &http.Server{
		Handler: b.Handler(), ReadHeaderTimeout: headerTimeout, ReadTimeout: readTimeout,
		WriteTimeout: writeTimeout, IdleTimeout: idleTimeout, MaxHeaderBytes: maxHeader,
	}
	s.RegisterOnShutdown(b.Close)
	return s
}

// local gives the time at the bench.
func (b *Bench) local() time.Time { return b.Now().In(b.Zone) }

// do carries out an order of whoever calls.
func (b *Bench) do(c *call, decide desk.Decision, then ...desk.Decision) ([]session.Event, error) {
	return b.Desk.Do(c.Context(), c.who.actor(), decide, then...)
}

func (b *Bench) view(ctx context.Context, look func(*session.Book) error) error {
	return b.Desk.View(ctx, look)
}
