package table

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"hash"
	"math"
)

// digestBlock is the number of values hashed at a time.
const digestBlock = 512

// digest returns the SHA-256 of a column's values, 8 bytes each, lowest byte
// first. Both zeros are one value, and so are a missing cell and a NaN, since
// a fit cannot tell them apart. buf holds digestBlock values.
func digest(v []float64, buf []byte) (sum [32]byte) {
	h := sha256.New()
	for len(v) > 0 {
		part := v[:min(digestBlock, len(v))]
		for i, x := range part {
			b := math.Float64bits(x)
			switch {
			case x == 0:
				b = 0
			case x != x:
				b = missingBits
			}
			binary.LittleEndian.PutUint64(buf[8*i:], b)
		}
		h.Write(buf[:8*len(part)])
		v = v[len(part):]
	}
	h.Sum(sum[:0])
	return sum
}

// digestLevels returns the SHA-256 of a column's levels and codes, and of the
// level that stands apart: a reference, or a success.
func digestLevels(c coding, apart int) (sum [32]byte) {
	h := sha256.New()
	writeInt(h, int64(len(c.names)))
	writeInt(h, int64(apart))
	for _, name := range c.names {
		writeInt(h, int64(len(name)))
		h.Write([]byte(name))
	}
	buf := make([]byte, 0, 4*digestBlock)
	for i, k := range c.codes {
		if buf = binary.LittleEndian.AppendUint32(buf, uint32(k)); len(buf) == cap(buf) || i == len(c.codes)-1 {
			h.Write(buf)
			buf = buf[:0]
		}
	}
	h.Sum(sum[:0])
	return sum
}

// print is what goes into the fingerprint of one column.
type print struct {
	role byte
	name string
	sum  [32]byte
}

// letter is a predictor's role in the fingerprint.
func (p *predictor) letter() byte {
	switch {
	case p.always && p.category != nil:
		return 'A'
	case p.category != nil:
		return 'C'
	case p.always:
		return 'a'
	}
	return 'c'
}

// sidePrints are those of the columns that are no predictors. They are taken
// after the outcome and the strata are settled over the rows used.
func (l *loading) sidePrints() (out []print) {
	o, d := &l.outcome, l.data
	buf := make([]byte, digestBlock*8)
	numbers := func(role byte, c *column) {
		if c != nil {
			out = append(out, print{role, c.Name, digest(pickRows(c.values, d.Rows), buf)})
		}
	}
	levels := func(role byte, c *column, levels coding, apart int) {
		out = append(out, print{role, c.Name, digestLevels(levels, apart)})
	}
	switch l.req.Outcome.Measure {
	case AsNumber:
		numbers('o', o.column)
	case AsCount:
		numbers('n', o.column)
	case AsYesNo:
		levels('y', o.column, o.levels, 1)
	case AsClasses:
		levels('k', o.column, o.levels, -1)
	case AsSurvival:
		numbers('t', o.time)
		levels('e', o.event, o.status, 1)
		numbers('l', o.entry)
		for k, c := range o.strata {
			levels('s', c, o.stratum[k], -1)
		}
	}
	numbers('f', o.offset)
	numbers('x', o.exposure)
	numbers('w', l.weight)
	for k, c := range l.within {
		if c != nil { // the outcome stands above
			levels('d', c, l.withinParts[k], -1)
		}
	}
	return out
}

// fingerprint combines the digests of the columns with their names and roles
// and the positions of the rows used. Columns are hashed apart and then
// together, so that they can be hashed at the same time.
func fingerprint(tableRows int, rows []int32, prints []print) string {
	h := sha256.New()
	h.Write([]byte("holdfast table 1\n"))
	writeInt(h, int64(tableRows))
	writeInt(h, int64(len(rows)))
	for _, r := range rows {
		writeInt(h, int64(r))
	}
	writeInt(h, int64(len(prints)))
	for _, p := range prints {
		h.Write([]byte{p.role})
		writeInt(h, int64(len(p.name)))
		h.Write([]byte(p.name))
		h.Write(p.sum[:])
	}
	return hex.EncodeToString(h.Sum(nil))
}

func writeInt(h hash.Hash, v int64) {
	var b [8]byte
	binary.LittleEndian.PutUint64(b[:], uint64(v))
	h.Write(b[:])
}
