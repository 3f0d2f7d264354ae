package simfab

import (
	"math"
	"math/rand/v2"
)

// splineVariance is the mean over a cell of the sum of squares of the four
// uniform cubic B-spline weights, 151/315: the variance that independent nodes
// of variance 1 keep, per axis, after interpolation.
const splineVariance = 151.0 / 315

// field is a smooth random function of x and y over a wafer, mean 0 and
// variance 1: independent normal nodes on a square lattice, interpolated by
// uniform cubic B-splines. Its correlation length is about the lattice spacing.
// setRow fixes y, then at gives values along x at four multiplications each.
type field struct {
	n               int
	inverse, origin float64 // lattice coordinate = (mm + origin)·inverse
	nodes, row      []float64
}

func newField(r *rand.Rand, radiusMM, spacingMM float64) *field {
	n := int(math.Ceil(2*radiusMM/spacingMM)) + 6 // room for the spline's reach and an offset wafer
	f := &field{n: n, inverse: 1 / spacingMM, origin: float64(n-1) / 2 * spacingMM, nodes: make([]float64, n*n), row: make([]float64, n)}
	for i := range f.nodes {
		f.nodes[i] = r.NormFloat64() / splineVariance
	}
	return f
}

// cell gives the first of the four nodes that reach a place, and their weights.
func (f *field) cell(mm float64) (i int, w [4]float64) {
	u := (mm + f.origin) * f.inverse
	i = min(max(int(u), 1), f.n-3)
	t := u - float64(i)
	s, t2, t3 := 1-t, t*t, t*t*t
	w[0] = s * s * s / 6
	w[1] = (3*t3 - 6*t2 + 4) / 6
	w[2] = (-3*t3 + 3*t2 + 3*t + 1) / 6
	w[3] = t3 / 6
	return i - 1, w
}

func (f *field) setRow(yMM float64) {
	j, w := f.cell(yMM)
	a, b, c, d := f.nodes[j*f.n:(j+1)*f.n], f.nodes[(j+1)*f.n:(j+2)*f.n], f.nodes[(j+2)*f.n:(j+3)*f.n], f.nodes[(j+3)*f.n:(j+4)*f.n]
	for i := range f.row {
		f.row[i] = w[0]*a[i] + w[1]*b[i] + w[2]*c[i] + w[3]*d[i]
	}
}

func (f *field) at(xMM float64) float64 {
	i, w := f.cell(xMM)
	return w[0]*f.row[i] + w[1]*f.row[i+1] + w[2]*f.row[i+2] + w[3]*f.row[i+3]
}

// stream is the random stream of one thing: fixed by the seed, what it is for
// and its number, so that nothing depends on the order things are computed in.
func stream(seed uint64, purpose, number uint64) *rand.Rand {
	return rand.New(rand.NewPCG(seed, purpose<<48|number))
}

// What random streams are for.
const (
	forRun uint64 = iota + 1
	forCarrier
	forWafer
	forStation
)
