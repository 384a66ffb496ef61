package calc

import (
	"fmt"
	"sort"
)

// At gives the correction at a reading in mL, interpolated linearly, with the
// uncertainty of the interpolation. A reading outside the calibrated range is
// ErrOutsideCurve.
func (c *Curve) At(readingML float64) (Point, error) { return c.Between(c.FirstML, readingML) }

// Between gives C(b) − C(a), the correction of the volume delivered from reading a to
// reading b, with its uncertainty from the full covariance. ReadingML of the result
// is b. A reading outside the calibrated range is ErrOutsideCurve.
func (c *Curve) Between(aML, bML float64) (Point, error) {
	a, err := c.place(aML)
	if err != nil {
		return Point{}, err
	}
	b, err := c.place(bML)
	if err != nil {
		return Point{}, err
	}
	w := weightsOf(a, b)
	correctionML, variance, random := 0.0, 0.0, 0.0
	for _, x := range w {
		if x.weight == 0 {
			continue
		}
		correctionML += x.weight * c.Points[x.point].CorrectionML
		for _, y := range w {
			if y.weight != 0 {
				variance += x.weight * y.weight * c.CovarianceML2[x.point][y.point]
				random += x.weight * y.weight * c.RandomML2[x.point][y.point]
			}
		}
	}
	return c.expand(bML, correctionML, max(variance, 0), max(random, 0), c.bridge(a, b))
}

// spot is where a reading lies: in the interval that ends at a point, a share of the
// way through it.
type spot struct {
	point    int     // the right end; the left end is point − 1, or the first mark
	right    float64 // 0 to 1
	lengthML float64 // of the interval
}

func (c *Curve) place(readingML float64) (spot, error) {
	last := len(c.Points) - 1
	if last < 0 || !(readingML >= c.FirstML && readingML <= c.Points[last].ReadingML) {
		return spot{}, fmt.Errorf("the reading %g mL is %w", readingML, ErrOutsideCurve)
	}
	k := sort.Search(last, func(k int) bool { return readingML <= c.Points[k].ReadingML })
	left := c.FirstML
	if k > 0 {
		left = c.Points[k-1].ReadingML
	}
	length := c.Points[k].ReadingML - left
	return spot{k, (readingML - left) / length, length}, nil
}

// weight is the share of one point in an interpolated value.
type weight struct {
	point  int
	weight float64
}

// weightsOf gives the points' shares in C(b) − C(a); a point may occur twice.
func weightsOf(a, b spot) [4]weight {
	w := [4]weight{{b.point, b.right}, {b.point - 1, 1 - b.right}, {a.point, -a.right}, {a.point - 1, a.right - 1}}
	for i := range w {
		if w[i].point < 0 {
			w[i] = weight{} // the first mark, where the correction is 0 by definition
		}
	}
	return w
}

// bridge gives the variance, mL², that linear interpolation adds to C(b) − C(a).
// Between two knots the curve is a Brownian bridge, with covariance
// rate·(min − left)(right − max)/(right − left) inside one interval and none between
// two intervals.
func (c *Curve) bridge(a, b spot) float64 {
	own := func(s spot) float64 { return s.lengthML * s.right * (1 - s.right) }
	sum := own(a) + own(b)
	if a.point == b.point {
		low, up := min(a.right, b.right), max(a.right, b.right)
		sum -= 2 * a.lengthML * low * (1 - up)
	}
	return c.BridgeRateML2PerML * max(sum, 0)
}

// estimateBridge estimates the rate of the bridge's variance. A curve that wanders like
// Brownian motion has increments D of variance rate × h over a length h, so that
//
//	rate = ΣD²/Σh,  degrees of freedom (Σh)²/Σh²
//
// over the increments between neighbouring knots: for equal intervals the mean of D²/h
// with one degree of freedom each. Short intervals, whose D is mostly measurement noise,
// count little. The noise is left in: with few increments it cannot be told apart, and
// taking it off would make the term too small half of the time. From one or two
// increments no estimate is good: the interval between the points then holds the truth
// in some 90 % of cases (by simulation).
func (c *Curve) estimateBridge() {
	left, squares, length, lengthSquares := Point{ReadingML: c.FirstML}, 0.0, 0.0, 0.0
	for _, p := range c.Points {
		step, h := p.CorrectionML-left.CorrectionML, p.ReadingML-left.ReadingML
		squares += step * step
		length += h
		lengthSquares += h * h
		left = p
	}
	c.BridgeRateML2PerML = squares / length
	c.BridgeNu = DegreesOfFreedom(length * length / lengthSquares)
}
