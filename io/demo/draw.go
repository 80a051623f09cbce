package demo

import (
	"encoding/binary"
	"math"
	"math/rand/v2"
)

// source gives the random numbers of one column or one shared factor.
type source struct{ rng *rand.ChaCha8 }

// origin is what the numbers of one table come from.
type origin struct {
	seed  uint64
	table string // put before every name, so that tables share no numbers
}

// source keys a generator by seed, table and name, so that adding a column to
// the recipe leaves all others as they were.
func (o origin) source(name string) source {
	var key [32]byte
	binary.LittleEndian.PutUint64(key[:], o.seed)
	name = o.table + name
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
		sum += s.uniform()
	}
	return sum
}

// uniform returns a number in [0,1).
func (s source) uniform() float64 { return float64(float64(s.rng.Uint64()>>11) * 0x1p-53) }

// below returns a whole number in 0..n-1, each as likely but for 2^-50.
func (s source) below(n int64) int64 { return int64(float64(s.uniform() * float64(n))) }

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
