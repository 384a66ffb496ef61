package main

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"sync"
	"time"

	"tenthmark/session"
	"tenthmark/session/bench"
	"tenthmark/session/desk"
)

// outbox puts signed runs into the drop, and tries again for as long as that fails.
type outbox struct {
	d *daemon

	mu      sync.Mutex // over waiting alone
	waiting map[string]bench.Waiting
}

func newOutbox(d *daemon) *outbox { return &outbox{d: d, waiting: map[string]bench.Waiting{}} }

// Run publishes what is due whenever something happened, and what failed every few
// seconds.
func (o *outbox) Run(ctx context.Context) error {
	notices, stop := o.d.desk.Listen()
	defer stop()
	again := time.NewTicker(5 * time.Second)
	defer again.Stop()
	for {
		o.publishDue(ctx)
		if err := o.wait(ctx, notices, again.C); err != nil {
			return err
		}
	}
}

// wait returns when a run was signed, when it is time to try again, or with an error.
func (o *outbox) wait(ctx context.Context, notices <-chan desk.Notice, again <-chan time.Time) error {
	for {
		select {
		case n, ok := <-notices:
			if !ok {
				return errors.New("the desk stopped")
			}
			if e := n.Event; e != nil && (e.Kind == session.RunFinished || e.Kind == session.RunReviewed) {
				return nil
			}
		case <-again:
			return nil
		case <-ctx.Done():
			return ctx.Err()
		}
	}
}

func (o *outbox) publishDue(ctx context.Context) {
	due, err := o.d.desk.Due(ctx)
	if err != nil {
		return
	}
	for _, id := range due {
		o.note(id, o.publish(ctx, id))
	}
}

// note keeps what a run waits for, and logs the change.
func (o *outbox) note(id string, err error) {
	o.mu.Lock()
	defer o.mu.Unlock()
	_, was := o.waiting[id]
	if err == nil {
		delete(o.waiting, id)
		o.d.log.Info().Str("run", id).Msg("run published")
		return
	}
	w := bench.Waiting{Run: id, Since: session.At(time.Now()), Reason: err.Error(), Hint: "The run is signed and safe in the ledger; it is published as soon as the drop folder can be written."}
	var fault *session.Fault
	if errors.As(err, &fault) {
		w.Reason, w.Hint = fault.Message, fault.Hint
	}
	if was {
		w.Since = o.waiting[id].Since
	} else {
		o.d.log.Warn().Err(err).Str("run", id).Msg("run not published yet")
	}
	o.waiting[id] = w
}

// Waiting lists what is not published yet.
func (o documents) Waiting() []bench.Waiting {
	box := o.d.outbox
	box.mu.Lock()
	defer box.mu.Unlock()
	list := []bench.Waiting{}
	for _, w := range box.waiting {
		list = append(list, w)
	}
	return list
}

// publish builds a run's documents, puts them into the drop and records that.
func (o *outbox) publish(ctx context.Context, id string) error {
	var doc session.Document
	err := o.d.desk.ViewRun(ctx, id, func(r *session.Run) error {
		doc = r.Document()
		return nil
	})
	if err != nil {
		return err
	}
	checkpoint, err := o.d.ledger.Checkpoint(ctx)
	if err != nil {
		return err
	}
	doc.Run.State, doc.Awaits, doc.Prompt, doc.Ledger.Checkpoint = session.Published, nil, "", string(checkpoint)
	text, err := json.MarshalIndent(doc, "", "  ")
	if err != nil {
		return fmt.Errorf("run.json: %w", err)
	}
	sum := sha256.Sum256(text)
	final := filepath.Join(o.d.config.Publish.Folder, o.d.folderName(id))
	if err := os.MkdirAll(final, 0o755); err != nil {
		return err
	}
	if err := os.WriteFile(filepath.Join(final, "run.json"), text, 0o644); err != nil {
		return err
	}
	sums := fmt.Sprintf("%s  run.json\n", hex.EncodeToString(sum[:]))
	if err := os.WriteFile(filepath.Join(final, "SHA256SUMS"), []byte(sums), 0o644); err != nil {
		return err
	}
	return o.d.desk.Published(ctx, id, session.PublishedBody{Folder: filepath.Base(final), Files: map[string]string{"run.json": hex.EncodeToString(sum[:])}, Checkpoint: string(checkpoint)})
}
