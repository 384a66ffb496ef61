package publish

import (
	"errors"
	"flag"
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"tenthmark/session"
)

var manyFaults = flag.Int("publish.faults", 1000, "forced faults during publication")

func someFiles() []File {
	return []File{{"run.json", []byte("{}\n")}, {"curve.csv", []byte("reading_mL\r\n10\r\n")}, {"certificate.pdf", []byte("%PDF-1.7")}}
}

// visible lists what a program sees that picks up finished folders: names that do not
// begin with a point.
func visible(t *testing.T, root string) []string {
	t.Helper()
	entries, err := os.ReadDir(root)
	if err != nil && !errors.Is(err, os.ErrNotExist) {
		t.Fatal(err)
	}
	var names []string
	for _, e := range entries {
		if !strings.HasPrefix(e.Name(), ".") {
			names = append(names, e.Name())
		}
	}
	return names
}

// killed is what a forced fault panics with that stands for SIGKILL: nothing after it
// runs, no tidying up either.
type killed struct{}

// attempt publishes with a fault at a random step: an error, or a kill.
func attempt(root, name string, rng *rand.Rand) (err error) {
	defer func() {
		if r := recover(); r != nil {
			if _, ok := r.(killed); !ok {
				panic(r)
			}
			err = errors.New("killed")
		}
	}()
	countdown, kill := rng.IntN(14), rng.IntN(2) == 0
	d := Drop{Root: root, fault: func(step, path string) error {
		if countdown--; countdown >= 0 {
			return nil
		}
		if kill {
			panic(killed{})
		}
		return fmt.Errorf("forced at %s of %s", step, filepath.Base(path))
	}}
	_, err = d.Put(name, someFiles())
	return err
}

// Whatever goes wrong at whatever step: no half folder is ever visible, and once the
// fault is gone the run is there, once.
func TestForcedFaultsNeverShowHalfAFolder(t *testing.T) {
	root := filepath.Join(t.TempDir(), "drop")
	rng := rand.New(rand.NewPCG(1, 2))
	faults := 0
	for n := 0; faults < *manyFaults; n++ {
		name := fmt.Sprintf("B-07-20261201-%d", n)
		for attempt(root, name, rng) != nil {
			faults++
			for _, seen := range visible(t, root) {
				if _, whole := (Drop{Root: root}).Holds(seen, Sums(someFiles())); !whole {
					t.Fatalf("%s is visible and not whole", seen)
				}
			}
		}
		if err := os.RemoveAll(filepath.Join(root, name)); err != nil {
			t.Fatal(err)
		}
		if err := (Drop{Root: root}).Sweep(); err != nil {
			t.Fatal(err)
		}
		if left := visible(t, root); len(left) != 0 {
			t.Fatalf("published more than once: %v", left)
		}
	}
	entries, err := os.ReadDir(root)
	if err != nil || len(entries) != 0 {
		t.Errorf("after sweeping %d entries are left, %v", len(entries), err)
	}
	t.Logf("%d forced faults", faults)
}

func TestTheSameRunTwiceIsOneFolder(t *testing.T) {
	d := Drop{Root: t.TempDir()}
	first, err := d.Put("B-07-20261201-1", someFiles())
	if err != nil {
		t.Fatal(err)
	}
	again, err := d.Put("B-07-20261201-1", someFiles())
	if err != nil || len(again) != len(first) || len(visible(t, d.Root)) != 1 {
		t.Errorf("again %v, %v", again, err)
	}
	other := append(someFiles()[1:], File{"run.json", []byte("{\"other\":1}\n")})
	if _, err := d.Put("B-07-20261201-1", other); session.FaultCode(err) != "name-taken" {
		t.Errorf("other content under the same name: %v, want name-taken", err)
	}
	if _, err := d.Put("../out", someFiles()); err == nil {
		t.Error("a name that leaves the drop was accepted")
	}
}

func TestADropThatCannotBeWrittenSaysSo(t *testing.T) {
	blocked := filepath.Join(t.TempDir(), "drop")
	if err := os.WriteFile(blocked, []byte("a file where the folder should be"), 0o600); err != nil {
		t.Fatal(err)
	}
	d := Drop{Root: blocked}
	_, err := d.Put("B-07-20261201-1", someFiles())
	if session.FaultCode(err) != "drop-unwritable" {
		t.Fatalf("got %v, want drop-unwritable", err)
	}
	if err := os.Remove(blocked); err != nil {
		t.Fatal(err)
	}
	if _, err := d.Put("B-07-20261201-1", someFiles()); err != nil {
		t.Errorf("after the fault: %v", err)
	}
}

func TestHoldsFindsAChangedByte(t *testing.T) {
	d := Drop{Root: t.TempDir()}
	if _, err := d.Put("run", someFiles()); err != nil {
		t.Fatal(err)
	}
	if _, whole := d.Holds("run", Sums(someFiles())); !whole {
		t.Fatal("a fresh folder does not hold")
	}
	for _, f := range someFiles() {
		path := filepath.Join(d.Root, "run", f.Name)
		changed := append([]byte{}, f.Bytes...)
		changed[0] ^= 1
		if err := os.WriteFile(path, changed, 0o600); err != nil {
			t.Fatal(err)
		}
		if _, whole := d.Holds("run", Sums(someFiles())); whole {
			t.Errorf("a changed bit in %s was not found", f.Name)
		}
		if err := os.WriteFile(path, f.Bytes, 0o600); err != nil {
			t.Fatal(err)
		}
	}
}

// Rounding: two significant digits of the uncertainty, the value to the same decimal
// (JCGM 100:2008, 7.2.6: at most two).
func TestRoundingRule(t *testing.T) {
	for _, tt := range []struct {
		value, expanded float64
		v, u            string
	}{
		{0.0145, 0.01464, "0.015", "0.015"},
		{-0.00804, 0.0088, "-0.0080", "0.0088"},
		{0.01234, 0.0996, "0.01", "0.10"},
		{12.3456, 1.04, "12.3", "1.0"},
		{0.00004, 0.000951, "0.00004", "0.00095"},
	} {
		v, u, err := rounded(tt.value, tt.expanded)
		if err != nil || v != tt.v || u != tt.u {
			t.Errorf("rounded(%g, %g) = %s, %s, %v; want %s, %s", tt.value, tt.expanded, v, u, err, tt.v, tt.u)
		}
	}
}
