//go:build !linux

package publish

import "os"

// renameNoReplace: a rename onto a folder that is not empty fails on every system.
func renameNoReplace(from, to string) error { return os.Rename(from, to) }

// ignoreUnsupported: folders cannot be synced on every system.
func ignoreUnsupported(error) error { return nil }
