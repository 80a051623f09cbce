package resample

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
)

// jitterLabel is laid before seed, draw and name, like a generator's label.
const jitterLabel = "jitter"

// checkJitter refuses a range that is none and candidates that cannot be told
// apart.
func (p Plan) checkJitter() error {
	if !(p.Jitter >= 0 && p.Jitter <= 1) {
		return fmt.Errorf("resample: jitter %v: it must lie between 0 and 1; 1 means none", p.Jitter)
	}
	if !p.jitters() {
		return nil
	}
	if len(p.Keys) == 0 {
		return fmt.Errorf("resample: jitter %v: the names of the candidates are needed", p.Jitter)
	}
	seen := make(map[string]bool, len(p.Keys))
	for _, key := range p.Keys {
		if seen[key] {
			return fmt.Errorf("resample: jitter %v: two candidates are called %q: rename one", p.Jitter, key)
		}
		seen[key] = true
	}
	return nil
}

// jitters reports whether candidates have a W.
func (p Plan) jitters() bool { return p.Jitter > 0 && p.Jitter < 1 }

// jitter is W of each candidate in a draw; nil without jitter. Halves of a pair
// are draws of different numbers, so each has its own (STATISTICS 4: a shared
// one would make the halves dependent).
//
// W = Jitter + (1 - Jitter) u, u being the upper 53 bits of the first 8 bytes,
// little-endian, of SHA-256 of label, seed, draw and name, over 2^53. So W of a
// candidate depends on nothing but these, whatever other candidates there are.
func (p Plan) jitter(draw int) []float64 {
	if !p.jitters() {
		return nil
	}
	message := make([]byte, 32, 32+64)
	copy(message, jitterLabel)
	binary.LittleEndian.PutUint64(message[16:], p.Seed)
	binary.LittleEndian.PutUint64(message[24:], uint64(draw))
	out := make([]float64, len(p.Keys))
	for i, key := range p.Keys {
		message = append(message[:32], key...)
		digest := sha256.Sum256(message)
		u := float64(binary.LittleEndian.Uint64(digest[:])>>11) / (1 << 53)
		out[i] = p.Jitter + float64((1-p.Jitter)*u) // u < 1, and rounding does not lead beyond 1
	}
	return out
}
