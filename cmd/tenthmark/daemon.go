package main

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"net"
	"net/http"
	"os"
	"sync"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/session"
	"tenthmark/session/desk"
	"tenthmark/session/ledger"
)

// daemon is the house with everything in it: ledger, desk, stations, outbox and page.
type daemon struct {
	config   *config
	log      zerolog.Logger
	ledger   *ledger.Ledger
	desk     *desk.Desk
	stations *stations
	outbox   *outbox
	listener net.Listener
	server   *http.Server
	ready    func() // called when calls are answered, may be nil
	logged   int64  // the newest log sample in the drop's files; 0: not looked up yet
}

// newDaemon opens the ledger, replays it and binds the page's address. Nothing runs
// yet. On an error everything that was opened is closed again.
func newDaemon(ctx context.Context, c *config, log zerolog.Logger) (d *daemon, err error) {
	d = &daemon{config: c, log: log}
	defer func() {
		if err != nil {
			err = errors.Join(err, d.closeAll())
		}
	}()
	if d.ledger, err = ledger.Open(ctx, ledger.Options{Path: c.Ledger.Path, KeyFile: c.Ledger.Key}); err != nil {
		return nil, err
	}
	zone, err := c.zone()
	if err != nil {
		return nil, err
	}
	if d.desk, err = desk.New(ctx, record{d.ledger}, desk.NewSystemClock(zone), log); err != nil {
		return nil, err
	}
	if d.stations, err = newStations(c, d.desk, log); err != nil {
		return nil, err
	}
	if d.listener, err = net.Listen("tcp", c.Bench.Listen); err != nil {
		return nil, &session.Fault{Code: "address-in-use", Message: fmt.Sprintf("The page's address %s cannot be used.", c.Bench.Listen), Hint: "Stop the other program that listens there, or change [bench] listen.", Err: err}
	}
	if err := d.furnish(zone); err != nil {
		return nil, err
	}
	return d, nil
}

func (d *daemon) closeAll() error {
	var errs []error
	if d.listener != nil {
		errs = append(errs, d.listener.Close())
	}
	if d.ledger != nil {
		errs = append(errs, d.ledger.Close())
	}
	return errors.Join(errs...)
}

// Address gives where the page is.
func (d *daemon) Address() string {
	scheme := "http"
	if d.config.Bench.TLSCert != "" {
		scheme = "https"
	}
	return scheme + "://" + d.listener.Addr().String()
}

// Run serves until ctx is cancelled, then stops in order: no more calls, no more
// weights, what waits at the desk, a checkpoint, the ledger.
func (d *daemon) Run(ctx context.Context) error {
	deskCtx, stopDesk := context.WithCancel(context.WithoutCancel(ctx))
	defer stopDesk()
	var atDesk, working sync.WaitGroup
	atDesk.Go(func() { d.report("desk", d.desk.Run(deskCtx)) })
	if err := d.begin(context.WithoutCancel(ctx)); err != nil {
		stopDesk()
		atDesk.Wait()
		return errors.Join(err, d.closeAll())
	}
	work, stopWork := context.WithCancel(ctx)
	defer stopWork()
	working.Go(func() { d.report("stations", d.stations.Run(work)) })
	working.Go(func() { d.report("outbox", d.outbox.Run(work)) })
	working.Go(func() { d.report("chores", d.chores(work)) })
	served := make(chan error, 1)
	go func() { served <- d.serve() }()
	notify("READY=1")
	if d.ready != nil {
		d.ready()
	}
	var err error
	select {
	case <-ctx.Done():
		err = d.stopServing(served)
	case err = <-served:
	}
	stopWork()
	working.Wait()
	err = errors.Join(err, d.end())
	stopDesk()
	atDesk.Wait()
	return errors.Join(err, d.ledger.Close())
}

// report logs the end of a component that ended with an error.
func (d *daemon) report(name string, err error) {
	if err != nil && !errors.Is(err, context.Canceled) {
		d.log.Error().Err(err).Str("part", name).Msg("part of the daemon stopped")
	}
}

func (d *daemon) serve() error {
	var err error
	if c := d.config.Bench; c.TLSCert != "" {
		err = d.server.ServeTLS(d.listener, c.TLSCert, c.TLSKey)
	} else {
		err = d.server.Serve(d.listener)
	}
	if errors.Is(err, http.ErrServerClosed) {
		return nil
	}
	return err
}

// stopServing lets calls end; open streams are cut.
func (d *daemon) stopServing(served <-chan error) error {
	ctx, cancel := context.WithTimeout(context.Background(), 3*time.Second)
	defer cancel()
	if err := d.server.Shutdown(ctx); err != nil {
		err = d.server.Close()
		return errors.Join(err, <-served)
	}
	return <-served
}

// startedBody is the body of a DaemonStarted event.
type startedBody struct {
	Software     string `json:"software"`
	ConfigSHA256 string `json:"config_sha256"`
	Unclean      bool   `json:"unclean"` // the last time it was not stopped in order
	SignIn       bool   `json:"sign_in"`
}

func (d *daemon) begin(ctx context.Context) error {
	text, err := os.ReadFile(d.config.file)
	if err != nil {
		return fmt.Errorf("read configuration again: %w", err)
	}
	sum := sha256.Sum256(text)
	_, err = d.desk.Do(ctx, session.Daemon, func(b *session.Book) ([]session.Draft, error) {
		return []session.Draft{{Kind: session.DaemonStarted, Body: startedBody{
			Software: "tenthmark " + version(), ConfigSHA256: hex.EncodeToString(sum[:]), Unclean: b.Unclean, SignIn: d.config.Access.SignIn,
		}}}, nil
	})
	return err
}

// end records the stop, keeps a snapshot and signs a checkpoint.
func (d *daemon) end() error {
	ctx, cancel := context.WithTimeout(context.Background(), 10*time.Second)
	defer cancel()
	_, err := d.desk.Do(ctx, session.Daemon, func(*session.Book) ([]session.Draft, error) {
		return []session.Draft{{Kind: session.DaemonStopped, Body: struct{}{}}}, nil
	})
	if err != nil {
		return err
	}
	if err := d.desk.Keep(ctx); err != nil {
		return err
	}
	_, err = d.ledger.Checkpoint(ctx)
	return err
}

// notify tells the service manager how the daemon is, if there is one (the datagram
// form of sd_notify).
func notify(state string) {
	path := os.Getenv("NOTIFY_SOCKET")
	if path == "" {
		return
	}
	conn, err := net.Dial("unixgram", path)
	if err != nil {
		return
	}
	defer conn.Close()
	_, _ = conn.Write([]byte(state)) // nobody waits for it
}

// newLog gives the log that people read at the terminal.
func newLog(w interface{ Write([]byte) (int, error) }) zerolog.Logger {
	return zerolog.New(zerolog.ConsoleWriter{Out: w, TimeFormat: "15:04:05", NoColor: true}).With().Timestamp().Logger()
}

func runServe(ctx context.Context, args []string, io stdio) int {
	f := newFlags("serve", "Runs the daemon until it is told to stop.", io.err)
	file := f.String("c", "config.toml", "configuration `file`")
	if code, done := parse(f, args); done {
		return code
	}
	c, err := loadConfig(*file)
	if err != nil {
		return complain(io.err, err)
	}
	d, err := newDaemon(ctx, c, newLog(io.err))
	if err != nil {
		return complain(io.err, err)
	}
	d.ready = func() { fmt.Fprintf(io.out, "tenthmark is at work; the page is at %s\n", d.Address()) }
	if err := d.Run(ctx); err != nil {
		return complain(io.err, err)
	}
	return exitDone
}
