package session

import (
	"fmt"

	"tenthmark/calc/decimal"
)

// amendable is a fact that was entered by a person and can be corrected. What the
// balance sent is not among them: a weight is never typed over.
type amendable interface {
	value(field string) (decimal.Number, error)
	check(r *Run, field string, v decimal.Number) error
	amend(Change) error
}

// fact finds an amendable fact by its number.
func (r *Run) fact(number int64) amendable {
	for _, a := range r.Ambients {
		if a.Fact == number {
			return a
		}
	}
	for _, d := range r.Deliveries {
		for _, reading := range []*Reading{d.Start, d.End} {
			if reading != nil && reading.Fact == number {
				return reading
			}
		}
		if d.Water != nil && d.Water.Fact == number {
			return d.Water
		}
	}
	return nil
}

// isWeight says whether a fact is a weight of this run, taken or seen.
func (r *Run) isWeight(number int64) bool {
	for _, s := range r.Seen {
		if s.Fact == number {
			return true
		}
	}
	for _, d := range r.Deliveries {
		for _, w := range []*Weighing{d.Before, d.After} {
			if w != nil && w.Fact == number {
				return true
			}
		}
	}
	return false
}

var errField = fmt.Errorf("this fact has no such field")

func (f *Reading) value(field string) (decimal.Number, error) {
	if field != "" && field != "reading_mL" {
		return decimal.Number{}, errField
	}
	return f.ReadingML, nil
}

func (f *Reading) check(r *Run, _ string, v decimal.Number) error { return r.checkReadingAs(f, v) }

func (f *Reading) amend(c Change) error {
	f.ReadingML, f.Amended = c.Value, append(f.Amended, c)
	return nil
}

func (f *WaterTemp) value(field string) (decimal.Number, error) {
	if field != "" && field != "water_temp_C" {
		return decimal.Number{}, errField
	}
	return f.WaterTempC, nil
}

func (f *WaterTemp) check(_ *Run, _ string, v decimal.Number) error { return checkWaterTemp(v) }

func (f *WaterTemp) amend(c Change) error {
	f.WaterTempC, f.Amended = c.Value, append(f.Amended, c)
	return nil
}

func (f *Ambient) field(name string) (*decimal.Number, error) {
	switch name {
	case "air_temp_C":
		return &f.AirTempC, nil
	case "pressure_hPa":
		return &f.PressureHPa, nil
	case "humidity_pct":
		return &f.HumidityPct, nil
	}
	return nil, errField
}

func (f *Ambient) value(field string) (decimal.Number, error) {
	v, err := f.field(field)
	if err != nil {
		return decimal.Number{}, err
	}
	return *v, nil
}

func (f *Ambient) check(_ *Run, field string, v decimal.Number) error {
	changed := f.AmbientBody
	copied := Ambient{AmbientBody: changed}
	at, err := copied.field(field)
	if err != nil {
		return err
	}
	*at = v
	return checkAmbient(copied.AmbientBody)
}

func (f *Ambient) amend(c Change) error {
	v, err := f.field(c.Field)
	if err != nil {
		return err
	}
	*v, f.Amended = c.Value, append(f.Amended, c)
	return nil
}
