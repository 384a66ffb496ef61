package acquire

import (
	"tenthmark/acquire/settle"
	"tenthmark/protocol"
)

// sampleOf says what a line means for settling. Some lines mean nothing: texts, as the
// date that some balances print before each value, and numbers with a code of their
// own, as the content of a tare memory.
func sampleOf(f *protocol.Frame) (s settle.Sample, means bool) {
	switch {
	case f.InReport:
		return settle.Sample{Kind: settle.Disturbed}, true
	case f.Kind == protocol.Weight && f.Plain:
		return settle.Sample{Kind: settle.Weight, MassG: f.MassG(), Unit: f.Unit, Stable: f.Stable, Raw: f.Raw}, true
	case f.Kind == protocol.Text, f.Kind == protocol.Weight && !isDisplay(f.ID), f.Kind == protocol.Status && f.Condition == protocol.Final:
		return settle.Sample{}, false
	case f.Kind == protocol.Blank:
		return settle.Sample{Kind: settle.Blank}, true
	case f.Kind == protocol.Status && (f.Condition == protocol.Overload || f.Condition == protocol.Underload):
		return settle.Sample{Kind: settle.Beyond}, true
	}
	return settle.Sample{Kind: settle.Disturbed}, true
}

// isDisplay says whether a line with this code shows what the display shows.
func isDisplay(id string) bool {
	switch id {
	case "", "N", "N1", "G#":
		return true
	}
	return false
}

func valueText(f *protocol.Frame) string {
	if f.Kind != protocol.Weight || f.InReport {
		return ""
	}
	return f.Value().String()
}

func statusText(f *protocol.Frame) string {
	switch {
	case f.InReport:
		return "report"
	case f.Kind == protocol.Status && f.Condition != protocol.Final:
		return f.Condition.String()
	case f.Kind == protocol.Blank:
		return "blank"
	case f.Kind == protocol.Error:
		return "error " + f.Code
	}
	return ""
}
