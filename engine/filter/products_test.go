package filter

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/geo"
)

// slanted is a likelihood whose residual grows to the east, unlike on the flat ground of
// its own density west of flatE.
type slanted struct {
	noise  Noise
	at     float64
	flatE  float64
	square float64
}

func (s slanted) Wants() Wants { return WantPosition }
func (s slanted) Rows() int    { return 1 }
func (s slanted) Noise() Noise { return s.noise }
func (s slanted) Linearize(t *Terms, at *Columns, _ []Quantity, _ []float64) {
	for i, e := range at.East {
		if e < s.flatE {
			t.Flat[i] = -6
			continue
		}
		t.Residual[i] = s.at - e - s.square*at.North[i]*at.North[i]
		t.Extra[i] = 0.1 * math.Abs(at.North[i])
		t.Row[2*i], t.Row[2*i+1] = 1, 2*s.square*at.North[i]
	}
}

// someSpace is a plane about the origin.
type someSpace struct{}

func (someSpace) Fingerprint() string { return "some" }
func (someSpace) Frame() geo.Frame    { return geo.NewFrame(geo.FromDegrees(7, 47)) }
func (someSpace) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -1e5, N: -1e5}, Max: geo.Point{E: 1e5, N: 1e5}}
}
func (someSpace) DetailM() float64 { return 1 }
func (someSpace) Sample(*Columns)  {}

// TestProductsAgainstLogs compares what a lattice is by products with densities with what
// it is by logs, the slow way: dense tiles, sparse ones and empty ones, outliers and none, ground with
// a density of its own, and measurements by which products underflow here or everywhere.
func TestProductsAgainstLogs(t *testing.T) {
	const seed = 31
	rng := rand.New(rand.NewPCG(seed, 1))
	products, byLogs, contradicted := 0, 0, 0
	worst, worstLog := 0.0, 0.0
	var w, slow Workspace
	for n := range 300 {
		b := &Belief{Map: "some", Dim: 2, Lattice: Lattice{SpacingM: 1}}
		for c := range int32(3) {
			b.Tiles.At = append(b.Tiles.At, TileAt{c - 1, 0})
			for x := range tileCells {
				m := math.Exp(-20 * rng.Float64())
				switch {
				case n%4 == 3 && c == 0, n%3 == 1 && rng.IntN(3) > 0, n%3 == 2 && c == 1 && (x < 64 || x >= 64+cellsAtOnce):
					m = 0
				}
				b.Tiles.Mass = append(b.Tiles.Mass, m)
			}
		}
		total := sum(b.Tiles.Mass)
		for i := range b.Tiles.Mass {
			b.Tiles.Mass[i] /= total
		}
		s := slanted{at: 40 * rng.NormFloat64(), flatE: -1e9, square: 0.02 * rng.Float64()}
		s.noise = Gaussian(math.Exp(2 * rng.NormFloat64()))
		s.noise.Parts[0].Mean = rng.NormFloat64()
		if n%2 == 0 {
			s.noise.Parts[0].Weight, s.noise.FlatWeight, s.noise.FlatDensity = 0.98, 0.02, 1e-3
		}
		switch n % 7 {
		case 0:
			s.flatE = -10
		case 1:
			s.at = 1e4 // beyond what a density can be, but for outliers
		case 2:
			s.at = 1e160
		}
		left := b.weighTiles(someSpace{}, s, false, &w)
		_, log, err := w.outcomeOf(left, b.Tiles.Mass, cellFloor)
		ev := newEvaluation(s, 1)
		b.logTiles(someSpace{}, s, &ev, nil, &slow)
		_, wantLog, wantErr := slow.outcome(b.Tiles.Mass, cellFloor)
		if !errors.Is(err, wantErr) {
			t.Fatalf("seed %d, %d: %v, want %v", seed, n, err, wantErr)
		}
		switch {
		case err != nil:
			contradicted++
			continue
		case left.products:
			products++
		default:
			byLogs++
		}
		worstLog = math.Max(worstLog, math.Abs(log-wantLog)/math.Max(1, math.Abs(wantLog)))
		for i, v := range w.scratch {
			worst = math.Max(worst, math.Abs(v-slow.scratch[i]))
		}
	}
	// Logs of up to 745 are rounded to 2^-44 each, and sums to 2^-53 a cell: so much of a
	// mass, which is at most 1.
	const bound = 4*0x1p-44 + 3*tileCells*0x1p-53
	t.Logf("off by %.2g of all mass, the evidence by %.2g", worst, worstLog)
	if worst > bound || worstLog > bound {
		t.Fatalf("seed %d: off by %v of all mass, the evidence by %v", seed, worst, worstLog)
	}
	if products < 100 || byLogs < 15 || contradicted < 15 {
		t.Fatalf("seed %d: %d by products, %d by logs, %d contradicted", seed, products, byLogs, contradicted)
	}
}
