package ledger

import (
	"context"
	"errors"
	"os"
)

// Reader looks at a ledger that no daemon holds: the file at rest, a backup, a file on a
// read-only disk. It never writes into it.
type Reader struct {
	*store
	lock *lockFile
	keys keyring
}

// OpenReader opens the ledger at path for looking. It refuses while a daemon has the
// ledger, and keeps a daemon from starting while it is open.
func OpenReader(ctx context.Context, path string) (*Reader, error) {
	r, err := openAny(ctx, path)
	if err != nil {
		return nil, err
	}
	if err := r.load(ctx); err != nil {
		return nil, errors.Join(err, r.Close())
	}
	return r, nil
}

// openAny connects without judging what the file holds, as Verify must.
func openAny(ctx context.Context, path string) (*Reader, error) {
	if err := refuseUnfit(path); err != nil {
		return nil, err
	}
	lock, err := takeLock(path, false)
	if err != nil {
		return nil, err
	}
	r := &Reader{store: newStore(path), lock: lock}
	if err := r.connect(ctx, readerDSN(path, readMode(path))); err != nil {
		return nil, errors.Join(err, lock.release())
	}
	return r, nil
}

// readMode gives the query for a reader. On a read-only disk SQLite cannot make the
// shared-memory file that a write-ahead log needs; when there is no log to read, the
// file may be treated as one that cannot change.
func readMode(path string) string {
	info, err := os.Stat(path + "-wal")
	if (err != nil || info.Size() == 0) && !writableFolder(path) {
		return "ro&immutable=1"
	}
	return "ro"
}

func writableFolder(path string) bool {
	f, err := os.OpenFile(path+".lock", os.O_RDWR, 0)
	if err != nil {
		return false
	}
	return f.Close() == nil
}

func (r *Reader) load(ctx context.Context) error {
	if err := r.checkIdentity(ctx); err != nil {
		return err
	}
	var err error
	r.keys, err = r.readKeys(ctx)
	return err
}

// Origin gives the ledger's name.
func (r *Reader) Origin() string { return originOf(r.keys.newest()) }

// PublicKey gives the present verifier key as the ledger itself names it.
func (r *Reader) PublicKey() string { return r.keys.newest() }

// Size gives the number of events.
func (r *Reader) Size(ctx context.Context) (int64, error) { return r.countNow(ctx) }

// Close ends the looking.
func (r *Reader) Close() error {
	<-r.turn
	defer r.leave()
	r.closed = true
	return errors.Join(r.disconnect(), r.lock.release())
}
