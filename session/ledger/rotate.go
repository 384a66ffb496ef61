package ledger

import (
	"context"
	"errors"
	"fmt"
	"os"

	"tenthmark/session"
)

// ChangeKey replaces the signing key. It makes a new pair, lets event encode the event of
// kind KindKeyChanged with the given content, appends it, and signs a checkpoint with
// the new key. The new secret is written to newKeyFile (mode 0600) before the event is
// appended, so that no fault can leave a ledger without its key; the old file stays,
// to be destroyed by hand. From then on the ledger is opened with newKeyFile.
func (l *Ledger) ChangeKey(ctx context.Context, newKeyFile, reason string, event func(seq int64, content KeyChanged) ([]byte, error)) error {
	if reason == "" {
		return session.Refuse("reason-missing", "A change of the signing key needs a reason.", "Say why the key is changed.")
	}
	if _, err := l.Checkpoint(ctx); err != nil {
		return err
	}
	next, err := makeKeyFiles(newKeyFile, l.Origin())
	if err != nil {
		return err
	}
	if err := l.appendChange(ctx, next, reason, event); err != nil {
		if session.FaultCode(err) == "ledger-unclear" {
			return err // the new key may be needed: leave it
		}
		return errors.Join(err, removeAll([]string{newKeyFile, newKeyFile + ".pub"}))
	}
	if err := l.adopt(ctx, next, newKeyFile); err != nil {
		return err
	}
	_, err = l.Checkpoint(ctx)
	return err
}

func makeKeyFiles(path, origin string) (signer, error) {
	secret, public, err := newKey(origin)
	if err != nil {
		return signer{}, err
	}
	for _, part := range []struct {
		path, text string
		mode       os.FileMode
	}{{path, secret + "\n", 0o600}, {path + ".pub", public + "\n", 0o644}} {
		if err := writeNew(part.path, part.text, part.mode); err != nil {
			return signer{}, explain("create", part.path, err)
		}
	}
	return readSigner(path)
}

func (l *Ledger) appendChange(ctx context.Context, next signer, reason string, event func(int64, KeyChanged) ([]byte, error)) error {
	old := l.signer
	_, err := l.Append(ctx, func(seq int64) ([]byte, error) {
		said := KeyStatement{Origin: l.Origin(), Seq: seq, New: next.public}
		signed, err := old.sign(said.text())
		if err != nil {
			return nil, err
		}
		body, err := event(seq, KeyChanged{Old: old.public, New: next.public, Reason: reason, Statement: string(signed)})
		if err != nil {
			return nil, err
		}
		if _, err := l.keys.change(seq, body); err != nil {
			return nil, fmt.Errorf("key change: the event does not carry what was given: %w", err)
		}
		return body, nil
	})
	return err
}

// adopt goes on with the new key.
func (l *Ledger) adopt(ctx context.Context, next signer, keyFile string) error {
	if err := l.enter(ctx); err != nil {
		return err
	}
	defer l.leave()
	keys, err := l.readKeys(ctx)
	if err != nil {
		return err
	}
	l.keys, l.signer, l.opt.KeyFile = keys, next, keyFile
	return nil
}
