package solver

import (
	"math"
	"strconv"

	"gonum.org/v1/gonum/stat/distuv"

	"holdfast/solver/kernel"
)

// group is what a draw makes of a candidate of several columns: an orthonormal
// block Z with Z'Z = N I that spans its centred columns X, X = Z R, so that the
// length of a block's coefficients is ||X b||/sqrt(N) (standardised group
// lasso, Simon & Tibshirani 2012, Statistica Sinica 22:983-1001, section 3).
// Which level of a category is the reference, and how columns are coded, only
// rotates the block.
type group struct {
	kept []int       // terms that are not redundant, in order
	mean []float64   // draw mean less centre, of each kept column
	r    [][]float64 // column i of R: its entries 0..i
}

// single reports whether a candidate is one column. A group of one column is
// one: its block is the standardised column.
func (m *Model) single(unit int32) bool {
	return int(unit) >= m.candidates() || m.p.Groups == nil || len(m.p.Groups[unit]) < 2
}

// columns lists the design columns of a unit.
func (m *Model) columns(unit int32) []int32 {
	if m.single(unit) {
		return []int32{m.design(unit)}
	}
	return m.p.Groups[unit]
}

// firstTerm is the position of a candidate's first column in Terms.
func (m *Model) firstTerm(unit int32) int {
	if m.first == nil {
		return int(unit)
	}
	return m.first[unit]
}

// whiten makes the block of a group by Gram-Schmidt, every column orthogonalised
// twice (Giraud et al. 2005, Numer. Math. 101:87-100). Columns that depend on
// earlier ones within the draw are left out. buffer gives room for a column.
func (d *drawn) whiten(m *Model, unit int32, buffer func() []float64) (*group, [][]float64) {
	g := &group{}
	var block [][]float64
	for t, j := range m.p.Groups[unit] {
		x := m.p.Design.Panel([]int32{j}, 0, m.rows, nil)[0]
		holes := m.p.Design.Holes(j)
		col := d.gather(x, holes, buffer())
		if col.sd == 0 || !d.varies(x, holes) {
			continue
		}
		v, along := col.values, make([]float64, len(block)+1)
		for range 2 {
			for i, z := range block {
				a := kernel.Dot(z, v) / d.total
				along[i] += a
				kernel.AddScaled(-a, z, v)
			}
		}
		left := math.Sqrt(kernel.Dot(v, v) / d.total)
		if left*left <= dependent*col.sd*col.sd {
			continue
		}
		along[len(block)] = left
		for k := range v {
			v[k] /= left
		}
		g.kept, g.mean, g.r = append(g.kept, t), append(g.mean, col.mean), append(g.r, along)
		block = append(block, v)
	}
	return g, block
}

// gradient turns X'u into Z'u, in place: R' (Z'u) = X'u.
func (g *group) gradient(x []float64) {
	for i, r := range g.r {
		for k := range i {
			x[i] -= float64(r[k] * x[k])
		}
		x[i] /= r[i]
	}
}

// coefficients turns those of the block into those of the kept columns, in
// place: R b = theta.
func (g *group) coefficients(theta []float64) {
	for i := len(g.r) - 1; i >= 0; i-- {
		for k := i + 1; k < len(g.r); k++ {
			theta[i] -= float64(g.r[k][i] * theta[k])
		}
		theta[i] /= g.r[i][i]
	}
}

// length is the Euclidean norm.
func length(v []float64) float64 { return math.Sqrt(kernel.Dot(v, v)) }

// Limits of Problem.Luck (DESIGN 4).
const (
	leastLuck = 0.001
	mostLuck  = 0.25
)

// groupWeight is the penalty weight of a group of k directions (DESIGN 4).
func (p *Problem) groupWeight(k int) float64 {
	if p.GroupWeight == GroupSqrt {
		return math.Sqrt(float64(k))
	}
	a := min(max(p.Luck, leastLuck), mostLuck)
	block, single := distuv.ChiSquared{K: float64(k)}, distuv.ChiSquared{K: 1} // of one direction: z(1-a/2)^2
	return rounded(math.Sqrt(block.Quantile(1-a) / single.Quantile(1-a)))
}

// rounded keeps twelve digits: the library's quantiles may differ beyond them from
// machine to machine.
func rounded(v float64) float64 {
	r, err := strconv.ParseFloat(strconv.FormatFloat(v, 'e', 11, 64), 64)
	if err != nil {
		return v
	}
	return r
}
