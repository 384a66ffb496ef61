package ledger

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
)

// publish writes the folder of a run with one document, as a publication does.
func publish(t testing.TB, l *Ledger, seqs ...int64) string {
	t.Helper()
	dir := t.TempDir()
	write := func(name string, content []byte) {
		if err := os.WriteFile(filepath.Join(dir, name), content, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	write("curve.csv", []byte("reading_mL,correction_mL\n10,-0.008\n"))
	sum, err := fileSum(filepath.Join(dir, "curve.csv"))
	if err != nil {
		t.Fatal(err)
	}
	sealed := mustAppend(t, l, func(seq int64) ([]byte, error) {
		return line(seq, "daemon", "run.sealed", "B-07-20261201-1", map[string]any{"documents": map[string]string{"curve.csv": sum}}), nil
	})
	events, proof, err := l.RunProof(t.Context(), append(seqs, sealed[0].Seq))
	if err != nil {
		t.Fatal(err)
	}
	write("events.jsonl", events)
	write("proof.json", proof)
	writeSums(t, dir)
	return dir
}

func writeSums(t testing.TB, dir string) {
	t.Helper()
	var sums strings.Builder
	for _, name := range []string{"curve.csv", "events.jsonl", "proof.json"} {
		sum, err := fileSum(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		fmt.Fprintf(&sums, "%s  %s\n", sum, name)
	}
	if err := os.WriteFile(filepath.Join(dir, sumsName), []byte(sums.String()), 0o644); err != nil {
		t.Fatal(err)
	}
}

func checkFolder(t testing.TB, dir, key string) FolderReport {
	t.Helper()
	r, err := VerifyFolder(dir, FolderOptions{PublicKey: key})
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func TestFolder(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(700)...)
	key := l.PublicKey()
	dir := publish(t, l, 5, 6, 7, 300, 299)
	r := checkFolder(t, dir, key)
	if !r.OK() || r.Events != 6 || r.Size != 702 || r.Files != 3 || r.Documents != 1 {
		t.Fatalf("report %+v: %v", r, r.Findings)
	}
	edit := func(name string, change func([]byte) []byte) func(string) {
		return func(dir string) {
			path := filepath.Join(dir, name)
			old, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			changed := change(bytes.Clone(old))
			if bytes.Equal(old, changed) {
				t.Fatal("the test changes nothing")
			}
			if err := os.WriteFile(path, changed, 0o644); err != nil {
				t.Fatal(err)
			}
		}
	}
	swap := func(from, to string) func([]byte) []byte {
		return func(b []byte) []byte { return bytes.Replace(b, []byte(from), []byte(to), 1) }
	}
	for _, tt := range []struct {
		name   string
		spoil  func(dir string)
		resign bool // SHA256SUMS made to fit again, as a forger would
	}{
		{"a digit of an event", edit("events.jsonl", swap(`"n":300`, `"n":301`)), true},
		{"an event removed", edit("events.jsonl", func(b []byte) []byte { return b[bytes.IndexByte(b, '\n')+1:] }), true},
		{"two events swapped", edit("events.jsonl", func(b []byte) []byte {
			lines := bytes.SplitAfter(b, []byte("\n"))
			lines[0], lines[1] = lines[1], lines[0]
			return bytes.Join(lines, nil)
		}), true},
		{"the checkpoint's size", edit("proof.json", swap(`\n702\n`, `\n703\n`)), true},
		{"a hash of a path", edit("proof.json", func(b []byte) []byte {
			i := bytes.Index(b, []byte(`"path"`)) + 20
			b[i] ^= 1
			return b
		}), true},
		{"the schema", edit("proof.json", swap("proof/1", "proof/9")), true},
		{"a document, the sums made to fit", edit("curve.csv", swap("-0.008", "-0.001")), true},
		{"a document", edit("curve.csv", swap("-0.008", "-0.001")), false},
		{"a document removed", func(dir string) { _ = os.Remove(filepath.Join(dir, "curve.csv")) }, false},
		{"the sums removed", func(dir string) { _ = os.Remove(filepath.Join(dir, sumsName)) }, false},
		{"a file added", func(dir string) { _ = os.WriteFile(filepath.Join(dir, "other.csv"), nil, 0o644) }, false},
	} {
		t.Run(tt.name, func(t *testing.T) {
			bad := t.TempDir()
			for _, name := range []string{"curve.csv", "events.jsonl", "proof.json", sumsName} {
				copyFile(t, filepath.Join(dir, name), filepath.Join(bad, name))
			}
			tt.spoil(bad)
			if tt.resign {
				writeSums(t, bad)
			}
			if checkFolder(t, bad, key).OK() {
				t.Error("not found")
			}
		})
	}
	t.Run("another ledger's key", func(t *testing.T) {
		other := open(t, found(t, t.TempDir()))
		if checkFolder(t, dir, other.PublicKey()).OK() {
			t.Error("not found")
		}
	})
}

func TestBackupUnderLoad(t *testing.T) {
	dir := t.TempDir()
	l := open(t, found(t, dir))
	mustAppend(t, l, plains(1500)...)
	ctx, stop := context.WithCancel(t.Context())
	var writing sync.WaitGroup
	writing.Go(func() {
		for ctx.Err() == nil {
			if _, err := l.Append(context.WithoutCancel(ctx), plain); err != nil {
				t.Error(err)
				return
			}
		}
	})
	file := filepath.Join(dir, "backup.db")
	report, err := l.Backup(t.Context(), file)
	stop()
	writing.Wait()
	if err != nil {
		t.Fatal(err)
	}
	if report.Events < 1501 || report.File != file || report.Bytes == 0 {
		t.Errorf("report %+v", report)
	}
	r, err := Verify(t.Context(), file, VerifyOptions{PublicKey: l.PublicKey()})
	if err != nil || !r.OK() || r.Events != report.Events || r.Root != report.Root {
		t.Errorf("the backup verifies as %+v (%v): %v", r, err, r.First())
	}
	if sum, err := fileSum(file); err != nil || sum != report.SHA256 {
		t.Errorf("hash %s, report says %s (%v)", sum, report.SHA256, err)
	}
	_, err = l.Backup(t.Context(), file)
	wantCode(t, err, "backup-exists")
	_, err = l.Backup(t.Context(), filepath.Join(dir, "nowhere", "backup.db"))
	if err == nil {
		t.Error("backup into a folder that is not there succeeded")
	}
	mustAppend(t, l, plain)
}

// TestRestore puts a backup in the place of the ledger and goes on with it.
func TestRestore(t *testing.T) {
	opt := found(t, t.TempDir())
	l := open(t, opt)
	mustAppend(t, l, plains(20)...)
	backup := filepath.Join(t.TempDir(), "backup.db")
	if _, err := l.Backup(t.Context(), backup); err != nil {
		t.Fatal(err)
	}
	mustClose(t, l)
	restored := Options{Path: filepath.Join(t.TempDir(), "ledger.db"), KeyFile: opt.KeyFile}
	copyFile(t, backup, restored.Path)
	l = open(t, restored)
	if l.Size() != 21 {
		t.Errorf("restored %d events, want 21", l.Size())
	}
	mustAppend(t, l, plain)
	mustClose(t, l)
	verifyGood(t, restored, 22)
}

func TestExportAndSegments(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	dir := t.TempDir()
	var whole bytes.Buffer
	next := int64(0)
	for range 3 {
		mustAppend(t, l, plains(30)...)
		seg, err := l.ExportSegment(t.Context(), dir, next)
		if err != nil {
			t.Fatal(err)
		}
		text, err := os.ReadFile(filepath.Join(dir, seg.Name+".jsonl"))
		if err != nil {
			t.Fatal(err)
		}
		whole.Write(text)
		next = seg.End
	}
	if seg, err := l.ExportSegment(t.Context(), dir, next); err != nil || seg.Name != "" {
		t.Errorf("nothing new gave a segment %+v (%v)", seg, err)
	}
	var direct bytes.Buffer
	if err := l.Export(t.Context(), &direct, 0, -1); err != nil || direct.String() != whole.String() {
		t.Errorf("segments and export differ (%v)", err)
	}
	signed, err := l.NewestCheckpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	key := l.PublicKey()
	check := func(lines string) Report {
		r, err := VerifyExport(strings.NewReader(lines), signed, VerifyOptions{PublicKey: key})
		if err != nil {
			t.Fatal(err)
		}
		return r
	}
	if r := check(whole.String()); !r.OK() || r.Events != 91 || r.Covered != 91 || !r.Trusted {
		t.Errorf("good export: %+v: %v", r, r.First())
	}
	if r := check(whole.String() + string(line(91, "daemon", "x", "", nil)) + "\n"); !r.OK() || r.Events != 92 || r.Covered != 91 {
		t.Errorf("an export with a later event: %+v: %v", r, r.First())
	}
	lines := strings.SplitAfter(whole.String(), "\n")
	for _, tt := range []struct {
		name, lines string
		first       int64
	}{
		{"a digit", strings.Replace(whole.String(), `"n":44`, `"n":45`, 1), -1},
		{"a cut tail", strings.Join(lines[:80], ""), 80},
		{"half a line", whole.String()[:whole.Len()-9], 90},
		{"a line removed", strings.Join(append(append([]string{}, lines[:7]...), lines[8:]...), ""), 7},
		{"nothing", "", 0},
	} {
		if r := check(tt.lines); r.OK() || r.First().Seq != tt.first {
			t.Errorf("%s: first finding %v, want event %d", tt.name, r.First(), tt.first)
		}
	}
	if err := l.Export(t.Context(), io.Discard, 5, 10_000); err == nil {
		t.Error("export of events that are not there succeeded")
	}
}

func TestCompareShowsGrowth(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(10)...)
	older, err := l.Checkpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	mustAppend(t, l, plains(33)...)
	g, err := l.Compare(t.Context(), older)
	if err != nil || g.Older.Size != 11 || g.Newer.Size != 44 {
		t.Fatalf("growth %+v (%v)", g, err)
	}
	g.Path[0][0] ^= 1
	if err := g.Check(); !errors.Is(err, ErrAltered) {
		t.Errorf("a changed proof was taken (%v)", err)
	}
	other := open(t, found(t, t.TempDir()))
	mustAppend(t, other, plains(50)...)
	if _, err := other.Compare(t.Context(), older); !errors.Is(err, ErrAltered) {
		t.Errorf("another ledger's checkpoint was taken (%v)", err)
	}
}

// TestStolenKey rewrites history with the signing key in hand. Everything inside fits
// again; only the checkpoint that was kept outside shows it.
func TestStolenKey(t *testing.T) {
	opt := found(t, t.TempDir())
	l := open(t, opt)
	mustAppend(t, l, plains(20)...)
	outside, err := l.Checkpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	mustAppend(t, l, plains(10)...)
	key := l.PublicKey()
	var bodies [][]byte
	if err := l.Replay(t.Context(), 0, func(e Entry) error { bodies = append(bodies, e.Body); return nil }); err != nil {
		t.Fatal(err)
	}
	sign := l.signer
	mustClose(t, l)

	bodies[12] = bytes.Replace(bodies[12], []byte(`"n":12`), []byte(`"n":99`), 1)
	forge(t, opt, sign, bodies)
	inside, err := Verify(t.Context(), opt.Path, VerifyOptions{PublicKey: key})
	if err != nil || !inside.OK() {
		t.Fatalf("the forgery is not good enough to test with: %v (%v)", inside.First(), err)
	}
	r, err := Verify(t.Context(), opt.Path, VerifyOptions{PublicKey: key, Checkpoints: [][]byte{outside}})
	if err != nil || r.OK() {
		t.Errorf("the outside checkpoint did not show the forgery (%v)", err)
	}
	l = open(t, opt)
	if _, err := l.Compare(t.Context(), outside); !errors.Is(err, ErrAltered) {
		t.Errorf("compare: %v, want that history was rewritten", err)
	}
}

// forge writes other bodies into the ledger with fitting hashes and a fitting signature.
func forge(t *testing.T, opt Options, sign signer, bodies [][]byte) {
	t.Helper()
	if err := os.Remove(opt.Path); err != nil {
		t.Fatal(err)
	}
	f := Founding{Path: opt.Path, Origin: testOrigin, KeyFile: opt.KeyFile}
	if err := f.appear(t.Context(), sign, bodies[0]); err != nil {
		t.Fatal(err)
	}
	l, err := Open(t.Context(), opt)
	if err != nil {
		t.Fatal(err)
	}
	for _, body := range bodies[1:] {
		mustAppend(t, l, func(int64) ([]byte, error) { return body, nil })
	}
	if _, err := l.Checkpoint(t.Context()); err != nil {
		t.Fatal(err)
	}
	mustClose(t, l)
}

func TestKeyChange(t *testing.T) {
	dir := t.TempDir()
	opt := found(t, dir)
	l := open(t, opt)
	mustAppend(t, l, plains(10)...)
	first := l.PublicKey()
	before, err := l.Checkpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	encode := func(seq int64, c KeyChanged) ([]byte, error) {
		return line(seq, "operator:anna", KindKeyChanged, "", c), nil
	}
	newKey := filepath.Join(dir, "ledger-2.key")
	if err := l.ChangeKey(t.Context(), newKey, "", encode); err == nil {
		t.Error("changed without a reason")
	}
	forget := func(seq int64, c KeyChanged) ([]byte, error) {
		c.New = first
		return encode(seq, c)
	}
	if err := l.ChangeKey(t.Context(), newKey, "yearly", forget); err == nil {
		t.Error("an event that says something else was taken")
	}
	if _, err := os.Stat(newKey); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("a key is left behind (%v)", err)
	}
	if err := l.ChangeKey(t.Context(), newKey, "yearly", encode); err != nil {
		t.Fatal(err)
	}
	second := l.PublicKey()
	mustAppend(t, l, plains(5)...)
	folder := publish(t, l, 3, 4)
	mustClose(t, l)

	_, err = Open(t.Context(), opt)
	wantCode(t, err, "ledger-key")
	l = open(t, Options{Path: opt.Path, KeyFile: newKey})
	if l.PublicKey() != second || second == first {
		t.Error("the new key is not in force")
	}
	mustClose(t, l)
	for _, key := range []string{first, second} {
		r, err := Verify(t.Context(), opt.Path, VerifyOptions{PublicKey: key, Checkpoints: [][]byte{before}})
		if err != nil || !r.OK() || !r.Trusted {
			t.Errorf("with key %s: %v (%v)", key, r.First(), err)
		}
		if f := checkFolder(t, folder, key); !f.OK() {
			t.Errorf("folder with key %s: %v", key, f.Findings)
		}
	}
}

// TestTextProof checks the C2SP tlog-proof text, and that it is small.
func TestTextProof(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(6)...)
	signed, err := l.Checkpoint(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	path, err := l.Prove(t.Context(), 4, 7)
	if err != nil {
		t.Fatal(err)
	}
	got := strings.SplitN(string(TextProof(4, path, signed)), "\n", 4)
	if got[0] != "c2sp.org/tlog-proof@v1" || got[1] != "index 4" || got[2] != path[0].String() {
		t.Errorf("proof text begins with %q", got)
	}
	if !strings.HasSuffix(got[3], "\n\n"+string(signed)) {
		t.Error("proof text does not end with the checkpoint")
	}
}

// TestProofIsReadable makes sure that proof.json stays what the documents describe.
func TestProofIsReadable(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(6)...)
	_, text, err := l.RunProof(t.Context(), []int64{2})
	if err != nil {
		t.Fatal(err)
	}
	var p map[string]any
	if err := json.Unmarshal(text, &p); err != nil {
		t.Fatal(err)
	}
	for _, key := range []string{"schema", "origin", "public_key", "key_changes", "checkpoint", "hash", "events"} {
		if p[key] == nil {
			t.Errorf("proof.json has no %q", key)
		}
	}
	if _, _, err := l.RunProof(t.Context(), []int64{99}); err == nil {
		t.Error("proved an event that is not there")
	}
}

// TestVerifyUnderLoad verifies the ledger while events are being appended.
func TestVerifyUnderLoad(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(3000)...)
	ctx, stop := context.WithCancel(t.Context())
	var writing sync.WaitGroup
	writing.Go(func() {
		for n := 0; ctx.Err() == nil; n++ {
			if _, err := l.Append(context.WithoutCancel(ctx), plains(3)...); err != nil {
				t.Error(err)
				return
			}
			if n%50 == 0 {
				if _, err := l.Checkpoint(context.WithoutCancel(ctx)); err != nil {
					t.Error(err)
					return
				}
			}
		}
	})
	for range 5 {
		r, err := l.Verify(t.Context(), VerifyOptions{})
		if err != nil || !r.OK() || r.Events < 3001 {
			t.Errorf("%d events (%v): %v", r.Events, err, r.First())
		}
	}
	stop()
	writing.Wait()
	if _, err := l.Verify(ctx, VerifyOptions{}); !errors.Is(err, context.Canceled) {
		t.Errorf("cancelled: %v", err)
	}
}
