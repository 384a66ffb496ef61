package session

import (
	"tenthmark/calc"
	"tenthmark/calc/decimal"
)

// SchemaName names the form of Document; it changes when a field changes meaning.
const SchemaName = "tenthmark/run/1"

// Document is the whole run as other programs read it: the content of run.json.
// What was entered or captured stands in it as text, exactly as it came; what was
// computed stands in it as numbers.
type Document struct {
	Schema     string             `json:"schema"`
	Run        DocumentRun        `json:"run"`
	Setting    Setting            `json:"setting"`
	Plan       Plan               `json:"plan"`
	Inputs     calc.Inputs        `json:"inputs"`
	Ambient    []DocumentAmbient  `json:"ambient"`
	Deliveries []DocumentDelivery `json:"deliveries"`
	Curve      *calc.Curve        `json:"curve,omitempty"`
	Conformity *calc.Conformity   `json:"conformity,omitempty"`
	Changes    []Change           `json:"changes"`
	Seen       []DocumentSeen     `json:"seen"`
	Signatures []DocumentSigned   `json:"signatures"`
	Ledger     DocumentLedger     `json:"ledger"`
	Awaits     []Awaited          `json:"awaits,omitempty"`
	Prompt     string             `json:"prompt,omitempty"`
	Doubt      *Doubt             `json:"doubt,omitempty"`
}

// DocumentRun identifies the run.
type DocumentRun struct {
	ID           string   `json:"id"`
	State        State    `json:"state"`
	Burette      Burette  `json:"burette"`
	Station      string   `json:"station"`
	Balance      Identity `json:"balance"`
	Opened       Time     `json:"opened"`
	OpenedBy     string   `json:"opened_by"`
	Finished     Time     `json:"finished"`
	PerformedBy  string   `json:"performed_by,omitempty"`
	ReviewedBy   string   `json:"reviewed_by,omitempty"`
	Condition    string   `json:"condition,omitempty"`
	Supersedes   string   `json:"supersedes,omitempty"`
	SupersededBy string   `json:"superseded_by,omitempty"`
}

// DocumentAmbient is one state of the air.
type DocumentAmbient struct {
	Fact int64 `json:"fact"`
	AmbientBody
	At      Time     `json:"at"`
	By      string   `json:"by"`
	Amended []Change `json:"amended,omitempty"`
}

// DocumentWeighing is one taken weight.
type DocumentWeighing struct {
	Fact   int64          `json:"fact"`
	MassG  decimal.Number `json:"mass_g"`
	Raw    Raw            `json:"raw"`
	At     Time           `json:"at"`
	Seen   int64          `json:"seen,omitempty"`
	Reason string         `json:"reason,omitempty"`
	Trace  *Trace         `json:"trace,omitempty"`
}

// DocumentReading is one burette reading.
type DocumentReading struct {
	Fact      int64          `json:"fact"`
	ReadingML decimal.Number `json:"reading_mL"`
	At        Time           `json:"at"`
	By        string         `json:"by"`
	Amended   []Change       `json:"amended,omitempty"`
}

// DocumentWaterTemp is the water's temperature at a delivery.
type DocumentWaterTemp struct {
	Fact       int64          `json:"fact"`
	WaterTempC decimal.Number `json:"water_temp_C"`
	At         Time           `json:"at"`
	By         string         `json:"by"`
	Amended    []Change       `json:"amended,omitempty"`
}

// DocumentRef points to a fact that stands elsewhere in the document.
type DocumentRef struct {
	Fact int64 `json:"fact"`
}

// DocumentDelivery is one delivery with its facts and, once it is complete, its
// numbers. Facts that two deliveries share appear in both with the same number.
type DocumentDelivery struct {
	Delivery   int                `json:"delivery"`
	FromML     float64            `json:"from_mL"`
	PointML    float64            `json:"point_mL"`
	Replicate  int                `json:"replicate"`
	Replaces   int                `json:"replaces,omitempty"`
	Void       bool               `json:"void"`
	VoidReason string             `json:"void_reason,omitempty"`
	Before     *DocumentWeighing  `json:"before,omitempty"`
	After      *DocumentWeighing  `json:"after,omitempty"`
	Start      *DocumentReading   `json:"start_reading,omitempty"`
	End        *DocumentReading   `json:"end_reading,omitempty"`
	Water      *DocumentWaterTemp `json:"water_temp,omitempty"`
	Ambient    *DocumentRef       `json:"ambient,omitempty"`
	*DocumentNumbers
}

// DocumentNumbers is what is computed from one delivery.
type DocumentNumbers struct {
	NetMassG         float64 `json:"net_mass_g"`
	AirDensityKgM3   float64 `json:"air_density_kg_m3"`
	WaterDensityKgM3 float64 `json:"water_density_kg_m3"`
	VolumeML         float64 `json:"volume_mL"`
	Volume20ML       float64 `json:"volume_20C_mL"`
	CorrectionML     float64 `json:"correction_mL"`
}

// DocumentSeen is a weight that was recorded and not taken.
type DocumentSeen struct {
	Fact  int64          `json:"fact"`
	MassG decimal.Number `json:"mass_g"`
	Raw   Raw            `json:"raw"`
	At    Time           `json:"at"`
	Why   string         `json:"why"`
	Taken int64          `json:"taken,omitempty"`
}

// DocumentSigned is one signature.
type DocumentSigned struct {
	Event int64 `json:"event"`
	SignedBody
	At Time `json:"at"`
}

// DocumentLedger says where in the ledger the run stands.
type DocumentLedger struct {
	First      int64  `json:"first"`
	Last       int64  `json:"last"`
	RecordHash string `json:"record_sha256"`
	Checkpoint string `json:"checkpoint,omitempty"`
}

// Document gives the run as it stands. Curve and conformity are there as soon as
// the deliveries determine every point; while the run is open, what it waits for is
// there too.
func (r *Run) Document() Document {
	d := Document{
		Schema: SchemaName, Run: r.documentRun(), Setting: r.Opening.Setting, Plan: r.Opening.Plan, Inputs: r.Opening.Setting.Inputs,
		Ambient: []DocumentAmbient{}, Deliveries: []DocumentDelivery{}, Seen: []DocumentSeen{}, Signatures: []DocumentSigned{},
		Changes: append([]Change{}, r.Changes...),
		Ledger:  DocumentLedger{First: r.First, Last: r.Last, RecordHash: r.RecordHash()},
	}
	for _, a := range r.Ambients {
		d.Ambient = append(d.Ambient, DocumentAmbient{a.Fact, a.AmbientBody, a.At, a.By.Name(), a.Amended})
	}
	for _, delivery := range r.Deliveries {
		d.Deliveries = append(d.Deliveries, r.documentDelivery(delivery))
	}
	for _, s := range r.Seen {
		d.Seen = append(d.Seen, DocumentSeen{s.Fact, s.MassG, s.Raw, s.At, s.Why, s.Taken})
	}
	for _, s := range []*Signature{r.Performed, r.Trail, r.Review} {
		if s != nil {
			d.Signatures = append(d.Signatures, DocumentSigned{s.Event, s.SignedBody, s.At})
		}
	}
	d.addResult(r)
	d.addWaiting(r)
	return d
}

func (d *Document) addResult(r *Run) {
	curve, err := r.Curve()
	if err != nil {
		return
	}
	d.Curve = curve
	if conformity, err := r.Conformity(curve); err == nil {
		d.Conformity = &conformity
	}
}

func (d *Document) addWaiting(r *Run) {
	if r.State == Published || r.State == Abandoned {
		return
	}
	d.Awaits, d.Prompt = r.Awaits(), r.Prompt()
	if at := r.current(); at != nil && r.State == Open {
		d.Doubt = r.DoubtAbout(at)
	}
}

func (r *Run) documentRun() DocumentRun {
	run := DocumentRun{
		ID: r.ID, State: r.State, Burette: r.Opening.Burette, Station: r.Opening.Station, Balance: r.Identity,
		Opened: r.OpenedAt, OpenedBy: r.OpenedBy.Name(), Finished: r.FinishedAt,
		Condition: r.Opening.Condition, Supersedes: r.Opening.Supersedes, SupersededBy: r.SupersededBy,
	}
	if r.Performed != nil {
		run.PerformedBy = r.Performed.Name
	}
	if r.Review != nil {
		run.ReviewedBy = r.Review.Name
	}
	return run
}

func (r *Run) documentDelivery(d *Delivery) DocumentDelivery {
	out := DocumentDelivery{
		Delivery: d.Number, FromML: d.FromML.Float(), PointML: d.PointML.Float(), Replicate: d.Replicate, Replaces: d.Replaces,
		Void: d.Void != nil, Before: documentWeighing(r.BeforeOf(d)), After: documentWeighing(d.After),
		Start: documentReading(r.StartOf(d)), End: documentReading(d.End),
	}
	if d.Void != nil {
		out.VoidReason = d.Void.Reason
	}
	if w := d.Water; w != nil {
		out.Water = &DocumentWaterTemp{w.Fact, w.WaterTempC, w.At, w.By.Name(), w.Amended}
	}
	if !r.IsComplete(d) {
		return out
	}
	out.Ambient = &DocumentRef{r.AmbientOf(d).Fact}
	if v, err := r.Result(d); err == nil {
		out.DocumentNumbers = &DocumentNumbers{v.NetMassG, v.AirDensityKgM3, v.WaterDensityKgM3, v.VolumeML, v.Volume20ML, v.CorrectionML}
	}
	return out
}

func documentWeighing(w *Weighing) *DocumentWeighing {
	if w == nil {
		return nil
	}
	return &DocumentWeighing{w.Fact, w.MassG, w.Raw, w.At, w.WeighingBody.Seen, w.Reason, w.Trace}
}

func documentReading(f *Reading) *DocumentReading {
	if f == nil {
		return nil
	}
	return &DocumentReading{f.Fact, f.ReadingML, f.At, f.By.Name(), f.Amended}
}
