package plane_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// bowl is a height field in closed form with a round void in its middle.
type bowl struct{ voidM float64 }

func (bowl) Frame() geo.Frame { return geo.NewFrame(geo.FromDegrees(10, 50)) }
func (bowl) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -800, N: -500}, Max: geo.Point{E: 700, N: 900}}
}

func (b bowl) Sample(dst geo.Heights, east, north []float64) {
	for i := range east {
		e, n := east[i], north[i]
		h, gE, gN, v := 10+e*e/2000-n/50, e/1000, -1./50, 4.
		if !b.Bounds().Contains(geo.Point{E: e, N: n}) || math.Hypot(e, n) < b.voidM {
			h, gE, gN, v = math.NaN(), 0, 0, 0
		}
		dst.HeightM[i] = h
		if dst.SlopeE != nil {
			dst.SlopeE[i], dst.SlopeN[i] = gE, gN
		}
		if dst.VarianceM2 != nil {
			dst.VarianceM2[i] = v
		}
	}
}

func TestPlanesConform(t *testing.T) {
	t.Run("open", func(t *testing.T) { filtertest.Space(t, plane.Open(geo.FromDegrees(-3, 40), 5000, 50)) })
	t.Run("field", func(t *testing.T) { filtertest.Space(t, plane.Over(bowl{}, "bowl", 30)) })
	t.Run("field with a void", func(t *testing.T) { filtertest.Space(t, plane.Over(bowl{200}, "bowl", 30)) })
}

// TestOverPassesTheFieldOn: the columns are those of the field at the point.
func TestOverPassesTheFieldOn(t *testing.T) {
	p := plane.Over(bowl{100}, "bowl", 30)
	if p.Fingerprint() != "bowl" || p.DetailM() != 30 || p.Bounds() != (bowl{}).Bounds() {
		t.Errorf("fingerprint %q, detail %v, bounds %v", p.Fingerprint(), p.DetailM(), p.Bounds())
	}
	var c filter.Columns
	c.Resize(filter.WantHeight, 2, 3)
	copy(c.East, []float64{200, 10, 5000})
	copy(c.North, []float64{100, 10, 0})
	p.Sample(&c)
	if c.Height[0] != 28 || c.SlopeE[0] != 0.2 || c.SlopeN[0] != -0.02 || c.HeightVar[0] != 4 {
		t.Errorf("at (200, 100): %v, slope %v %v, variance %v; want 28, 0.2 -0.02, 4", c.Height[0], c.SlopeE[0], c.SlopeN[0], c.HeightVar[0])
	}
	if !math.IsNaN(c.Height[1]) || !math.IsNaN(c.Height[2]) {
		t.Errorf("in the void and off the field: %v", c.Height[1:])
	}
}

func TestMisusePanics(t *testing.T) {
	for name, f := range map[string]func(){
		"detail 0":   func() { plane.Over(bowl{}, "x", 0) },
		"detail NaN": func() { plane.Open(geo.LonLat{}, 10, math.NaN()) },
		"no width":   func() { plane.Open(geo.LonLat{}, 0, 1) },
		"too wide":   func() { plane.Open(geo.LonLat{}, 2e5+1, 1) },
	} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("%s: no panic", name)
				}
			}()
			f()
		}()
	}
}

// TestScaleAcross100km: distances on a plane are true to 1e-4 across 100 km
// (x²/2R² at 50 km is 3.1e-5).
func TestScaleAcross100km(t *testing.T) {
	p := plane.Open(geo.FromDegrees(25, 60), 50e3, 100)
	for _, q := range []geo.Point{{E: 50e3}, {N: 50e3}, {E: -50e3, N: 50e3}} {
		_, k := p.Frame().Convergence(q)
		if math.Abs(k-1) > 1e-4 {
			t.Errorf("scale %v at %v", k, q)
		}
	}
}
