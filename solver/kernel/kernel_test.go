package kernel

import (
	"math"
	"math/big"
	"math/rand/v2"
	"strconv"
	"testing"
)

func random(n int, seed uint64) []float64 {
	r := rand.New(rand.NewPCG(seed, 7))
	x := make([]float64, n)
	for i := range x {
		x[i] = r.NormFloat64() * math.Pow(10, float64(r.IntN(7)-3))
	}
	return x
}

// written is the record order as the package documentation writes it.
func written(x, y []float64) float64 {
	total := 0.0
	for c := 0; c < len(x); c += Chunk {
		var s [8]float64
		for i := c; i < min(c+Chunk, len(x)); i++ {
			s[(i-c)%8] = math.FMA(x[i], y[i], s[(i-c)%8])
		}
		total += ((s[0] + s[4]) + (s[2] + s[6])) + ((s[1] + s[5]) + (s[3] + s[7]))
	}
	return total
}

// lengths are 0 to past two unrolled blocks, and around the chunk border.
func lengths() []int {
	var n []int
	for i := range 35 {
		n = append(n, i)
	}
	return append(n, Chunk-1, Chunk, Chunk+1, 2*Chunk+9)
}

// TestRecordOrder holds Dot and Sum to the written order, at every length and
// start offset, without touching the input or its neighbours.
func TestRecordOrder(t *testing.T) {
	for _, n := range lengths() {
		for offset := range 9 {
			x, y := random(n+offset+8, 1), random(n+offset+8, 2)
			x0, y0 := append([]float64(nil), x...), append([]float64(nil), y...)
			a, b := x[offset:offset+n], y[offset:offset+n]
			if got, want := Dot(a, b), written(a, b); got != want {
				t.Fatalf("Dot at length %d, offset %d: %g, want %g", n, offset, got, want)
			}
			if Dot(a, b) != Dot(b, a) {
				t.Fatalf("Dot is not symmetric at length %d", n)
			}
			ones := make([]float64, n)
			for i := range ones {
				ones[i] = 1
			}
			if got, want := Sum(a), written(a, ones); got != want {
				t.Fatalf("Sum at length %d: %g, want %g", n, got, want)
			}
			for i := range x {
				if x[i] != x0[i] || y[i] != y0[i] {
					t.Fatalf("input changed at %d", i)
				}
			}
		}
	}
}

// TestAccuracy compares long sums with exact rational arithmetic: the error is
// within the bound of the chunked order, (Chunk/8 + n/Chunk + 3) roundings of
// the sum of absolute products (Higham 2002, section 4.2).
func TestAccuracy(t *testing.T) {
	n := 50_000
	x, y := random(n, 3), random(n, 4)
	exact, size := new(big.Float).SetPrec(400), 0.0
	for i := range x {
		p := new(big.Float).SetPrec(400).SetFloat64(x[i])
		exact.Add(exact, p.Mul(p, new(big.Float).SetFloat64(y[i])))
		size += math.Abs(x[i] * y[i])
	}
	want, _ := exact.Float64()
	if e := math.Abs(Dot(x, y) - want); e > (Chunk/8+float64(n)/Chunk+3)*0x1p-53*size {
		t.Errorf("error %g of %g", e, size)
	}
}

// TestLanes holds the lane product to its order for every number of lanes.
func TestLanes(t *testing.T) {
	for _, n := range []int{0, 1, 5, Chunk, Chunk + 3} {
		for k := 1; k <= MaxLanes; k++ {
			cols := [][]float64{random(n, 5), random(n, 6), random(n, 7)}
			u := random(n*k, 8)
			out := random(3*k+2, 9)
			guard := [2]float64{out[3*k], out[3*k+1]}
			Lanes(cols, u, k, out)
			for c, x := range cols {
				for l := range k {
					want := 0.0
					for r0 := 0; r0 < n; r0 += Chunk {
						s := 0.0
						for i := r0; i < min(r0+Chunk, n); i++ {
							s = math.FMA(x[i], u[i*k+l], s)
						}
						want += s
					}
					if out[c*k+l] != want {
						t.Fatalf("%d rows, %d lanes: column %d lane %d: %g, want %g", n, k, c, l, out[c*k+l], want)
					}
				}
			}
			if out[3*k] != guard[0] || out[3*k+1] != guard[1] {
				t.Fatalf("%d lanes: wrote past the output", k)
			}
		}
	}
}

// TestRows: products over drawn rows equal those of gathered copies, to the
// rounding of a sum.
func TestRows(t *testing.T) {
	x := random(3000, 10)
	for _, n := range lengths() {
		rows := make([]int32, n)
		for k := range rows {
			rows[k] = int32(k + k/3)
		}
		u, w := random(n, 11), random(n, 12)
		g := make([]float64, n)
		Gather(g, x, rows, 0, 1)
		size := 1e-300
		for k := range g {
			size += math.Abs(g[k]*u[k]) + g[k]*g[k]*(1+math.Abs(w[k])) + math.Abs(g[k]*w[k])
		}
		close := func(what string, got, want float64) {
			if math.Abs(got-want) > 1e-13*size {
				t.Errorf("%s over %d rows: %g, want %g", what, n, got, want)
			}
		}
		close("DotRows", DotRows(x, rows, u), Dot(g, u))
		sx, sxx, sxy := Moments(x, rows, nil, u)
		close("sum", sx, Sum(g))
		close("square", sxx, Dot(g, g))
		close("product", sxy, Dot(g, u))
		sx, sxx, sxy = Moments(x, rows, w, u)
		close("weighted sum", sx, Dot(g, w))
		wg := append([]float64(nil), g...)
		for k := range wg {
			wg[k] *= w[k]
		}
		close("weighted square", sxx, Dot(wg, g))
		close("weighted product", sxy, Dot(g, u))
		d := 0.0
		for k := range g {
			d += (g[k] - u[k]) * (g[k] - u[k])
		}
		size += d
		close("distance", SquaredDistance(g, u), d)
	}
}

// TestElementwise holds AddScaled4 to four calls of AddScaled.
func TestElementwise(t *testing.T) {
	for _, n := range lengths() {
		x := [4][]float64{random(n, 1), random(n, 2), random(n, 3), random(n, 4)}
		a := [4]float64{1.5, -0.3, 1e5, 1e-7}
		y := random(n, 5)
		want := append([]float64(nil), y...)
		for k := range x {
			AddScaled(a[k], x[k], want)
		}
		AddScaled4(&a, x[0], x[1], x[2], x[3], y)
		for i := range y {
			if y[i] != want[i] {
				t.Fatalf("length %d element %d: %g, want %g", n, i, y[i], want[i])
			}
		}
	}
}

// TestSpecialValues: NaN and infinities come through.
func TestSpecialValues(t *testing.T) {
	for _, n := range []int{1, 8, 9, 20} {
		x, y := random(n, 1), random(n, 2)
		x[n-1] = math.NaN()
		if !math.IsNaN(Dot(x, y)) || !math.IsNaN(Sum(x)) {
			t.Errorf("length %d: a NaN was lost", n)
		}
		x[n-1], y[n-1] = math.Inf(1), 1
		if !math.IsInf(Dot(x, y), 1) {
			t.Errorf("length %d: an infinity was lost", n)
		}
	}
}

func BenchmarkDot(b *testing.B) {
	for _, n := range []int{250, 10_000, 100_000} {
		b.Run("n="+strconv.Itoa(n), func(b *testing.B) {
			x, y := random(n, 1), random(n, 2)
			b.SetBytes(int64(16 * n))
			for b.Loop() {
				Dot(x, y)
			}
		})
	}
}

func BenchmarkDotRows(b *testing.B) {
	for _, n := range []int{500, 20_000, 200_000} {
		b.Run("n="+strconv.Itoa(n), func(b *testing.B) {
			x, u, rows := random(n, 1), random(n/2, 2), make([]int32, n/2)
			for k := range rows {
				rows[k] = int32(2 * k)
			}
			b.SetBytes(int64(8 * n))
			for b.Loop() {
				DotRows(x, rows, u)
			}
		})
	}
}

func BenchmarkLanes(b *testing.B) {
	for _, n := range []int{500, 20_000, 200_000} {
		b.Run("n="+strconv.Itoa(n), func(b *testing.B) {
			cols, u, out := [][]float64{random(n, 1)}, random(16*n, 2), make([]float64, 16)
			b.SetBytes(int64(8 * n))
			for b.Loop() {
				Lanes(cols, u, 16, out)
			}
		})
	}
}
