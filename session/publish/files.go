// Package publish makes the documents of a finished run and puts them into the drop:
// whole, once, and only when everything is durable.
//
// The documents are functions of the run's record alone: built again they say the same
// (the PDF's bytes differ, because its library orders the embedded fonts anew each
// time). The package decides nothing about the run and, but for the simulation in
// uncertainty.txt, computes nothing: it rounds, draws and writes.
package publish

import (
	"encoding/json"
	"fmt"

	"tenthmark/calc"
	"tenthmark/session"
)

// Material is what the documents of a run are made from.
type Material struct {
	Document   session.Document
	Curve      *calc.Curve
	Deliveries []calc.Delivery // those that entered the curve
	Paper      string          // A4 or Letter
	Logo       []byte          // PNG, may be empty
}

// document names a file and how it is made.
type document struct {
	name string
	make func(Material) ([]byte, error)
}

// documents is every file of a run's folder but the list of hashes and the evidence,
// which holds the event that names the hashes of these.
var documents = []document{
	{"run.json", runJSON},
	{"deliveries.csv", deliveriesCSV},
	{"curve.csv", curveCSV},
	{"lookup.csv", lookupCSV},
	{"curve.svg", curveSVG},
	{"certificate.pdf", certificatePDF},
	{"certificate.html", certificateHTML},
	{"certificate.xml", certificateXML},
	{"worksheet.txt", worksheetText},
	{"uncertainty.txt", uncertaintyText},
}

// Files makes all documents of a run.
func Files(m Material) ([]File, error) {
	files := make([]File, 0, len(documents))
	for _, d := range documents {
		b, err := d.make(m)
		if err != nil {
			return nil, fmt.Errorf("make %s of run %s: %w", d.name, m.Document.Run.ID, err)
		}
		files = append(files, File{d.name, b})
	}
	return files, nil
}

// Evidence gives the files that show where in the ledger the run stands: its events as
// stored, and their proofs.
func Evidence(eventsJSONL, proofJSON []byte) []File {
	return []File{{"events.jsonl", eventsJSONL}, {"proof.json", proofJSON}}
}

func runJSON(m Material) ([]byte, error) {
	b, err := json.MarshalIndent(m.Document, "", "  ")
	if err != nil {
		return nil, err
	}
	return append(b, '\n'), nil
}

// worksheetText is the hand calculation, for a reviewer with a pocket calculator.
func worksheetText(m Material) ([]byte, error) {
	sheet, err := calc.NewWorksheet(m.Document.Inputs, m.Curve, m.Deliveries)
	if err != nil {
		return nil, err
	}
	return []byte(sheet.Text()), nil
}
