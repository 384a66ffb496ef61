package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"time"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

func runLedgerKey(ctx context.Context, args []string, out, complaints io.Writer) int {
	f := newLedgerFlags("key", "Shows the ledger's public key. Keep it, and from time to time a checkpoint, on another computer.", complaints)
	checkpoint := f.Bool("checkpoint", false, "show the newest signed checkpoint instead")
	next := f.String("change", "", "change the signing key: make a new one in this `file`; the daemon must be stopped")
	reason := f.String("reason", "", "why the key is changed")
	if code, done := parse(f.FlagSet, args); done {
		return code
	}
	if err := only(f.FlagSet); err != nil {
		return misuse(complaints, err)
	}
	var err error
	switch {
	case *next != "":
		err = f.changeKey(ctx, *next, *reason, out)
	case *checkpoint:
		err = f.showCheckpoint(ctx, out)
	default:
		err = f.showKey(ctx, out)
	}
	if err != nil {
		return complain(complaints, err)
	}
	return exitDone
}

func (f ledgerFlags) showCheckpoint(ctx context.Context, out io.Writer) error {
	signed, err := f.checkpoint(ctx)
	if err != nil {
		return err
	}
	_, err = out.Write(signed)
	return err
}

// checkpoint gives the newest signed checkpoint.
func (f ledgerFlags) checkpoint(ctx context.Context) ([]byte, error) {
	if daemon := f.remote(); daemon != nil {
		return daemonCheckpoint(ctx, daemon)
	}
	r, err := f.reader(ctx)
	if err != nil {
		return nil, err
	}
	signed, err := r.NewestCheckpoint(ctx)
	return signed, errors.Join(err, r.Close())
}

func (f ledgerFlags) showKey(ctx context.Context, out io.Writer) error {
	if f.remote() != nil {
		return errors.New("the public key is not asked from the daemon: take it from the file that was made beside the signing key")
	}
	r, err := f.reader(ctx)
	if err != nil {
		return err
	}
	fmt.Fprintln(out, r.PublicKey())
	return r.Close()
}

// changeKey appends the key change as an operator's act.
func (f ledgerFlags) changeKey(ctx context.Context, file, reason string, out io.Writer) error {
	if *f.operator == "" {
		return session.Refuse("operator-missing", "A change of the signing key needs to be somebody's.", "Say who changes it: --operator NAME.")
	}
	l, err := f.writer(ctx)
	if err != nil {
		return err
	}
	err = l.ChangeKey(ctx, file, reason, func(seq int64, content ledger.KeyChanged) ([]byte, error) {
		body, err := json.Marshal(content)
		if err != nil {
			return nil, err
		}
		now := time.Now()
		_, offset := now.Zone()
		return session.Event{
			Seq: seq, At: session.At(now), OffsetMin: offset / 60, Actor: session.Operator(*f.operator), Kind: ledger.KindKeyChanged, Body: body,
		}.Encode()
	})
	if err := errors.Join(err, l.Close()); err != nil {
		return err
	}
	fmt.Fprintf(out, "The ledger signs with %s from now on. Set `key` under [ledger] in the configuration to it, hand out %s.pub,\nand destroy the old key file.\n", file, file)
	return nil
}
