package calc

import (
	"errors"
	"fmt"
	"math"
	"sort"
)

// Certificate is what a calibration certificate says of a thermometer, barometer or
// hygrometer: the correction at some readings, with one standard uncertainty. The
// correction is true minus indicated and is added to the reading.
type Certificate struct {
	Points []CertificatePoint // rising; one is enough and then holds everywhere
	U      float64            // standard uncertainty of a corrected reading, drift included
}

// CertificatePoint is the correction at one reading, in the unit of the instrument.
type CertificatePoint struct{ Reading, Correction float64 }

// Correct adds the certificate's correction to a reading, interpolated linearly. A
// reading beyond the points of a certificate with several is an error, as is a
// certificate without points.
func (c Certificate) Correct(reading float64) (corrected, u float64, err error) {
	n := len(c.Points)
	switch {
	case n == 0 || !(c.U >= 0):
		return 0, 0, errors.New("correct reading: the certificate has no points or no uncertainty")
	case n == 1:
		return reading + c.Points[0].Correction, c.U, nil
	case !sort.SliceIsSorted(c.Points, func(i, j int) bool { return c.Points[i].Reading < c.Points[j].Reading }):
		return 0, 0, errors.New("correct reading: the points of the certificate do not rise")
	case !(reading >= c.Points[0].Reading && reading <= c.Points[n-1].Reading):
		return 0, 0, fmt.Errorf("correct reading: %g is beyond the certificate, %g to %g", reading, c.Points[0].Reading, c.Points[n-1].Reading)
	}
	k := sort.Search(n-1, func(k int) bool { return c.Points[k].Reading >= reading })
	k = max(k, 1)
	a, b := c.Points[k-1], c.Points[k]
	if a.Reading == b.Reading {
		return 0, 0, fmt.Errorf("correct reading: the certificate has two points at %g", a.Reading)
	}
	share := (reading - a.Reading) / (b.Reading - a.Reading)
	return reading + a.Correction*(1-share) + b.Correction*share, c.U, nil
}

// TracePoint is the balance's display some time before or after a weighing.
type TracePoint struct{ Seconds, MassG float64 }

// EvaporationRate gives the loss of an open vessel on the pan, g/s and positive when it
// gets lighter, with its standard uncertainty, from a straight line through the settle
// trace. At least three points at different times.
func EvaporationRate(trace []TracePoint) (rateGS, u float64, err error) {
	n := float64(len(trace))
	var meanS, meanG, ss, sg float64
	for _, p := range trace {
		meanS += p.Seconds / n
		meanG += p.MassG / n
	}
	for _, p := range trace {
		ss += (p.Seconds - meanS) * (p.Seconds - meanS)
		sg += (p.Seconds - meanS) * (p.MassG - meanG)
	}
	if len(trace) < 3 || !(ss > 0) {
		return 0, 0, fmt.Errorf("evaporation rate: %d points do not give a slope", len(trace))
	}
	slope, rest := sg/ss, 0.0
	for _, p := range trace {
		e := p.MassG - meanG - slope*(p.Seconds-meanS)
		rest += e * e
	}
	return -slope, math.Sqrt(rest / (n - 2) / ss), nil
}

// Evaporation gives what evaporated, g, at a rate in g/s over the time between the
// delivery and the weighing. It is added to the net mass. A time below 0, and a rate
// that is not a number, are errors; a slightly negative measured rate is kept, so that
// its noise averages out.
func Evaporation(rateGS, seconds float64) (float64, error) {
	if !(seconds >= 0) || math.IsNaN(rateGS) || math.IsInf(rateGS*seconds, 0) {
		return 0, fmt.Errorf("evaporation: a rate of %g g/s over %g s makes no sense", rateGS, seconds)
	}
	return rateGS * seconds, nil
}

// CycleEvaporation gives the evaporation of one delivery cycle, g, from a series of
// weighings of ISO 8655-6:2022, 9.1: the display at the start, after one cycle time
// without delivery, after the last delivery, and one cycle time later. (How the four
// combine is from memory.)
func CycleEvaporation(startG, afterCycleG, lastG, lastAfterCycleG float64) (float64, error) {
	loss := (startG - afterCycleG + lastG - lastAfterCycleG) / 2
	if math.IsNaN(loss) || math.IsInf(loss, 0) {
		return 0, errors.New("evaporation: a weighing is missing")
	}
	return loss, nil
}

// BuoyancyOfWeights gives the relative error of taking the adjustment weights'
// conventional density of 8000 kg/m³ for their real one: (ρa − 1.2)(1/ρreal − 1/8000).
// Densities in kg/m³. Source: OIML D 28 in the form of JCGM 101:2008, eq. (24).
func BuoyancyOfWeights(airKgM3, weightKgM3 float64) float64 {
	return (airKgM3 - 1.2) * (1/weightKgM3 - 1.0/8000)
}
