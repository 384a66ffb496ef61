package publish

import (
	"bytes"
	_ "embed"
	"encoding/xml"
	"fmt"
	"math"
	"strconv"
	"strings"
	"text/template"
	"time"

	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// The Digital Calibration Certificate follows the DCC schema 3.3.0 with D-SI 2.2.1. No
// authority has published how a burette's correction table is to be written in it, so
// the names of the quantities say it in words, and the sign as well.
//
//go:embed dcc.xml.tmpl
var dccText string

var dccTemplate = template.Must(template.New("dcc").Funcs(template.FuncMap{"x": escaped}).Parse(dccText))

// escaped makes any value safe as XML text.
func escaped(v any) (string, error) {
	var b bytes.Buffer
	err := xml.EscapeText(&b, []byte(fmt.Sprint(v)))
	return b.String(), err
}

// dccEquipment is an instrument with the one name that identifies it.
type dccEquipment struct {
	session.Equipment
	Label string
}

// dcc is what the template is filled with.
type dcc struct {
	session.Document
	Release, Country, Begin, End, Issued, Item, Limit string
	Laboratory, Address, Customer, Method             string
	Norm, Statement, Overall, Record                  string
	Readings, Volumes, Corrections, Uncertainties     string
	Factors, Covariance, Verdicts, WaterTemps         string
	MainSigner                                        int64
	Equipment                                         []dccEquipment
}

// conformities turns verdicts into the words of the schema.
var conformities = map[string]string{
	"meets": "pass", "conditional pass": "conditionalPass", "conditional fail": "conditionalFail", "does not meet": "fail",
}

func certificateXML(m Material) ([]byte, error) {
	d, err := newDCC(m)
	if err != nil {
		return nil, err
	}
	if err := d.check(len(m.Curve.Points)); err != nil {
		return nil, err
	}
	var out bytes.Buffer
	if err := dccTemplate.Execute(&out, d); err != nil {
		return nil, err
	}
	return out.Bytes(), nil
}

func newDCC(m Material) (*dcc, error) {
	doc := m.Document
	b, lab := doc.Run.Burette, doc.Setting.Laboratory
	d := &dcc{
		Document: doc, Release: strings.TrimPrefix(doc.Setting.Software, "tenthmark "), Country: lab.Country,
		Begin: doc.Run.Opened.Format(time.DateOnly), End: doc.Run.Finished.Format(time.DateOnly), Issued: issued(doc),
		Item:       fmt.Sprintf("%s mL, subdivision %s mL, class %s, waiting time %d s, %s °C", b.CapacityML, b.SubdivisionML, b.Class, b.WaitS, b.ReferenceTempC),
		Laboratory: or(lab.Name), Address: or(strings.Join(lab.Address, ", ")), Customer: customer(b, lab), Method: or(doc.Setting.Method),
		Record: fmt.Sprintf("ledger events %d to %d, record SHA-256 %s", doc.Ledger.First, doc.Ledger.Last, doc.Ledger.RecordHash),
	}
	if d.Country == "" {
		d.Country = "ZZ" // the code that ISO 3166-1 leaves to users: not stated
	}
	for _, s := range doc.Signatures {
		d.MainSigner = s.Event
	}
	for _, e := range doc.Setting.Equipment {
		label := e.Serial
		if label == "" {
			label = or(e.Name)
		}
		d.Equipment = append(d.Equipment, dccEquipment{e, label})
	}
	if c := doc.Conformity; c != nil {
		d.Norm, d.Statement, d.Overall = fmt.Sprintf("%s, class %s", c.Standard, c.Class), c.Statement(), conformities[c.Verdict]
		d.Limit = strconv.FormatFloat(c.MPEML, 'f', -1, 64)
		verdicts := make([]string, len(c.Points))
		for i, p := range c.Points {
			verdicts[i] = conformities[p.Verdict]
		}
		d.Verdicts = strings.Join(verdicts, " ")
	}
	return d, d.fill(m)
}

// fill writes the lists. Value and volume are rounded alike, so that reading plus
// correction gives the volume to the printed digit.
func (d *dcc) fill(m Material) error {
	var readings, volumes, corrections, uncertainties, factors, covariance, temps []string
	for _, p := range m.Curve.Points {
		v, u, err := rounded(p.CorrectionML, p.ExpandedML)
		if err != nil {
			return err
		}
		correction := decimal.MustParse(v)
		reading, err := decimal.Parse(strconv.FormatFloat(p.ReadingML, 'f', -1, 64))
		if err != nil {
			return err
		}
		k, err := fixed(p.K, 3)
		if err != nil {
			return err
		}
		volume := reading.Sub(decimal.New(-correction.Unscaled(), correction.Decimals()))
		readings, volumes = append(readings, reading.String()), append(volumes, volume.String())
		corrections, uncertainties, factors = append(corrections, v), append(uncertainties, u), append(factors, k)
	}
	for _, row := range m.Curve.CovarianceML2 {
		for _, v := range row {
			covariance = append(covariance, strconv.FormatFloat(v, 'E', 6, 64))
		}
	}
	for _, one := range d.Deliveries {
		if !one.Void && one.Water != nil {
			temps = append(temps, one.Water.WaterTempC.String())
		}
	}
	d.Readings, d.Volumes, d.Corrections = strings.Join(readings, " "), strings.Join(volumes, " "), strings.Join(corrections, " ")
	d.Uncertainties, d.Factors, d.Covariance = strings.Join(uncertainties, " "), strings.Join(factors, " "), strings.Join(covariance, " ")
	d.WaterTemps = strings.Join(temps, " ")
	return nil
}

// check finds what the schema lets pass and should not: lists of unequal length, a
// missing uncertainty, dates out of order, readings that do not rise.
func (d *dcc) check(points int) error {
	for name, list := range map[string]struct {
		text string
		want int
	}{
		"readings": {d.Readings, points}, "volumes": {d.Volumes, points}, "corrections": {d.Corrections, points},
		"uncertainties": {d.Uncertainties, points}, "factors": {d.Factors, points}, "covariance": {d.Covariance, points * points},
	} {
		if got := len(strings.Fields(list.text)); got != list.want {
			return fmt.Errorf("certificate.xml: %d %s for %d points", got, name, points)
		}
	}
	last := math.Inf(-1)
	for _, text := range strings.Fields(d.Readings) {
		n, err := decimal.Parse(text)
		if err != nil || n.Float() <= last {
			return fmt.Errorf("certificate.xml: the readings %s do not rise", d.Readings)
		}
		last = n.Float()
	}
	switch {
	case d.Begin > d.End || d.End > d.Issued:
		return fmt.Errorf("certificate.xml: dates %s, %s, %s are out of order", d.Begin, d.End, d.Issued)
	case d.Conformity != nil && d.Overall == "":
		return fmt.Errorf("certificate.xml: the verdict %q has no word in the schema", d.Conformity.Verdict)
	}
	return nil
}
