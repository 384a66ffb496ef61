package ledger

import (
	"errors"
	"fmt"
	"os"
	"strings"

	"tenthmark/session"
)

// lockFile is the file beside the ledger that says who works on it: one writer, or any
// number of readers. The system gives the lock back when the process ends, however
// it ends; the file itself stays.
type lockFile struct{ f *os.File }

var errHeld = errors.New("held by another process")

// takeLock takes the lock of the ledger at path. Where the lock file is not there and a
// reader cannot make it (on a read-only disk), there is no daemon either: the reader
// goes on with a nil lock.
func takeLock(path string, exclusive bool) (*lockFile, error) {
	name := path + ".lock"
	f, err := os.OpenFile(name, os.O_RDWR|os.O_CREATE, 0o640)
	if err != nil && !exclusive {
		if f, err = os.Open(name); errors.Is(err, os.ErrNotExist) {
			return nil, nil
		}
	}
	if err != nil {
		return nil, explain("lock", path, err)
	}
	if err := tryLock(f, exclusive); err != nil {
		holder := readHolder(name)
		err = errors.Join(err, f.Close())
		return nil, &session.Fault{
			Code: "ledger-in-use", Message: "The ledger " + path + " is in use" + holder + ".",
			Hint: "Only one program works on a ledger. While the daemon runs, ask it instead (the same commands with --url), or stop it first.", Err: err,
		}
	}
	if !exclusive {
		return &lockFile{f}, nil
	}
	if err := writeHolder(f); err != nil {
		return nil, explain("lock", path, errors.Join(err, f.Close()))
	}
	return &lockFile{f}, nil
}

// writeHolder leaves a note for people; the lock does not depend on it.
func writeHolder(f *os.File) error {
	if err := f.Truncate(0); err != nil {
		return err
	}
	_, err := f.WriteAt([]byte(fmt.Sprintf("%d\n", os.Getpid())), 0)
	return err
}

func readHolder(name string) string {
	text, err := os.ReadFile(name)
	if id := strings.TrimSpace(string(text)); err == nil && id != "" {
		return " by process " + id
	}
	return ""
}

func (l *lockFile) release() error {
	if l == nil || l.f == nil {
		return nil
	}
	err := l.f.Close()
	l.f = nil
	return err
}
