package calc

import (
	"context"
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
	ds := bench.draw(bench.wander())
	const trials = 1_000_000
	deviates := countFacts(bench.in, ds) + commonInputs
	b.Run("deliveries=30/trials=1000000", func(b *testing.B) {
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
	for _, p := range []pattern{{"stepwise", "separate", 10}, {"stepwise", "running", 10}, {"from-zero", "separate", 10}} {
		b.Run("points=50/replicates=10/reading="+p.reading+"/weighing="+p.weighing, func(b *testing.B) {
			bench := newBench(p, 1)
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
