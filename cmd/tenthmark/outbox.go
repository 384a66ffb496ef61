package main

import (
	"context"
	"errors"
	"os"
	"sync"
	"time"

	"tenthmark/session"
	"tenthmark/session/bench"
	"tenthmark/session/desk"
	"tenthmark/session/publish"
)

// outbox puts signed runs into the drop, and tries again for as long as that fails.
type outbox struct {
	d    *daemon
	drop publish.Drop

	mu      sync.Mutex // over waiting alone
	waiting map[string]bench.Waiting
}

func newOutbox(d *daemon) *outbox {
	return &outbox{d: d, drop: publish.Drop{Root: d.config.Publish.Folder}, waiting: map[string]bench.Waiting{}}
}

// Run publishes what is due whenever something happened, and what failed every few
// seconds.
func (o *outbox) Run(ctx context.Context) error {
	if err := o.drop.Sweep(); err != nil {
		o.d.log.Warn().Err(err).Msg("half-built folders left in the drop")
	}
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

// publish builds a run's documents, records that they are about to appear, puts them
// into the drop and records that. After an interruption it finds out what had appeared.
func (o *outbox) publish(ctx context.Context, id string) error {
	var m publish.Material
	var prepared *session.Publication
	err := o.d.desk.ViewRun(ctx, id, func(r *session.Run) (err error) {
		prepared = r.Prepared
		m.Document = r.Document()
		if m.Deliveries, err = r.CalcDeliveries(); err == nil {
			m.Curve, err = r.Curve()
		}
		return err
	})
	if err != nil {
		return err
	}
	if prepared != nil {
		if files, there := o.drop.Holds(prepared.Folder, prepared.Files); there {
			return o.d.desk.Published(ctx, id, session.PublishedBody{Folder: prepared.Folder, Files: files, Checkpoint: prepared.Checkpoint})
		}
	}
	return o.make(ctx, m)
}

// make builds the documents, binds them to the run by an event with their hashes, and
// adds the evidence, which covers that event too.
func (o *outbox) make(ctx context.Context, m publish.Material) error {
	checkpoint, err := o.d.ledger.Checkpoint(ctx)
	if err != nil {
		return err
	}
	doc := &m.Document
	doc.Run.State, doc.Awaits, doc.Prompt, doc.Ledger.Checkpoint = session.Published, nil, "", string(checkpoint)
	m.Paper, m.Logo = o.d.config.Publish.Paper, o.logo(*doc)
	files, err := publish.Files(m)
	if err != nil {
		return err
	}
	id := doc.Run.ID
	body := session.PublishedBody{Folder: o.d.folderName(id), Files: publish.Sums(files), Checkpoint: string(checkpoint)}
	if err := o.d.desk.Prepared(ctx, id, body); err != nil {
		return err
	}
	evidence, err := o.evidence(ctx, id)
	if err != nil {
		return err
	}
	if body.Files, err = o.drop.Put(body.Folder, append(files, evidence...)); err != nil {
		return err
	}
	return o.d.desk.Published(ctx, id, body)
}

// logo reads the laboratory's picture, if there is one that can be read.
func (o *outbox) logo(doc session.Document) []byte {
	path := doc.Setting.Laboratory.Logo
	if path == "" {
		return nil
	}
	b, err := os.ReadFile(path)
	if err != nil {
		o.d.log.Warn().Err(err).Msg("logo not read, certificate made without")
	}
	return b
}

// evidence gives the run's events with their proofs against a fresh checkpoint.
func (o *outbox) evidence(ctx context.Context, id string) ([]publish.File, error) {
	lines, err := (record{o.d.ledger}).RunLines(ctx, id)
	if err != nil {
		return nil, err
	}
	seqs := make([]int64, len(lines))
	for i, line := range lines {
		e, err := session.DecodeEvent(line)
		if err != nil {
			return nil, err
		}
		seqs[i] = e.Seq
	}
	if _, err := o.d.ledger.Checkpoint(ctx); err != nil {
		return nil, err
	}
	events, proof, err := o.d.ledger.RunProof(ctx, seqs)
	if err != nil {
		return nil, err
	}
	return publish.Evidence(events, proof), nil
}
