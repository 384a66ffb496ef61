package publish

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"tenthmark/calc"
	"tenthmark/session"
)

// Shelved is one published run that was read back from a drop.
type Shelved struct {
	Folder   string // its folder's name in the drop
	Document session.Document
}

// unaltered is how far a stored number may lie from the one that its own facts give,
// as a share of its size (of 1 mL for corrections).
const unaltered = 1e-9

// ReadShelf reads the published runs of a drop, in order of the burette's name and of
// the moment they were finished. burette, when given, leaves out the folders whose name
// does not hold it. Folders that are no runs are passed over; a run that cannot be read
// is an error, because a missing calibration would put an older one in force.
func ReadShelf(root, burette string) ([]Shelved, error) {
	entries, err := os.ReadDir(root)
	if err != nil {
		return nil, &session.Fault{
			Code: "drop-unreadable", Message: fmt.Sprintf("The drop folder %s cannot be read.", root),
			Hint: "Give the folder that finished runs appear in with --drop, or the configuration with -c.", Err: err,
		}
	}
	var all []Shelved
	for _, e := range entries {
		if strings.HasPrefix(e.Name(), ".") || !strings.Contains(e.Name(), burette) {
			continue
		}
		d, err := ReadRun(filepath.Join(root, e.Name()))
		if errors.Is(err, fs.ErrNotExist) || errors.Is(err, errNoFolder) {
			continue
		} else if err != nil {
			return nil, err
		}
		if d.Run.State == session.Published && d.Curve != nil && (burette == "" || d.Run.Burette.Name == burette) {
			all = append(all, Shelved{e.Name(), d})
		}
	}
	slices.SortStableFunc(all, func(a, b Shelved) int {
		if c := strings.Compare(a.Document.Run.Burette.Name, b.Document.Run.Burette.Name); c != 0 {
			return c
		}
		return a.Document.Run.Finished.Compare(b.Document.Run.Finished.Time)
	})
	return all, nil
}

var errNoFolder = errors.New("no folder")

// ReadRun reads the run.json of a run's folder. If the folder lists its hashes, the
// file must fit the list.
func ReadRun(folder string) (session.Document, error) {
	if info, err := os.Stat(folder); err != nil || !info.IsDir() {
		return session.Document{}, errors.Join(err, errNoFolder)
	}
	file := filepath.Join(folder, "run.json")
	d, text, err := readRunFile(file)
	if err != nil {
		return session.Document{}, err
	}
	list, err := os.ReadFile(filepath.Join(folder, sumsName))
	if errors.Is(err, fs.ErrNotExist) {
		return d, nil
	}
	if err == nil && !bytes.Contains(list, []byte(File{"run.json", text}.Sum()+"  run.json\n")) {
		err = altered(file, "its hash is not the one in "+sumsName)
	}
	return d, err
}

// ReadRunFile reads a run.json that stands alone.
func ReadRunFile(file string) (session.Document, error) {
	d, _, err := readRunFile(file)
	return d, err
}

func readRunFile(file string) (session.Document, []byte, error) {
	text, err := os.ReadFile(file)
	if err != nil {
		return session.Document{}, nil, fmt.Errorf("read run: %w", err)
	}
	var d session.Document
	if err := json.Unmarshal(text, &d); err != nil {
		return session.Document{}, nil, fmt.Errorf("read run %s: %w", file, err)
	}
	if d.Schema != session.SchemaName {
		return session.Document{}, nil, fmt.Errorf("read run %s: its form is %q, not %q", file, d.Schema, session.SchemaName)
	}
	d.Seen = nil // not needed to use a curve, and most of the bytes
	return d, text, nil
}

func altered(what, why string) error {
	return &session.Fault{
		Code: "run-altered", Message: fmt.Sprintf("%s was altered: %s.", what, why),
		Hint: "Fetch the run's folder from where it was published, and check it with `sha256sum -c SHA256SUMS`. A run of another version of the program may calculate otherwise.",
	}
}

// Refit fits the curve of a document to its deliveries again and gives it. It is a
// Fault when the stored curve is another one.
func Refit(d session.Document) (*calc.Curve, error) {
	ds, points, err := documentDeliveries(d)
	if err != nil {
		return nil, err
	}
	name := "Run " + d.Run.ID
	if d.Curve == nil || d.Curve.Inputs != d.Inputs {
		return nil, altered(name, "its curve and its inputs do not belong together")
	}
	curve, err := calc.FitCurve(d.Inputs, points, ds)
	if err != nil {
		return nil, fmt.Errorf("fit the curve of run %s again: %w", d.Run.ID, err)
	}
	if what := curveDifference(d.Curve, curve); what != "" {
		return nil, altered(name, what+" does not follow from its deliveries")
	}
	return curve, nil
}

// documentDeliveries gives the deliveries that entered a document's curve and the
// knots of the curve.
func documentDeliveries(d session.Document) ([]calc.Delivery, []float64, error) {
	points := make([]float64, len(d.Plan.PointsML))
	for i, p := range d.Plan.PointsML {
		points[i] = p.Float()
	}
	air := map[int64]session.DocumentAmbient{}
	for _, a := range d.Ambient {
		air[a.Fact] = a
	}
	var ds []calc.Delivery
	for _, row := range d.Deliveries {
		if row.Void {
			continue
		}
		if row.End != nil && len(points) > 0 {
			points[len(points)-1] = max(points[len(points)-1], row.End.ReadingML.Float())
		}
		if row.DocumentNumbers == nil {
			continue
		}
		if row.Before == nil || row.After == nil || row.Start == nil || row.End == nil || row.Water == nil || row.Ambient == nil {
			return nil, nil, altered("Run "+d.Run.ID, fmt.Sprintf("delivery %d lacks a fact", row.Delivery))
		}
		ds = append(ds, calcDelivery(row, air[row.Ambient.Fact]))
	}
	return ds, points, nil
}

func calcDelivery(d session.DocumentDelivery, a session.DocumentAmbient) calc.Delivery {
	return calc.Delivery{
		Delivery: d.Delivery, PointML: d.PointML, Replicate: d.Replicate,
		Before:  calc.Weighing{Fact: d.Before.Fact, MassG: d.Before.MassG.Float()},
		After:   calc.Weighing{Fact: d.After.Fact, MassG: d.After.MassG.Float()},
		Start:   calc.Reading{Fact: d.Start.Fact, ReadingML: d.Start.ReadingML.Float()},
		End:     calc.Reading{Fact: d.End.Fact, ReadingML: d.End.ReadingML.Float()},
		Water:   calc.WaterTemp{Fact: d.Water.Fact, WaterTempC: d.Water.WaterTempC.Float()},
		Ambient: calc.Ambient{Fact: a.Fact, AirTempC: a.AirTempC.Float(), PressureHPa: a.PressureHPa.Float(), HumidityPct: a.HumidityPct.Float()},
	}
}

// curveDifference names the first thing in which two curves differ, "" when they do not.
func curveDifference(stored, again *calc.Curve) string {
	if len(stored.Points) != len(again.Points) {
		return "the number of points"
	}
	if stored.Nu != again.Nu || far(stored.FirstML, again.FirstML) || far(stored.Chi2, again.Chi2) || far(stored.Birge, again.Birge) {
		return "the scatter"
	}
	if apart(stored.BridgeRateML2PerML, again.BridgeRateML2PerML, again.BridgeRateML2PerML) || far(float64(stored.BridgeNu), float64(again.BridgeNu)) {
		return "the uncertainty between the points"
	}
	for i, p := range stored.Points {
		q := again.Points[i]
		if far(p.ReadingML, q.ReadingML) || far(p.CorrectionML, q.CorrectionML) || far(p.UML, q.UML) || far(p.K, q.K) || far(p.ExpandedML, q.ExpandedML) {
			return fmt.Sprintf("the point at %g mL", q.ReadingML)
		}
		for j := range stored.Points {
			scale := q.UML * again.Points[j].UML
			if apart(stored.CovarianceML2[i][j], again.CovarianceML2[i][j], scale) || apart(stored.RandomML2[i][j], again.RandomML2[i][j], scale) {
				return "the covariance"
			}
		}
	}
	return ""
}

func far(a, b float64) bool {
	if math.IsInf(a, 1) && math.IsInf(b, 1) {
		return false
	}
	return apart(a, b, max(1, math.Abs(b)))
}

// apart says whether a and b differ by more than rounding of numbers of this size.
func apart(a, b, scale float64) bool { return !(math.Abs(a-b) <= unaltered*scale) }
