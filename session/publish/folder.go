package publish

import (
	"bytes"
	"crypto/rand"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sort"
	"strings"

	"tenthmark/session"
)

// File is one document of a run.
type File struct {
	Name  string
	Bytes []byte
}

// Sum gives the SHA-256 of the file, hexadecimal.
func (f File) Sum() string {
	sum := sha256.Sum256(f.Bytes)
	return hex.EncodeToString(sum[:])
}

// sumsName is the list of all other files' hashes, in the form that sha256sum -c
// reads. It is written last.
const sumsName = "SHA256SUMS"

// withSums adds the list of hashes to the files.
func withSums(files []File) []File {
	sorted := append([]File{}, files...)
	sort.Slice(sorted, func(i, j int) bool { return sorted[i].Name < sorted[j].Name })
	var list strings.Builder
	for _, f := range sorted {
		fmt.Fprintf(&list, "%s  %s\n", f.Sum(), f.Name)
	}
	return append(sorted, File{sumsName, []byte(list.String())})
}

// Drop is the folder that finished runs appear in.
type Drop struct {
	Root  string
	fault func(step string, path string) error // in tests, makes a step fail; nil lets every step through
}

// partEnd marks a folder that is being built. Its name also begins with a point, so
// that whoever picks up finished folders sees neither.
const partEnd = ".part"

// Put makes the folder name appear in the drop with all files in it and their hashes,
// at once: it is built beside, synced and renamed, and the drop itself is synced. If it
// is there already with the same bytes, that is success; with others, it is a Fault
// with the code name-taken. It gives the hash of each file.
func (d Drop) Put(name string, files []File) (map[string]string, error) {
	if name != filepath.Base(name) || strings.HasPrefix(name, ".") {
		return nil, fmt.Errorf("publish: %q is no name of a folder", name)
	}
	files = withSums(files)
	final := filepath.Join(d.Root, name)
	if present, err := d.same(final, files); err != nil || present {
		return sums(files), err
	}
	if err := os.MkdirAll(d.Root, 0o755); err != nil {
		return nil, d.trouble(err)
	}
	part := filepath.Join(d.Root, "."+name+"."+rand.Text()[:8]+partEnd)
	if err := d.build(part, files); err != nil {
		return nil, d.trouble(errors.Join(err, os.RemoveAll(part)))
	}
	return d.appear(part, final, files)
}

// appear renames the finished folder. A rename that reports an error may have
// happened all the same, so the drop is looked at before the error is believed.
func (d Drop) appear(part, final string, files []File) (map[string]string, error) {
	err := d.step("rename", final)
	if err == nil {
		err = renameNoReplace(part, final)
	}
	if err == nil {
		err = d.step("renamed", final)
	}
	if err != nil {
		if present, look := d.same(final, files); look != nil || !present {
			return nil, d.trouble(errors.Join(err, look, os.RemoveAll(part)))
		}
	}
	if err := d.syncDir(d.Root); err != nil {
		return nil, d.trouble(err)
	}
	return sums(files), nil
}

func sums(files []File) map[string]string {
	m := map[string]string{}
	for _, f := range files {
		m[f.Name] = f.Sum()
	}
	return m
}

// same says whether the folder is there with exactly these files.
func (d Drop) same(final string, files []File) (bool, error) {
	entries, err := os.ReadDir(final)
	if errors.Is(err, fs.ErrNotExist) {
		return false, nil
	} else if err != nil {
		return false, d.trouble(err)
	}
	taken := &session.Fault{
		Code: "name-taken", Message: fmt.Sprintf("The drop has a folder %s already, with other content.", filepath.Base(final)),
		Hint: "Look whose it is. When several daemons share one drop, give each a prefix in [publish]. The run waits until the name is free.",
	}
	if len(entries) != len(files) {
		return false, taken
	}
	for _, f := range files {
		b, err := os.ReadFile(filepath.Join(final, f.Name))
		if err != nil || !bytes.Equal(b, f.Bytes) {
			return false, taken
		}
	}
	return true, nil
}

// Holds says whether the drop has the folder, whole, with the files of these hashes in
// it: what was prepared before an interruption has appeared after all. Files beyond
// those must fit the folder's own list. It gives the hash of every file.
func (d Drop) Holds(name string, hashes map[string]string) (map[string]string, bool) {
	list, err := os.ReadFile(filepath.Join(d.Root, name, sumsName))
	if err != nil {
		return nil, false
	}
	found := map[string]string{sumsName: File{sumsName, list}.Sum()}
	for _, line := range strings.Split(strings.TrimSpace(string(list)), "\n") {
		want, file, _ := strings.Cut(line, "  ")
		b, err := os.ReadFile(filepath.Join(d.Root, name, filepath.Base(file)))
		if err != nil || (File{file, b}).Sum() != want {
			return nil, false
		}
		found[file] = want
	}
	for file, want := range hashes {
		if found[file] != want {
			return nil, false
		}
	}
	return found, true
}

// Sums gives the hashes of files.
func Sums(files []File) map[string]string { return sums(files) }

// build writes the files into a new folder and makes them durable.
func (d Drop) build(part string, files []File) error {
	if err := d.step("mkdir", part); err != nil {
		return err
	}
	if err := os.Mkdir(part, 0o755); err != nil {
		return err
	}
	for _, f := range files {
		if err := d.write(filepath.Join(part, f.Name), f.Bytes); err != nil {
			return err
		}
	}
	return d.syncDir(part)
}

func (d Drop) write(path string, b []byte) error {
	if err := d.step("write", path); err != nil {
		return err
	}
	f, err := os.OpenFile(path, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o644)
	if err != nil {
		return err
	}
	_, err = f.Write(b)
	if err == nil {
		err = d.step("sync", path)
	}
	return errors.Join(err, f.Sync(), f.Close())
}

func (d Drop) syncDir(path string) error {
	if err := d.step("syncdir", path); err != nil {
		return err
	}
	dir, err := os.Open(path)
	if err != nil {
		return err
	}
	return errors.Join(ignoreUnsupported(dir.Sync()), dir.Close())
}

func (d Drop) step(name, path string) error {
	if d.fault == nil {
		return nil
	}
	return d.fault(name, path)
}

// Sweep removes half-built folders that an interrupted daemon left behind.
func (d Drop) Sweep() error {
	left, err := filepath.Glob(filepath.Join(d.Root, ".*"+partEnd))
	if err != nil {
		return err
	}
	for _, path := range left {
		err = errors.Join(err, os.RemoveAll(path))
	}
	return err
}

// trouble puts a failure in the operator's words.
func (d Drop) trouble(err error) error {
	var known *session.Fault
	if errors.As(err, &known) {
		return known
	}
	return &session.Fault{
		Code: "drop-unwritable", Message: fmt.Sprintf("The drop folder %s cannot be written.", d.Root),
		Hint: "Check that the disk or share is there, has space and may be written by this user. The run waits and is published by itself.", Err: err,
	}
}
