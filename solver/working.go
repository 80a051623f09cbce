package solver

import (
	"holdfast/solver/kernel"
)

// working is the set of units of one draw that have been looked at closely:
// their gathered columns in scaled units, the Gram matrix among them and their
// products with the outcome. All of it is record numbers: each entry depends
// on the draw and on its own units only, not on when or why they joined.
type working struct {
	quadratic
	place  map[int32]int32 // of a unit's first column
	scale  []float64       // what a column was divided by: penalty units
	mean   []float64       // draw mean less centre
	z      [][]float64     // root * (x - mean) / scale
	square []float64       // z'z / N of each column
	spare  [][]float64     // column buffers of earlier draws
}

// quadratic is a penalised least-squares problem: minimise (1/2) b'Hb - c'b
// plus the penalty, each coefficient that of a unit.
type quadratic struct {
	units []int32   // per place, in order of joining: history, so nothing recorded may depend on it
	h     symmetric // of the working set: z'z / N
	c     []float64 // of the working set: z'y / N
}

func (w *working) reset() {
	w.spare = append(w.spare, w.z...)
	w.units, w.scale, w.mean, w.z, w.c = w.units[:0], w.scale[:0], w.mean[:0], w.z[:0], w.c[:0]
	w.square = w.square[:0]
	w.h.reset()
	if w.place == nil {
		w.place = make(map[int32]int32)
	}
	clear(w.place)
}

// buffer returns a column buffer of an earlier draw, or nil.
func (w *working) buffer() []float64 {
	n := len(w.spare)
	if n == 0 {
		return nil
	}
	b := w.spare[n-1]
	w.spare = w.spare[:n-1]
	return b
}

func (w *working) has(unit int32) bool { _, ok := w.place[unit]; return ok }

// add gathers units and extends the Gram matrix. Units already in are left.
func (w *working) add(f *fitting, units []int32) {
	from := len(w.units)
	for _, u := range units {
		if !w.has(u) {
			w.gather(f, u)
		}
	}
	w.multiply(f, from)
}

// multiply notes the squares of new columns and, for the exact core, extends the
// Gram matrix and the products with the outcome.
func (w *working) multiply(f *fitting, from int) {
	if f.m.exact {
		w.complete(f.d.total)
	}
	for i := from; i < len(w.z); i++ {
		w.square = append(w.square, kernel.Dot(w.z[i], w.z[i])/f.d.total)
		if f.m.exact {
			w.c = append(w.c, kernel.Dot(w.z[i], f.d.y)/f.d.total)
		}
	}
}

// complete brings the Gram matrix up to the columns that are there.
func (w *working) complete(total float64) {
	row := make([]float64, len(w.z))
	for i := len(w.h.row); i < len(w.z); i++ {
		for j := range i + 1 {
			row[j] = kernel.Dot(w.z[i], w.z[j]) / total
		}
		w.h.append(row[:i+1])
	}
}

// width is the number of places of the unit whose first place is given.
func (w *working) width(place int) int {
	k := 1
	for place+k < len(w.units) && w.units[place+k] == w.units[place] {
		k++
	}
	return k
}

// gather adds a unit's columns.
func (w *working) gather(f *fitting, unit int32) {
	switch {
	case unit == f.m.interceptUnit():
		w.join(unit, f.d.constant(w.buffer()), 0, 1)
	case f.m.single(unit):
		w.gatherSingle(f, unit)
	default:
		_, block := f.d.whiten(f.m, unit, w.buffer)
		for _, z := range block {
			w.join(unit, z, 0, 1)
		}
	}
}

func (w *working) gatherSingle(f *fitting, unit int32) {
	x, holes := f.m.column(unit)
	col := f.d.gather(x, holes, w.buffer())
	scale := f.m.scaleOf(unit, col.sd)
	for k := range col.values {
		col.values[k] /= scale
	}
	w.join(unit, col.values, col.mean, scale)
}

func (w *working) join(unit int32, z []float64, mean, scale float64) {
	if !w.has(unit) {
		w.place[unit] = int32(len(w.units))
	}
	w.units = append(w.units, unit)
	w.scale, w.mean, w.z = append(w.scale, scale), append(w.mean, mean), append(w.z, z)
}

// fitted overwrites dst with the sum of beta[i]*z[members[i]], members in the
// order given, one fused multiply-add each, a chunk of rows at a time.
func (w *working) fitted(members []int, beta, dst []float64) {
	clear(dst)
	for r0 := 0; r0 < len(dst); r0 += kernel.Chunk {
		r1 := min(r0+kernel.Chunk, len(dst))
		part := dst[r0:r1]
		i := 0
		for ; i+4 <= len(members); i += 4 {
			m := members[i : i+4 : i+4]
			b := [4]float64{beta[i], beta[i+1], beta[i+2], beta[i+3]}
			kernel.AddScaled4(&b, w.z[m[0]][r0:r1], w.z[m[1]][r0:r1], w.z[m[2]][r0:r1], w.z[m[3]][r0:r1], part)
		}
		for ; i < len(members); i++ {
			kernel.AddScaled(beta[i], w.z[members[i]][r0:r1], part)
		}
	}
}
