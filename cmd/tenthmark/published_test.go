package main

import (
	"bytes"
	"encoding/json"
	"encoding/xml"
	"errors"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"

	"tenthmark/session"
	"tenthmark/session/publish"
)

// published runs a demo for a seed and gives the folder that it published.
func published(t *testing.T, seed uint64) (s *stage, folder string) {
	t.Helper()
	out := t.TempDir()
	var said bytes.Buffer
	if err := demo(t.Context(), demoOptions{seed: seed, out: out, pace: 100}, stdio{out: &said, err: &said}); err != nil {
		t.Fatalf("%v\n%s", err, &said)
	}
	folders, err := filepath.Glob(filepath.Join(out, "drop", "B-07-*"))
	if err != nil || len(folders) != 1 {
		t.Fatalf("published %v, %v; want one folder\n%s", folders, err, &said)
	}
	c, err := loadConfig(filepath.Join(out, "config.toml"))
	if err != nil {
		t.Fatal(err)
	}
	return &stage{folder: out, config: c}, folders[0]
}

func needs(t *testing.T, tool string) {
	t.Helper()
	if _, err := exec.LookPath(tool); err != nil {
		t.Skipf("needs %s, which is not on this machine", tool)
	}
}

// The whole chain: the demo's run is judged by programs that share nothing with this
// one.
func TestAPublishedRunStandsUpToOtherPrograms(t *testing.T) {
	for _, seed := range []uint64{1, 2} {
		s, folder := published(t, seed)
		t.Run("an independent program recomputes it", func(t *testing.T) {
			needs(t, "python3")
			out, err := exec.Command("python3", "../../docs/recompute.py", filepath.Join(folder, "run.json")).CombinedOutput()
			if err != nil {
				t.Errorf("recompute.py: %v\n%s", err, out)
			}
		})
		t.Run("sha256sum finds every file as listed", func(t *testing.T) {
			needs(t, "sha256sum")
			cmd := exec.Command("sha256sum", "--strict", "-c", "SHA256SUMS")
			cmd.Dir = folder
			if out, err := cmd.CombinedOutput(); err != nil {
				t.Errorf("sha256sum: %v\n%s", err, out)
			}
		})
		t.Run("a JSON Schema validator accepts run.json", func(t *testing.T) { checkSchema(t, filepath.Join(folder, "run.json")) })
		t.Run("the certificate's XML is well-formed, and valid where the schemas are at hand", func(t *testing.T) { checkXML(t, filepath.Join(folder, "certificate.xml")) })
		t.Run("the ledger verifies and the run recomputes from its raw bytes", func(t *testing.T) { checkLedger(t, s, folder) })
	}
}

func checkSchema(t *testing.T, file string) {
	t.Helper()
	schema, err := jsonschema.NewCompiler().Compile("../../docs/run.schema.json")
	if err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	accepts := func(text []byte) error {
		v, err := jsonschema.UnmarshalJSON(bytes.NewReader(text))
		if err != nil {
			return err
		}
		return schema.Validate(v)
	}
	if err := accepts(text); err != nil {
		t.Error(err)
	}
	for old, bad := range map[string]string{
		`"mass_g": "`: `"mass_g": "1,`, `"schema": "tenthmark/run/1"`: `"schema": "other"`, `"replicates": 2`: `"replicates": "2"`,
	} {
		if accepts(bytes.Replace(text, []byte(old), []byte(bad), 1)) == nil {
			t.Errorf("the schema accepts %s in place of %s", bad, old)
		}
	}
}

func checkXML(t *testing.T, file string) {
	t.Helper()
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	for d := xml.NewDecoder(bytes.NewReader(text)); ; {
		if _, err := d.Token(); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatal(err)
		}
	}
	schemas := os.Getenv("TENTHMARK_DCC_SCHEMAS")
	if schemas == "" {
		t.Skip("well-formed; to validate, set TENTHMARK_DCC_SCHEMAS to a folder with the DCC schemas and their catalog.xml")
	}
	needs(t, "xmllint")
	cmd := exec.Command("xmllint", "--nonet", "--noout", "--schema", "https://ptb.de/dcc/v3.3.0/dcc.xsd", file)
	cmd.Env = append(os.Environ(), "XML_CATALOG_FILES="+filepath.Join(schemas, "catalog.xml"))
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Errorf("xmllint: %v\n%s", err, out)
	}
}

func checkLedger(t *testing.T, s *stage, folder string) {
	t.Helper()
	config := filepath.Join(s.folder, "config.toml")
	for _, args := range [][]string{
		{"ledger", "verify", "-c", config},
		{"ledger", "verify", "--drop", folder, "--key", s.config.Ledger.Key + ".pub"},
		{"recompute", "-c", config, filepath.Base(folder)},
	} {
		var said bytes.Buffer
		if code := tenthmark(args, stdio{out: &said, err: &said}); code != exitDone {
			t.Errorf("tenthmark %s: exit %d\n%s", strings.Join(args, " "), code, &said)
		}
	}
}

// What the demo promises: one amended misreading with its old value, one void delivery
// with its replacement, and the class decided.
func TestTheDemoMisreadsOnceAndSpillsOnce(t *testing.T) {
	_, folder := published(t, 3)
	text, err := os.ReadFile(filepath.Join(folder, "run.json"))
	if err != nil {
		t.Fatal(err)
	}
	var doc session.Document
	if err := json.Unmarshal(text, &doc); err != nil {
		t.Fatal(err)
	}
	amended, void := 0, 0
	for _, c := range doc.Changes {
		switch {
		case c.Kind == session.FactAmended && c.Was.IsSet() && c.Value.IsSet() && c.Reason != "":
			amended++
		case c.Kind == session.DeliveryVoid && c.Reason != "":
			void++
		}
	}
	if amended != 1 || void != 1 || doc.Conformity == nil || doc.Run.ReviewedBy == "" {
		t.Errorf("%d amendments, %d void deliveries, conformity %v, reviewed by %q", amended, void, doc.Conformity, doc.Run.ReviewedBy)
	}
}

// docs/pickup.py hands over whole folders, each once, and leaves a damaged one alone.
func TestThePickupScriptTakesEachRunOnce(t *testing.T) {
	needs(t, "python3")
	root := t.TempDir()
	drop, done, took := filepath.Join(root, "drop"), filepath.Join(root, "done"), filepath.Join(root, "took")
	put := func(name string) {
		if _, err := (publish.Drop{Root: drop}).Put(name, []publish.File{{Name: "run.json", Bytes: []byte("{}\n")}}); err != nil {
			t.Fatal(err)
		}
	}
	pickUp := func() string {
		cmd := exec.Command("python3", "../../docs/pickup.py", drop, done, "sh", "-c", `basename "$0" >> "`+took+`"`)
		if out, err := cmd.CombinedOutput(); err != nil {
			t.Fatalf("pickup.py: %v\n%s", err, out)
		}
		text, err := os.ReadFile(took)
		if err != nil && !os.IsNotExist(err) {
			t.Fatal(err)
		}
		return strings.Join(strings.Fields(string(text)), " ")
	}
	put("B-07-20261201-1")
	put("B-07-20261201-2")
	if err := os.Mkdir(filepath.Join(drop, ".B-07-20261201-3.x.part"), 0o700); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(drop, "B-07-20261201-2", "run.json"), []byte("{ }\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	if got := pickUp(); got != "B-07-20261201-1" {
		t.Errorf("first picked up %q, want the whole folder alone", got)
	}
	put("B-07-20261202-1")
	if got := pickUp(); got != "B-07-20261201-1 B-07-20261202-1" {
		t.Errorf("then picked up %q, want each once", got)
	}
}
