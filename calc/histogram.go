package calc

import (
	"math"
	"sort"
)

// histogramBins makes a bin of a normal distribution some 0.001 standard deviations
// wide, far below what a million trials can tell.
const histogramBins = 1 << 14

// histogram counts values in narrow bins. Its counts do not depend on the order in
// which values arrive, and its memory does not grow with the trials.
type histogram struct {
	low, width float64
	counts     [histogramBins + 2]float64 // below, the bins, above; after accumulate: cumulated
}

// newHistogram places the bins around a centre.
func newHistogram(centre, halfWidth float64) *histogram {
	return &histogram{low: centre - halfWidth, width: 2 * halfWidth / histogramBins}
}

func (h *histogram) add(values []float64) {
	if h.width == 0 { // a constant
		h.counts[1] += float64(len(values))
		return
	}
	inverse := 1 / h.width
	for _, v := range values {
		bin := math.Floor((v-h.low)*inverse) + 1
		h.counts[int(min(max(bin, 0), histogramBins+1))]++
	}
}

// accumulate replaces the counts by the distribution function at the bins' upper ends.
func (h *histogram) accumulate() *histogram {
	sum := 0.0
	for i, c := range h.counts {
		sum += c
		h.counts[i] = sum
	}
	for i := range h.counts {
		h.counts[i] /= sum
	}
	return h
}

// quantile inverts the distribution function, linear inside a bin.
func (h *histogram) quantile(p float64) float64 {
	bin := sort.SearchFloat64s(h.counts[:], p)
	bin = min(max(bin, 1), histogramBins)
	below, up := h.counts[bin-1], h.counts[bin]
	share := 1.0
	if up > below {
		share = min(max((p-below)/(up-below), 0), 1)
	}
	return h.low + h.width*(float64(bin-1)+share)
}

// shortest gives the shortest interval that holds the probability p, JCGM 101 7.7.4,
// among a thousand lower ends.
func (h *histogram) shortest(p float64) CoverageInterval {
	const steps = 1000
	best := CoverageInterval{math.Inf(-1), math.Inf(1)}
	for i := 1; i < steps; i++ {
		a := (1 - p) * float64(i) / steps
		if c := (CoverageInterval{h.quantile(a), h.quantile(a + p)}); c.Up-c.Low < best.Up-best.Low {
			best = c
		}
	}
	return best
}

// sortedQuantile is the quantile of sorted values.
func sortedQuantile(sorted []float64, p float64) float64 {
	at := p*float64(len(sorted)) - 0.5
	k := min(max(int(at), 0), len(sorted)-2)
	share := min(max(at-float64(k), 0), 1)
	return sorted[k]*(1-share) + sorted[k+1]*share
}
