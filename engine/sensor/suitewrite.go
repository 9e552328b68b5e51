package sensor

import (
	"fmt"
	"slices"

	"github.com/goccy/go-yaml"

	"leadline/engine/filter"
)

// YAML writes a suite as a file with the defaults for roads (dim 1) or a plane
// (dim 2) filled in: ParseSuite reads a suite from it that says the same there.
// A figure that stays 0 is left out.
func (s *Suite) YAML(dim int) ([]byte, error) {
	text, err := yaml.MarshalWithOptions(s.filled(dim), yaml.OmitZero(), yaml.IndentSequence(true))
	if err != nil {
		return nil, fmt.Errorf("suite: %w", err)
	}
	return text, nil
}

// filled is For with the defaults of the sensors written out, too.
func (s *Suite) filled(dim int) *Suite {
	c := s.For(dim)
	c.Sensors = slices.Clone(c.Sensors)
	for i := range c.Sensors {
		d := &c.Sensors[i]
		outlier, correlation := d.outlier(), d.correlation()
		d.OutlierProbability, d.CorrelationS = &outlier, &correlation
		if d.Kind == KindRange {
			d.MaxRangeM = d.maxRange()
		}
		switch d.Kind {
		case KindTravel, KindTurn, KindBodyDisplacement, KindSpeed:
			d.Sign = int(d.sign())
		}
	}
	for _, q := range s.Quantities(dim) {
		switch q.Name {
		case filter.Heading:
			c.estimate(NuisanceHeading, s.nuisance(NuisanceHeading, headingDefault(dim)), KindTurn, KindBodyDisplacement, KindHeading, KindTravel, KindSpeed)
		case filter.OdometerScale:
			c.estimate(NuisanceOdometerScale, s.nuisance(NuisanceOdometerScale, scaleDefault), KindTravel, KindBodyDisplacement)
		}
	}
	return c
}

// estimate writes a nuisance out at the first sensor of the first of the kinds
// that the suite has, unless one describes it already.
func (s *Suite) estimate(name string, n Nuisance, kinds ...string) {
	if s.declares(name) {
		return
	}
	n.Name = name
	for _, kind := range kinds {
		for i := range s.Sensors {
			if d := &s.Sensors[i]; d.Kind == kind {
				d.Nuisances = append(slices.Clip(d.Nuisances), n)
				return
			}
		}
	}
}
