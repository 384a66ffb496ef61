package virtual

// stability is the balance's own idea of rest: the value stays within some digits for
// some time. A hand at work starts it anew, as a real balance notices a step.
type stability struct {
	widthG, neededS   float64
	values            []float64
	ages              []float64
	sinceS            float64
	lowG, highG, atS  float64
	flickerAllowanceG float64
}

func newStability(opt Options) *stability {
	s := &stability{widthG: float64(opt.StableDigits) * opt.ReadabilityG, neededS: opt.StableS}
	// A cell with much noise is set to a wider stability by whoever installs it.
	s.flickerAllowanceG = 6 * opt.NoiseG
	return s
}

func (s *stability) disturb() { s.values, s.ages = s.values[:0], s.ages[:0] }

// add takes one value and drops what is older than the needed time.
func (s *stability) add(value, dtS float64) {
	s.atS += dtS
	s.values, s.ages = append(s.values, value), append(s.ages, s.atS)
	old := 0
	for old < len(s.ages) && s.atS-s.ages[old] > s.neededS+1e-9 {
		old++
	}
	s.sinceS = s.atS - s.ages[min(old, len(s.ages)-1)]
	s.values = append(s.values[:0], s.values[old:]...)
	s.ages = append(s.ages[:0], s.ages[old:]...)
}

// stable says whether the values of the needed time lie close together.
func (s *stability) stable() bool {
	if len(s.values) < 2 || s.sinceS < 0.9*s.neededS {
		return false
	}
	s.lowG, s.highG = s.values[0], s.values[0]
	for _, v := range s.values {
		s.lowG, s.highG = min(s.lowG, v), max(s.highG, v)
	}
	return s.highG-s.lowG <= s.widthG+s.flickerAllowanceG
}
