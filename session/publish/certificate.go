package publish

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"tenthmark/session"
)

// certificate is what stands on the certificate, in order, before it is laid out. PDF
// and HTML are two layouts of the same content.
type certificate struct {
	Title      string
	Number     string // of the certificate: the run's name
	Laboratory []string
	Issued     string
	Missing    []string // what ISO/IEC 17025 asks for and nobody stated
	Sections   []section
	Checkpoint string
	Superseded string
}

// section is a heading with paragraphs, pairs and a table, each of which may be empty.
type section struct {
	Heading string
	Pairs   [][2]string
	Header  []string
	Rows    [][]string
	Widths  []float64 // shares of the line, of a table's columns
	Notes   []string
	Drawing bool // the burette with its curve stands here
}

const notStated = "not stated"

// newCertificate collects what the run says. Its numbers follow the RoundingRule.
func newCertificate(m Material) (*certificate, error) {
	d := m.Document
	c := &certificate{
		Title: "Calibration certificate", Number: d.Run.ID, Laboratory: laboratoryLines(d.Setting.Laboratory),
		Issued: issued(d), Checkpoint: d.Ledger.Checkpoint,
	}
	if d.Run.Supersedes != "" {
		c.Superseded = "This certificate replaces certificate " + d.Run.Supersedes + "."
	}
	if c.Missing = missing(d); len(c.Missing) > 0 {
		c.Title = "Calibration record"
	}
	results, err := resultSection(m)
	if err != nil {
		return nil, err
	}
	deliveries, err := deliverySection(d)
	if err != nil {
		return nil, err
	}
	c.Sections = []section{
		itemSection(d), workSection(d), results, conformitySection(d),
		{Heading: "Burette and curve", Drawing: true},
		traceSection(d), deliveries, changeSection(d), signatureSection(d), noteSection(d, c.Missing),
	}
	return c, nil
}

func laboratoryLines(l session.Laboratory) []string {
	lines := append([]string{or(l.Name)}, l.Address...)
	for _, more := range []string{l.Contact, l.Accreditation} {
		if more != "" {
			lines = append(lines, more)
		}
	}
	return lines
}

func or(text string) string {
	if text == "" {
		return notStated
	}
	return text
}

// missing lists what ISO/IEC 17025:2017, 7.8.2 and 7.8.4 ask for and the record lacks.
func missing(d session.Document) []string {
	var list []string
	for _, need := range []struct {
		what  string
		there bool
	}{
		{"name of the laboratory", d.Setting.Laboratory.Name != ""},
		{"address of the laboratory", len(d.Setting.Laboratory.Address) > 0},
		{"place of the work", d.Setting.Laboratory.Place != ""},
		{"method", d.Setting.Method != ""},
		{"calibrated instruments", len(d.Setting.Equipment) > 0},
		{"person who performed it", d.Run.PerformedBy != ""},
		{"statement of conformity", d.Conformity != nil},
	} {
		if !need.there {
			list = append(list, need.what)
		}
	}
	return list
}

func issued(d session.Document) string {
	at := d.Run.Finished
	for _, s := range d.Signatures {
		at = s.At
	}
	return at.Format(time.DateOnly)
}

func moment(t session.Time) string { return t.Format("2006-01-02 15:04 UTC") }

func itemSection(d session.Document) section {
	b := d.Run.Burette
	return section{Heading: "Item", Pairs: [][2]string{
		{"Burette", b.Name},
		{"Maker, serial number", or(strings.Trim(b.Maker+", "+b.SerialNumber, ", "))},
		{"Nominal capacity, subdivision", fmt.Sprintf("%s mL, %s mL", b.CapacityML, b.SubdivisionML)},
		{"Class engraved", b.Class},
		{"Glass, stopcock", or(strings.Trim(b.Material+", "+b.Stopcock, ", "))},
		{"Reference temperature", b.ReferenceTempC.String() + " °C"},
		{"Waiting time before reading", fmt.Sprintf("%d s", b.WaitS)},
		{"Customer", customer(b, d.Setting.Laboratory)},
		{"Condition", condition(d.Run.Condition)},
	}}
}

func customer(b session.Burette, l session.Laboratory) string {
	if b.Owner != "" {
		return b.Owner
	}
	return "the laboratory itself: " + or(l.Name)
}

func condition(text string) string {
	if text == "" {
		return "as found; no cleaning, adjustment or repair recorded before this calibration"
	}
	return text
}

func workSection(d session.Document) section {
	s := section{Heading: "Calibration", Pairs: [][2]string{
		{"Method", or(d.Setting.Method)},
		{"Principle", "volume of delivered water from its mass in air (ISO 4787), referred to the reference temperature"},
		{"Place", or(d.Setting.Laboratory.Place)},
		{"Performed", moment(d.Run.Opened) + " to " + moment(d.Run.Finished)},
		{"Deliveries", deliveryPattern(d)},
		{"Weighing", weighingPattern(d)},
		{"Formulas", fmt.Sprintf("water %s, air %s, glass expansion %g /°C, weights %g kg/m³", d.Inputs.WaterDensity, d.Inputs.AirDensity, d.Inputs.ExpansionPerC, d.Inputs.WeightDensityKgM3)},
	}}
	for _, a := range d.Ambient {
		s.Pairs = append(s.Pairs, [2]string{"Air, " + moment(a.At), fmt.Sprintf("%s °C, %s hPa, %s %% relative humidity", a.AirTempC, a.PressureHPa, a.HumidityPct)})
	}
	if low, high, ok := waterRange(d); ok {
		s.Pairs = append(s.Pairs, [2]string{"Water", fmt.Sprintf("%s to %s °C", low, high)})
	}
	return s
}

func deliveryPattern(d session.Document) string {
	points := make([]string, len(d.Plan.PointsML))
	for i, p := range d.Plan.PointsML {
		points[i] = p.String()
	}
	how := "each delivery starts where the last ended"
	if d.Plan.ReadingPattern == session.FromZero {
		how = "refilled to the zero line before each delivery"
	}
	return fmt.Sprintf("test points %s mL, %d replicates, %s", strings.Join(points, ", "), d.Plan.Replicates, how)
}

func weighingPattern(d session.Document) string {
	how := map[session.WeighingPattern]string{
		session.Separate: "vessel weighed before and after every delivery",
		session.Running:  "vessel not emptied, each after-weight is the next before-weight",
		session.Tared:    "balance tared with the vessel on it, the zero taken as the before-weight",
	}[d.Plan.WeighingPattern]
	return how + "; every weight taken off the balance's line"
}

func waterRange(d session.Document) (low, high string, ok bool) {
	lowest, highest := math.Inf(1), math.Inf(-1)
	for _, one := range d.Deliveries {
		if one.Void || one.Water == nil {
			continue
		}
		if v := one.Water.WaterTempC; v.Float() < lowest {
			lowest, low = v.Float(), v.String()
		}
		if v := one.Water.WaterTempC; v.Float() > highest {
			highest, high = v.Float(), v.String()
		}
	}
	return low, high, low != ""
}

func resultSection(m Material) (section, error) {
	s := section{
		Heading: "Result", Header: []string{"Reading, mL", "Correction, mL", "Error of indication, mL", "Expanded uncertainty U, mL", "k"},
		Widths: []float64{1, 1.1, 1.3, 1.5, 0.6},
	}
	for _, p := range m.Curve.Points {
		v, u, err := signed(p.CorrectionML, p.ExpandedML)
		if err != nil {
			return s, err
		}
		e, _, err := signed(-p.CorrectionML, p.ExpandedML)
		if err != nil {
			return s, err
		}
		k, err := fixed(p.K, 2)
		if err != nil {
			return s, err
		}
		s.Rows = append(s.Rows, []string{strconv.FormatFloat(p.ReadingML, 'f', -1, 64), v, e, u, k})
	}
	in := m.Document.Inputs
	s.Notes = []string{
		"Correction is true minus indicated volume, from the zero line to the reading: it is added to a reading. Error of indication is indicated minus true, the negative of the correction. At the zero line both are 0 by definition.",
		fmt.Sprintf("U is the standard uncertainty multiplied by the coverage factor k; the interval of ±U holds the true value with a probability of about %.2f %%. It was evaluated by JCGM 100. Volumes are referred to %g °C.", in.CoverageProbability*100, in.ReferenceTempC),
		RoundingRule,
	}
	if m.Curve.Birge > 1 {
		s.Notes = append(s.Notes, fmt.Sprintf("The deliveries scatter more than their stated uncertainties allow (chi² %.1f with %d degrees of freedom); the random part of the uncertainty was enlarged by the Birge ratio %.2f.", m.Curve.Chi2, m.Curve.Nu, m.Curve.Birge))
	}
	return s, nil
}

func conformitySection(d session.Document) section {
	s := section{Heading: "Conformity"}
	if d.Conformity == nil {
		s.Notes = []string{"No statement of conformity is made."}
		return s
	}
	s.Notes = []string{d.Conformity.Statement()}
	return s
}

func traceSection(d session.Document) section {
	s := section{
		Heading: "Traceability", Header: []string{"Instrument", "Serial number", "Certificate", "Issued by", "Calibrated", "Valid until"},
		Widths: []float64{1.6, 1.1, 1.2, 1.5, 1.15, 1.15},
		Notes:  []string{"Results are traceable to the International System of Units through the certificates of these instruments."},
	}
	for _, e := range d.Setting.Equipment {
		s.Rows = append(s.Rows, []string{e.Kind + ": " + e.Name, e.Serial, e.Certificate, e.Issuer, e.CalibratedOn, e.ValidUntil})
	}
	if len(s.Rows) == 0 {
		s.Header, s.Notes = nil, []string{"The instruments behind the result are not stated."}
	}
	if b := d.Run.Balance; b.Serial != "" {
		s.Notes = append(s.Notes, fmt.Sprintf("The balance on the line reported itself as model %s, serial number %s, software %s.", or(b.Model), b.Serial, or(b.Firmware)))
	}
	return s
}

func deliverySection(d session.Document) (section, error) {
	s := section{
		Heading: "Deliveries", Header: []string{"No.", "From, mL", "To, mL", "Mass in air, g", "Water, °C", "Volume at reference, mL", "Correction, mL"},
		Widths: []float64{0.6, 0.9, 0.9, 1.1, 0.9, 1.5, 1.1},
	}
	for _, one := range d.Deliveries {
		row := []string{strconv.Itoa(one.Delivery), "", "", "", "", "", ""}
		if one.Start != nil {
			row[1] = one.Start.ReadingML.String() + mark(one.Start.Amended)
		}
		if one.End != nil {
			row[2] = one.End.ReadingML.String() + mark(one.End.Amended)
		}
		if one.Water != nil {
			row[4] = one.Water.WaterTempC.String() + mark(one.Water.Amended)
		}
		if n := one.DocumentNumbers; n != nil {
			for i, v := range map[int]float64{3: n.NetMassG, 5: n.Volume20ML, 6: n.CorrectionML} {
				text, err := fixed(v, 4)
				if err != nil {
					return s, err
				}
				row[i] = text
			}
		}
		if one.Void {
			row[6] = "void"
		}
		s.Rows = append(s.Rows, row)
	}
	s.Notes = []string{"A value marked * was amended after it was entered; a void delivery does not enter the result. Both stand under the next heading with their reason."}
	return s, nil
}

func mark(amended []session.Change) string {
	if len(amended) > 0 {
		return "*"
	}
	return ""
}

func changeSection(d session.Document) section {
	s := section{Heading: "Changes since entry", Header: []string{"When", "Who", "What", "Reason"}, Widths: []float64{1.5, 0.8, 2.2, 2}}
	for _, c := range d.Changes {
		s.Rows = append(s.Rows, []string{moment(c.At), c.By, changed(c), c.Reason})
	}
	if len(s.Rows) == 0 {
		s.Header, s.Notes = nil, []string{"None."}
	}
	return s
}

// changed says in words what a change did.
func changed(c session.Change) string {
	switch c.Kind {
	case session.FactAmended:
		return fmt.Sprintf("fact %d amended from %s to %s", c.Fact, c.Was, c.Value)
	case session.DeliveryVoid:
		return fmt.Sprintf("delivery %d void and replaced", c.Delivery)
	case session.DoubtAnswered:
		return fmt.Sprintf("delivery %d: the values stand", c.Delivery)
	case session.RunSuspended:
		return "run suspended"
	case session.RunResumed:
		return "run resumed"
	case session.RunReopened:
		return "run reopened after signing"
	}
	return string(c.Kind)
}

func signatureSection(d session.Document) section {
	s := section{Heading: "Signatures"}
	for _, one := range d.Signatures {
		s.Pairs = append(s.Pairs, [2]string{one.Name + ", " + one.Meaning, moment(one.At) + ". " + one.Statement})
	}
	if !d.Setting.SignIn {
		s.Notes = append(s.Notes, "Sign-in by secret was switched off: the names are those that the operators gave.")
	}
	return s
}

func noteSection(d session.Document, missing []string) section {
	s := section{Heading: "Notes", Notes: []string{
		"The result relates only to the item named here, in the condition in which it was calibrated.",
		"This document supports the laboratory's own accredited procedure and does not replace it; local law on measuring instruments and the decisions of authorised persons count before it.",
		fmt.Sprintf("Made by %s from events %d to %d of the ledger; the record that was signed has the SHA-256 %s.", d.Setting.Software, d.Ledger.First, d.Ledger.Last, d.Ledger.RecordHash),
	}}
	if len(missing) > 0 {
		s.Notes = append(s.Notes, "Not a certificate: the record lacks "+strings.Join(missing, ", ")+".")
	}
	return s
}
