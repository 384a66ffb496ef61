package calc

import (
	"fmt"
	"math"
	"time"
)

// Calibration is one calibration in the history of a burette.
type Calibration struct {
	Label string // names it in messages
	At    time.Time
	Curve *Curve
}

// EnoughForDrift is from how many calibrations on a drift is worth acting on (common
// practice, no source). Three give a number, fewer none.
const EnoughForDrift = 4

// hoursPerYear is the mean year of the Gregorian calendar.
const hoursPerYear = 24 * 365.2425

// Drift is a straight line through the corrections that several calibrations gave for
// the volume between two readings: C = C(mean time) + slope·(t − mean time).
type Drift struct {
	FromML     float64          `json:"from_mL"`
	ToML       float64          `json:"to_mL"`
	N          int              `json:"calibrations"`
	PerYearML  float64          `json:"per_year_mL"`
	UPerYearML float64          `json:"u_per_year_mL"`
	Nu         DegreesOfFreedom `json:"nu"`
	K          float64          `json:"k"`
	ExpandedML float64          `json:"U_per_year_mL"`
	Drifts     bool             `json:"drifts"`   // the slope exceeds its U
	Reliable   bool             `json:"reliable"` // at least EnoughForDrift calibrations
	Birge      float64          `json:"birge"`    // 1: the calibrations scatter as their u says

	meanTime time.Time
	meanML   float64
	uMeanML  float64
	limits   float64 // coverage probability
}

// DriftOf fits the drift of the correction from reading a to reading b, weighted by the
// uncertainties of the calibrations. When they scatter about the line more than that
// (chi²/nu > 1, nu = N − 2), its uncertainty is scaled by the Birge ratio and k is from
// Student's t with nu degrees of freedom; otherwise k is from the normal distribution.
// At least three calibrations at different times are needed.
func DriftOf(history []Calibration, aML, bML float64) (Drift, error) {
	if len(history) < 3 {
		return Drift{}, &Refusal{
			"drift-too-few", fmt.Sprintf("%d calibrations do not show a drift.", len(history)),
			"Three give a first number, four or more one to act on.",
		}
	}
	line, err := weigh(history, aML, bML)
	if err != nil {
		return Drift{}, err
	}
	d := Drift{FromML: aML, ToML: bML, N: len(history), Reliable: len(history) >= EnoughForDrift, Birge: 1, Nu: DegreesOfFreedom(math.Inf(1))}
	if err := line.fit(&d, history[0].At); err != nil {
		return Drift{}, err
	}
	d.limits = history[len(history)-1].Curve.Inputs.CoverageProbability
	if d.K, err = CoverageFactor(d.limits, float64(d.Nu)); err != nil {
		return Drift{}, fmt.Errorf("drift: %w", err)
	}
	d.ExpandedML = d.K * d.UPerYearML
	d.Drifts = math.Abs(d.PerYearML) > d.ExpandedML
	return d, nil
}

// weighed are corrections with their times, years, and weights, 1/mL².
type weighed struct{ years, ml, w []float64 }

func weigh(history []Calibration, aML, bML float64) (weighed, error) {
	var l weighed
	for _, h := range history {
		p, err := h.Curve.Between(aML, bML)
		if err != nil {
			return weighed{}, fmt.Errorf("drift, calibration %s: %w", h.Label, err)
		}
		if !(p.UML > 0) {
			return weighed{}, fmt.Errorf("drift, calibration %s: u = %g mL at %g mL", h.Label, p.UML, bML)
		}
		l.years = append(l.years, h.At.Sub(history[0].At).Hours()/hoursPerYear)
		l.ml, l.w = append(l.ml, p.CorrectionML), append(l.w, 1/(p.UML*p.UML))
	}
	return l, nil
}

// fit is weighted least squares about the weighted mean time.
func (l weighed) fit(d *Drift, origin time.Time) error {
	sw, meanT, meanY := 0.0, 0.0, 0.0
	for i, w := range l.w {
		sw += w
		meanT += w * l.years[i]
		meanY += w * l.ml[i]
	}
	meanT, meanY = meanT/sw, meanY/sw
	sxx, sxy, chi2 := 0.0, 0.0, 0.0
	for i, w := range l.w {
		sxx += w * (l.years[i] - meanT) * (l.years[i] - meanT)
		sxy += w * (l.years[i] - meanT) * (l.ml[i] - meanY)
	}
	if !(sxx/sw > 1e-6) { // about 9 hours
		return &Refusal{"drift-one-time", "The calibrations are all from the same time.", "A drift needs calibrations some months apart."}
	}
	d.PerYearML = sxy / sxx
	for i, w := range l.w {
		rest := l.ml[i] - meanY - d.PerYearML*(l.years[i]-meanT)
		chi2 += w * rest * rest
	}
	nu := float64(len(l.w) - 2)
	if chi2 > nu {
		d.Birge, d.Nu = math.Sqrt(chi2/nu), DegreesOfFreedom(nu)
	}
	d.UPerYearML = d.Birge / math.Sqrt(sxx)
	d.meanTime = origin.Add(time.Duration(meanT * hoursPerYear * float64(time.Hour)))
	d.meanML, d.uMeanML = meanY, d.Birge/math.Sqrt(sw)
	return nil
}

// AtTime gives the correction that the line foretells, mL, with its standard
// uncertainty.
func (d Drift) AtTime(t time.Time) (correctionML, uML float64) {
	years := t.Sub(d.meanTime).Hours() / hoursPerYear
	return d.meanML + d.PerYearML*years, math.Hypot(d.uMeanML, d.UPerYearML*years)
}

// Words says what is known of the drift.
func (d Drift) Words() string {
	s := fmt.Sprintf("From %g to %g mL: %+.4f mL a year, U = %.4f mL a year, from %d calibrations.", d.FromML, d.ToML, d.PerYearML, d.ExpandedML, d.N)
	switch {
	case !d.Reliable:
		return s + fmt.Sprintf(" That is a first number: act on it from %d calibrations on.", EnoughForDrift)
	case d.Drifts:
		return s + " It drifts."
	}
	return s + " No drift is seen."
}
