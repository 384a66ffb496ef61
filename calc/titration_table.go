package calc

import (
	"fmt"
	"math"
)

// CorrectionTable is a curve made ready for many titrations: each costs a table
// look-up and some forty multiplications, and no memory. It gives what Titrate gives.
// It may be used from several goroutines at once.
type CorrectionTable struct {
	in         Inputs
	knotML     []float64 // the first mark and the points
	correction []float64
	spread     []spread  // covariance between knots, row by row
	bridge     []float64 // rate × length of the segment after each knot, mL²
	bridgeNu   float64
	randomNu   float64 // degrees of freedom of the random part; infinite when it was not scaled
	first      []int   // by bucket: the segment its left end lies in
	perML      float64 // buckets per mL
	factors    *factorTable
}

// spread is the covariance of two knots and the part of it that has few degrees of
// freedom, mL².
type spread struct{ whole, random float64 }

// Corrected is one row's result.
type Corrected struct {
	VolumeML   float64
	UML        float64
	NuEff      float64
	K          float64
	ExpandedML float64
}

// Table prepares a curve for many titrations.
func (c *Curve) Table() (*CorrectionTable, error) {
	n := len(c.Points) + 1
	t := &CorrectionTable{
		in: c.Inputs, knotML: append([]float64{c.FirstML}, c.readingsML()...), correction: make([]float64, n),
		spread: make([]spread, n*n), bridge: make([]float64, n), bridgeNu: float64(c.BridgeNu), randomNu: math.Inf(1),
		factors: &factorTable{p: c.Inputs.CoverageProbability},
	}
	if n < 2 {
		return nil, fmt.Errorf("correction table: the curve has no points")
	}
	if c.Birge > 1 {
		t.randomNu = float64(c.Nu)
	}
	for i, p := range c.Points {
		t.correction[i+1] = p.CorrectionML
		t.bridge[i] = c.BridgeRateML2PerML * (p.ReadingML - t.knotML[i])
		for j := range c.Points {
			t.spread[(i+1)*n+j+1] = spread{c.CovarianceML2[i][j], c.RandomML2[i][j]}
		}
	}
	t.fillBuckets()
	return t, checkFactor(t.factors.p, math.Inf(1))
}

func (t *CorrectionTable) fillBuckets() {
	n := len(t.knotML)
	count := 8 * n
	t.perML = float64(count) / (t.knotML[n-1] - t.knotML[0])
	t.first = make([]int, count+1)
	seg := 0
	for b := range t.first {
		left := t.knotML[0] + (float64(b)-1e-6)/t.perML
		for seg < n-2 && t.knotML[seg+1] < left {
			seg++
		}
		t.first[b] = seg
	}
}

// Correct gives volume and standard uncertainty, mL, of a titration from reading a to
// reading b with the calibration's reading uncertainty, as Titrate does.
func (t *CorrectionTable) Correct(aML, bML float64) (volumeML, uML float64, err error) {
	variance, _, volume, err := t.between(aML, bML)
	if err != nil {
		return 0, 0, err
	}
	return volume, math.Sqrt(variance + 2*t.in.UReadingML*t.in.UReadingML), nil
}

// Expand gives volume, u, k and U of a titration whose reading uncertainty is given
// (0: that of the calibration).
func (t *CorrectionTable) Expand(aML, bML, uReadingML float64) (Corrected, error) {
	variance, nu, volume, err := t.between(aML, bML)
	if err != nil {
		return Corrected{}, err
	}
	u := or(uReadingML, t.in.UReadingML)
	return t.corrected(volume, variance, nu, 2*u*u)
}

// ExpandAt is Expand with the volume converted to the reference temperature for a
// titrant at tempC that expands like water, as Titrate does with ToReferenceTemp.
func (t *CorrectionTable) ExpandAt(aML, bML, uReadingML, tempC, uTempC float64) (Corrected, error) {
	variance, nu, volume, err := t.between(aML, bML)
	if err != nil {
		return Corrected{}, err
	}
	f, slope, err := TitrantFactor(t.in, tempC)
	if err != nil {
		return Corrected{}, err
	}
	u, uTemp := or(uReadingML, t.in.UReadingML), volume*f*slope*uTempC
	return t.corrected(volume*f, variance*f*f, nu, 2*u*u*f*f+uTemp*uTemp)
}

func (t *CorrectionTable) corrected(volume, variance, nu, more float64) (Corrected, error) {
	r := Corrected{VolumeML: volume, UML: math.Sqrt(variance + more), NuEff: addedNu(variance, nu, more)}
	var err error
	if r.K, err = t.factors.factor(r.NuEff); err != nil {
		return Corrected{}, err
	}
	r.ExpandedML = r.K * r.UML
	return r, nil
}

// between gives variance and degrees of freedom of C(b) − C(a), and the volume.
func (t *CorrectionTable) between(a, b float64) (variance, nu, volume float64, err error) {
	last := t.knotML[len(t.knotML)-1]
	if !(a >= t.knotML[0] && a <= b && b <= last) {
		return 0, 0, 0, t.refuse(a, b)
	}
	i, s := t.locate(a)
	j, r := t.locate(b)
	n := len(t.knotML)
	volume = b - a + (1-r)*t.correction[j] + r*t.correction[j+1] - (1-s)*t.correction[i] - s*t.correction[i+1]
	whole, random := t.quadratic(n, i, s, j, r)
	bridge := t.bridge[i]*s*(1-s) + t.bridge[j]*r*(1-r)
	if i == j {
		bridge = t.bridge[i] * (s*(1-s) + r*(1-r) - 2*min(s, r)*(1-max(s, r)))
	}
	whole, bridge = max(whole, 0), max(bridge, 0)
	variance = whole + bridge
	sum := bridge*bridge/t.bridgeNu + random*random/t.randomNu
	if sum == 0 {
		return variance, math.Inf(1), volume, nil
	}
	return variance, variance * variance / sum, volume, nil
}

// locate gives the knot left of v and the share of the way to the next.
func (t *CorrectionTable) locate(v float64) (int, float64) {
	k := t.first[int((v-t.knotML[0])*t.perML)]
	for v > t.knotML[k+1] {
		k++
	}
	return k, (v - t.knotML[k]) / (t.knotML[k+1] - t.knotML[k])
}

// quadratic is wᵀ·Σ·w for the weights 1−r, r at j, j+1 less 1−s, s at i, i+1.
func (t *CorrectionTable) quadratic(n, i int, s float64, j int, r float64) (whole, random float64) {
	at := [4]int{i, i + 1, j, j + 1}
	w := [4]float64{s - 1, -s, 1 - r, r}
	for x := range at {
		row := t.spread[at[x]*n : at[x]*n+n]
		for y := range x {
			v, f := row[at[y]], 2*w[x]*w[y]
			whole += f * v.whole
			random += f * v.random
		}
		v, f := row[at[x]], w[x]*w[x]
		whole += f * v.whole
		random += f * v.random
	}
	return whole, random
}

func (t *CorrectionTable) refuse(a, b float64) error {
	if a > b {
		return fmt.Errorf("titration from %g to %g mL: the end reading is the smaller one", a, b)
	}
	return fmt.Errorf("titration from %g to %g mL: %w, %g to %g mL", a, b, ErrOutsideCurve, t.knotML[0], t.knotML[len(t.knotML)-1])
}
