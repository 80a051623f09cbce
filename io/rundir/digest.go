package rundir

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"math"

	"holdfast/solver"
)

// sum is the SHA-256 of one draw.
type sum [sha256.Size]byte

// drawSum is the digest of a draw's canonical encoding: every field in the
// order of solver.Path, integers as 8 bytes little-endian (of a coefficient as
// 4, for there are many), floats by their bits, texts and lists behind their
// length. Two draws have equal digests only if they are equal to the bit.
func drawSum(number int, p *solver.Path) sum {
	b := make([]byte, 0, 256+24*len(p.Coefs)+24*len(p.Entries)+8*(len(p.Intercepts)+len(p.Always)+len(p.Still)+len(p.Deviance)))
	b = integers(b, number, p.First, p.Last)
	b = words(b, p.Stop.String(), p.Why)
	b = floats(b, []float64{p.Violation, p.Gap})
	b = integers(b, p.Borderline, p.Twins, len(p.Entries))
	for _, e := range p.Entries {
		sign := 0
		if e.Negative {
			sign = 1
		}
		b = integers(b, int(e.Step), int(e.Candidate), sign)
	}
	b = integers(b, len(p.Coefs))
	for _, c := range p.Coefs {
		for _, v := range [...]int32{c.Step, c.Candidate, c.Term, c.Class} {
			b = binary.LittleEndian.AppendUint32(b, uint32(v))
		}
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(c.Value))
	}
	b = floats(integers(b, len(p.Intercepts)), p.Intercepts)
	b = floats(integers(b, len(p.Always)), p.Always)
	b = integers(b, len(p.Still))
	for _, j := range p.Still {
		b = integers(b, int(j))
	}
	b = floats(integers(b, len(p.Deviance)), p.Deviance)
	b = integers(floats(b, []float64{p.NullDeviance}), p.Redraws)
	return sha256.Sum256(b)
}

// blockDigest is the digest of a block: of the identity of its run and the
// digests of its draws in order.
func blockDigest(identity string, sums []sum) string {
	h := sha256.New()
	h.Write(words(nil, "holdfast draws", identity))
	for _, s := range sums {
		h.Write(s[:])
	}
	return hex.EncodeToString(h.Sum(nil))
}

func integers(b []byte, values ...int) []byte {
	for _, v := range values {
		b = binary.LittleEndian.AppendUint64(b, uint64(v))
	}
	return b
}

func floats(b []byte, values []float64) []byte {
	for _, v := range values {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(v))
	}
	return b
}

func words(b []byte, texts ...string) []byte {
	for _, t := range texts {
		b = append(integers(b, len(t)), t...)
	}
	return b
}
