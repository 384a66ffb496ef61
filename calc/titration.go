package calc

import (
	"fmt"
	"math"
)

// normalPressureHPa is the pressure a titrant's density is taken at: 50 hPa change it
// by 2 parts in a million.
const normalPressureHPa = 1013.25

// Titration is one use of a burette.
type Titration struct {
	StartML    float64 // reading before, mL
	EndML      float64 // reading after, mL; not below StartML
	UReadingML float64 // standard uncertainty of each of the two settings, mL; 0: that of the calibration

	// UDeliveryML is what one delivery adds by drainage and the drop at the tip, mL.
	// Inputs.UDeliveryML is what the calibration took for it; 0 leaves it out.
	UDeliveryML float64

	HasTitrantTemp bool    // TitrantTempC was measured
	TitrantTempC   float64 // °C
	UTitrantTempC  float64 // standard uncertainty, °C; without a measured temperature, how far from the reference temperature it may be

	// ToReferenceTemp converts to the volume that the titrant has at the reference
	// temperature. For water and solutions that expand like it, up to about 0.1 mol/L.
	// When the titrant was standardised at the same temperature in the same burette
	// the effect cancels: leave it out.
	ToReferenceTemp bool
}

// TitrationResult is the corrected volume of a titration.
type TitrationResult struct {
	StartML      float64          `json:"start_mL"`
	EndML        float64          `json:"end_mL"`
	ApparentML   float64          `json:"apparent_mL"`   // end minus start
	CorrectionML float64          `json:"correction_mL"` // C(end) − C(start)
	TempFactor   float64          `json:"temp_factor"`   // 1 when nothing was converted
	VolumeML     float64          `json:"volume_mL"`     // (apparent + correction) × factor
	UML          float64          `json:"u_mL"`
	NuEff        DegreesOfFreedom `json:"nu_eff"`
	K            float64          `json:"k"`
	ExpandedML   float64          `json:"U_mL"`
	Basis        string           `json:"basis"` // what VolumeML is the volume of
}

// TitrantFactor gives the factor from a volume that the burette's scale shows,
// corrected, to the volume of the titrant at the reference temperature,
//
//	f = [1 + γ(t − tref)]·ρ(t)/ρ(tref)
//
// γ cubic expansion of the burette, ρ density of water, t temperature of titrant and
// glass, °C, and its relative slope d ln f/dt in 1/°C. The first factor is what the
// glass grew by, the second what the liquid shrinks by. t is 0 to 40 °C. The table of
// GB/T 601 gives the same with γ = 2.6·10⁻⁵/°C.
func TitrantFactor(in Inputs, tempC float64) (factor, slopePerC float64, err error) {
	if _, err := WaterDensity(in.WaterDensity, tempC, normalPressureHPa); err != nil {
		return 0, 0, fmt.Errorf("titrant: %w", err)
	}
	rhoRef, err := WaterDensity(in.WaterDensity, in.ReferenceTempC, normalPressureHPa)
	if err != nil {
		return 0, 0, fmt.Errorf("titrant, reference temperature: %w", err)
	}
	rho, byTempC, _ := waterFormulas[in.WaterDensity].density(tempC, normalPressureHPa)
	glass := 1 + in.ExpansionPerC*(tempC-in.ReferenceTempC)
	slopePerC = byTempC/rho + in.ExpansionPerC/glass
	return glass * rho / rhoRef, slopePerC, nil
}

// Titrate gives the volume delivered between two readings,
//
//	V = (b − a) + C(b) − C(a)
//
// at the burette's reference temperature, with
//
//	u² = u²(C(b) − C(a)) + 2·u²(reading) + u²(delivery) + u²(temperature)
//
// where the first term comes from the curve's covariance and the bridge between its
// points: what both corrections share nearly cancels, which u²(C(b)) + u²(C(a)) would
// miss. A reading outside the calibrated range is ErrOutsideCurve.
func Titrate(c *Curve, t Titration) (TitrationResult, error) {
	if !(t.StartML <= t.EndML) {
		return TitrationResult{}, &Refusal{
			"readings-fall", fmt.Sprintf("The end reading %g mL lies above the start reading %g mL on the scale.", t.EndML, t.StartML),
			"A burette is read downwards: the end reading is the larger one. A refill makes two titrations.",
		}
	}
	d, err := c.Between(t.StartML, t.EndML)
	if err != nil {
		return TitrationResult{}, fmt.Errorf("titration: %w", err)
	}
	r := TitrationResult{
		StartML: t.StartML, EndML: t.EndML, ApparentML: t.EndML - t.StartML, CorrectionML: d.CorrectionML, TempFactor: 1,
		Basis: fmt.Sprintf("what the burette delivers at %g °C", c.Inputs.ReferenceTempC),
	}
	scaleML := r.ApparentML + r.CorrectionML
	u2, err := t.temperature(c.Inputs, scaleML, &r)
	if err != nil {
		return TitrationResult{}, err
	}
	uReading := or(t.UReadingML, c.Inputs.UReadingML)
	r.VolumeML = scaleML * r.TempFactor
	f2 := r.TempFactor * r.TempFactor
	return r, r.expand(c, f2*d.UML*d.UML, float64(d.NuEff), u2+f2*(2*uReading*uReading+t.UDeliveryML*t.UDeliveryML))
}

// temperature fills the factor and the basis and gives u²(temperature), mL².
func (t Titration) temperature(in Inputs, scaleML float64, r *TitrationResult) (float64, error) {
	if !t.HasTitrantTemp && t.ToReferenceTemp {
		return 0, &Refusal{
			"titrant-temp-missing", "The titrant's temperature is missing.",
			"Enter it in °C, or ask for the volume without conversion.",
		}
	}
	if !(t.UTitrantTempC >= 0) || math.IsInf(t.UTitrantTempC, 1) {
		return 0, fmt.Errorf("titration: u of the titrant's temperature %g °C", t.UTitrantTempC)
	}
	if !t.HasTitrantTemp && t.UTitrantTempC == 0 {
		return 0, nil
	}
	tempC := in.ReferenceTempC
	if t.HasTitrantTemp {
		tempC = t.TitrantTempC
	}
	f, slope, err := TitrantFactor(in, tempC)
	if err != nil {
		return 0, fmt.Errorf("titration: %w", err)
	}
	if t.ToReferenceTemp {
		r.TempFactor = f
		r.Basis = fmt.Sprintf("the titrant at %g °C, delivered at %g °C, expanding like water", in.ReferenceTempC, tempC)
	}
	if t.HasTitrantTemp && !t.ToReferenceTemp {
		return 0, nil // the temperature is known and on purpose not applied
	}
	u := scaleML * r.TempFactor * slope * t.UTitrantTempC
	return u * u, nil
}

// expand adds a variance of infinite degrees of freedom to that of the curve.
func (r *TitrationResult) expand(c *Curve, variance, nu, more float64) error {
	total := variance + more
	r.UML, r.NuEff = math.Sqrt(total), DegreesOfFreedom(addedNu(variance, nu, more))
	var err error
	if r.K, err = c.factor(float64(r.NuEff)); err != nil {
		return fmt.Errorf("titration: %w", err)
	}
	r.ExpandedML = r.K * r.UML
	if math.IsNaN(r.VolumeML) || math.IsNaN(r.UML) {
		return fmt.Errorf("titration from %g to %g mL: the volume is no number", r.StartML, r.EndML)
	}
	return nil
}

// addedNu is Welch–Satterthwaite for a variance with nu degrees of freedom and one
// with infinitely many.
func addedNu(variance, nu, more float64) float64 {
	if math.IsInf(nu, 1) || variance == 0 {
		return math.Inf(1)
	}
	ratio := 1 + more/variance
	return nu * ratio * ratio
}

// Uncalibrated gives what is known of a titration from a burette that was never
// calibrated and only keeps its class: the volume as read, the class limit with a
// triangular distribution, MPE/√6, and the temperature as in Titrate (QUAM:2012, A2).
// It shows what a calibration is worth.
func Uncalibrated(in Inputs, mpe MPE, t Titration) (TitrationResult, error) {
	if !(t.StartML <= t.EndML) || !(mpe.LimitML > 0) {
		return TitrationResult{}, fmt.Errorf("titration from %g to %g mL with a limit of %g mL", t.StartML, t.EndML, mpe.LimitML)
	}
	r := TitrationResult{
		StartML: t.StartML, EndML: t.EndML, ApparentML: t.EndML - t.StartML, TempFactor: 1,
		Basis: fmt.Sprintf("as read, from a burette that keeps %s, class %s", mpe.Standard, mpe.Class),
	}
	u2, err := t.temperature(in, r.ApparentML, &r)
	if err != nil {
		return TitrationResult{}, err
	}
	r.VolumeML = r.ApparentML * r.TempFactor
	class := mpe.LimitML * r.TempFactor / math.Sqrt(6)
	return r, r.expand(&Curve{Inputs: in}, class*class, math.Inf(1), u2)
}
