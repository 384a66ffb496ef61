package calc

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
)

// skyline is the lower triangle of a symmetric matrix, or a lower triangular matrix:
// row i is kept from its first nonzero to the diagonal.
type skyline struct {
	first []int
	rows  [][]float64
}

// newSkyline adds up the covariance of variables of variance scale²; position gives
// the place of each row of the model.
func newSkyline(n int, variables [][]share, position []int, scale float64) *skyline {
	k := &skyline{first: make([]int, n), rows: make([][]float64, n)}
	for i := range k.first {
		k.first[i] = i
	}
	for _, shares := range variables {
		for _, a := range shares {
			for _, b := range shares {
				i := position[a.row]
				k.first[i] = min(k.first[i], position[b.row])
			}
		}
	}
	for i := range k.rows {
		k.rows[i] = make([]float64, i-k.first[i]+1)
	}
	for _, shares := range variables {
		for _, a := range shares {
			for _, b := range shares {
				if i, j := position[a.row], position[b.row]; j <= i {
					k.rows[i][j-k.first[i]] += scale * scale * a.contributionML * b.contributionML
				}
			}
		}
	}
	return k
}

// cholesky replaces the matrix by its lower factor.
func (k *skyline) cholesky() (*skyline, error) {
	for i, row := range k.rows {
		fi := k.first[i]
		for j := fi; j <= i; j++ {
			fj := k.first[j]
			from := max(fi, fj)
			sum := row[j-fi]
			if from < j {
				sum -= floats.Dot(row[from-fi:j-fi], k.rows[j][from-fj:j-fj])
			}
			if j < i {
				row[j-fi] = sum / k.rows[j][j-fj]
				continue
			}
			if !(sum > 1e-13*row[j-fi]) || math.IsInf(sum, 0) {
				return nil, errors.New("the covariance of the deliveries is not positive definite")
			}
			row[j-fi] = math.Sqrt(sum)
		}
	}
	return k, nil
}

// solve replaces b by L⁻¹·b.
func (k *skyline) solve(b *mat.Dense) {
	for i, row := range k.rows {
		target, last := b.RawRowView(i), len(row)-1
		for j, l := range row[:last] {
			if l != 0 {
				floats.AddScaled(target, -l, b.RawRowView(k.first[i]+j))
			}
		}
		floats.Scale(1/row[last], target)
	}
}

// solveTransposed replaces b by L⁻ᵀ·b.
func (k *skyline) solveTransposed(b *mat.Dense) {
	for i := len(k.rows) - 1; i >= 0; i-- {
		row := k.rows[i]
		source, last := b.RawRowView(i), len(row)-1
		floats.Scale(1/row[last], source)
		for j, l := range row[:last] {
			if l != 0 {
				floats.AddScaled(b.RawRowView(k.first[i]+j), -l, source)
			}
		}
	}
}

// inverseDiagonal gives the diagonal of (L·Lᵀ)⁻¹.
func (k *skyline) inverseDiagonal() []float64 {
	n := len(k.rows)
	out, column := make([]float64, n), make([]float64, n)
	for start := range n {
		clear(column[start:])
		column[start] = 1 / k.rows[start][start-k.first[start]]
		sum := column[start] * column[start]
		for i := start + 1; i < n; i++ {
			from := max(k.first[i], start)
			if from == i {
				continue
			}
			row := k.rows[i]
			column[i] = -floats.Dot(row[from-k.first[i]:i-k.first[i]], column[from:i]) / row[i-k.first[i]]
			sum += column[i] * column[i]
		}
		out[start] = sum
	}
	return out
}
