package publish

import (
	"errors"
	"os"

	"golang.org/x/sys/unix"
)

// renameNoReplace renames without ever replacing what is there. File systems that
// cannot promise that (some network shares) get a plain rename, which for a folder
// fails on a target that is not empty.
func renameNoReplace(from, to string) error {
	err := unix.Renameat2(unix.AT_FDCWD, from, unix.AT_FDCWD, to, unix.RENAME_NOREPLACE)
	if errors.Is(err, unix.EINVAL) || errors.Is(err, unix.ENOSYS) {
		return os.Rename(from, to)
	}
	return err
}

// ignoreUnsupported: some network shares refuse to sync a folder.
func ignoreUnsupported(err error) error {
	if errors.Is(err, unix.EINVAL) {
		return nil
	}
	return err
}
