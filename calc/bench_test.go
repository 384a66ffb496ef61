package calc

import (
	"context"
	"fmt"
	"math/rand/v2"
	"runtime"
	"sync"
	"testing"
	"time"

	"gonum.org/v1/gonum/mat"
)

// BenchmarkMonteCarlo: 30 deliveries, a million trials; the second result is the ratio to
// drawing as many normal deviates on as many processors. Budget: at most 4.
func BenchmarkMonteCarlo(b *testing.B) {
	bench := newBench(pattern{"stepwise", "separate", 6}, 1)
	for name, ambients := range map[string]int{"one": 1, "each": 30} { // how often the air was observed
		ds := bench.draw(bench.wander())
		for i := range ds {
			ds[i].Ambient.PressureHPa += float64(i%ambients) / 10
		}
		const trials = 1_000_000
		deviates := countFacts(bench.in, ds) + commonInputs
		b.Run("deliveries=30/trials=1000000/ambient="+name, func(b *testing.B) {
			besides := yardstick{b: b, bare: func() { bareDeviates(deviates * trials) }}
			for b.Loop() {
				if _, err := MonteCarlo(context.Background(), bench.in, bench.pointsML, ds, Simulation{Trials: trials, Seed: 1}); err != nil {
					b.Fatal(err)
				}
				besides.measure()
			}
			besides.report()
		})
	}
}

func countFacts(in Inputs, ds []Delivery) int {
	seen := map[variable]bool{}
	for _, d := range ds {
		for _, v := range []variable{
			{weighingFact, d.Before.Fact},
			{weighingFact, d.After.Fact},
			{readingFact, d.Start.Fact},
			{readingFact, d.End.Fact},
			{waterTempFact, d.Water.Fact},
			{deliveryFact, int64(d.Delivery)},
		} {
			seen[v] = true
		}
	}
	return len(seen)
}

// bareDeviates draws normal deviates and nothing else.
func bareDeviates(n int) {
	workers := runtime.GOMAXPROCS(0)
	var group sync.WaitGroup
	for w := range workers {
		group.Go(func() {
			rng := rand.New(rand.NewPCG(1, uint64(w)))
			sum := 0.0
			for range n / workers {
				sum += rng.NormFloat64()
			}
			runtime.KeepAlive(sum)
		})
	}
	group.Wait()
}

// BenchmarkFitCurve: 50 points, 10 replicates; the second result is the ratio to one
// Cholesky factorisation and solution of a matrix of that many deliveries. Budget: at
// most 3.
func BenchmarkFitCurve(b *testing.B) {
	for _, c := range []struct {
		pattern
		scatter float64
	}{
		{pattern{"stepwise", "separate", 10}, 1},
		{pattern{"stepwise", "running", 10}, 1},
		{pattern{"from-zero", "separate", 10}, 1},
		{pattern{"stepwise", "separate", 10}, 3}, // solved twice, with the Birge ratio
	} {
		p := c.pattern
		b.Run(fmt.Sprintf("points=50/replicates=10/reading=%s/weighing=%s/scatter=%g", p.reading, p.weighing, c.scatter), func(b *testing.B) {
			bench := newBench(p, 1)
			bench.scatter = c.scatter
			bench.pointsML = nil
			for k := 1; k <= 50; k++ {
				bench.pointsML = append(bench.pointsML, float64(k))
			}
			ds := bench.draw(bench.wander())
			besides := yardstick{b: b, bare: bareCholesky(b, len(ds))}
			for b.Loop() {
				if _, err := FitCurve(bench.in, bench.pointsML, ds); err != nil {
					b.Fatal(err)
				}
				besides.measure()
			}
			besides.report()
		})
	}
}

// BenchmarkBetween is what one titration asks of the curve.
func BenchmarkBetween(b *testing.B) {
	bench := newBench(patterns[0], 1)
	c, err := FitCurve(bench.in, bench.pointsML, bench.draw(bench.wander()))
	if err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := c.Between(0.42, 24.79); err != nil {
			b.Fatal(err)
		}
	}
}

// bareCholesky factorises and solves once.
func bareCholesky(b *testing.B, n int) func() {
	a := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			a.SetSym(i, j, 1/float64(1+j-i))
		}
		a.SetSym(i, i, 4)
	}
	y := mat.NewVecDense(n, nil)
	return func() {
		var chol mat.Cholesky
		if !chol.Factorize(a) {
			b.Fatal("not positive definite")
		}
		var x mat.VecDense
		if err := chol.SolveVecTo(&x, y); err != nil {
			b.Fatal(err)
		}
	}
}

// yardstick runs the bare work beside the work that is measured, in turns, so that a
// busy machine slows both.
type yardstick struct {
	b       *testing.B
	bare    func()
	elapsed time.Duration
}

func (y *yardstick) measure() {
	y.b.StopTimer()
	start := time.Now()
	y.bare()
	y.elapsed += time.Since(start)
	y.b.StartTimer()
}

func (y *yardstick) report() { y.b.ReportMetric(float64(y.b.Elapsed())/float64(y.elapsed), "x-bare") }
