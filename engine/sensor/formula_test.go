package sensor

import (
	"math"
	"strings"
	"testing"

	"leadline/engine/geo"
)

// ISO 2533: 22632.06 Pa at 11 km; 500 hPa at 5574.4 m. The tolerances are
// half of the last figure printed.
func TestStandardAtmosphere(t *testing.T) {
	if got := StandardPressureHPa(11000, 1013.25) * 100; !near(got, 22632.06, 0.005) {
		t.Errorf("p(11 km) = %v Pa", got)
	}
	if got := StandardHeightM(500, 1013.25); !near(got, 5574.4, 0.05) {
		t.Errorf("h(500 hPa) = %v m", got)
	}
	for h := -500.0; h <= 20000; h += 250 {
		// The inverse to rounding: p has 1e-16 relative, a height of 1e4 m
		// hangs on ln p by 7e3 m, so 1e-8 m leaves room.
		if got := StandardHeightM(StandardPressureHPa(h, 990), 990); !near(got, h, 1e-8) {
			t.Errorf("h(p(%v)) = %v", h, got)
		}
	}
	if !math.IsNaN(StandardHeightM(0, 1013.25)) || !math.IsNaN(StandardHeightM(-1, 1013.25)) {
		t.Error("no pressure has a height")
	}
}

// Speed of sound in air 20.05·sqrt(T): 340.35 m/s at 15 °C, 343.29 at 20 °C
// (textbook formula, computed).
func TestSoundSpeedAir(t *testing.T) {
	for c, want := range map[float64]float64{15: 340.35, 20: 343.29} {
		if got := SoundSpeedAirMPS(c + 273.15); !near(got, want, 0.005) {
			t.Errorf("%v °C: %v", c, got)
		}
	}
}

// σ_θ = c σ_τ / (d cos θ): 2.05° for d = 0.2 m, c = 343.3 m/s and one sample
// at 48 kHz, at broadside (formula, computed).
func TestArrivalSigma(t *testing.T) {
	if got := geo.Deg(ArrivalSigmaRad(343.3, 1.0/48000, 0.2, 0)); !near(got, 2.05, 0.005) {
		t.Errorf("%v°", got)
	}
	a, b := ArrivalSigmaRad(343.3, 1.0/48000, 0.2, geo.Rad(60)), ArrivalSigmaRad(343.3, 1.0/48000, 0.2, 0)
	if !near(a, 2*b, 1e-12) { // cos 60° = 1/2
		t.Errorf("60°: %v, 0°: %v", a, b)
	}
}

// S-44 total vertical uncertainty at 30 m, 95 %: sqrt(a²+(b·d)²): 1.2149,
// 0.6341, 0.3363, 0.2704 m for orders 2, 1a, special, exclusive (IHO S-44 ed.
// 6). The survey craft's starter suite quotes them and uses order 1a / 1.96.
func TestSurveyOrders(t *testing.T) {
	text, _ := StarterText("survey-craft")
	for _, c := range []struct {
		a, b float64
		want string
	}{{1, 0.023, "1.2149"}, {0.5, 0.013, "0.6341"}, {0.25, 0.0075, "0.3363"}, {0.15, 0.0075, "0.2704"}} {
		got := hypot(c.a, c.b*30)
		var want float64
		for i, r := range c.want {
			if r != '.' {
				want += float64(r-'0') * []float64{1, 0, 0.1, 0.01, 0.001, 0.0001}[i]
			}
		}
		if !near(got, want, 5e-5) || !strings.Contains(string(text), c.want) {
			t.Errorf("%v %v: %v, want %s, and in the suite", c.a, c.b, got, c.want)
		}
	}
	s, err := ParseSuite("survey-craft.yaml", text)
	if err != nil {
		t.Fatal(err)
	}
	if got, want := s.Sensor("sounder", KindSounding).Noise.SigmaM, hypot(0.5, 0.013*30)/1.96; !near(got, want, 0.005) {
		t.Errorf("sounder: %v, order 1a gives %v", got, want)
	}
}

// von Mises at δ = 0, σ = 1: e / (2π·I₀(1)) with I₀(1) = 1.266065878
// (Abramowitz & Stegun, table 9.8).
func TestVonMises(t *testing.T) {
	if got, want := NewVonMises(1).LogDensity(0), 1-math.Log(2*math.Pi*1.266065878); !near(got, want, 1e-9) {
		t.Errorf("%v, want %v", got, want)
	}
	for _, sigma := range []float64{0.001, 0.0099, 0.0101, 0.1, 0.5, 1, 3, 30} {
		v := NewVonMises(sigma)
		// Trapezoids over the circle converge faster than any power; 40
		// steps a sigma leave nothing.
		n := int(math.Max(200, 80*math.Pi/sigma))
		sum := 0.0
		for i := range n {
			sum += math.Exp(v.LogDensity(2 * math.Pi * float64(i) / float64(n)))
		}
		// ln I₀ is good to 1e-12 of itself, so of κ = 1/σ² up to 1e4, above
		// which the series leaves 1/16κ² < 1e-9.
		if got := sum * 2 * math.Pi / float64(n); !near(got, 1, 2e-8) {
			t.Errorf("σ = %v integrates to %v", sigma, got)
		}
	}
	// Poor directions: far sides stay possible.
	if l := NewVonMises(geo.Rad(20)).LogDensity(math.Pi); math.IsInf(l, 0) || l > -10 {
		t.Errorf("opposite: %v", l)
	}
}
