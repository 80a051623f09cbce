package table

import (
	"math"
	"math/bits"
	"slices"
)

// rowMarks is what one worker of a scan learns of the rows as whole rows.
type rowMarks struct {
	holed  []uint64 // bit per row: a column that could be a candidate has a gap there
	sums   []uint64 // per row: sum of the hashes of its cells
	spread float64  // bits that the columns in sums could tell rows apart by
}

func newRowMarks(n int64) *rowMarks {
	return &rowMarks{holed: make([]uint64, (n+63)/64), sums: make([]uint64, n)}
}

// add enters column k. Outcomes, and columns that a draft leaves out by
// themselves, hold no row back; labels and dates make every row another one,
// so they say nothing about repeats.
func (m *rowMarks) add(k int, c *ColumnSummary, v []float64, outcome bool) {
	gaps := c.Missing + c.NaN + c.Infinite
	if gaps > 0 && !outcome && !c.Leak && c.Missing+c.NaN < int64(len(v)) {
		for i, x := range v {
			if notFinite(x) {
				m.holed[i>>6] |= 1 << (i & 63)
			}
		}
	}
	if c.Unique || c.RowNumber || c.Dates != "" || c.Distinct < 2 {
		return
	}
	m.spread += math.Log2(float64(c.Distinct))
	key := mix(uint64(k) + 1)
	for i, x := range v {
		m.sums[i] += mix(math.Float64bits(x+0) ^ key) // x+0 makes one zero of both
	}
}

// mix spreads the bits of x: the finaliser of SplitMix64 (Steele, Lea and
// Flood 2014, OOPSLA).
func mix(x uint64) uint64 {
	x = (x ^ x>>30) * 0xbf58476d1ce4e5b9
	x = (x ^ x>>27) * 0x94d049bb133111eb
	return x ^ x>>31
}

// rareByChance is how many bits more than chance repeats need the columns must
// have before equal rows are remarkable: were the columns independent, any two
// of n rows would be equal with a chance below 2^-(rareByChance+1).
const rareByChance = 7

// summarise puts the marks of all workers into a summary.
func summarise(out *Summary, marks []*rowMarks) {
	var all *rowMarks
	for _, m := range marks {
		switch {
		case m == nil:
		case all == nil:
			all = m
		default:
			all.merge(m)
		}
	}
	if all == nil {
		return
	}
	for _, w := range all.holed {
		out.Incomplete += int64(bits.OnesCount64(w))
	}
	if all.spread < 2*math.Log2(float64(out.Rows))+rareByChance {
		return
	}
	slices.Sort(all.sums)
	for i := 1; i < len(all.sums); i++ {
		if all.sums[i] == all.sums[i-1] {
			out.Repeats++
		}
	}
}

func (m *rowMarks) merge(other *rowMarks) {
	for i, w := range other.holed {
		m.holed[i] |= w
	}
	for i, s := range other.sums {
		m.sums[i] += s
	}
	m.spread += other.spread
}
