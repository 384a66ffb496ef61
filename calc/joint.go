package calc

import (
	"fmt"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/stat/distuv"
)

// Sizes of the integration in spanProbability: rotations of one lattice, and its points.
const (
	spanRotations = 8
	spanLattice   = 1021
)

// spanProbability gives the probability that a curve keeps a limit everywhere at
// once: that max(0, C₁ … Cp) − min(0, C₁ … Cp) ≤ limit, C normal with the given mean
// and covariance (multivariate t with nu degrees of freedom when nu is finite). That
// one condition is the limit at every point and between any two.
//
// The conditions are integrated one after the other (the separation of variables of
// Genz, J. Comput. Graph. Stat. 1 (1992) 141–149): given C₁ … Ck−1 with running minimum
// lo and maximum hi, Ck must lie in [hi − limit, lo + limit], a normal probability.
// Points come from a rotated lattice with a fixed seed, so that the same curve always
// gives the same number; the second result is its standard error.
func spanProbability(mean []float64, covariance [][]float64, nu, limit float64) (p, stderr float64, err error) {
	l, err := choleskySemi(covariance)
	if err != nil {
		return 0, 0, err
	}
	s := spanIntegrand{mean: mean, l: l, limit: limit, nu: nu, z: make([]float64, len(mean)), w: make([]float64, len(mean)+1)}
	steps := latticeSteps(len(s.w))
	rng := rand.New(rand.NewPCG(106, 2012))
	sum, sumSq := 0.0, 0.0
	for range spanRotations {
		m := s.average(steps, rng)
		sum += m
		sumSq += m * m
	}
	p = sum / spanRotations
	variance := max(0, sumSq/spanRotations-p*p) / (spanRotations - 1)
	return min(p, 1), math.Sqrt(variance), nil
}

// latticeSteps are the fractional parts of the square roots of the primes
// (Richtmyer's lattice).
func latticeSteps(n int) []float64 {
	steps := make([]float64, 0, n)
	for candidate := 2; len(steps) < n; candidate++ {
		if isPrime(candidate) {
			_, f := math.Modf(math.Sqrt(float64(candidate)))
			steps = append(steps, f)
		}
	}
	return steps
}

func isPrime(n int) bool {
	for d := 2; d*d <= n; d++ {
		if n%d == 0 {
			return false
		}
	}
	return true
}

type spanIntegrand struct {
	mean      []float64
	l         [][]float64 // lower triangle of the covariance
	limit, nu float64
	z, w      []float64 // scratch: deviates, and the lattice point
}

// average is the integrand's mean over one rotation of the lattice.
func (s *spanIntegrand) average(steps []float64, rng *rand.Rand) float64 {
	shift := make([]float64, len(steps))
	for i := range shift {
		shift[i] = rng.Float64()
	}
	sum := 0.0
	for k := range spanLattice {
		for i, step := range steps {
			_, f := math.Modf(float64(k+1)*step + shift[i])
			s.w[i] = math.Abs(2*f - 1) // the baker's transform makes it periodic
		}
		sum += s.at()
	}
	return sum / spanLattice
}

// at is the probability of the chain of conditions at the lattice point w.
func (s *spanIntegrand) at() float64 {
	scale := 1.0
	last := len(s.w) - 1
	if !math.IsInf(s.nu, 1) {
		scale = math.Sqrt(s.nu / distuv.ChiSquared{K: s.nu}.Quantile(min(max(s.w[last], 1e-15), 1-1e-15)))
	}
	p, lo, hi := 1.0, 0.0, 0.0
	for k, m := range s.mean {
		for j := range k {
			m += scale * s.l[k][j] * s.z[j]
		}
		value, share := s.step(k, m, scale*s.l[k][k], hi-s.limit, lo+s.limit)
		if p *= share; p == 0 {
			return 0
		}
		lo, hi = min(lo, value), max(hi, value)
	}
	return p
}

// step draws value k, normal with mean m and deviation sd, from between low and up,
// and gives the probability of lying there.
func (s *spanIntegrand) step(k int, m, sd, low, up float64) (value, share float64) {
	if sd == 0 {
		s.z[k] = 0
		if m < low || m > up {
			return m, 0
		}
		return m, 1
	}
	a, b := (low-m)/sd, (up-m)/sd
	share = between(a, b, math.Inf(1))
	flip := a > 0 // work in the lower tail, where the digits are
	if flip {
		a, b = -b, -a
	}
	z := distuv.UnitNormal.Quantile(min(max(lowerTail(a, math.Inf(1))+s.w[k]*share, 0), 1))
	z = min(max(z, a), b)
	if flip {
		z = -z
	}
	s.z[k] = z
	return m + sd*z, share
}

// choleskySemi gives L with L·Lᵀ = m for a positive semidefinite m; a variance of 0
// gives a row of zeros. gonum's refuses semidefinite matrices.
func choleskySemi(m [][]float64) ([][]float64, error) {
	l := make([][]float64, len(m))
	for i := range m {
		l[i] = make([]float64, len(m))
		for j := range i + 1 {
			sum := m[i][j]
			for k := range j {
				sum -= l[i][k] * l[j][k]
			}
			switch {
			case i != j && l[j][j] > 0:
				l[i][j] = sum / l[j][j]
			case i == j && sum > 1e-14*m[i][i]:
				l[i][i] = math.Sqrt(sum)
			case i == j && !(sum >= -1e-9*m[i][i]):
				return nil, fmt.Errorf("the covariance of the curve is not positive at point %d", i+1)
			}
		}
	}
	return l, nil
}
