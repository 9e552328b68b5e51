package summary

import (
	"errors"
	"fmt"
)

// Options of a Summarizer. The zero value of each field means its default.
type Options struct {
	// AlertLimitM is the error, in metres, beyond which somebody must be
	// told: the limit of `located`, and the scale of a mode. Default 25.
	AlertLimitM float64
	// IntegrityRisk is the probability that the position is farther from the
	// mean than the protection radius. From 1e-12 to 0.01; default 1e-7.
	IntegrityRisk float64
	// LateralSigmaM is the standard deviation of the vehicle's place across
	// the road, in metres; it is not used on a plane. Default 2.5: a lane
	// either side of the centreline (3.5 m wide, uniform over two: 2.0) and
	// 1.5 m of map error.
	LateralSigmaM float64
	// MaxModes and MaxEdges bound the lists of a posterior; what is not
	// listed is summed. Defaults 8 and 16.
	MaxModes, MaxEdges int
	// MaxVertices bounds the corners of a region. At least 64; default 2048.
	MaxVertices int
}

// withDefaults fills the fields that are zero.
func (o Options) withDefaults() Options {
	set := func(v *float64, d float64) {
		if *v == 0 {
			*v = d
		}
	}
	set(&o.AlertLimitM, 25)
	set(&o.IntegrityRisk, 1e-7)
	set(&o.LateralSigmaM, 2.5)
	for _, p := range []struct {
		v *int
		d int
	}{{&o.MaxModes, 8}, {&o.MaxEdges, 16}, {&o.MaxVertices, 2048}} {
		if *p.v == 0 {
			*p.v = p.d
		}
	}
	return o
}

// Validate lists everything that is wrong.
func (o Options) Validate() error {
	o = o.withDefaults()
	var errs []error
	between := func(name string, v, low, high float64) {
		if !(v >= low && v <= high) {
			errs = append(errs, fmt.Errorf("summary: %s is %v; it must be from %v to %v", name, v, low, high))
		}
	}
	between("AlertLimitM", o.AlertLimitM, 0.01, 1e6)
	between("IntegrityRisk", o.IntegrityRisk, 1e-12, 0.01)
	between("LateralSigmaM", o.LateralSigmaM, 1e-3, 1e4)
	between("MaxModes", float64(o.MaxModes), 1, 1000)
	between("MaxEdges", float64(o.MaxEdges), 1, 10000)
	between("MaxVertices", float64(o.MaxVertices), 64, 1e6)
	return errors.Join(errs...)
}
