package ledger

import (
	"context"
	"errors"
	"fmt"
	"os"

	"golang.org/x/mod/sumdb/tlog"
	"tenthmark/session"
)

// Founding says where a new ledger and its keys go.
type Founding struct {
	Path    string // the ledger's file; must not exist
	Origin  string // its name in every checkpoint, such as "waterworks.example/burettes"
	KeyFile string // the signing key, mode 0600; the public key goes to KeyFile + ".pub"
}

// Create makes the key pair and the ledger with event 0, whose bytes first gives: an
// event of kind KindCreated with the content Created. It signs the first
// checkpoint. It refuses to overwrite anything, and leaves nothing behind on failure.
func Create(ctx context.Context, f Founding, first func(seq int64, publicKey string) ([]byte, error)) (err error) {
	if err := f.refuse(); err != nil {
		return err
	}
	secret, public, err := newKey(f.Origin)
	if err != nil {
		return err
	}
	var undo []string
	defer func() {
		if err != nil {
			err = errors.Join(err, removeAll(undo))
		}
	}()
	for _, part := range []struct {
		path, text string
		mode       os.FileMode
	}{{f.KeyFile, secret + "\n", 0o600}, {f.KeyFile + ".pub", public + "\n", 0o644}} {
		if err := writeNew(part.path, part.text, part.mode); err != nil {
			return explain("create", part.path, err)
		}
		undo = append(undo, part.path)
	}
	return f.found(ctx, public, first)
}

// refuse names the reasons not to begin.
func (f Founding) refuse() error {
	if err := checkOrigin(f.Origin); err != nil {
		return err
	}
	hint := "A ledger is made once. Choose another path, or go on with the existing ledger."
	for _, path := range []string{f.Path, f.Path + "-wal", f.KeyFile, f.KeyFile + ".pub"} {
		if _, err := os.Lstat(path); err == nil {
			return session.Refuse("ledger-exists", path+" exists already and is not overwritten.", hint)
		} else if !errors.Is(err, os.ErrNotExist) {
			return explain("create", path, err)
		}
		if path == f.Path {
			hint = "There is a key but no ledger at " + f.Path + ": perhaps an earlier init was interrupted. If the key signs no ledger, move it and its .pub away and call init again."
		}
	}
	return refuseNetwork(f.Path)
}

// found writes tables, event 0 and the first checkpoint into the empty file.
func (f Founding) found(ctx context.Context, public string, first func(int64, string) ([]byte, error)) (err error) {
	lock, err := takeLock(f.Path, true)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, lock.release()) }()
	body, err := first(0, public)
	if err != nil {
		return fmt.Errorf("event 0: %w", err)
	}
	if err := checkBody(0, body); err != nil {
		return err
	}
	keys, err := begin(body)
	if err != nil {
		return err
	}
	if keys.newest() != public {
		return errors.New("event 0 names another public key")
	}
	sign, err := readSigner(f.KeyFile)
	if err != nil {
		return err
	}
	return f.appear(ctx, sign, body)
}

// appear builds the ledger beside and gives it its name at once, so that an interrupted
// init leaves no half ledger.
func (f Founding) appear(ctx context.Context, sign signer, body []byte) error {
	beside := Founding{Path: f.Path + ".part", Origin: f.Origin}
	for _, path := range []string{beside.Path, beside.Path + "-wal"} {
		if err := removeIfThere(path); err != nil {
			return explain("create", f.Path, err)
		}
	}
	if err := writeNew(beside.Path, "", 0o640); err != nil {
		return explain("create", f.Path, err)
	}
	if err := beside.writeFirst(ctx, sign, body); err != nil {
		return errors.Join(err, removeIfThere(beside.Path))
	}
	return explain("create", f.Path, publishCopy(beside.Path, f.Path))
}

func (f Founding) writeFirst(ctx context.Context, sign signer, body []byte) error {
	s := newStore(f.Path)
	if err := s.connect(ctx, writerDSN(f.Path)); err != nil {
		return err
	}
	var edge frontier
	nodes := packHashes(edge.push(tlog.RecordHash(body), nil))
	signed, err := sign.sign(Head{Origin: f.Origin, Size: 1, Root: edge.root()}.text())
	if err == nil {
		err = s.firstRows(ctx, body, nodes, signed)
	}
	return errors.Join(explain("create", f.Path, err), s.disconnect(), syncFolder(f.Path))
}

func (s *store) firstRows(ctx context.Context, body, nodes, signed []byte) error {
	tx, err := s.db.BeginTx(ctx, nil)
	if err != nil {
		return err
	}
	err = makeSchema(ctx, tx)
	for _, q := range []struct {
		sql  string
		args []any
	}{
		{`INSERT INTO event (seq, body, nodes) VALUES (0, ?, ?)`, []any{body, nodes}},
		{`INSERT INTO checkpoint (size, note) VALUES (1, ?)`, []any{signed}},
		{fmt.Sprintf(`PRAGMA application_id = %d`, applicationID), nil},
		{fmt.Sprintf(`PRAGMA user_version = %d`, schemaVersion), nil},
	} {
		if err == nil {
			_, err = tx.ExecContext(ctx, q.sql, q.args...)
		}
	}
	if err != nil {
		return errors.Join(err, tx.Rollback())
	}
	return tx.Commit()
}

func removeAll(paths []string) error {
	var err error
	for _, p := range paths {
		err = errors.Join(err, os.Remove(p))
	}
	return err
}
