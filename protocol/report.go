package protocol

import "bytes"

// report follows printed reports. A header comes before the first result and a footer
// after the last; both begin and end with a line of dashes, and both may come unasked,
// after an adjustment, in the middle of weighing:
//
//	-------------------       header opens
//	14.01.2011    09:43
//	Type           ABCD
//	Ser.no.    12345678
//	-------------------       header closes
//	Nom.   +  200.0000 g      results: weights by their codes
//	-------------------       footer opens
//	14.01.2011    09:45
//	Name:
//
//	-------------------       footer closes
//
// Nothing between an opening and a closing line of dashes is a weight. Usually every
// second line of dashes closes. But a line can get lost, or listening can begin in the
// middle, and then the count would be wrong for ever. Therefore the content counts too:
//
//   - a date or a header's label right after dashes: a block is open;
//   - a text and then a blank line before dashes: a footer closes;
//   - a text before the first dashes after Resync: that block was joined in its middle
//     and closes;
//   - ten plain weights in a row, no other text among them: no report prints that, so
//     the closing dashes were lost. The tenth counts again.
//
// A caller that knows of a long silence can end a block with EndReport.
type report struct {
	inside bool
	joined bool // nothing is known of what came before
	dashes bool // the line before was dashes
	plain  int  // plain weights in a row inside a block

	before, twoBefore Kind
}

const (
	fewestDashes = 8
	plainInARow  = 10
)

// EndReport says that no report is being printed: after a silence of several seconds,
// because a balance prints its reports in one go.
func (d *Decoder) EndReport() { d.report.inside = false }

// watch marks the frame when it belongs to a report.
func (r *report) watch(f *Frame) {
	kind := f.Kind
	switch {
	case kind != Weight && isDashes(f.line):
		r.turn()
		f.InReport = true
	case r.inside || r.dashes:
		r.content(f)
	}
	r.twoBefore, r.before = r.before, kind
}

// turn opens or closes a block at a line of dashes.
func (r *report) turn() {
	footerEnds := r.before == Blank && r.twoBefore == Text
	joinedEnds := r.joined && r.before == Text
	r.inside = !r.inside && !footerEnds && !joinedEnds
	r.joined, r.dashes, r.plain = false, true, 0
}

func (r *report) content(f *Frame) {
	first := r.dashes
	r.dashes = false
	if first && f.Kind == Text && opensReport(f.line) {
		r.inside = true
	}
	if !r.inside {
		return
	}
	switch {
	case f.Plain:
		r.plain++
	case f.Kind == Text || f.Kind == Weight:
		r.plain = 0
	}
	if r.plain >= plainInARow {
		r.inside, r.plain = false, 0
		return
	}
	f.InReport, f.Plain = true, false
	if f.Kind == Weight || f.Damage == Misaligned { // a report has columns of its own
		f.Kind, f.Damage = Text, NoDamage
		f.noNumber()
	}
}

// opensReport: a date, or a label of the first lines of a header.
func opensReport(line []byte) bool {
	line = bytes.TrimSpace(line)
	for _, label := range [...]string{"Type", "Mod", "Ser", "Vers", "BVers", "Date"} {
		if bytes.HasPrefix(line, []byte(label)) {
			return true
		}
	}
	digits, marks := 0, 0
	for _, c := range line[:min(10, len(line))] {
		switch {
		case isDigit(c):
			digits++
		case c == '.' || c == '-' || c == '/':
			marks++
		}
	}
	return marks == 2 && digits >= 6 && isDigit(line[0]) // 14.01.2011, 2011-01-14, 1/14/2011
}

func isDashes(line []byte) bool {
	dashes := 0
	for _, c := range line {
		if c == '-' {
			dashes++
		} else if c != ' ' {
			return false
		}
	}
	return dashes >= fewestDashes
}
