package publish

import (
	"bytes"
	"encoding/json"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"tenthmark/session"
)

// demoMaterial is a published run of the demo, built from its events alone: the file
// is one that an earlier version wrote, and has to stay readable.
func demoMaterial(t *testing.T) Material {
	t.Helper()
	text, err := os.ReadFile("../../testdata/publish/run-seed-11.events.jsonl")
	if err != nil {
		t.Fatal(err)
	}
	run, err := session.RunFromLines(bytes.Split(bytes.TrimSpace(text), []byte("\n")))
	if err != nil {
		t.Fatal(err)
	}
	m := Material{Document: run.Document()}
	if m.Deliveries, err = run.CalcDeliveries(); err != nil {
		t.Fatal(err)
	}
	if m.Curve, err = run.Curve(); err != nil {
		t.Fatal(err)
	}
	m.Document.Ledger.Checkpoint = "demo.waterworks.example\n82\n+CO943FZ0n/5qnM7s+U3izAeReYvu4Z2QXdG1qq2xMc=\n\n— demo.waterworks.example AAAA\n"
	return m
}

// words gives everything that stands on the certificate.
func words(c *certificate) string {
	b, err := json.Marshal(c)
	if err != nil {
		panic(err)
	}
	return string(b)
}

// What ISO/IEC 17025:2017, 7.8.2.1 and 7.8.4.1, ask for and this software can know
// (clause letters from memory).
func TestTheCertificateHasWhatTheStandardAsksFor(t *testing.T) {
	m := demoMaterial(t)
	c, err := newCertificate(m)
	if err != nil {
		t.Fatal(err)
	}
	if c.Title != "Calibration certificate" || len(c.Missing) != 0 {
		t.Errorf("title %q, missing %v", c.Title, c.Missing)
	}
	all := words(c)
	for what, text := range map[string]string{
		"laboratory": "Drinking-Water Works", "address": "Reservoir Road", "place": "Balance room 2", "number": m.Document.Run.ID,
		"method": "LW-12", "item": "07-2219", "condition": "as found", "relates only to the item": "relates only to the item",
		"uncertainty": "Expanded uncertainty U, mL", "coverage": "95.45 %", "conditions": "1004.2 hPa", "traceability": "VB-2026-0311",
		"decision rule": "Decision rule", "specification": "ISO 385:2005", "both signs": "Error of indication is indicated minus true",
		"authorised": "t.okafor, reviewed", "not a substitute": "does not replace it",
	} {
		if !strings.Contains(all, text) {
			t.Errorf("%s: %q does not stand on the certificate", what, text)
		}
	}
	if strings.Contains(strings.ToLower(all), "next calibration") || strings.Contains(all, "due") {
		t.Error("a recalibration interval stands on the certificate, and nobody agreed to one (7.8.4.3)")
	}
}

func TestWithoutAMandatoryFieldItIsNoCertificate(t *testing.T) {
	for what, blank := range map[string]func(*session.Document){
		"name of the laboratory":    func(d *session.Document) { d.Setting.Laboratory.Name = "" },
		"address of the laboratory": func(d *session.Document) { d.Setting.Laboratory.Address = nil },
		"place of the work":         func(d *session.Document) { d.Setting.Laboratory.Place = "" },
		"method":                    func(d *session.Document) { d.Setting.Method = "" },
		"calibrated instruments":    func(d *session.Document) { d.Setting.Equipment = nil },
		"person who performed it":   func(d *session.Document) { d.Run.PerformedBy = "" },
		"statement of conformity":   func(d *session.Document) { d.Conformity = nil },
	} {
		m := demoMaterial(t)
		blank(&m.Document)
		c, err := newCertificate(m)
		if err != nil {
			t.Errorf("without %s: %v", what, err)
			continue
		}
		if c.Title != "Calibration record" || !slices.Contains(c.Missing, what) || !strings.Contains(words(c), "lacks "+what) {
			t.Errorf("without %s: title %q, missing %v", what, c.Title, c.Missing)
		}
	}
}

func TestAmendedValuesShowTheOldOne(t *testing.T) {
	m := demoMaterial(t)
	c, err := newCertificate(m)
	if err != nil {
		t.Fatal(err)
	}
	all := words(c)
	for _, change := range m.Document.Changes {
		if change.Kind == session.FactAmended && !strings.Contains(all, change.Was.String()+" to "+change.Value.String()) {
			t.Errorf("the amendment of fact %d does not show %s", change.Fact, change.Was)
		}
		if !strings.Contains(all, change.Reason) {
			t.Errorf("the reason %q does not stand on the certificate", change.Reason)
		}
	}
	if !strings.Contains(all, "*") || !strings.Contains(all, `"void"`) {
		t.Error("amended and void values are not marked")
	}
}

// The numbers people read agree with run.json by the one rounding rule.
func TestCertificateAndRunAgree(t *testing.T) {
	m := demoMaterial(t)
	s, err := resultSection(m)
	if err != nil {
		t.Fatal(err)
	}
	for i, p := range m.Curve.Points {
		v, u, err := signed(p.CorrectionML, p.ExpandedML)
		if err != nil || s.Rows[i][1] != v || s.Rows[i][3] != u {
			t.Errorf("row %v, want %s ± %s", s.Rows[i], v, u)
		}
		digits := strings.TrimLeft(strings.ReplaceAll(strings.TrimLeft(u, "0."), ".", ""), "0")
		if len(digits) != 2 {
			t.Errorf("U = %s has not two significant digits", u)
		}
	}
}

func TestThePDFReadsBack(t *testing.T) {
	m := demoMaterial(t)
	for _, paper := range []string{"A4", "Letter"} {
		m.Paper = paper
		pdf, err := certificatePDF(m)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := exec.LookPath("pdftotext"); err != nil {
			t.Skip("needs pdftotext, which is not on this machine")
		}
		file := filepath.Join(t.TempDir(), "certificate.pdf")
		if err := os.WriteFile(file, pdf, 0o600); err != nil {
			t.Fatal(err)
		}
		out, err := exec.Command("pdftotext", "-layout", file, "-").CombinedOutput()
		if err != nil {
			t.Fatalf("pdftotext: %v\n%s", err, out)
		}
		for _, text := range []string{m.Document.Run.ID, "page 1 of ", "End of the calibration certificate", "t.okafor", "Reading, mL"} {
			if !bytes.Contains(out, []byte(text)) {
				t.Errorf("%s: %q is not in the text of the PDF", paper, text)
			}
		}
	}
}

func TestACellIsNeverAFormula(t *testing.T) {
	m := demoMaterial(t)
	for i := range m.Document.Deliveries {
		m.Document.Deliveries[i].VoidReason = "=1+1"
	}
	b, err := deliveriesCSV(m)
	if err != nil || bytes.Contains(b, []byte(",=1+1")) || !bytes.Contains(b, []byte(",'=1+1")) {
		t.Errorf("%v\n%s", err, b)
	}
	if !bytes.Contains(b, []byte(",-0.")) {
		t.Error("negative numbers lost their sign")
	}
	if bytes.Count(b, []byte("\r\n")) != len(m.Document.Deliveries)+1 {
		t.Error("lines do not end with CR LF (RFC 4180)")
	}
}

func TestTheXMLCheckFindsWhatTheSchemaLetsPass(t *testing.T) {
	for what, spoil := range map[string]func(*dcc){
		"a missing uncertainty":     func(d *dcc) { d.Uncertainties = "" },
		"four factors for five":     func(d *dcc) { d.Factors = strings.Join(strings.Fields(d.Factors)[1:], " ") },
		"dates out of order":        func(d *dcc) { d.End = "2020-01-01" },
		"readings that do not rise": func(d *dcc) { d.Readings = "10 20 20 40 50" },
		"a verdict without a word":  func(d *dcc) { d.Overall = "" },
	} {
		m := demoMaterial(t)
		d, err := newDCC(m)
		if err != nil {
			t.Fatal(err)
		}
		if err := d.check(len(m.Curve.Points)); err != nil {
			t.Fatalf("before it was spoilt: %v", err)
		}
		spoil(d)
		if d.check(len(m.Curve.Points)) == nil {
			t.Errorf("%s was not found", what)
		}
	}
}
