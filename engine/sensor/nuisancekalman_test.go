package sensor_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
)

// tilted is a plane of heights: everything that is measured over it is linear.
type tilted struct{ frame geo.Frame }

const (
	tiltM, tiltE, tiltN = -1100, 0.08, -0.05
	tiltHalf            = 20e3
)

func (f tilted) Frame() geo.Frame { return f.frame }
func (f tilted) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -tiltHalf, N: -tiltHalf}, Max: geo.Point{E: tiltHalf, N: tiltHalf}}
}

func (f tilted) Sample(dst geo.Heights, east, north []float64) {
	for i := range east {
		dst.HeightM[i] = tiltM + tiltE*east[i] + tiltN*north[i]
		if dst.SlopeE != nil {
			dst.SlopeE[i], dst.SlopeN[i] = tiltE, tiltN
		}
		if dst.VarianceM2 != nil {
			dst.VarianceM2[i] = 0
		}
	}
}

// TestKalmanWithAllNuisances: linear-Gaussian models with as many nuisances as a
// belief holds, from suite and events to the belief, equal the joint Kalman
// filter: means within 1 % of their sigma, covariances within 1 %, the summed log
// evidence within 1 % of a nat a measurement.
func TestKalmanWithAllNuisances(t *testing.T) {
	t.Run("road", func(t *testing.T) {
		const grade = 0.06
		zero, one := 0.0, geo.Rad(1)
		suite := &sensor.Suite{
			Vehicle: sensor.Vehicle{StretchMPerSqrtM: 1e-6, CornerSigmaM: 1e-6},
			Sensors: []sensor.Sensor{
				{Name: "odo", Kind: sensor.KindTravel, Nuisances: []sensor.Nuisance{{Name: sensor.NuisanceOdometerScale, Sigma: 0.02, DriftPerSqrtS: 1e-4}}},
				{Name: "gyro", Kind: sensor.KindTurn, Nuisances: []sensor.Nuisance{
					{Name: sensor.NuisanceHeading, Sigma: 10, DriftPerSqrtS: 0.1}, {Name: sensor.NuisanceGyroBias, Sigma: 0.05, DriftPerSqrtS: 0.01},
				}},
				{Name: "compass", Kind: sensor.KindHeading, OutlierProbability: &zero, CorrelationS: &zero},
				{Name: "alt", Kind: sensor.KindClearance, OutlierProbability: &zero, Nuisances: []sensor.Nuisance{{Name: sensor.NuisanceAltimeterOffset, Mean: 1, Sigma: 3, DriftPerSqrtS: 0.1}}},
				{Name: "baro", Kind: sensor.KindBarometer, OutlierProbability: &zero, CorrelationS: &zero, Nuisances: []sensor.Nuisance{{Name: sensor.NuisanceBarometerOffset, Sigma: 8, DriftPerSqrtS: 0.2}}},
				{Name: "sounder", Kind: sensor.KindSounding, OutlierProbability: &zero, Nuisances: []sensor.Nuisance{
					{Name: sensor.NuisanceTide, Sigma: 1, DriftPerSqrtS: 0.05}, {Name: sensor.NuisanceSoundSpeed, Sigma: 0.02, DriftPerSqrtS: 1e-3},
				}},
			},
		}
		road := filtertest.NewRoad(2, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 2000}}}}, [][]filtertest.Link{nil})
		road.HeadingVar = one * one
		road.Height = func(_, n float64) (float64, float64, float64) { return grade*n - 200, 0, grade }
		// along, heading, scale, gyro bias, altimeter, barometer, tide, sound speed.
		r := &besideKalman{suite: suite, dim: 1, space: road, prior: onRoadAt{500, 20}, start: []float64{500, 0, 0, 0, 1, 0, 0, 0}}
		r.p0 = []float64{400, one * one, 4e-4, geo.Rad(0.05) * geo.Rad(0.05), 9, 64, 1, 4e-4}
		r.q = []float64{4, geo.Rad(0.1)*geo.Rad(0.1) + 1e-6, 1e-8, geo.Rad(0.01) * geo.Rad(0.01), 0.01, 0.04, 0.0025, 1e-6}
		r.second = func(int) ([]sensor.Measurement, []string, *mat.Dense, []float64) {
			a := mat.NewDense(8, 8, nil)
			a.Set(0, 2, 13)
			a.Set(1, 3, -1)
			return []sensor.Measurement{sensor.Travel{DistanceM: 13, SigmaM: 2}, sensor.Turn{AngleRad: 0.01, SigmaRad: 1e-3}}, []string{"odo", "gyro"},
				a, []float64{13, 0.01, 0, 0, 0, 0, 0, 0}
		}
		r.measured = func(_ int, x []float64, rng *rand.Rand) []scalar {
			h := grade*x[0] - 200
			alt, baro, head := h+x[4]+0.5*rng.NormFloat64(), h+x[5]+0.5*rng.NormFloat64(), x[1]+one*rng.NormFloat64()
			depth := (x[6]-h)/(1+x[7]) + 0.3*rng.NormFloat64()
			at := x[0] + 8*rng.NormFloat64()
			return []scalar{
				{l: filtertest.Along{Z: at, SigmaM: 8}, z: at, row: []float64{1, 0, 0, 0, 0, 0, 0, 0}, variance: 64},
				{sensor: "alt", m: sensor.Clearance{ClearanceM: 50, AltitudeM: 50 + alt, SigmaM: 0.5}, z: alt, c: -200, row: []float64{grade, 0, 0, 0, 1, 0, 0, 0}, variance: 0.25},
				{sensor: "baro", m: sensor.Barometer{AltitudeM: baro, SigmaM: 0.5}, z: baro, c: -200, row: []float64{grade, 0, 0, 0, 0, 1, 0, 0}, variance: 0.25},
				{sensor: "compass", m: sensor.HeadingFix{HeadingRad: head, SigmaRad: one}, z: head, row: []float64{0, 1, 0, 0, 0, 0, 0, 0}, variance: one * one},
				// -depth = height - tide + depth·scale + v.
				{sensor: "sounder", m: sensor.Sounding{DepthBelowTransducerM: depth, SigmaM: 0.3}, z: -depth, c: -200, row: []float64{grade, 0, 0, 0, 0, 0, -1, depth}, variance: 0.09},
			}
		}
		r.run(t)
	})
	t.Run("plane", func(t *testing.T) {
		zero := 0.0
		suite := &sensor.Suite{
			Sensors: []sensor.Sensor{
				{Name: "ins", Kind: sensor.KindDisplacement, Nuisances: []sensor.Nuisance{
					{Name: sensor.NuisanceVelocityEast, Sigma: 0.5, DriftPerSqrtS: 0.05},
					{Name: sensor.NuisanceVelocityNorth, Sigma: 0.5, DriftPerSqrtS: 0.05},
					{Name: sensor.NuisanceAzimuth, Sigma: 3, DriftPerSqrtS: 0.1},
				}},
				{Name: "alt", Kind: sensor.KindClearance, OutlierProbability: &zero, Nuisances: []sensor.Nuisance{{Name: sensor.NuisanceAltimeterOffset, Sigma: 3, DriftPerSqrtS: 0.1}}},
				{Name: "sounder", Kind: sensor.KindSounding, OutlierProbability: &zero, Nuisances: []sensor.Nuisance{
					{Name: sensor.NuisanceTide, Sigma: 1, DriftPerSqrtS: 0.05}, {Name: sensor.NuisanceSoundSpeed, Sigma: 0.02, DriftPerSqrtS: 1e-3},
				}},
			},
		}
		at := geo.Point{E: 9000, N: 5000}
		field := tilted{geo.NewFrame(geo.FromDegrees(10, 60))}
		// East, north, altimeter, tide, sound speed, velocity east, north, azimuth.
		r := &besideKalman{
			suite: suite, dim: 2, space: plane.Over(field, "tilted", 8), prior: filter.AtPoint{Point: at, SigmaM: 20}, pose: sensor.Pose{At: at},
			start: []float64{at.E, at.N, 0, 0, 0, 0, 0, 0},
		}
		r.p0 = []float64{400, 400, 9, 1, 4e-4, 0.25, 0.25, geo.Rad(3) * geo.Rad(3)}
		r.q = []float64{2, 2, 0.01, 0.0025, 1e-6, 0.0025, 0.0025, geo.Rad(0.1) * geo.Rad(0.1)}
		c, s, k := field.frame.Rotation(at)
		r.second = func(i int) ([]sensor.Measurement, []string, *mat.Dense, []float64) {
			sin, cos := math.Sincos(0.2 * float64(i))
			e, n := 20*sin, 20*cos
			a := mat.NewDense(8, 8, nil)
			frame := func(to int, e, n float64) {
				a.Set(0, to, k*(c*e-s*n))
				a.Set(1, to, k*(s*e+c*n))
			}
			frame(5, -1, 0)
			frame(6, 0, -1)
			frame(7, n, -e)
			v := 2 / k / k
			return []sensor.Measurement{sensor.Displacement{EastM: e, NorthM: n, CovM2: [3]float64{v, 0, v}}}, []string{"ins"},
				a, []float64{k * (c*e - s*n), k * (s*e + c*n), 0, 0, 0, 0, 0, 0}
		}
		r.measured = func(i int, x []float64, rng *rand.Rand) []scalar {
			h := tiltM + tiltE*x[0] + tiltN*x[1]
			alt := h + x[2] + 0.5*rng.NormFloat64()
			depth := (x[3]-h)/(1+x[4]) + 0.3*rng.NormFloat64()
			e := x[i%2] + 8*rng.NormFloat64()
			row := make([]float64, 8)
			row[i%2] = 1
			return []scalar{
				{l: axis{i % 2, e, 8}, z: e, row: row, variance: 64},
				{sensor: "alt", m: sensor.Clearance{ClearanceM: 50, AltitudeM: 50 + alt, SigmaM: 0.5}, z: alt, c: tiltM, row: []float64{tiltE, tiltN, 1, 0, 0, 0, 0, 0}, variance: 0.25},
				{sensor: "sounder", m: sensor.Sounding{DepthBelowTransducerM: depth, SigmaM: 0.3}, z: -depth, c: tiltM, row: []float64{tiltE, tiltN, 0, -1, depth, 0, 0, 0}, variance: 0.09},
			}
		}
		r.run(t)
	})
}

// axis measures east (0) or north (1).
type axis struct {
	of       int
	z, sigma float64
}

func (axis) Wants() filter.Wants   { return filter.WantPosition }
func (axis) Rows() int             { return 1 }
func (a axis) Noise() filter.Noise { return filter.Gaussian(a.sigma) }

func (a axis) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, _ []float64) {
	for i := range at.East {
		t.Residual[i] = a.z - [2]float64{at.East[i], at.North[i]}[a.of]
		t.Row[i*len(qs)+a.of] = 1
	}
}
