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

// fingerprint combines the digests of the columns with their names and roles
// and the positions of the rows used. Columns are hashed apart and then
// together, so that they can be hashed at the same time.
func fingerprint(tableRows int, rows []int32, roles []byte, names []string, digests [][32]byte) string {
	h := sha256.New()
	h.Write([]byte("holdfast table 1\n"))
	writeInt(h, int64(tableRows))
	writeInt(h, int64(len(rows)))
	for _, r := range rows {
		writeInt(h, int64(r))
	}
	writeInt(h, int64(len(names)))
	for j, name := range names {
		h.Write(roles[j : j+1])
		writeInt(h, int64(len(name)))
		h.Write([]byte(name))
		h.Write(digests[j][:])
	}
	return hex.EncodeToString(h.Sum(nil))
}

func writeInt(h hash.Hash, v int64) {
	var b [8]byte
	binary.LittleEndian.PutUint64(b[:], uint64(v))
	h.Write(b[:])
}
