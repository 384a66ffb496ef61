package protocol

import "bytes"

// report follows printed headers and footers, which begin and end with a line of
// dashes. They may be printed unasked, and lines like "Nom.   + 200.0000 g" stand in
// them: nothing inside is a weight.
//
// A header is dashes, text, dashes; results follow; a footer is dashes, text, dashes
// again. So every second line of dashes ends a block.
type report struct{ inside bool }

const fewestDashes = 8

func (r *report) watch(f *Frame, line []byte) {
	if isDashes(line) {
		r.inside = !r.inside
		f.InReport = true
		return
	}
	if r.inside {
		f.InReport, f.Plain = true, false
	}
}

func isDashes(line []byte) bool {
	trimmed := bytes.TrimSpace(line)
	if len(trimmed) < fewestDashes {
		return false
	}
	for _, c := range trimmed {
		if c != '-' {
			return false
		}
	}
	return true
}
