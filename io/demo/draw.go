package demo

import (
	"encoding/binary"
	"math"
	"math/rand/v2"
)

// source gives the random numbers of one column or one shared factor.
type source struct{ rng *rand.ChaCha8 }

// newSource keys a generator by seed and name, so that adding a column to the
// recipe leaves all others as they were.
func newSource(seed uint64, name string) source {
	var key [32]byte
	binary.LittleEndian.PutUint64(key[:], seed)
	for i := range len(name) {
		key[8+i%24] = key[8+i%24]*31 + name[i]
	}
	return source{rand.NewChaCha8(key)}
}

// normal returns a number that is normal for every purpose here: the sum of
// twelve uniform numbers less six, mean 0 and variance 1. Only additions, so
// that the bits are the same on every machine.
func (s source) normal() float64 {
	sum := -6.0
	for range 12 {
		sum += float64(float64(s.rng.Uint64()>>11) * 0x1p-53)
	}
	return sum
}

// normals returns n of them.
func (s source) normals(n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = s.normal()
	}
	return v
}

// mix returns share*a + sqrt(1-share^2)*b: unit variance, correlation share
// with a. The conversions keep the compiler from fusing the sum on some
// machines and not on others.
func mix(a, b []float64, share float64) []float64 {
	rest := math.Sqrt(1 - float64(share*share))
	v := make([]float64, len(a))
	for i := range v {
		v[i] = float64(share*a[i]) + float64(rest*b[i])
	}
	return v
}

// scaled returns centre + spread*z rounded to the given number of decimals,
// not below floor.
func scaled(z []float64, centre, spread, floor float64, decimals int) []float64 {
	unit := 1.0
	for range decimals {
		unit *= 10
	}
	v := make([]float64, len(z))
	for i := range v {
		x := centre + float64(spread*z[i])
		v[i] = math.Round(float64(math.Max(x, floor)*unit)) / unit
	}
	return v
}
