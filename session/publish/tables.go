package publish

import (
	"bytes"
	"encoding/csv"
	"strconv"
	"strings"

	"tenthmark/calc/decimal"
)

// table collects rows of an RFC 4180 table: commas, CR LF, a header with units, and
// always a decimal point.
type table struct {
	rows [][]string
	err  error
}

func newTable(header ...string) *table { return &table{rows: [][]string{header}} }

func (t *table) add(cells ...string) { t.rows = append(t.rows, cells) }

// number prints a computed value with a fixed number of decimals.
func (t *table) number(x float64, decimals int) string {
	s, err := fixed(x, decimals)
	if err != nil && t.err == nil {
		t.err = err
	}
	return s
}

func (t *table) bytes() ([]byte, error) {
	if t.err != nil {
		return nil, t.err
	}
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	w.UseCRLF = true
	if err := w.WriteAll(t.rows); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}

// plain keeps a spreadsheet from taking a text for a formula.
func plain(text string) string {
	if text != "" && strings.ContainsRune("=+-@\t\r", rune(text[0])) {
		return "'" + text
	}
	return text
}

// Decimals of computed columns: one more than an instrument resolves, so that a reader
// can round.
const (
	volumeDecimals  = 5
	densityDecimals = 5
	massDecimals    = 4
)

func deliveriesCSV(m Material) ([]byte, error) {
	t := newTable("delivery", "point_mL", "replicate", "void", "void_reason", "start_reading_mL", "end_reading_mL", "before_g", "after_g",
		"net_mass_g", "water_temp_C", "air_density_kg_m3", "water_density_kg_m3", "volume_mL", "volume_20C_mL", "correction_mL")
	for _, d := range m.Document.Deliveries {
		row := []string{
			strconv.Itoa(d.Delivery), strconv.FormatFloat(d.PointML, 'f', -1, 64), strconv.Itoa(d.Replicate), strconv.FormatBool(d.Void), plain(d.VoidReason),
			"", "", "", "", "", "", "", "", "", "", "",
		}
		if d.Start != nil {
			row[5] = d.Start.ReadingML.String()
		}
		if d.End != nil {
			row[6] = d.End.ReadingML.String()
		}
		if d.Before != nil {
			row[7] = d.Before.MassG.String()
		}
		if d.After != nil {
			row[8] = d.After.MassG.String()
		}
		if d.Water != nil {
			row[10] = d.Water.WaterTempC.String()
		}
		if n := d.DocumentNumbers; n != nil {
			row[9] = t.number(n.NetMassG, massDecimals)
			row[11], row[12] = t.number(n.AirDensityKgM3, densityDecimals), t.number(n.WaterDensityKgM3, densityDecimals)
			row[13], row[14], row[15] = t.number(n.VolumeML, volumeDecimals), t.number(n.Volume20ML, volumeDecimals), t.number(n.CorrectionML, volumeDecimals)
		}
		t.add(row...)
	}
	return t.bytes()
}

func curveCSV(m Material) ([]byte, error) {
	t := newTable("reading_mL", "correction_mL", "error_of_indication_mL", "u_mL", "nu_eff", "k", "U_mL")
	for _, p := range m.Curve.Points {
		nu := "infinite"
		if v := float64(p.NuEff); v < 1e6 {
			nu = t.number(v, 1)
		}
		t.add(strconv.FormatFloat(p.ReadingML, 'f', -1, 64), t.number(p.CorrectionML, volumeDecimals), t.number(-p.CorrectionML, volumeDecimals),
			t.number(p.UML, volumeDecimals), nu, t.number(p.K, 2), t.number(p.ExpandedML, volumeDecimals))
	}
	return t.bytes()
}

// lookupCSV has the correction at every line of the scale within the calibrated range.
func lookupCSV(m Material) ([]byte, error) {
	t := newTable("reading_mL", "correction_mL", "U_mL")
	step := m.Document.Run.Burette.SubdivisionML.Number
	last := m.Curve.Points[len(m.Curve.Points)-1].ReadingML
	for i := int64(0); ; i++ {
		reading := decimal.New(i*step.Unscaled(), step.Decimals())
		if reading.Float() > last {
			return t.bytes()
		}
		p, err := m.Curve.At(reading.Float())
		if err != nil {
			return nil, err
		}
		t.add(reading.String(), t.number(p.CorrectionML, volumeDecimals), t.number(p.ExpandedML, volumeDecimals))
	}
}
