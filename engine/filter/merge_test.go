package filter

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// TestSortIsStable compares the order of the merger with the standard
// library's stable sort, around the size where the method changes and for keys
// that differ in few bits, in all, or not at all.
func TestSortIsStable(t *testing.T) {
	const seed = 21
	rng := rand.New(rand.NewPCG(seed, 0))
	var m merger
	for _, n := range []int{0, 1, 2, 63, 64, 65, 1000, 5000} {
		for _, mask := range []uint64{0, 1, 1 << 63, 0xff00ff, 1<<63 | 1, 7 << 30, math.MaxUint64, 0x1fffff << 40} {
			base := rng.Uint64()
			keys := make([]uint64, n)
			for i := range keys {
				keys[i] = base&^mask | rng.Uint64()&mask
			}
			want := make([]int32, n)
			for i := range want {
				want[i] = int32(i)
			}
			slices.SortStableFunc(want, func(a, b int32) int {
				switch {
				case keys[a] < keys[b]:
					return -1
				case keys[a] > keys[b]:
					return 1
				}
				return 0
			})
			m.sort(keys)
			if !slices.Equal(m.order, want) {
				t.Fatalf("seed %d: %d keys with mask %x are out of order", seed, n, mask)
			}
		}
	}
}

// randomGaussian draws a Gaussian with a covariance of full rank.
func randomGaussian(rng *rand.Rand, k int) gaussian {
	g := gaussian{mass: rng.Float64() + 0.01}
	var l [MaxK][MaxK]float64
	for i := range k {
		g.mean[i] = 3 * rng.NormFloat64()
		for j := 0; j <= i; j++ {
			l[i][j] = rng.NormFloat64()
		}
	}
	for i := range k {
		for j := 0; j <= i; j++ {
			for x := range k {
				g.cov[Packed(i, j)] += l[i][x] * l[j][x]
			}
		}
	}
	return g
}

// moments are mass, first and second raw moments of a set of Gaussians.
func rawMoments(c *Gaussians, k int) []float64 {
	sum := make([]float64, 1+k+k*(k+1)/2)
	for e, m := range c.Mass {
		mean, cov := c.Mean[e*k:], c.Cov[e*k*(k+1)/2:]
		sum[0] += m
		for i := range k {
			sum[1+i] += m * mean[i]
			for j := 0; j <= i; j++ {
				sum[1+k+Packed(i, j)] += m * (cov[Packed(i, j)] + mean[i]*mean[j])
			}
		}
	}
	return sum
}

// TestMergeKeepsMoments: per cell, merged Gaussians have the mass and the raw
// moments of what went in, summed directly; at most the allowed number are
// left; the trace accounts for every one.
func TestMergeKeepsMoments(t *testing.T) {
	const seed = 22
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, k := range []int{1, 2, 3, 5, MaxK} {
		var src, dst Gaussians
		for range 600 {
			g := randomGaussian(rng, k)
			src.push(uint64(rng.IntN(40))<<32|uint64(rng.IntN(3)), k, &g)
		}
		var m merger
		trace := make([]int32, len(src.Key))
		m.merge(&dst, &src, k, 0, 3, trace)
		if !slices.IsSorted(dst.Key) || len(slices.Compact(slices.Clone(dst.Key))) != len(dst.Key) {
			t.Errorf("seed %d, k %d: without angles each cell should be left with one, in order", seed, k)
		}
		into := make([]float64, len(dst.Key))
		for i, j := range trace {
			if src.Key[i] != dst.Key[j] {
				t.Fatalf("seed %d: entry %d of cell %x went to cell %x", seed, i, src.Key[i], dst.Key[j])
			}
			into[j] += src.Mass[i]
		}
		for j, key := range dst.Key {
			var cell, left Gaussians
			for i := range src.Key {
				if src.Key[i] == key {
					var g gaussian
					src.load(&g, i, k)
					cell.push(key, k, &g)
				}
			}
			var g gaussian
			dst.load(&g, j, k)
			left.push(key, k, &g)
			want, got := rawMoments(&cell, k), rawMoments(&left, k)
			for i := range want {
				// Some twenty sums of terms below a few hundred.
				if math.Abs(got[i]-want[i]) > 1e-11 {
					t.Fatalf("seed %d, k %d, cell %x: moment %d is %v, want %v", seed, k, key, i, got[i], want[i])
				}
			}
			if math.Abs(into[j]-dst.Mass[j]) > 1e-12 {
				t.Fatalf("seed %d: the trace brings %v into an entry of %v", seed, into[j], dst.Mass[j])
			}
		}
	}
}

// TestMergeKeepsStoriesApart: Gaussians of one cell whose headings differ by
// more than mergeAngleRad stay apart, up to the bound; and those on the two
// sides of ±π meet where they are, not at zero.
func TestMergeKeepsStoriesApart(t *testing.T) {
	var src, dst Gaussians
	for _, h := range []float64{math.Pi - 0.05, -math.Pi + 0.05, 0, math.Pi / 2, 0.1, math.Pi/2 + 0.1} {
		g := gaussian{mass: 1}
		g.mean[1], g.cov[0], g.cov[2] = h, 1, 0.01
		src.push(7, 2, &g)
	}
	var m merger
	m.merge(&dst, &src, 2, 2, 3, nil)
	if len(dst.Key) != 3 {
		t.Fatalf("%d Gaussians, want 3: %v", len(dst.Key), dst.Mean)
	}
	for i, want := range []float64{math.Pi, 0.05, math.Pi/2 + 0.05} {
		if got := dst.Mean[i*2+1]; math.Abs(geo.WrapPi(got-want)) > 1e-12 || dst.Mass[i] != 2 {
			t.Errorf("heading %v with mass %v, want %v with 2", got, dst.Mass[i], want)
		}
		if got := dst.Cov[i*3+2]; math.Abs(got-0.0125) > 1e-12 {
			t.Errorf("heading variance %v, want 0.01 + 0.05²", got)
		}
	}
}

// TestTruncateAgainstIntegration compares the pieces of a cut Gaussian with
// numeric integration of a bivariate density over the same strip.
func TestTruncateAgainstIntegration(t *testing.T) {
	g := gaussian{mass: 0.7}
	g.mean[0], g.mean[1] = 0.3, -2
	g.cov[0], g.cov[1], g.cov[2] = 1.44, 0.6, 0.5
	for _, c := range [][2]float64{{math.Inf(-1), -1}, {-1, 0}, {0, 1}, {1, 1.1}, {4, 6}, {2, math.Inf(1)}} {
		at := func(x float64) edge {
			if math.IsInf(x, 0) {
				return edge{z: x}
			}
			return edgeAt((x - 0.3) / 1.2)
		}
		var whole cutting
		whole.begin(&g, 2, 0)
		var r gaussian
		whole.piece(&r, 2, between(at(c[0]), at(c[1])))
		// Given x, y is N(m + b(x - mx), v - bc): integrate over x alone,
		// midpoint rule: error (b-a)·f″·dx²/24 < 1e-9.
		lo, hi := math.Max(c[0], -12), math.Min(c[1], 12)
		const n = 100000
		var s [6]float64
		dx := (hi - lo) / n
		for i := range n {
			x := lo + (float64(i)+0.5)*dx
			z := (x - 0.3) / 1.2
			f := 0.7 * math.Exp(-z*z/2) / (1.2 * math.Sqrt(2*math.Pi)) * dx
			y := -2 + 0.6/1.44*(x-0.3)
			s[0] += f
			s[1] += f * x
			s[2] += f * y
			s[3] += f * x * x
			s[4] += f * x * y
			s[5] += f * (y*y + 0.5 - 0.36/1.44)
		}
		mx, my := s[1]/s[0], s[2]/s[0]
		got := []float64{r.mass, r.mean[0], r.mean[1], r.cov[0], r.cov[1], r.cov[2]}
		want := []float64{s[0], mx, my, s[3]/s[0] - mx*mx, s[4]/s[0] - mx*my, s[5]/s[0] - my*my}
		for i := range want {
			if math.Abs(got[i]-want[i]) > 1e-7 {
				t.Errorf("strip %v: %v, integration gives %v", c, got, want)
				break
			}
		}
	}
}

// TestSplittingAgainstMixture cuts wide Gaussians into cells and compares
// with a brute-force mixture: mass, mean and variance of the whole to
// rounding, the share of every cell within three and a half sigma exactly.
func TestSplittingAgainstMixture(t *testing.T) {
	for _, sigma := range []float64{0.51, 0.8, 2, 7} {
		ln := &Lines{
			LengthM: []float64{400}, Cells: []int32{400}, WidthM: []float64{1},
			Forward: Links{Start: []int32{0, 0}}, Backward: Links{Start: []int32{0, 0}},
		}
		g := gaussian{mass: 0.4}
		g.mean[0], g.cov[0] = 0.21, sigma*sigma
		var out Gaussians
		mv := mover{k: 1, dim: 1, out: &out, lines: ln}
		mv.sendLine(LineKey(0, 200), &g)
		const pos = 200.5 + 0.21
		var mass, mean, second float64
		share := map[int32]float64{}
		for i, key := range out.Key {
			_, cell := LineCell(key)
			x := float64(cell) + 0.5 + out.Mean[i]
			if math.Abs(out.Mean[i]) > 0.5+1e-12 {
				t.Errorf("sigma %g: a piece of cell %d lies at %v", sigma, cell, out.Mean[i])
			}
			mass += out.Mass[i]
			mean += out.Mass[i] * (x - pos)
			second += out.Mass[i] * (out.Cov[i] + (x-pos)*(x-pos))
			share[cell] += out.Mass[i]
		}
		if math.Abs(mass+mv.pruned-0.4) > 1e-15 || math.Abs(mean/0.4) > 1e-12*sigma || math.Abs(second/0.4/sigma/sigma-1) > 1e-12 {
			t.Errorf("sigma %g: mass %v, mean off by %v, variance %v", sigma, mass, mean/0.4, second/0.4)
		}
		for cell := int32(pos - 3*sigma); cell <= int32(pos+3*sigma); cell++ {
			want := 0.4 * (kernel.NormalUpper((float64(cell)-pos)/sigma) - kernel.NormalUpper((float64(cell)+1-pos)/sigma))
			if float64(cell) < pos-3.4*sigma || float64(cell)+1 > pos+3.4*sigma {
				continue
			}
			if math.Abs(share[cell]-want) > 1e-13 {
				t.Errorf("sigma %g: cell %d holds %v, want %v", sigma, cell, share[cell], want)
			}
		}
	}
}
