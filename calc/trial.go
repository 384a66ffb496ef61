package calc

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"sync"

	"gonum.org/v1/gonum/mat"
)

// Trial evaluates a measurement model once: it draws every input from rng and writes
// the outputs to y.
type Trial func(rng *rand.Rand, y []float64)

// Simulation is how a propagation of distributions (JCGM 101:2008) is run.
type Simulation struct {
	Trials      int     // 0: adaptive, JCGM 101 7.9, until the results are stable
	MaxTrials   int     // bound of the adaptive run; 0: 10,000,000
	Seed        uint64  // the same seed gives the same result, with any number of workers
	Workers     int     // 0: one for each processor
	Probability float64 // of the coverage intervals
	Tolerance   float64 // adaptive: fraction of the numerical tolerance to reach; 0: 1
}

// CoverageInterval holds an output with the probability asked for.
type CoverageInterval struct {
	Low float64 `json:"low"`
	Up  float64 `json:"up"`
}

// Outcome is the result of a simulation, by output.
type Outcome struct {
	Trials     int
	Stable     bool // adaptive: the criterion was reached
	Mean, U    []float64
	Covariance [][]float64
	Symmetric  []CoverageInterval // the same probability on both sides
	Shortest   []CoverageInterval
	UEnd       []float64 // statistical uncertainty of the ends of Symmetric, from the blocks
}

// blockTrials is the number of trials in a block, JCGM 101 7.9.4 b. A block has a
// random stream of its own, so that it does not matter who works on it.
const blockTrials = 10_000

// Simulate propagates distributions through a model with a number of outputs. Each
// worker calls newTrial once and uses the Trial alone. The number of trials is rounded
// up to whole blocks of 10,000. An output that is not finite is an error, and so is a
// cancelled context.
func Simulate(ctx context.Context, outputs int, newTrial func() Trial, s Simulation) (*Outcome, error) {
	if outputs < 1 || s.Trials < 0 || !(s.Probability > 0 && s.Probability < 1) || !(100/(1-s.Probability) <= blockTrials) {
		return nil, fmt.Errorf("simulate: %d outputs, %d trials and a probability of %g cannot be simulated", outputs, s.Trials, s.Probability)
	}
	if s.MaxTrials == 0 {
		s.MaxTrials = 10_000_000
	}
	if s.Tolerance == 0 {
		s.Tolerance = 1
	}
	if s.Workers < 1 {
		s.Workers = runtime.GOMAXPROCS(0)
	}
	ctx, stop := context.WithCancel(ctx)
	blocks := startBlocks(ctx, outputs, newTrial, s)
	g := newGathering(outputs, s)
	err := g.takeAll(ctx, blocks)
	stop()
	for pending := range blocks { // let the workers end
		<-pending
	}
	if err != nil {
		return nil, fmt.Errorf("simulate: %w", err)
	}
	return g.outcome(), nil
}

// block is the result of blockTrials trials.
type block struct {
	columns [][]float64 // by output
	mean    []float64
	scatter *mat.SymDense // sum of products of the deviations from mean
}

// startBlocks hands out blocks to workers and gives their results in order.
func startBlocks(ctx context.Context, outputs int, newTrial func() Trial, s Simulation) <-chan chan *block {
	total := s.Trials
	if total == 0 {
		total = s.MaxTrials
	}
	type order struct {
		number uint64
		out    chan *block
	}
	orders, results := make(chan order), make(chan chan *block, 2*s.Workers)
	var workers sync.WaitGroup
	for range s.Workers {
		workers.Go(func() {
			trial := newTrial()
			for o := range orders {
				if ctx.Err() != nil {
					o.out <- nil
					continue
				}
				o.out <- runBlock(trial, outputs, rand.New(rand.NewPCG(s.Seed, o.number)))
			}
		})
	}
	go func() { // ends when the results are taken or ctx is done; the last to close is results
		defer close(results)
		defer workers.Wait()
		defer close(orders)
		for number := range uint64((total + blockTrials - 1) / blockTrials) {
			o := order{number, make(chan *block, 1)}
			select {
			case results <- o.out:
			case <-ctx.Done():
				return
			}
			orders <- o
		}
	}()
	return results
}

func runBlock(trial Trial, outputs int, rng *rand.Rand) *block {
	x := mat.NewDense(blockTrials, outputs, nil)
	b := &block{columns: square(outputs, blockTrials), mean: make([]float64, outputs), scatter: mat.NewSymDense(outputs, nil)}
	for i := range blockTrials {
		row := x.RawRowView(i)
		trial(rng, row)
		for k, v := range row {
			b.columns[k][i] = v
			b.mean[k] += v
		}
	}
	for k := range b.mean {
		b.mean[k] /= blockTrials
	}
	for i := range blockTrials {
		row := x.RawRowView(i)
		for k := range row {
			row[k] -= b.mean[k]
		}
	}
	b.scatter.SymOuterK(1, x.T())
	return b
}

// gathering adds up blocks in their order.
type gathering struct {
	s          Simulation
	blocks     int
	mean       []float64
	scatter    *mat.SymDense
	histograms []*histogram
	spread     []blockSpread // by output
	stable     bool
}

// blockSpread follows mean, u and the ends of the symmetric interval from block to
// block, JCGM 101 7.9.4.
type blockSpread [4]running

// running is a running mean and sum of squared deviations (Welford).
type running struct{ n, mean, squares float64 }

func (r *running) add(x float64) {
	r.n++
	d := x - r.mean
	r.mean += d / r.n
	r.squares += d * (x - r.mean)
}

// u is the standard uncertainty of the mean.
func (r *running) u() float64 { return math.Sqrt(r.squares / (r.n * (r.n - 1))) }

func newGathering(outputs int, s Simulation) *gathering {
	return &gathering{
		s: s, mean: make([]float64, outputs), scatter: mat.NewSymDense(outputs, nil),
		histograms: make([]*histogram, outputs), spread: make([]blockSpread, outputs),
	}
}

func (g *gathering) takeAll(ctx context.Context, blocks <-chan chan *block) error {
	for pending := range blocks {
		b := <-pending
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := g.take(b); err != nil {
			return err
		}
		if g.s.Trials == 0 && g.settled() {
			g.stable = true
			return nil
		}
	}
	return ctx.Err()
}

func (g *gathering) take(b *block) error {
	for _, m := range b.mean {
		if math.IsNaN(m) || math.IsInf(m, 0) {
			return errors.New("the model gave a value that is not finite")
		}
	}
	n := float64(g.blocks)
	g.blocks++
	for i := range b.mean { // pooled scatter about the common mean
		for j := i; j < len(b.mean); j++ {
			between := (b.mean[i] - g.mean[i]) * (b.mean[j] - g.mean[j]) * blockTrials * n / (n + 1)
			g.scatter.SetSym(i, j, g.scatter.At(i, j)+b.scatter.At(i, j)+between)
		}
	}
	for k, column := range b.columns {
		g.mean[k] += (b.mean[k] - g.mean[k]) / (n + 1)
		g.takeColumn(k, column, b)
	}
	return nil
}

// takeColumn counts one output's values. Sorting every block is what the adaptive run
// needs; a fixed number of trials needs it only for the first blocks, which place the
// histogram and tell the noise.
func (g *gathering) takeColumn(k int, column []float64, b *block) {
	if g.s.Trials == 0 || g.blocks <= 10 {
		slices.Sort(column)
		low, up := sortedQuantile(column, (1-g.s.Probability)/2), sortedQuantile(column, (1+g.s.Probability)/2)
		if g.histograms[k] == nil {
			g.histograms[k] = newHistogram((low+up)/2, 4*(up-low))
		}
		u := math.Sqrt(b.scatter.At(k, k) / (blockTrials - 1))
		for q, v := range [4]float64{b.mean[k], u, low, up} {
			g.spread[k][q].add(v)
		}
	}
	g.histograms[k].add(column)
}

// settled is the stopping rule of JCGM 101 7.9.4 for two significant digits.
func (g *gathering) settled() bool {
	if g.blocks < 2 {
		return false
	}
	for k := range g.spread {
		tolerance := g.s.Tolerance * NumericalTolerance(g.u(k))
		for q := range g.spread[k] {
			if !(2*g.spread[k][q].u() <= tolerance) {
				return false
			}
		}
	}
	return true
}

func (g *gathering) u(k int) float64 {
	return math.Sqrt(g.scatter.At(k, k) / (float64(g.blocks)*blockTrials - 1))
}

func (g *gathering) outcome() *Outcome {
	n := len(g.mean)
	o := &Outcome{
		Trials: g.blocks * blockTrials, Stable: g.stable, Mean: g.mean, U: make([]float64, n), Covariance: square(n, n),
		Symmetric: make([]CoverageInterval, n), Shortest: make([]CoverageInterval, n), UEnd: make([]float64, n),
	}
	for k := range n {
		o.U[k] = g.u(k)
		for j := range n {
			o.Covariance[k][j] = g.scatter.At(k, j) / (float64(o.Trials) - 1)
		}
		h, p := g.histograms[k].accumulate(), g.s.Probability
		o.Symmetric[k] = CoverageInterval{h.quantile((1 - p) / 2), h.quantile((1 + p) / 2)}
		o.Shortest[k] = h.shortest(p)
		o.UEnd[k] = g.uEnd(k)
	}
	return o
}

// uEnd estimates the statistical uncertainty of an interval's end from the blocks that
// were sorted; for a single block that of a normal distribution's.
func (g *gathering) uEnd(k int) float64 {
	sorted := g.spread[k][2].n
	if sorted < 2 {
		return 3 * g.u(k) / math.Sqrt(blockTrials)
	}
	return max(g.spread[k][2].u(), g.spread[k][3].u()) * math.Sqrt(sorted/float64(g.blocks))
}

// NumericalTolerance gives δ of JCGM 101:2008, 7.9.2, for two significant digits: half a
// unit of the second digit of a standard uncertainty.
func NumericalTolerance(u float64) float64 {
	if !(u > 0) || math.IsInf(u, 0) {
		return 0
	}
	exponent := math.Floor(math.Log10(u)) - 1
	if math.Round(u/math.Pow(10, exponent)) >= 100 { // 0.0996 is 0.10
		exponent++
	}
	return math.Pow(10, exponent) / 2
}
