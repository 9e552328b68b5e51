package kernel

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestLikelyBits compares with plain Go, for every length of a tail, and with the formula:
// densities that underflow, that are denormal, and those that a place has of its own, with
// outliers and without.
func TestLikelyBits(t *testing.T) {
	const seed = 21
	rng := rand.New(rand.NewPCG(seed, 1))
	own, gone, denormal := 0, 0, 0
	for n := range 400 {
		l := Likely{Noise: math.Exp(6 * rng.NormFloat64()), Mean: rng.NormFloat64(), Least: math.Exp(4 * rng.NormFloat64()), Weight: 0.9 * InvSqrt2Pi}
		if n%2 == 0 {
			l.Flat = 1e-5
		}
		mass, residual, row, extra, flat := make([]float64, n), make([]float64, n), make([]float64, 2*n), make([]float64, n), make([]float64, n)
		for i := range n {
			mass[i] = math.Exp(-30 * rng.Float64())
			if rng.IntN(6) == 0 {
				mass[i] = awkward[rng.IntN(len(awkward))]
			}
			row[2*i], row[2*i+1] = rng.NormFloat64(), rng.NormFloat64()
			if rng.IntN(3) == 0 {
				extra[i] = rng.ExpFloat64()
			}
			residual[i], flat[i] = 45*math.Sqrt(l.Noise)*rng.Float64(), math.NaN()
			switch rng.IntN(8) {
			case 0:
				flat[i] = -40 * rng.Float64()
				residual[i] = math.NaN()
			case 1:
				flat[i] = []float64{0, -745.13, -745.3, math.Inf(-1), 3}[rng.IntN(5)]
			case 2:
				residual[i] = []float64{math.Inf(1), 0, l.Mean, 1e300}[rng.IntN(4)]
			}
		}
		const least = 1e-250
		got, want := make([]float64, n), make([]float64, n)
		sum, before := l.Weigh(got, mass, residual, row, extra, flat, least)
		var sums [8]float64
		likelyPlain(&l, &sums, want, mass, residual, row, extra, flat, least, 0)
		sameBits(t, "Likely.Weigh", got, want)
		sameBits(t, "its sums", []float64{sum, before}, []float64{(sums[0] + sums[1]) + (sums[2] + sums[3]), (sums[4] + sums[5]) + (sums[6] + sums[7])})
		for i, m := range mass {
			v := math.Max(l.Noise+extra[i], l.Least*(row[2*i]*row[2*i]+row[2*i+1]*row[2*i+1]))
			z := (residual[i] - l.Mean) / math.Sqrt(v)
			p, x := l.Weight/math.Sqrt(v)*math.Exp(-z*z/2)+l.Flat, z*z/2
			if flat[i] == flat[i] {
				p, x = math.Exp(flat[i]), math.Abs(flat[i])
				own++
			}
			if m < least {
				p = 0
			}
			// As stated, and as much by the formula here.
			if off := math.Abs(got[i] - m*p); !(off <= m*p*2*(8+6*math.Min(x, 800))*0x1p-53+1e-320) {
				t.Fatalf("seed %d: %v with mass %v, want %v", seed, got[i], m, m*p)
			}
			switch {
			case got[i] == 0:
				gone++
			case got[i] < 0x1p-1022:
				denormal++
			}
		}
		in := append([]float64(nil), mass...)
		l.Weigh(in, in, residual, row, extra, flat, least)
		sameBits(t, "Likely.Weigh in place", in, want)
	}
	if own < 1000 || gone < 1000 || denormal < 10 {
		t.Fatalf("seed %d: %d of their own, %d gone, %d denormal", seed, own, gone, denormal)
	}
	l := Likely{Noise: 1, Weight: 1}
	nan := []float64{math.NaN(), math.NaN(), math.NaN(), math.NaN()}
	one, four := []float64{1, 1, 1, 1}, make([]float64, 4)
	if sum, _ := l.Weigh(four, one, nan, make([]float64, 8), four, nan, 0); sum == sum {
		t.Fatalf("a residual that is no number makes %v", sum)
	}
}

// TestGroundBits compares with plain Go, for every length of a tail, beside unknown heights.
func TestGroundBits(t *testing.T) {
	const seed = 22
	rng := rand.New(rand.NewPCG(seed, 1))
	for n := range 100 {
		g := Ground{TopM: 300, DistanceM: 100.1, MapFactor: 1.3, SlopeVar: 12.7, Tilt: 0.01, Flat: -7}
		column := func(k int) []float64 {
			x := make([]float64, k)
			for i := range x {
				x[i] = 200 * rng.NormFloat64()
			}
			return x
		}
		height, slopeE, slopeN, variance := column(n), column(n), column(n), column(n)
		for i := range height {
			if rng.IntN(5) == 0 {
				height[i], slopeE[i], slopeN[i], variance[i] = math.NaN(), 0, 0, 0
			}
		}
		var got, want [4][]float64
		for k, size := range [4]int{n, n, 2 * n, n} {
			got[k], want[k] = column(size), column(size)
		}
		g.Terms(got[0], got[1], got[2], got[3], height, slopeE, slopeN, variance)
		groundPlain(&g, want[0], want[1], want[2], want[3], height, slopeE, slopeN, variance, 0)
		for k := range got {
			sameBits(t, "Ground.Terms", got[k], want[k])
		}
	}
}

// TestTileBits compares what goes over tiles with plain Go, for every length of a tail, and
// moments with sums written another way.
func TestTileBits(t *testing.T) {
	const seed = 23
	rng := rand.New(rand.NewPCG(seed, 1))
	for n := range 130 {
		src := make([]float64, n)
		for i := range src {
			src[i] = math.Exp(-60 * rng.Float64())
			if rng.IntN(40) == 0 {
				src[i] = awkward[rng.IntN(len(awkward))]
			}
		}
		if got, want := Dense(src), densePlain(src, 0); got != want {
			t.Fatalf("seed %d: Dense is %v", seed, got)
		}
		if got, want := Count(src), countPlain(src, 0); got != want {
			t.Fatalf("seed %d: Count is %d, want %d", seed, got, want)
		}
		got, want := append([]float64(nil), src...), append([]float64(nil), src...)
		some, enough := Scale(got, 0.3, 1e-14)
		if s, e := scalePlain(want, 0.3, 1e-14, 0); s != some || e != enough {
			t.Fatalf("seed %d: of %d values, %d and %d, want %d and %d", seed, n, some, enough, s, e)
		}
		sameBits(t, "Scale", got, want)
	}
	for _, size := range [][2]int{{32, 32}, {4, 1}, {8, 3}, {12, 0}} {
		cols, rows := size[0], size[1]
		src := make([]float64, cols*rows)
		for i := range src {
			src[i] = math.Exp(-20 * rng.Float64())
			if rng.IntN(20) == 0 {
				src[i] = awkward[rng.IntN(len(awkward)-1)] // 1e300 would drown the others
			}
		}
		rootsAndSteps(t, src, cols, rows, cols+1+rng.IntN(5))
		var sums [24]float64
		blockMomentsPlain(&sums, src, cols)
		m := BlockMoments(src, cols)
		var want [6]float64
		for i, v := range src {
			x, y := float64(i%cols)-0.5*float64(cols-1), float64(i/cols)-0.5*float64(rows-1)
			for k, by := range [6]float64{1, x, y, x * x, x * y, y * y} {
				want[k] += v * by
			}
		}
		for k := range m {
			plain := (sums[4*k] + sums[4*k+1]) + (sums[4*k+2] + sums[4*k+3])
			if math.Float64bits(m[k]) != math.Float64bits(plain) {
				t.Fatalf("seed %d: moment %d of %d × %d cells is %v, in plain Go %v", seed, k, cols, rows, m[k], plain)
			}
			// Sums of as many rounded terms as there are cells, at most.
			if bound := float64(cols*rows) * 0x1p-53 * want[0] * 256; math.Abs(m[k]-want[k]) > bound {
				t.Fatalf("seed %d: moment %d of %d × %d cells is %v, want %v", seed, k, cols, rows, m[k], want[k])
			}
		}
	}
}

// rootsAndSteps compares Roots and Steps with plain Go and with sums written another way.
func rootsAndSteps(t *testing.T, src []float64, cols, rows, apart int) {
	t.Helper()
	if rows == 0 {
		Roots(nil, src, cols, apart)
		return
	}
	got, want := make([]float64, (rows+1)*apart), make([]float64, (rows+1)*apart)
	Roots(got, src, cols, apart)
	rootsPlain(want, src, cols, rows, apart)
	sameBits(t, "Roots", got, want)
	for i, v := range src {
		if r := got[i/cols*apart+i%cols]; r != math.Sqrt(v) {
			t.Fatalf("the root of %v is %v", v, r)
		}
	}
	for i := range got { // what lies beyond, too
		if got[i] == 0 {
			got[i] = float64(i%7) / 8
		}
	}
	x, y := Steps(got, cols, rows, apart)
	var sums [8]float64
	stepsPlain(&sums, got, cols, rows, apart)
	s := func(k int) float64 { return (sums[k] + sums[k+1]) + (sums[k+2] + sums[k+3]) }
	sameBits(t, "Steps", []float64{x, y}, []float64{s(0), s(4)})
	var sumX, sumY float64
	for i := range rows * cols {
		at := i/cols*apart + i%cols
		sumX += math.Pow(got[at+1]-got[at], 2)
		sumY += math.Pow(got[at+apart]-got[at], 2)
	}
	if math.Abs(x-sumX) > 1e-13*sumX || math.Abs(y-sumY) > 1e-13*sumY {
		t.Fatalf("steps of %d × %d are %v and %v, want %v and %v", cols, rows, x, y, sumX, sumY)
	}
}
