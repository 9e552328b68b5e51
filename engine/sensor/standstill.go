package sensor

import (
	"math"

	"leadline/engine/filter"
)

// Standstill says that the vehicle does not move: a motion of zero over the
// time since the same sensor's previous standstill, at most standstillS
// seconds (a first one covers standstillS). Over the time it covers it
// overrules every other motion: a gyro's or an inertial unit's residual drift
// is known to be no motion: moved = 0. Source: practice, a zero velocity update.
// What a gyro says meanwhile is its bias (Stood).
type Standstill struct{}

const (
	// standstillS bounds the time one standstill speaks for.
	standstillS = 1.0
	// A standing vehicle still rocks and creeps; these are random walks, so
	// that they do not depend on the rate (practice).
	standstillMPerSqrtS   = 0.01
	standstillRadPerSqrtS = 0.0002 // 0.01°
)

// Kind is "standstill".
func (Standstill) Kind() string { return KindStandstill }

// Check accepts every standstill.
func (Standstill) Check(Time) error { return nil }

// Stood is what a gyro whose bias is estimated has turned by, as it says, while
// the vehicle stood.
type Stood struct {
	Seconds, AngleRad, VarRad2 float64
}

// Stood is that of the segment, if standstills cover all of it and so does the
// gyro; ok is false otherwise.
func (m *Motion) Stood() (st Stood, ok bool) {
	still := false
	for i := range m.sources {
		switch s := &m.sources[i]; {
		case s.covered < m.To-m.From:
		case s.still:
			still = true
		case s.biased:
			st, ok = Stood{m.Seconds(), s.turn, s.turnVar}, true
		}
	}
	return st, ok && still
}

// Add puts another segment's to it.
func (s Stood) Add(t Stood) Stood {
	return Stood{s.Seconds + t.Seconds, s.AngleRad + t.AngleRad, s.VarRad2 + t.VarRad2}
}

// Likelihood is what the gyro says of its bias b, as a zero angular rate update
// does (practice): over t seconds its turn is
//
//	angle = b·t + v,  v ~ N(0, VarRad2 + (0.01°)²·t),
//
// the latter for what a standing vehicle rocks. 0.01 of them are carried, by a
// ferry or a turntable, and turn at any rate up to carriedRadPerS. It is nil for a
// belief that does not estimate the bias, or no time.
func (s Stood) Likelihood(qs []filter.Quantity) filter.LinearLikelihood {
	bias := filter.Index(qs, filter.GyroBias)
	if bias < 0 || !(s.Seconds > 0) {
		return nil
	}
	n := filter.Gaussian(math.Sqrt(s.VarRad2 + standstillRadPerSqrtS*standstillRadPerSqrtS*s.Seconds))
	n.Parts[0].Weight = 0.99
	n.FlatWeight, n.FlatDensity = 0.01, 1/(2*carriedRadPerS*s.Seconds)
	return &standing{Stood: s, bias: bias, noise: n}
}

// carriedRadPerS is how fast what carries a standing vehicle turns at most: a
// turntable once in half a minute (practice).
const carriedRadPerS = 0.2

type standing struct {
	Stood
	bias  int
	noise filter.Noise
}

var _ filter.LinearLikelihood = (*standing)(nil)

func (l *standing) Wants() filter.Wants { return filter.WantPosition }
func (l *standing) Rows() int           { return 1 }
func (l *standing) Noise() filter.Noise { return l.noise }

// Linearize implements filter.LinearLikelihood.
func (l *standing) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := stride(at, qs)
	for i := range at.East {
		t.Residual[i] = l.AngleRad - float64(mean[i*k+l.bias]*l.Seconds)
		t.Row[i*k+l.bias] = l.Seconds
	}
}
