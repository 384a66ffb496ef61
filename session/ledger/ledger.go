// Package ledger keeps every event of the daemon in one append-only SQLite file.
// The bytes of an event are a leaf of an RFC 6962 Merkle tree whose nodes stand in
// the same row; signed checkpoints in the C2SP signed-note form pin the tree, so
// that anyone with the public key can see whether an event was altered, removed,
// swapped or added.
//
// It refuses to change or delete an event, to open a file it did not make, a
// newer one or one on a network folder, to share the file with a second daemon,
// and to say "saved" before the bytes are on disk. It does not know what a run
// is: of an event it reads only the thin header.
package ledger

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"sync/atomic"

	"tenthmark/session"
)

// Entry is an event as stored. Seq is its number from 0 and its index in the tree;
// Body is one line of UTF-8 JSON without line break, hashed exactly as it stands.
type Entry struct {
	Seq  int64
	Body []byte
}

// Draft gives the bytes of an event once its number is known. It must not call
// the ledger.
type Draft func(seq int64) ([]byte, error)

// Options says which ledger to open.
type Options struct {
	Path    string // the ledger's file, made by Create
	KeyFile string // the signing key, made by Create

	// fault, in tests, makes a step fail; nil lets every step through.
	fault func(step) error
}

// Ledger is the one writer. All methods may be called from several goroutines;
// they take turns on the one connection.
type Ledger struct {
	*store
	lock   *lockFile
	origin string

	// The fields below belong to whoever has the store's turn.
	opt     Options
	keys    keyring
	signer  signer
	edge    frontier // the tree as far as it is durable
	covered int64    // size of the newest checkpoint
	broken  error    // set when it is not known what the disk holds
	unclear *change  // what was being written then
	insert  *sql.Stmt

	size atomic.Int64 // events known to be durable, readable without the turn
}

// Open opens the ledger for writing and checks what can be checked in a moment:
// that the file is a ledger, the settings are in force, the key is the ledger's,
// the newest checkpoint fits, and the events after it hash to the stored nodes.
func Open(ctx context.Context, opt Options) (*Ledger, error) {
	if err := refuseUnfit(opt.Path); err != nil {
		return nil, err
	}
	sign, err := readSigner(opt.KeyFile)
	if err != nil {
		return nil, err
	}
	lock, err := takeLock(opt.Path, true)
	if err != nil {
		return nil, err
	}
	l := &Ledger{store: newStore(opt.Path), opt: opt, lock: lock, signer: sign, origin: sign.Name()}
	if err := l.load(ctx); err != nil {
		return nil, errors.Join(err, l.release())
	}
	l.size.Store(l.edge.size)
	return l, nil
}

// refuseUnfit names the reasons not to open a file at all.
func refuseUnfit(path string) error {
	if _, err := os.Stat(path); errors.Is(err, os.ErrNotExist) {
		return &session.Fault{
			Code: "ledger-missing", Message: "There is no ledger at " + path + ".",
			Hint: "Check the path in the configuration. A new ledger is made once, with: tenthmark init", Err: err,
		}
	} else if err != nil {
		return explain("open ledger", path, err)
	}
	return refuseNetwork(path)
}

// load connects and brings the fields in step with the file. Own turn assumed.
func (l *Ledger) load(ctx context.Context) error {
	if err := l.connect(ctx, writerDSN(l.path)); err != nil {
		return err
	}
	if err := l.checkWriter(ctx); err != nil {
		return err
	}
	keys, err := l.readKeys(ctx)
	if err != nil {
		return err
	}
	if l.signer.public != keys.newest() {
		return session.Refuse("ledger-key", "The signing key in "+l.opt.KeyFile+" is not the key of this ledger.",
			"Put the ledger's own key file in place, or check which ledger the configuration names.")
	}
	edge, covered, err := l.checkTail(ctx, keys)
	if err != nil {
		return err
	}
	l.keys, l.edge, l.covered = keys, edge, covered
	l.insert, err = l.db.PrepareContext(ctx, `INSERT INTO event (seq, body, nodes) VALUES (?, ?, ?)`)
	return explain("prepare", l.path, err)
}

// Size gives the number of events.
func (l *Ledger) Size() int64 { return l.size.Load() }

// Origin gives the ledger's name, which is also the name of its keys.
func (l *Ledger) Origin() string { return l.origin }

// PublicKey gives the present verifier key in the signed-note form.
func (l *Ledger) PublicKey() string {
	<-l.turn
	defer l.leave()
	return l.signer.public
}

// Path gives the ledger's file.
func (l *Ledger) Path() string { return l.path }

// Close catches the index up, folds the write-ahead log into the file and gives
// the lock back. It does not sign a checkpoint: call Checkpoint before.
func (l *Ledger) Close() error {
	<-l.turn
	defer l.leave()
	if l.closed {
		return nil
	}
	if l.broken == nil {
		l.catchUp(context.Background())
	}
	return l.release()
}

var errClosed = errors.New("ledger is closed")

func (l *Ledger) release() error {
	l.closed = true
	err := l.disconnect()
	return errors.Join(err, l.lock.release())
}

// checkBody refuses bytes that could not be read back as an event's line.
func checkBody(seq int64, body []byte) error {
	h, err := ParseHeader(body)
	if err != nil {
		return fmt.Errorf("event %d: %w", seq, err)
	}
	if h.Seq != seq {
		return fmt.Errorf("event %d: carries number %d", seq, h.Seq)
	}
	return checkLine(body)
}

// syncFolder makes a new name in the folder of path durable. Windows has no such call and
// writes names through.
func syncFolder(path string) error {
	if runtime.GOOS == "windows" {
		return nil
	}
	dir, err := os.Open(filepath.Dir(path))
	if err != nil {
		return err
	}
	err = dir.Sync()
	return errors.Join(err, dir.Close())
}
