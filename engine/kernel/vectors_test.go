package kernel

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// sameBits fails unless two slices are the same, bit for bit.
func sameBits(t *testing.T, what string, got, want []float64) {
	t.Helper()
	for i := range want {
		if math.Float64bits(got[i]) != math.Float64bits(want[i]) {
			t.Fatalf("%s: value %d of %d is %v (%#x), want %v (%#x)", what, i, len(want), got[i], math.Float64bits(got[i]), want[i], math.Float64bits(want[i]))
		}
	}
}

// awkward are values at which vector code goes wrong where it does.
var awkward = []float64{0, 5e-324, 1e-310, 0x1p-1022, 1e-300, 1e-250, 1, 1 + 0x1p-52, 1e300}

// TestSpreadBits compares with plain Go, for every length of a tail, strides to
// the next value and to the next row, and kernels of one weight and more; and with
// a sum written another way.
func TestSpreadBits(t *testing.T) {
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 1))
	for n := range 75 {
		for _, stride := range []int{1, 32, -31} {
			for _, reach := range []int{0, 1, 2, 7} {
				at := reach * max(stride, -stride)
				src := make([]float64, at+n+at)
				for i := range src {
					src[i] = math.Exp(-700 * rng.Float64())
					if rng.IntN(4) == 0 {
						src[i] = awkward[rng.IntN(len(awkward))]
					}
				}
				weight := make([]float64, reach+1)
				for i := range weight {
					weight[i] = math.Exp(-float64(i*i) * rng.Float64())
				}
				got, want := make([]float64, n), make([]float64, n)
				Spread(got, src, at, stride, weight)
				spreadPlain(want, src, at, stride, weight, 0)
				sameBits(t, "Spread", got, want)
				for i := range got {
					sum := 0.0
					for k := -reach; k <= reach; k++ {
						sum += src[at+i+k*stride] * weight[max(k, -k)]
					}
					if math.Abs(got[i]-sum) > 1e-14*sum {
						t.Fatalf("Spread over %d values by %d at stride %d: %v, want %v", n, reach, stride, got[i], sum)
					}
				}
			}
		}
	}
}

// TestSpreadRowsBits compares SpreadRows with Spread of each row in plain Go, for every
// length of a tail.
func TestSpreadRowsBits(t *testing.T) {
	const seed = 25
	rng := rand.New(rand.NewPCG(seed, 1))
	for cols := 1; cols < 75; cols++ {
		for _, reach := range []int{0, 1, 3} {
			rows, from := 1+rng.IntN(5), cols+rng.IntN(9)
			stride := []int{1, from, from - 1, -from}[rng.IntN(4)]
			at := reach * max(stride, -stride)
			src := make([]float64, at+(rows-1)*from+cols+at)
			for i := range src {
				src[i] = math.Exp(-700 * rng.Float64())
				if rng.IntN(4) == 0 {
					src[i] = awkward[rng.IntN(len(awkward))]
				}
			}
			weight := make([]float64, reach+1)
			for i := range weight {
				weight[i] = math.Exp(-float64(i*i) * rng.Float64())
			}
			got, want := make([]float64, rows*cols), make([]float64, rows*cols)
			SpreadRows(got, src, at, stride, cols, from, weight)
			for r := range rows {
				spreadPlain(want[r*cols:(r+1)*cols], src, at+r*from, stride, weight, 0)
			}
			sameBits(t, "SpreadRows", got, want)
			clear(got)
			spreadRowsPlain(got, src, at, stride, cols, from, weight)
			sameBits(t, "SpreadRows in plain Go", got, want)
		}
	}
}

// TestWeighBits compares with plain Go, for every length of a tail, over all
// arguments at which Exp changes its way: denormal results, 0, -Inf.
func TestWeighBits(t *testing.T) {
	const seed = 4
	rng := rand.New(rand.NewPCG(seed, 1))
	logs := []float64{0, math.Copysign(0, -1), -0x1p-60, -0.3465735902799726, -0.34657359027997264, -1, -707.9, -708.4, -708.5, -744.4, -745.1, -745.13, -745.2, -745.2000001, -746, -1e4, -1e300, math.Inf(-1)}
	for range 4000 {
		logs = append(logs, -760*rng.Float64(), -rng.ExpFloat64())
	}
	for _, most := range []float64{0, 3.7, -1e5} {
		shifted := make([]float64, len(logs))
		mass := make([]float64, len(logs))
		for i, l := range logs {
			shifted[i] = l + most
			mass[i] = rng.Float64()
			if rng.IntN(4) == 0 {
				mass[i] = awkward[rng.IntN(len(awkward))]
			}
			if mass[i] < 1e-250 && rng.IntN(2) == 0 {
				shifted[i] = most + 1e3 // above, where it does not matter
			}
		}
		for from := 0; from < len(logs); {
			n := min(1+rng.IntN(70), len(logs)-from)
			got, want := make([]float64, n), make([]float64, n)
			Weigh(got, mass[from:], shifted[from:], most, 1e-250)
			weighPlain(want, mass[from:], shifted[from:], most, 1e-250, 0)
			sameBits(t, "Weigh", got, want)
			Weigh(mass[from:from+n], mass[from:], shifted[from:], most, 1e-250)
			sameBits(t, "Weigh in place", mass[from:from+n], want)
			from += n
		}
	}
}

// TestLogNormalBits compares with plain Go, and with the formula, for every length
// of a tail: variances at which Log changes its way, and those that are no normal
// numbers.
func TestLogNormalBits(t *testing.T) {
	const seed = 5
	rng := rand.New(rand.NewPCG(seed, 1))
	variances := []float64{0x1p-1022, 0.5, math.Sqrt2 / 2, math.Nextafter(math.Sqrt2/2, 0), math.Nextafter(math.Sqrt2/2, 1), 1, 1 - 0x1p-53, 1 + 0x1p-52, 2, 1e300, math.MaxFloat64}
	for range 4000 {
		variances = append(variances, math.Exp(40*(rng.Float64()-0.5)))
	}
	for from := 0; from < len(variances); {
		n := min(1+rng.IntN(40), len(variances)-from)
		v := append([]float64(nil), variances[from:from+n]...)
		if rng.IntN(4) == 0 {
			v[rng.IntN(n)] = []float64{0, 5e-324, 1e-310, math.Inf(1)}[rng.IntN(4)]
		}
		r, got, want := make([]float64, n), make([]float64, n), make([]float64, n)
		for i := range r {
			r[i] = rng.NormFloat64() * math.Sqrt(v[i])
		}
		r[0] = 0
		weight := -rng.ExpFloat64()
		LogNormal(got, r, v, weight)
		logNormalPlain(want, r, v, weight, 0)
		for i, x := range want {
			if math.IsNaN(x) && math.IsNaN(got[i]) { // of variance 0 or infinity
				got[i] = x
			}
		}
		sameBits(t, "LogNormal", got, want)
		for i, x := range v {
			if x > 1e-300 && x < 1e300 {
				near(t, "LogNormal", x, got[i], weight-0.5*(r[i]*r[i]/x+math.Log(2*math.Pi*x)), 1e-14, 1)
			}
		}
		from += n
	}
}

// TestLogAddBits compares with plain Go, and with the formula, for every length of
// a tail, at distances where Exp changes its way and -Inf.
func TestLogAddBits(t *testing.T) {
	const seed = 6
	rng := rand.New(rand.NewPCG(seed, 1))
	apart := []float64{0, 0x1p-60, 1, 37, 708.5, 744.4, 745.13, 745.3, 746, 1e300, math.Inf(1)}
	for range 4000 {
		apart = append(apart, 40*rng.Float64())
	}
	for from := 0; from < len(apart); {
		n := min(1+rng.IntN(40), len(apart)-from)
		log := -20 * rng.Float64()
		got, want := make([]float64, n), make([]float64, n)
		for i, d := range apart[from : from+n] {
			if rng.IntN(2) == 0 && d < 1e3 {
				d = -d
			}
			got[i], want[i] = log-d, log-d
		}
		above := append([]float64(nil), got...)
		LogAdd(got, log)
		logAddPlain(want, log, 0)
		sameBits(t, "LogAdd", got, want)
		for i, x := range above {
			near(t, "LogAdd", x, got[i], math.Max(x, log)+math.Log1p(math.Exp(-math.Abs(x-log))), 1e-14, 1)
		}
		from += n
	}
}

func BenchmarkVectors(b *testing.B) {
	const n = 1 << 20
	src, dst, logs := make([]float64, n), make([]float64, n), make([]float64, n)
	rng := rand.New(rand.NewPCG(1, 1))
	for i := range src {
		src[i], logs[i] = rng.Float64(), -20*rng.Float64()
	}
	weight := []float64{0.5, 0.2, 0.05}
	run := func(name string, f func()) {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				f()
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/n, "ns/cell")
		})
	}
	run("copy", func() { copy(dst, src) })
	run("spread", func() { Spread(dst[64:n-64], src, 64, 32, weight) })
	run("spread-plain", func() { spreadPlain(dst[64:n-64], src, 64, 32, weight, 0) })
	run("lognormal", func() { LogNormal(dst, logs, src, 0) })
	run("lognormal-plain", func() { logNormalPlain(dst, logs, src, 0, 0) })
	run("logadd", func() { LogAdd(dst, -3) })
	run("logadd-plain", func() { logAddPlain(dst, -3, 0) })
	run("weigh", func() { Weigh(dst, src, logs, 0, 1e-250) })
	run("weigh-plain", func() { weighPlain(dst, src, logs, 0, 1e-250, 0) })
}

// TestCombineBits compares AddScaled, Combine and WeighBy with plain Go, for every
// length of a tail, and with sums written another way.
func TestCombineBits(t *testing.T) {
	const seed = 6
	rng := rand.New(rand.NewPCG(seed, 1))
	src := make([]float64, 200)
	for i := range src {
		src[i] = rng.NormFloat64() * math.Exp(-300*rng.Float64())
		if rng.IntN(4) == 0 {
			src[i] = awkward[rng.IntN(len(awkward))]
		}
	}
	for n := range 75 {
		for taps := 1; taps <= 9; taps += 2 {
			var at []int
			var weight []float64
			for range taps {
				at, weight = append(at, rng.IntN(len(src)-n)), append(weight, rng.NormFloat64())
			}
			got, want := make([]float64, n), make([]float64, n)
			Combine(got, src, at, weight)
			combinePlain(want, src, at, weight, 0)
			sameBits(t, "Combine", got, want)
			AddScaled(got, src[at[0]:at[0]+n], weight[0])
			addScaledPlain(want, src[at[0]:at[0]+n], weight[0], 0)
			sameBits(t, "AddScaled", got, want)
			mass := slices.Clone(src[:n])
			for i := range got {
				sum := weight[0] * src[at[0]+i]
				size := math.Abs(sum)
				for k := range at {
					sum += weight[k] * src[at[k]+i]
					size += math.Abs(weight[k] * src[at[k]+i])
				}
				if math.Abs(got[i]-sum) > 1e-14*size {
					t.Fatalf("%d of %d values, %d taps: %v, want %v", i, n, taps, got[i], sum)
				}
			}
			var sum [16]float64
			weighByPlain(want, mass, src, at, weight, &sum, 0)
			total := WeighBy(got, mass, src, at, weight)
			sameBits(t, "WeighBy", got, want)
			var four [4]float64
			for i := range four {
				four[i] = sum[i] + sum[4+i] + (sum[8+i] + sum[12+i])
			}
			sameBits(t, "WeighBy's sum", []float64{total}, []float64{four[0] + four[1] + (four[2] + four[3])})
			plain := 0.0
			for _, v := range got {
				if v < 0 {
					t.Fatalf("WeighBy leaves %v", v)
				}
				plain += v
			}
			if math.Abs(total-plain) > 1e-12*plain {
				t.Fatalf("WeighBy over %d values: %v, want %v", n, total, plain)
			}
		}
	}
}
