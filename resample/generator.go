package resample

import (
	"encoding/binary"
	"math/bits"
	"math/rand/v2"
)

// labelSize is the room for a label in a generator's key; two labels of at
// most this many bytes cannot share a key.
const labelSize = 15

// newGenerator returns the stream of one label, attempt, seed and number. The
// key is the four laid side by side, so that no two of them can meet.
func newGenerator(label string, attempt uint8, seed, number uint64) rand.Source {
	if len(label) > labelSize {
		panic("resample: generator label longer than 15 bytes: " + label)
	}
	var key [32]byte
	copy(key[:labelSize], label)
	key[labelSize] = attempt
	binary.LittleEndian.PutUint64(key[16:], seed)
	binary.LittleEndian.PutUint64(key[24:], number)
	return rand.NewChaCha8(key)
}

// below returns an integer uniform on 0..limit-1, by the multiplication of
// Lemire (2019), algorithm 5, with its rejection: no value is favoured. It
// is written here because the library promises a law, not a sequence.
// limit must be at least 1.
func below(src rand.Source, limit uint64) uint64 {
	hi, lo := bits.Mul64(src.Uint64(), limit)
	if lo >= limit {
		return hi
	}
	for reject := -limit % limit; lo < reject; {
		hi, lo = bits.Mul64(src.Uint64(), limit)
	}
	return hi
}

// choose moves a uniform random subset of size m of the items to the front,
// by the first m steps of a shuffle (Knuth, algorithm P, from the front).
func choose(src rand.Source, items []int32, m int) {
	for i := range m {
		j := i + int(below(src, uint64(len(items)-i)))
		items[i], items[j] = items[j], items[i]
	}
}
