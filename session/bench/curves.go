package bench

import (
	"context"
	"errors"
	"fmt"
	"net/http"
	"sync"
	"time"

	"tenthmark/calc"
	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// curveAnswer is the curve that was in force on a day.
type curveAnswer struct {
	Burette      string           `json:"burette"`
	At           session.Time     `json:"at"`  // the moment that was asked about
	Run          string           `json:"run"` // that the curve comes from
	Finished     session.Time     `json:"finished"`
	SupersededBy string           `json:"superseded_by,omitempty"`
	Curve        *calc.Curve      `json:"curve"`
	Conformity   *calc.Conformity `json:"conformity,omitempty"`
}

// curveShelf keeps the curves of published runs, which do not change any more.
type curveShelf struct {
	mu   sync.Mutex // guards kept; not held while a curve is computed
	kept map[string]*session.Document
}

const shelfSize = 200

func newCurveShelf() *curveShelf { return &curveShelf{kept: map[string]*session.Document{}} }

func (s *curveShelf) get(run string) *session.Document {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.kept[run]
}

func (s *curveShelf) put(run string, d *session.Document) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if len(s.kept) >= shelfSize {
		clear(s.kept)
	}
	s.kept[run] = d
}

// at reads a day (its end counts, at the bench) or a moment; empty is now.
func (b *Bench) at(text string) (time.Time, error) {
	if text == "" {
		return b.Now(), nil
	}
	if day, err := time.ParseInLocation(time.DateOnly, text, b.Zone); err == nil {
		return day.AddDate(0, 0, 1).Add(-time.Millisecond), nil
	}
	if moment, err := time.Parse(time.RFC3339, text); err == nil {
		return moment, nil
	}
	return time.Time{}, session.Refuse("bad-time", fmt.Sprintf("%q is no day and no moment.", text), "Use a day like 2026-12-01, or a moment like 2026-12-01T09:30:00Z.")
}

func (b *Bench) curve(c *call) error {
	at, err := b.at(c.URL.Query().Get("at"))
	if err != nil {
		return err
	}
	answer, err := b.curveInForce(c.Context(), c.PathValue("burette"), at)
	if err != nil {
		return err
	}
	return c.reply(http.StatusOK, answer)
}

func (b *Bench) curveInForce(ctx context.Context, burette string, at time.Time) (*curveAnswer, error) {
	answer := &curveAnswer{Burette: burette, At: session.At(at)}
	err := b.view(ctx, func(book *session.Book) error {
		s, err := book.CurveInForce(burette, at)
		if err != nil {
			return err
		}
		answer.Run, answer.Finished, answer.SupersededBy = s.ID, s.FinishedAt, s.SupersededBy
		return nil
	})
	if err != nil {
		return nil, err
	}
	d := b.curves.get(answer.Run)
	if d == nil {
		d = &session.Document{}
		if err := b.Desk.ViewRun(ctx, answer.Run, func(r *session.Run) error { *d = r.Document(); return nil }); err != nil {
			return nil, err
		}
		b.curves.put(answer.Run, d)
	}
	if d.Curve == nil {
		return nil, fmt.Errorf("published run %s gives no curve", answer.Run)
	}
	answer.Curve, answer.Conformity = d.Curve, d.Conformity
	return answer, nil
}

// titrationsRequest is a table of titrations.
type titrationsRequest struct {
	Rows            []titrationRow `json:"rows"`
	ToReferenceTemp bool           `json:"to_reference_temp"` // convert to the titrant's volume at the burette's reference temperature
	UReadingML      decimal.Number `json:"u_reading_mL"`      // of each reading; left out: that of the calibration
	UTempC          decimal.Number `json:"u_temp_C"`
}

type titrationRow struct {
	Start decimal.Number `json:"start"`
	End   decimal.Number `json:"end"`
	TempC decimal.Number `json:"temp_C"`
	At    string         `json:"at"` // day or moment of the titration; left out: now
}

// titrationAnswer is one corrected row, or why it could not be corrected.
type titrationAnswer struct {
	Row int    `json:"row"` // from 1
	Run string `json:"run,omitempty"`
	*calc.TitrationResult
	Problem *problem `json:"problem,omitempty"`
}

const maxRows = 20_000

func (b *Bench) titrations(c *call) error {
	q, err := read[titrationsRequest](c, maxTable)
	if err != nil {
		return err
	}
	if len(q.Rows) == 0 || len(q.Rows) > maxRows {
		return session.Refuse("bad-table", fmt.Sprintf("The table has %d rows.", len(q.Rows)), fmt.Sprintf("Send 1 to %d rows; for more, use tenthmark correct.", maxRows))
	}
	burette := c.PathValue("burette")
	if err := b.mustKnow(c.Context(), burette); err != nil {
		return err
	}
	curves := map[string]*curveAnswer{}
	rows := make([]titrationAnswer, len(q.Rows))
	for i, row := range q.Rows {
		rows[i] = b.titration(c.Context(), burette, curves, q, row)
		rows[i].Row = i + 1
	}
	return c.reply(http.StatusOK, map[string]any{"burette": burette, "rows": rows})
}

func (b *Bench) mustKnow(ctx context.Context, burette string) error {
	return b.view(ctx, func(book *session.Book) error {
		_, err := book.CurveInForce(burette, b.Now())
		if session.FaultCode(err) == "unknown-burette" {
			return err
		}
		return nil
	})
}

// titration corrects one row. A row that cannot be corrected says why and does not
// stop the others.
func (b *Bench) titration(ctx context.Context, burette string, curves map[string]*curveAnswer, q titrationsRequest, row titrationRow) titrationAnswer {
	answer, err := b.curveFor(ctx, burette, curves, row.At)
	if err == nil {
		var result calc.TitrationResult
		if result, err = row.titrate(answer.Curve, q); err == nil {
			return titrationAnswer{Run: answer.Run, TitrationResult: &result}
		}
	}
	p := describe(err)
	p.Reference = ""
	return titrationAnswer{Problem: &p}
}

func (b *Bench) curveFor(ctx context.Context, burette string, curves map[string]*curveAnswer, text string) (*curveAnswer, error) {
	if known := curves[text]; known != nil {
		return known, nil
	}
	at, err := b.at(text)
	if err != nil {
		return nil, err
	}
	answer, err := b.curveInForce(ctx, burette, at)
	if err == nil {
		curves[text] = answer
	}
	return answer, err
}

func (row titrationRow) titrate(curve *calc.Curve, q titrationsRequest) (calc.TitrationResult, error) {
	if !row.Start.IsSet() || !row.End.IsSet() {
		return calc.TitrationResult{}, session.Refuse("reading-missing", "A reading is missing.", "Give start and end in mL.")
	}
	t := calc.Titration{StartML: row.Start.Float(), EndML: row.End.Float(), ToReferenceTemp: q.ToReferenceTemp}
	if row.TempC.IsSet() {
		t.HasTitrantTemp, t.TitrantTempC = true, row.TempC.Float()
	}
	if q.UReadingML.IsSet() {
		t.UReadingML = q.UReadingML.Float()
	}
	if q.UTempC.IsSet() {
		t.UTitrantTempC = q.UTempC.Float()
	}
	result, err := calc.Titrate(curve, t)
	return result, asTitrationFault(err, curve)
}

// asTitrationFault puts the causes that a row can have into the analyst's words.
func asTitrationFault(err error, curve *calc.Curve) error {
	var outside *calc.OutsideRange
	switch {
	case errors.Is(err, calc.ErrOutsideCurve):
		last := curve.Points[len(curve.Points)-1].ReadingML
		return session.Refuse("reading-outside-curve", fmt.Sprintf("A reading lies outside the calibrated range, %g to %g mL.", curve.FirstML, last), "A correction is never extrapolated: read within the range, or calibrate further.")
	case errors.As(err, &outside):
		return session.Refuse("temp-out-of-range", "The temperature lies outside the range of the formula: "+outside.Error()+".", "Give the titrant's temperature in °C.")
	}
	return err
}
