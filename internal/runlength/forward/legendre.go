package forward

import (
	"math"
	"sync"
)

// Legendre fills into with P_0(t), P_1(t), ...
func Legendre(t float64, into []float64) {
	for n := range into {
		switch n {
		case 0:
			into[0] = 1
		case 1:
			into[1] = t
		default:
			into[n] = (float64(2*n-1)*t*into[n-1] - float64(n-1)*into[n-2]) / float64(n)
		}
	}
}

// quadrature holds nodes and weights once computed, by their number.
var quadrature sync.Map

// Nodes gives the Gauss-Legendre nodes and weights on -1 <= t <= 1, by Newton's method on P_n. The caller must not change
// them. They are computed here because those of gonum v0.17.0 for 26 nodes are wrong: their weights add up to 1.979.
func Nodes(n int) (t, w []float64) {
	both, known := quadrature.Load(n)
	if !known {
		t, w = make([]float64, n), make([]float64, n)
		p := make([]float64, n+1)
		for i := range t {
			x := -math.Cos(math.Pi * (float64(i) + 0.75) / (float64(n) + 0.5))
			slope := 0.0
			for range 8 {
				Legendre(x, p)
				slope = float64(n) * (p[n-1] - x*p[n]) / (1 - x*x)
				x -= p[n] / slope
			}
			t[i], w[i] = x, 2/((1-x*x)*slope*slope)
		}
		both, _ = quadrature.LoadOrStore(n, [2][]float64{t, w})
	}
	pair := both.([2][]float64)
	return pair[0], pair[1]
}

// Matrix is a dense map between coefficients, by rows.
type Matrix struct {
	Rows, Columns int
	Data          []float64
}

// NewMatrix gives a matrix of zeros.
func NewMatrix(rows, columns int) *Matrix {
	return &Matrix{rows, columns, make([]float64, rows*columns)}
}

// AddTo adds the image of x, of which trailing zeros may be left out, to y.
func (m *Matrix) AddTo(y, x []float64) {
	for i := range y {
		row := m.Data[i*m.Columns : (i+1)*m.Columns]
		sum := 0.0
		for j, v := range x {
			sum += row[j] * v
		}
		y[i] += sum
	}
}

// Project gives the matrix whose column j holds the first terms of the Legendre series of column j of f, a function of
// t that fills in one value a column. Nodes is the number of quadrature nodes.
func Project(terms, columns, nodes int, f func(t float64, into []float64)) *Matrix {
	m := NewMatrix(terms, columns)
	ts, ws := Nodes(nodes)
	values, basis := make([]float64, columns), make([]float64, terms)
	for i, t := range ts {
		clear(values)
		f(t, values)
		Legendre(t, basis)
		for n, p := range basis {
			scale := ws[i] * p * (2*float64(n) + 1) / 2
			for j, v := range values {
				m.Data[n*columns+j] += scale * v
			}
		}
	}
	return m
}
