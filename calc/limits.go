package calc

import (
	"fmt"
	"slices"
	"sort"
	"strings"
)

// DefaultStandard is the standard whose limits count when none is named.
const DefaultStandard = "ISO 385:2005"

// MPE is the maximum permissible error of a burette: a limit on the error at every
// reading and on the difference between the errors of any two readings.
type MPE struct {
	LimitML       float64     `json:"mpe_mL"`         // ± mL
	Class         string      `json:"class"`          // A, AS or B
	CapacityML    float64     `json:"capacity_mL"`    // nominal capacity, mL
	SubdivisionML float64     `json:"subdivision_mL"` // mL; 0: the limit does not depend on it
	Standard      string      `json:"standard"`       // with its edition
	Status        LimitStatus `json:"status"`
	WaitS         int         `json:"wait_s"`         // waiting time that belongs to the class, s
	Note          string      `json:"note,omitempty"` // what a certificate should add
}

// LimitStatus says how far a limit in the table was checked against the standard.
type LimitStatus string

// How far a limit was checked. None of the standards' own texts was at hand.
const (
	LimitRead       LimitStatus = "read in an official document"
	LimitSecondhand LimitStatus = "read in a second source that names the standard"
	LimitMemory     LimitStatus = "unverified, from memory"
	LimitEntered    LimitStatus = "entered by the laboratory"
)

// Refusal is an answer that an operator can act on: a code for programs, a message
// in their words, and what to do next.
type Refusal struct{ Code, Message, Hint string }

func (r *Refusal) Error() string { return r.Code + ": " + r.Message }

// EnteredLimit is a limit that the laboratory takes from a document of its own.
func EnteredLimit(document, class string, capacityML, subdivisionML, limitML float64) (MPE, error) {
	if !(limitML > 0 && limitML < capacityML) {
		return MPE{}, &Refusal{
			"limit-unusable",
			fmt.Sprintf("A limit of %g mL makes no sense for a burette of %g mL.", limitML, capacityML),
			"Enter the maximum permissible error in mL, above zero.",
		}
	}
	return MPE{
		LimitML: limitML, Class: class, CapacityML: capacityML, SubdivisionML: subdivisionML,
		Standard: document, Status: LimitEntered,
	}, nil
}

// Standards gives the names that Limit knows, sorted.
func Standards() []string {
	names := make([]string, 0, len(standards))
	for name := range standards {
		names = append(names, name)
	}
	sort.Strings(names)
	return names
}

// Limits gives every limit of one standard, by class and rising capacity.
func Limits(standard string) ([]MPE, error) {
	s, err := findStandard(standard)
	if err != nil {
		return nil, err
	}
	var all []MPE
	for _, class := range s.classes {
		for _, row := range s.rows {
			all = append(all, s.mpe(row, class))
		}
	}
	return all, nil
}

// Limit gives the maximum permissible error of a burette by its standard ("" for
// DefaultStandard), class (A, AS or B as on the glass), nominal capacity and
// subdivision in mL. Where a standard lists one capacity with two subdivisions, both
// count. The subdivision may be 0 (not known) where it changes nothing.
func Limit(standard, class string, capacityML, subdivisionML float64) (MPE, error) {
	s, err := findStandard(standard)
	if err != nil {
		return MPE{}, err
	}
	if err := s.checkClass(class); err != nil {
		return MPE{}, err
	}
	rows := s.capacity(capacityML)
	if len(rows) == 0 {
		return s.unlisted(class, capacityML)
	}
	row, err := s.subdivided(rows, subdivisionML)
	if err != nil {
		return MPE{}, err
	}
	return s.mpe(row, class), nil
}

func findStandard(name string) (standardLimits, error) {
	if name == "" {
		name = DefaultStandard
	}
	s, ok := standards[name]
	if !ok {
		return standardLimits{}, &Refusal{
			"standard-unknown",
			fmt.Sprintf("There is no table of limits for %q.", name),
			"Known are " + strings.Join(Standards(), ", ") + ". For another document, enter its limit in mL.",
		}
	}
	s.name = name
	return s, nil
}

func (s standardLimits) checkClass(class string) error {
	if slices.Contains(s.classes, class) {
		return nil
	}
	if class == "" {
		return &Refusal{
			"class-missing", "The burette has no class.",
			"Look for A, AS or B on the glass. No class mark means class B.",
		}
	}
	return &Refusal{
		"class-unknown",
		fmt.Sprintf("%s has no class %q.", s.name, class),
		"Its classes are " + strings.Join(s.classes, ", ") + ".",
	}
}

// capacity gives the rows of one capacity, by subdivision.
func (s standardLimits) capacity(capacityML float64) []limitRow {
	var rows []limitRow
	for _, row := range s.rows {
		if sameML(row.capacityML, capacityML) {
			rows = append(rows, row)
		}
	}
	return rows
}

func (s standardLimits) subdivided(rows []limitRow, subdivisionML float64) (limitRow, error) {
	for _, row := range rows {
		if row.subdivisionML == 0 || sameML(row.subdivisionML, subdivisionML) {
			return row, nil
		}
	}
	if subdivisionML == 0 && len(rows) == 1 {
		return rows[0], nil
	}
	var listed []string
	for _, row := range rows {
		listed = append(listed, fmt.Sprintf("%g", row.subdivisionML))
	}
	message := fmt.Sprintf("%s has no limit for %g mL with a subdivision of %g mL.", s.name, rows[0].capacityML, subdivisionML)
	if subdivisionML == 0 {
		message = fmt.Sprintf("The limit for %g mL depends on the subdivision, which is missing.", rows[0].capacityML)
	}
	return limitRow{}, &Refusal{
		"subdivision-unlisted", message,
		"Listed are " + strings.Join(listed, " and ") + " mL. Check the burette's entry, or enter a limit of your own.",
	}
}

// unlisted is for a capacity that the table does not have: an error, but for a
// standard that gives a rule for it.
func (s standardLimits) unlisted(class string, capacityML float64) (MPE, error) {
	below := -1
	var listed []string
	for i, row := range s.rows {
		if row.capacityML < capacityML {
			below = i
		}
		if text := fmt.Sprintf("%g", row.capacityML); !slices.Contains(listed, text) {
			listed = append(listed, text)
		}
	}
	if s.nextSmaller && below >= 0 {
		m := s.mpe(s.rows[below], class)
		m.Note = fmt.Sprintf("%g mL is not listed: the limit of the next smaller size, %g mL, counts (%s, 1.1.3)", capacityML, m.CapacityML, s.name)
		m.CapacityML = capacityML
		return m, nil
	}
	return MPE{}, &Refusal{
		"capacity-unlisted",
		fmt.Sprintf("%s has no limit for a burette of %g mL.", s.name, capacityML),
		"Listed are " + strings.Join(listed, ", ") + " mL. Check the capacity, choose another standard, or enter a limit of your own.",
	}
}

func (s standardLimits) mpe(row limitRow, class string) MPE {
	limit := row.classAML
	if class == "B" {
		limit = row.classBML
	}
	return MPE{
		LimitML: limit, Class: class, CapacityML: row.capacityML, SubdivisionML: row.subdivisionML,
		Standard: s.name, Status: s.status, WaitS: s.waitS[class], Note: s.note,
	}
}

// sameML compares two volumes from data, equal to a nanolitre.
func sameML(a, b float64) bool { return a-b < 1e-6 && b-a < 1e-6 }
