package session

import (
	"fmt"
	"regexp"
	"strings"

	"tenthmark/calc"
	"tenthmark/calc/decimal"
)

// Amount is an exact decimal that travels as a bare JSON number: what is known of
// a thing (a capacity, a subdivision), as against what was read off an instrument,
// which travels as text.
type Amount struct{ decimal.Number }

// MarshalJSON writes the digits as a JSON number, an absent amount as null.
func (a Amount) MarshalJSON() ([]byte, error) {
	if !a.IsSet() {
		return []byte("null"), nil
	}
	return []byte(decimal.New(a.Unscaled(), a.Decimals()).String()), nil
}

// Burette is one entry of the register: what is engraved on the glass and what
// the laboratory adds.
type Burette struct {
	Name           string `json:"burette"` // the laboratory's own number, unique for ever
	CapacityML     Amount `json:"capacity_mL"`
	SubdivisionML  Amount `json:"subdivision_mL"`
	Class          string `json:"class"`                     // as engraved: A, AS or B
	Standard       string `json:"standard,omitempty"`        // the standard its limits come from
	Material       string `json:"material,omitempty"`        // names the glass, see calc's table of expansion
	ExpansionPerC  Amount `json:"expansion_per_C,omitzero"`  // cubic expansion, if known better than by material
	ReferenceTempC Amount `json:"reference_temp_C"`          // 20, or 27 where a country chose it
	SerialNumber   string `json:"serial_number,omitempty"`   // the maker's
	Maker          string `json:"maker,omitempty"`           //
	Stopcock       string `json:"stopcock,omitempty"`        // glass or PTFE
	Location       string `json:"location,omitempty"`        //
	WaitS          int    `json:"wait_s"`                    // waiting time before reading, seconds
	IntervalMonths int    `json:"interval_months,omitempty"` // of recalibration; 0: none agreed
	Owner          string `json:"owner,omitempty"`           // the customer, if not the laboratory
	Retired        bool   `json:"retired,omitempty"`         // out of service, never deleted
}

var nameForm = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9._-]{0,31}$`)

// CheckName says whether a name may stand for a burette, a station or an operator:
// 1 to 32 letters, digits, points, hyphens and underscores, so that it can also be
// part of a file name.
func CheckName(what, name string) error {
	if nameForm.MatchString(name) && !strings.Contains(name, "..") {
		return nil
	}
	return Refuse("bad-name", fmt.Sprintf("The %s name %q cannot be used.", what, name),
		"Use 1 to 32 letters, digits, points, hyphens or underscores, beginning with a letter or digit.")
}

func knownGlass(material string) bool {
	_, err := calc.ExpansionPerC(material)
	return err == nil
}

// inputs gives the inputs of a run with what the burette adds: its reference
// temperature and its glass.
func (b Burette) inputs(in calc.Inputs) calc.Inputs {
	in.ReferenceTempC = b.ReferenceTempC.Float()
	if b.ExpansionPerC.IsSet() {
		in.ExpansionPerC = b.ExpansionPerC.Float()
	} else if e, err := calc.ExpansionPerC(b.Material); err == nil {
		in.ExpansionPerC = e
	}
	return in
}

// withDefaults fills in what a burette has when nothing else is said.
func (b Burette) withDefaults() Burette {
	if !b.ReferenceTempC.IsSet() {
		b.ReferenceTempC = Amount{decimal.MustParse("20")}
	}
	if b.Material == "" {
		b.Material = "borosilicate-3.3"
	}
	if b.Standard == "" {
		b.Standard = "ISO 385:2005"
	}
	return b
}

// Check says what is wrong with a register entry, as a Fault.
func (b Burette) Check() error {
	if err := CheckName("burette", b.Name); err != nil {
		return err
	}
	bad := func(message, hint string) error {
		return Refuse("bad-burette", fmt.Sprintf("Burette %s: %s", b.Name, message), hint)
	}
	switch {
	case !b.CapacityML.IsSet() || b.CapacityML.Unscaled() <= 0 || b.CapacityML.Float() > 1000:
		return bad("the nominal capacity is missing or not between 0 and 1000 mL.", "Enter capacity_mL as engraved, for example 50.")
	case !b.SubdivisionML.IsSet() || b.SubdivisionML.Unscaled() <= 0 || b.SubdivisionML.Cmp(b.CapacityML.Number) >= 0:
		return bad("the subdivision is missing or not smaller than the capacity.", "Enter subdivision_mL, the step between two lines, for example 0.1.")
	case b.Class != "A" && b.Class != "AS" && b.Class != "B":
		return bad(fmt.Sprintf("the class %q is none of A, AS and B.", b.Class), "Enter the class as engraved. A burette without a class mark counts as class B.")
	case b.ReferenceTempC.IsSet() && (b.ReferenceTempC.Float() < 15 || b.ReferenceTempC.Float() > 30):
		return bad("the reference temperature is not between 15 and 30 °C.", "Enter reference_temp_C as engraved: 20, or 27.")
	case !b.ExpansionPerC.IsSet() && !knownGlass(b.Material):
		return bad(fmt.Sprintf("the expansion of the glass %q is not known.", b.Material), "Use borosilicate-3.3, borosilicate-5.0, soda-lime or fused-silica, or enter expansion_per_C.")
	case b.WaitS < 0 || b.WaitS > 3600 || b.IntervalMonths < 0 || b.IntervalMonths > 240:
		return bad("waiting time or interval is out of range.", "wait_s is 0 to 3600 seconds, interval_months 0 to 240.")
	}
	return nil
}
