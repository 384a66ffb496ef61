package ledger

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"testing"
)

var update = flag.Bool("update", false, "write the ledger of the present form into testdata when it is not there")

const formsDir = "../../testdata/ledger"

// TestEveryPastForm opens a ledger that was written in each form there ever was, verifies
// it against the checkpoint of that day, and goes on with it. The keys beside them were
// made for this test and sign nothing else.
func TestEveryPastForm(t *testing.T) {
	if *update {
		writeForm(t)
	}
	dirs, err := filepath.Glob(filepath.Join(formsDir, "form-*"))
	if err != nil || len(dirs) != schemaVersion {
		t.Fatalf("%d forms in testdata (%v), want one for each of the %d there were", len(dirs), err, schemaVersion)
	}
	for _, dir := range dirs {
		t.Run(filepath.Base(dir), func(t *testing.T) {
			tmp := t.TempDir()
			opt := Options{Path: filepath.Join(tmp, "ledger.db"), KeyFile: filepath.Join(tmp, "ledger.key")}
			copyFile(t, filepath.Join(dir, "ledger.db"), opt.Path)
			copyFile(t, filepath.Join(dir, "ledger.key"), opt.KeyFile)
			if err := os.Chmod(opt.KeyFile, 0o600); err != nil {
				t.Fatal(err)
			}
			signed, err := os.ReadFile(filepath.Join(dir, "checkpoint.txt"))
			if err != nil {
				t.Fatal(err)
			}
			key, err := ReadPublicKey(filepath.Join(dir, "ledger.key.pub"))
			if err != nil {
				t.Fatal(err)
			}
			l := open(t, opt)
			mustAppend(t, l, plain)
			size := l.Size()
			mustClose(t, l)
			r, err := Verify(t.Context(), opt.Path, VerifyOptions{PublicKey: key, Checkpoints: [][]byte{signed}})
			if err != nil || !r.OK() || !r.Trusted || r.Outside != 1 || r.Events != size {
				t.Errorf("%+v (%v): %v", r, err, r.First())
			}
		})
	}
}

// writeForm makes the fixture of the present form, once.
func writeForm(t *testing.T) {
	t.Helper()
	dir := filepath.Join(formsDir, fmt.Sprintf("form-%d", schemaVersion))
	if err := os.Mkdir(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	opt := found(t, dir)
	l := open(t, opt)
	mustAppend(t, l, plains(20)...)
	signed, err := l.Checkpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	if err := l.SaveSnapshot(t.Context(), Snapshot{15, []byte("the state of 15 events")}); err != nil {
		t.Fatal(err)
	}
	mustAppend(t, l, plains(5)...)
	mustClose(t, l)
	if err := os.WriteFile(filepath.Join(dir, "checkpoint.txt"), signed, 0o644); err != nil {
		t.Fatal(err)
	}
	if err := os.Remove(opt.Path + ".lock"); err != nil {
		t.Fatal(err)
	}
}
