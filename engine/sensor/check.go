package sensor

import (
	"errors"
	"fmt"
	"math"
	"strings"
)

// Limits of what Check accepts. They are far beyond any vehicle and keep
// every square, quotient and logarithm of a likelihood finite.
const (
	maxLengthM   = 4.1e7 // the Earth's circumference
	minSigmaM    = 1e-6
	maxSigmaM    = 1e8
	maxAngleDeg  = 5.7e7 // 1e6 rad: kernel.Sincos is exact up to there
	minSigmaDeg  = 1e-7
	maxSigmaDeg  = 3.6e4
	maxSpeedMPS  = 1e5
	minSigmaMPS  = 1e-6
	maxFarM      = 1.5e6 // nothing farther away is measured; the frame holds to 3e6 (geo.TransverseMercator)
	maxIncrement = Time(24 * 3600 * 1e9)
	maxBeams     = 1024
	maxVertices  = 10000
	maxName      = 256 // bytes of an id or name
)

// problems collects what is wrong with one thing, so that one error lists it
// all.
type problems struct {
	what string
	list []string
}

func (p *problems) addf(format string, args ...any) {
	p.list = append(p.list, fmt.Sprintf(format, args...))
}

func (p *problems) within(name string, v, lo, hi float64) {
	if !(v >= lo && v <= hi) { // also NaN
		p.addf("%s is %v: it must be a number from %v to %v", name, v, lo, hi)
	}
}

func (p *problems) length(name string, v float64) { p.within(name, v, -maxLengthM, maxLengthM) }
func (p *problems) angle(name string, deg float64) {
	p.within(name, deg, -maxAngleDeg, maxAngleDeg)
}
func (p *problems) sigmaM(name string, v float64) { p.sigma(name, v, minSigmaM, maxSigmaM) }
func (p *problems) sigmaDeg(name string, deg float64) {
	p.sigma(name, deg, minSigmaDeg, maxSigmaDeg)
}

func (p *problems) sigma(name string, v, lo, hi float64) {
	if v == 0 {
		p.addf("%s is 0 or missing: give the standard deviation, here or in the suite", name)
		return
	}
	if !(v >= lo && v <= hi) {
		p.addf("%s is %v: a standard deviation must be a number from %v to %v", name, v, lo, hi)
	}
}

func (p *problems) since(since, at Time) {
	switch d := at - since; {
	case since >= at || d <= 0: // the difference may overflow
		p.addf("since must be before the measurement's time")
	case d > maxIncrement:
		p.addf("since is more than 24 hours before the measurement's time: send shorter increments")
	}
}

func (p *problems) name(field, v string) {
	if len(v) > maxName {
		p.addf("%s has %d bytes: at most %d are allowed", field, len(v), maxName)
	}
}

func (p *problems) err() error {
	if len(p.list) == 0 {
		return nil
	}
	return errors.New(p.what + ": " + strings.Join(p.list, "; "))
}

func square(x float64) float64 { return x * x }

func hypot(x, y float64) float64 { return math.Sqrt(float64(x*x) + float64(y*y)) }
