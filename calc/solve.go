package calc

import (
	"errors"
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
)

// ErrUndetermined marks a set of deliveries that leaves a point of the curve open.
var ErrUndetermined = errors.New("the deliveries do not determine the point")

// wideFact is the number of deliveries from which a shared fact is solved for beside
// the curve instead of entering the covariance matrix, which it would fill.
const wideFact = 6

// solution is one generalised least squares solution. The covariance of y is
//
//	V = N + B·Bᵀ
//
// where N comes from facts that few deliveries share and is nearly diagonal, and the
// columns of B are the variables that many share, of variance 1 each. Minimising
// (y − A·c − B·z)ᵀ N⁻¹ (y − A·c − B·z) + zᵀz over c and z gives the c, the covariance
// and the chi² of V (C. R. Henderson's mixed model equations) and never builds V.
type solution struct {
	c     []float64
	cov   *mat.SymDense // p × p, mL²
	chi2  float64
	m     *model
	order []int         // row of the model behind each row of the solution
	low   *skyline      // N = low·lowᵀ
	x     *mat.Dense    // low⁻¹·[A B]
	chol  *mat.Cholesky // of xᵀx, with 1 added to the diagonal at z, scaled to a diagonal of 1
	scale []float64     // what the columns of x were multiplied by for that
	rest  []float64     // low⁻¹·(y − A·c − B·z)
}

// solve does the least squares with the part of V that comes from single facts scaled
// by birge².
func (m *model) solve(birge float64) (*solution, error) {
	n, p := len(m.ds), len(m.pointsML)
	narrow, wide := m.splitFacts()
	s := &solution{m: m, order: m.orderRows(narrow)}
	position := make([]int, n)
	for at, row := range s.order {
		position[row] = at
	}
	var err error
	if s.low, err = newSkyline(n, narrow, position, birge).cholesky(); err != nil {
		return nil, err
	}
	q := len(wide) + commonInputs
	s.x = mat.NewDense(n, p+q, nil)
	y := mat.NewDense(n, 1, nil)
	for at, row := range s.order {
		y.Set(at, 0, m.y[row])
		target := s.x.RawRowView(at)
		copy(target, m.design[row])
		copy(target[p+len(wide):], m.common[row][:])
	}
	for k, shares := range wide {
		for _, sh := range shares {
			s.x.Set(position[sh.row], p+k, birge*sh.contributionML)
		}
	}
	s.low.solve(s.x)
	s.low.solve(y)
	return s, s.normalEquations(y, p, q)
}

// splitFacts gives the contributions of facts that few deliveries share, and of those
// that many do.
func (m *model) splitFacts() (narrow, wide [][]share) {
	for _, shares := range m.shares {
		if len(shares) < wideFact {
			narrow = append(narrow, shares)
		} else {
			wide = append(wide, shares)
		}
	}
	return narrow, wide
}

// orderRows puts deliveries that share facts next to each other, by rising start, so
// that the covariance matrix of a chain of readings or weighings is tridiagonal.
func (m *model) orderRows(narrow [][]share) []int {
	group := make([]int, len(m.ds))
	for i := range group {
		group[i] = i
	}
	find := func(i int) int {
		for group[i] != i {
			group[i] = group[group[i]]
			i = group[i]
		}
		return i
	}
	for _, shares := range narrow {
		for _, sh := range shares[1:] {
			group[find(sh.row)] = find(shares[0].row)
		}
	}
	order := make([]int, len(m.ds))
	for i := range order {
		order[i], group[i] = i, find(i)
	}
	sort.SliceStable(order, func(a, b int) bool {
		a, b = order[a], order[b]
		if group[a] != group[b] {
			return group[a] < group[b]
		}
		return m.ds[a].Start.ReadingML < m.ds[b].Start.ReadingML
	})
	return order
}

// normalEquations solves for c and z. The columns are brought to the same size first:
// a balance and a meniscus may differ by ten powers of ten from what the run shares.
func (s *solution) normalEquations(y *mat.Dense, p, q int) error {
	normal := s.scaledNormal(p, q)
	s.chol = &mat.Cholesky{}
	if !s.chol.Factorize(normal) || s.chol.Cond() > 1e14 {
		return s.m.undetermined()
	}
	var right, theta, fitted mat.Dense
	right.Mul(s.x.T(), y)
	if err := s.chol.SolveTo(&theta, &right); err != nil {
		return fmt.Errorf("normal equations: %w", err)
	}
	fitted.Mul(s.x, &theta)
	s.rest = mat.Col(nil, 0, y)
	floats.Sub(s.rest, mat.Col(nil, 0, &fitted))
	all := mat.Col(nil, 0, &theta)
	floats.Mul(all, s.scale)
	s.c = all[:p]
	s.chi2 = floats.Dot(s.rest, s.rest) + floats.Dot(all[p:], all[p:])
	var inverse mat.SymDense
	if err := s.chol.InverseTo(&inverse); err != nil {
		return fmt.Errorf("covariance: %w", err)
	}
	s.cov = mat.NewSymDense(p, nil)
	for i := range p {
		for j := i; j < p; j++ {
			s.cov.SetSym(i, j, inverse.At(i, j)*s.scale[i]*s.scale[j])
		}
	}
	return nil
}

// scaledNormal scales the columns of x and gives the normal equations' matrix.
func (s *solution) scaledNormal(p, q int) *mat.SymDense {
	normal := mat.NewSymDense(p+q, nil)
	normal.SymOuterK(1, s.x.T())
	s.scale = make([]float64, p+q)
	for k := range s.scale {
		if k >= p {
			normal.SetSym(k, k, normal.At(k, k)+1)
		}
		s.scale[k] = 1 / math.Sqrt(normal.At(k, k))
	}
	for i := range s.scale {
		for j := i; j < p+q; j++ {
			normal.SetSym(i, j, normal.At(i, j)*s.scale[i]*s.scale[j])
		}
	}
	n, _ := s.x.Dims()
	for i := range n {
		floats.Mul(s.x.RawRowView(i), s.scale)
	}
	return normal
}

// undetermined names the point that the deliveries leave open.
func (m *model) undetermined() error {
	design := mat.NewDense(len(m.ds), len(m.pointsML), nil)
	for i, row := range m.design {
		design.SetRow(i, row)
	}
	var svd mat.SVD
	if !svd.Factorize(design, mat.SVDFullV) {
		return ErrUndetermined
	}
	var v mat.Dense
	svd.VTo(&v)
	worst, open := 0, len(m.pointsML)-1
	for k := range m.pointsML {
		if math.Abs(v.At(k, open)) > math.Abs(v.At(worst, open))*(1+1e-9) {
			worst = k
		}
	}
	return fmt.Errorf("%w %g mL", ErrUndetermined, m.pointsML[worst])
}

// influence is how a solution rests on its deliveries, in the order of the model.
type influence struct {
	gain      *mat.Dense // c = gain·y, p × n
	pull      []float64  // V⁻¹·(y − A·c), 1/mL
	leverage  []float64  // diagonal of V⁻¹ − V⁻¹·A·cov·Aᵀ·V⁻¹, 1/mL²
	precision []float64  // diagonal of N⁻¹, 1/mL²
}

func (s *solution) influence() (*influence, error) {
	n, cols := s.x.Dims()
	p := len(s.c)
	q := mat.DenseCopyOf(s.x) // becomes N⁻¹·[A B]
	s.low.solveTransposed(q)
	rest := mat.NewDense(n, 1, append([]float64(nil), s.rest...))
	s.low.solveTransposed(rest)
	full := mat.NewDense(cols, n, nil)
	if err := s.chol.SolveTo(full, q.T()); err != nil {
		return nil, fmt.Errorf("influence: %w", err)
	}
	out := &influence{gain: mat.NewDense(p, n, nil), pull: make([]float64, n), leverage: make([]float64, n), precision: make([]float64, n)}
	inverse := s.low.inverseDiagonal()
	column := make([]float64, cols)
	for at, row := range s.order {
		mat.Col(column, at, full)
		out.pull[row] = rest.At(at, 0)
		out.precision[row] = inverse[at]
		out.leverage[row] = inverse[at] - floats.Dot(q.RawRowView(at), column)
		floats.Mul(column, s.scale)
		out.gain.SetCol(row, column[:p])
	}
	return out, nil
}
