package publish

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"

	"tenthmark/session"
)

// shelfRun is a run of our own demonstration (seed 5), as it was published.
const shelfRun = "../../testdata/publish/shelf_run.json"

// putRun puts a run.json into a drop the way a run is published, with its hash.
func putRun(t *testing.T, root, folder string, text []byte) {
	t.Helper()
	if _, err := (Drop{Root: root}).Put(folder, []File{{"run.json", text}}); err != nil {
		t.Fatal(err)
	}
}

func shelfText(t *testing.T) []byte {
	t.Helper()
	text, err := os.ReadFile(shelfRun)
	if err != nil {
		t.Fatal(err)
	}
	return text
}

func TestShelfReadsWhatWasPublished(t *testing.T) {
	root := t.TempDir()
	putRun(t, root, "B-07-20261201-1", shelfText(t))
	for _, other := range []string{".B-07-half.part", "holiday pictures"} {
		if err := os.Mkdir(filepath.Join(root, other), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	for burette, want := range map[string]int{"": 1, "B-07": 1, "B-0": 0, "B-08": 0} {
		all, err := ReadShelf(root, burette)
		if err != nil || len(all) != want {
			t.Errorf("burette %q: %d runs, %v; want %d", burette, len(all), err, want)
		}
	}
	all, err := ReadShelf(root, "B-07")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Refit(all[0].Document); err != nil {
		t.Errorf("the curve does not follow from its own deliveries: %v", err)
	}
	if _, err := ReadShelf(filepath.Join(root, "nowhere"), ""); session.FaultCode(err) != "drop-unreadable" {
		t.Errorf("no drop: %v", err)
	}
}

// Whoever changes a number in run.json is found out: by the list of hashes if it lies
// beside, and by the deliveries if it does not.
func TestShelfFindsAlteredRuns(t *testing.T) {
	good := shelfText(t)
	d, err := ReadRunFile(shelfRun)
	if err != nil {
		t.Fatal(err)
	}
	c := d.Curve
	for name, change := range map[string]func(){
		"correction":  func() { c.Points[2].CorrectionML += 2e-9 },
		"U":           func() { c.Points[4].ExpandedML *= 0.9 },
		"covariance":  func() { c.CovarianceML2[1][3] *= 1.00001 },
		"bridge":      func() { c.BridgeRateML2PerML *= 1.00001 },
		"birge":       func() { c.Birge = 1.5 },
		"inputs":      func() { c.Inputs.UReadingML /= 2 },
		"a void":      func() { d.Deliveries[3].Void = true },
		"a fact gone": func() { d.Deliveries[0].Water = nil },
	} {
		if d, err = ReadRunFile(shelfRun); err != nil {
			t.Fatal(err)
		}
		c = d.Curve
		change()
		if _, err := Refit(d); session.FaultCode(err) != "run-altered" {
			t.Errorf("%s: %v", name, err)
		}
	}
	root := t.TempDir()
	putRun(t, root, "B-07-20261201-1", good)
	file := filepath.Join(root, "B-07-20261201-1", "run.json")
	if err := os.WriteFile(file, bytes.Replace(good, []byte("B-07"), []byte("B-08"), 1), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadShelf(root, ""); session.FaultCode(err) != "run-altered" {
		t.Errorf("another hash: %v", err)
	}
	if err := os.WriteFile(file, []byte(`{"schema":"else"}`), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadShelf(root, ""); err == nil {
		t.Error("another form passed")
	}
}
