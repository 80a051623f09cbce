package table

import (
	"math"
	"math/big"
	"strconv"
)

// missing stands for a cell without a value until the policy for missing
// values has been applied: a NaN with bits of its own, so that a NaN in the
// file can be told apart. Values are only moved, never computed with, before
// that, so the bits survive.
var missing = math.Float64frombits(missingBits)

const missingBits = 0x7ff8_0000_0000_6d76

// isMissing reports whether v is the value missing, bit for bit.
func isMissing(v float64) bool { return math.Float64bits(v) == missingBits }

// notFinite reports NaN (missing too) and infinities.
func notFinite(v float64) bool {
	return math.Float64bits(v)&0x7ff0_0000_0000_0000 == 0x7ff0_0000_0000_0000
}

// foreign returns a value of a file; a NaN loses its payload, so that it
// cannot be mistaken for missing.
func foreign(v float64) float64 {
	if v != v {
		return math.NaN()
	}
	return v
}

// rounded counts the integers of a column that float64 cannot hold exactly.
type rounded struct {
	count int64
	first int64 // table row of the first
}

// add counts a rounded integer in the table row given.
func (r *rounded) add(row int64) {
	if r.count == 0 || row < r.first {
		r.first = row
	}
	r.count++
}

// merge adds the counts of another part of the column.
func (r *rounded) merge(o rounded) {
	if o.count > 0 && (r.count == 0 || o.first < r.first) {
		r.first = o.first
	}
	r.count += o.count
}

// exactSigned reports whether float64 holds v. 2^63 itself is no int64.
func exactSigned(v int64) bool {
	f := float64(v)
	return f != 1<<63 && int64(f) == v
}

// exactUnsigned reports whether float64 holds v.
func exactUnsigned(v uint64) bool {
	f := float64(v)
	return f != 1<<64 && uint64(f) == v
}

// powers of ten that float64 holds exactly.
var tens = func() (p [23]float64) {
	p[0] = 1
	for i := 1; i < len(p); i++ {
		p[i] = p[i-1] * 10
	}
	return p
}()

// decimal returns the float64 nearest to u times ten to the power -scale: the
// same that reading the number as text gives. A quotient of two numbers that
// are held exactly is rounded once (IEEE 754); the rest goes through text.
func decimal(u *big.Int, scale int) (v float64, whole bool) {
	whole = scale <= 0
	if u.IsInt64() && scale >= 0 && scale < len(tens) && exactSigned(u.Int64()) {
		return float64(u.Int64()) / tens[scale], whole
	}
	v, _ = strconv.ParseFloat(u.String()+"e"+strconv.Itoa(-scale), 64)
	return v, whole
}

// decimalSmall is decimal for unscaled values of 64 bits.
func decimalSmall(u int64, scale int) float64 {
	if scale >= 0 && scale < len(tens) && exactSigned(u) {
		return float64(u) / tens[scale]
	}
	v, _ := decimal(big.NewInt(u), scale)
	return v
}

// bigEndianInt sets u to the two's complement number in b, highest byte first.
func bigEndianInt(u *big.Int, b []byte) *big.Int {
	u.SetBytes(b)
	if len(b) > 0 && b[0]&0x80 != 0 {
		u.Sub(u, new(big.Int).Lsh(big.NewInt(1), uint(8*len(b))))
	}
	return u
}

// exactBig reports whether float64 holds u.
func exactBig(u *big.Int) bool {
	_, accuracy := new(big.Float).SetInt(u).Float64()
	return accuracy == big.Exact
}
