package ledger

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// recipe takes a script out of the manual, so that what the manual says is what is tested.
func recipe(t *testing.T, name string) string {
	t.Helper()
	text, err := os.ReadFile("../../docs/ledger.md")
	if err != nil {
		t.Fatal(err)
	}
	_, rest, found := strings.Cut(string(text), "```python\n# "+name+"\n")
	if !found {
		t.Fatalf("the manual has no %s", name)
	}
	script, _, _ := strings.Cut(rest, "```")
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, []byte(script), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

func needs(t *testing.T, tools ...string) {
	t.Helper()
	for _, tool := range tools {
		if _, err := exec.LookPath(tool); err != nil {
			t.Skipf("%s is not here", tool)
		}
	}
}

// TestFolderRecipe checks a published folder with the manual's script: Python's standard
// library and openssl, none of our code.
func TestFolderRecipe(t *testing.T) {
	needs(t, "python3", "openssl", "sha256sum", "sh")
	dir := t.TempDir()
	opt := found(t, dir)
	l := open(t, opt)
	mustAppend(t, l, plains(333)...)
	oldKey := opt.KeyFile + ".pub"
	encode := func(seq int64, c KeyChanged) ([]byte, error) {
		return line(seq, "operator:anna", KindKeyChanged, "", c), nil
	}
	newKey := filepath.Join(dir, "next.key")
	if err := l.ChangeKey(t.Context(), newKey, "yearly", encode); err != nil {
		t.Fatal(err)
	}
	mustAppend(t, l, plains(70)...)
	folder := publish(t, l, 0, 1, 2, 99, 333, 334, 400)
	script := recipe(t, "check_folder.py")
	for _, key := range []string{oldKey, newKey + ".pub"} {
		if out, err := exec.Command("python3", script, folder, key).CombinedOutput(); err != nil || !strings.HasPrefix(string(out), "OK: 8 events") {
			t.Errorf("good folder with %s: %v\n%s", key, err, out)
		}
	}
	sums := exec.Command("sha256sum", "-c", sumsName)
	sums.Dir = folder
	if out, err := sums.CombinedOutput(); err != nil {
		t.Errorf("sha256sum: %v\n%s", err, out)
	}
	other := found(t, t.TempDir())
	if out, err := exec.Command("python3", script, folder, other.KeyFile+".pub").CombinedOutput(); err == nil {
		t.Errorf("another ledger's key was taken:\n%s", out)
	}
	path := filepath.Join(folder, "events.jsonl")
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(strings.Replace(string(text), `"n":99`, `"n":98`, 1)), 0o600); err != nil {
		t.Fatal(err)
	}
	if out, err := exec.Command("python3", script, folder, oldKey).CombinedOutput(); err == nil || !strings.Contains(string(out), "event 99: altered") {
		t.Errorf("a changed digit: %v\n%s", err, out)
	}
}

// TestExportRecipe recomputes the root of a whole export with the manual's other script.
func TestExportRecipe(t *testing.T) {
	needs(t, "python3")
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(777)...)
	dir := t.TempDir()
	seg, err := l.ExportSegment(t.Context(), dir, 0)
	if err != nil {
		t.Fatal(err)
	}
	script, events, checkpoint := recipe(t, "check_export.py"), filepath.Join(dir, seg.Name+".jsonl"), filepath.Join(dir, seg.Name+".checkpoint")
	if out, err := exec.Command("python3", script, events, checkpoint).CombinedOutput(); err != nil || !strings.HasPrefix(string(out), "OK 778 ") {
		t.Errorf("good export: %v\n%s", err, out)
	}
	text, err := os.ReadFile(events)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(events, []byte(strings.Replace(string(text), `"n":500`, `"n":501`, 1)), 0o600); err != nil {
		t.Fatal(err)
	}
	if out, err := exec.Command("python3", script, events, checkpoint).CombinedOutput(); err == nil {
		t.Errorf("a changed digit was not found:\n%s", out)
	}
}

// TestLeafByHand checks the manual's one-liner for a single event.
func TestLeafByHand(t *testing.T) {
	needs(t, "sh", "sed", "tr", "sha256sum")
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(5)...)
	folder := publish(t, l, 3)
	byHand := exec.Command("sh", "-c", `(printf '\0'; sed -n 1p events.jsonl | tr -d '\n') | sha256sum`)
	byHand.Dir = folder
	out, err := byHand.Output()
	if err != nil {
		t.Fatal(err)
	}
	proof, err := os.ReadFile(filepath.Join(folder, "proof.json"))
	if err != nil {
		t.Fatal(err)
	}
	if leaf, _, _ := strings.Cut(string(out), " "); !strings.Contains(string(proof), `"leaf": "`+leaf+`"`) {
		t.Errorf("leaf %s is not in proof.json", leaf)
	}
}
