package desk

import (
	"context"

	"tenthmark/session"
)

// Due lists the runs that are signed and not yet published, oldest first.
func (d *Desk) Due(ctx context.Context) ([]string, error) {
	var due []string
	err := d.View(ctx, func(b *session.Book) error {
		for _, id := range b.Order {
			if run := b.Runs[id]; run != nil && run.IsDue() {
				due = append(due, id)
			}
		}
		return nil
	})
	return due, err
}

// Prepared records what is about to appear in the drop, so that after an interruption
// it can be told from somebody else's folder.
func (d *Desk) Prepared(ctx context.Context, id string, body session.PublishedBody) error {
	_, err := d.DoRun(ctx, session.Daemon, id, func(*session.Run) ([]session.Draft, error) {
		return []session.Draft{{Kind: session.RunPrepared, Subject: id, Body: body}}, nil
	})
	return err
}

// Published records that a run lies in the drop, and that the run it supersedes, if
// any, is superseded.
func (d *Desk) Published(ctx context.Context, id string, body session.PublishedBody) error {
	_, err := d.Do(ctx, session.Daemon, func(b *session.Book) ([]session.Draft, error) {
		run, err := b.Run(id)
		if err != nil {
			return nil, err
		}
		if run.Publishing != nil {
			return nil, nil
		}
		drafts := []session.Draft{{Kind: session.RunPublished, Subject: id, Body: body}}
		if old := run.Opening.Supersedes; old != "" {
			drafts = append(drafts, session.Draft{Kind: session.RunSuperseded, Subject: old, Body: session.SupersededBody{By: id, Reason: run.Opening.Condition}})
		}
		return drafts, nil
	})
	return err
}
