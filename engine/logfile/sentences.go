package logfile

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"leadline/engine/sensor"
)

// Sentences says what to make of NMEA sentences. The zero value takes the
// defaults of the package's table. Its keys are those of a YAML file.
type Sentences struct {
	Time SentenceTime `yaml:"time"`
	// VariationDeg is the magnetic variation, east positive, for directions
	// whose sentence does not bring one.
	VariationDeg *float64 `yaml:"variation_deg"`
	// Satellites says what positions are, GGA, RMC and GLL: fix, measurements
	// that position the vehicle; truth, to compare with; or none. With truth and
	// none the speeds of VTG and RMC are left out, too. fix unless said.
	Satellites string `yaml:"satellites"`
	// SigmasFromSuite leaves out every sigma that is not given here, so that
	// the suite's noise holds.
	SigmasFromSuite bool `yaml:"sigmas_from_suite"`

	Depth       Quantity `yaml:"depth"`
	Heading     Quantity `yaml:"heading"`
	TurnRate    Quantity `yaml:"turn_rate"`
	WaterSpeed  Quantity `yaml:"water_speed"`
	GroundSpeed Quantity `yaml:"ground_speed"`
	Fix         Quantity `yaml:"fix"`
	// Reckon makes displacements of speed and heading, see there.
	Reckon *Reckon `yaml:"reckon"`
}

// SentenceTime says where the times of sentences come from.
type SentenceTime struct {
	// From is sentence: ZDA, RMC, GGA and GLL bring the time, which holds for
	// those after them; a sentence that comes n times before the next time has
	// them spread evenly. prefix: before the sentence, as Format says. tag: in
	// the c: of a tag block. arrival: when it arrives, live alone.
	From string `yaml:"from"`
	// Date, as 2030-05-01, is the day of the first time, where no RMC or ZDA
	// says it, or a receiver says a wrong one.
	Date       string `yaml:"date"`
	TimeFormat `yaml:",inline"`
}

// Quantity is what to make of one quantity.
type Quantity struct {
	Use    *bool  `yaml:"use"`    // true unless said
	Sensor string `yaml:"sensor"` // its name in the drive
	// From lists the sentences that may give it, best first: HDT for those of
	// any talker, HEHDT for those of one.
	From []string `yaml:"from"`
	// The sigma, in the quantity's own unit; 0 leaves it to the suite. That of
	// a turn rate is of the rate.
	SigmaM   *float64 `yaml:"sigma_m"`
	SigmaDeg *float64 `yaml:"sigma_deg"`
	SigmaDPS *float64 `yaml:"sigma_dps"`
	SigmaMPS *float64 `yaml:"sigma_mps"`
	// TransducerDepthM is the transducer's depth below the waterline where no
	// DPT says it.
	TransducerDepthM float64 `yaml:"transducer_depth_m"`
}

// The quantities.
type quantity int

const (
	depth quantity = iota
	heading
	turnRate
	waterSpeed
	groundSpeed
	fix
	quantities
)

// quantityTable holds name, sentences, best first, the sensor's default name,
// and the key of its sigma.
var quantityTable = [quantities]struct {
	name, sensor, sigma string
	from                []string
}{
	depth:       {"depth", "sounder", "sigma_m", []string{"DPT", "DBT"}},
	heading:     {"heading", "compass", "sigma_deg", []string{"HDT", "HDG", "HDM", "VHW"}},
	turnRate:    {"turn_rate", "turn_rate", "sigma_dps", []string{"ROT"}},
	waterSpeed:  {"water_speed", "water_speed", "sigma_mps", []string{"VBW", "VHW"}},
	groundSpeed: {"ground_speed", "ground_speed", "sigma_mps", []string{"VBW", "VTG", "RMC"}},
	fix:         {"fix", "fix", "sigma_m", []string{"GGA", "RMC", "GLL"}},
}

func (o *Sentences) of(q quantity) *Quantity {
	return [quantities]*Quantity{&o.Depth, &o.Heading, &o.TurnRate, &o.WaterSpeed, &o.GroundSpeed, &o.Fix}[q]
}

// Words of Sentences.
const (
	FromSentence = "sentence"
	FromPrefix   = "prefix"
	FromTag      = "tag"
	FromArrival  = "arrival"

	SatellitesFix   = "fix"
	SatellitesTruth = "truth"
	SatellitesNone  = "none"
)

// ParseSentences reads such a file; name is used in errors only. Everything
// that is wrong is an error with its line.
func ParseSentences(name string, text []byte) (*Sentences, error) {
	o := &Sentences{}
	y, err := sensor.ParseYAML("sentences file", name, text, o, "docs/drives.md under Logs of your own")
	if err != nil {
		return nil, err
	}
	if err := y.Error(o.problems()); err != nil {
		return nil, err
	}
	return o, nil
}

// Validate lists everything that is wrong.
func (o *Sentences) Validate() error {
	var all []string
	for _, f := range o.problems() {
		all = append(all, f.String())
	}
	if len(all) == 0 {
		return nil
	}
	return fmt.Errorf("sentences: %s", strings.Join(all, "; "))
}

func (o *Sentences) problems() (p problems) {
	o.Time.check(&p)
	if v := o.VariationDeg; v != nil {
		p.within("variation_deg", *v, -180, 180)
	}
	if s := o.Satellites; s != "" && s != SatellitesFix && s != SatellitesTruth && s != SatellitesNone {
		p.addf("satellites", "%.20q must be %s, %s or %s", s, SatellitesFix, SatellitesTruth, SatellitesNone)
	}
	names := map[string]string{}
	for q := range quantities {
		t := quantityTable[q]
		o.of(q).check(&p, q)
		name := o.sensor(q)
		if other, twice := names[name]; twice {
			p.addf(t.name+".sensor", "%q is the name for %s, too", name, other)
		}
		names[name] = t.name
	}
	if r := o.Reckon; r != nil {
		r.check(&p)
		if other, twice := names[r.sensor()]; twice {
			p.addf("reckon.sensor", "%q is the name for %s, too", r.sensor(), other)
		}
	}
	return p
}

func (t *SentenceTime) check(p *problems) {
	switch t.From {
	case FromPrefix:
		_, wrong := t.compile()
		for _, key := range []string{"format", "start", "layout"} {
			if text := wrong[key]; text != "" {
				p.addf("time."+key, "%s", text)
			}
		}
	case "", FromSentence, FromTag, FromArrival:
		if t.TimeFormat != (TimeFormat{}) {
			p.addf("time", "format, start, layout and zone are those of a prefix: write from: prefix, or remove them")
		}
	default:
		p.addf("time.from", "%.20q must be %s, %s, %s or %s", t.From, FromSentence, FromPrefix, FromTag, FromArrival)
	}
	if t.Date != "" {
		if t.From != "" && t.From != FromSentence {
			p.addf("time.date", "only times from sentences need a date: remove it")
		} else if _, err := parseDate(t.Date); err != nil {
			p.addf("time.date", "%v", err)
		}
	}
}

func parseDate(text string) (time.Time, error) {
	day, err := time.Parse(time.DateOnly, text)
	if err != nil || day.Year() < 1970 || day.Year() > 2260 {
		return day, fmt.Errorf("%.20q is no date: give it like 2030-05-01", text)
	}
	return day, nil
}

func (u *Quantity) check(p *problems, q quantity) {
	t := quantityTable[q]
	if len(u.Sensor) > maxName {
		p.addf(t.name+".sensor", "it has %d bytes: at most %d", len(u.Sensor), maxName)
	}
	if len(u.From) > 32 {
		p.addf(t.name+".from", "at most 32 are allowed")
		return
	}
	for i, f := range u.From {
		if len(f) != 3 && len(f) != 5 || !slices.Contains(t.from, f[max(0, len(f)-3):]) {
			p.addf(fmt.Sprintf("%s.from[%d]", t.name, i), "%.20q gives no %s: give %s, with a talker before it if you like", f, t.name, strings.Join(t.from, ", "))
		}
	}
	for key, s := range map[string]*float64{"sigma_m": u.SigmaM, "sigma_deg": u.SigmaDeg, "sigma_dps": u.SigmaDPS, "sigma_mps": u.SigmaMPS} {
		switch {
		case s == nil:
		case key != t.sigma:
			p.addf(t.name, "its standard deviation is %s, not %s", t.sigma, key)
		case *s != 0:
			p.within(t.name+"."+key, *s, 1e-6, 1e6)
		}
	}
	if u.TransducerDepthM != 0 {
		if q != depth {
			p.addf(t.name+".transducer_depth_m", "only depth has it")
		}
		p.within(t.name+".transducer_depth_m", u.TransducerDepthM, -1000, 1000)
	}
}

func (o *Sentences) sensor(q quantity) string {
	if name := o.of(q).Sensor; name != "" {
		return name
	}
	return quantityTable[q].sensor
}

func (o *Sentences) from(q quantity) []string {
	if from := o.of(q).From; len(from) > 0 {
		return from
	}
	return quantityTable[q].from
}

func (o *Sentences) uses(q quantity) bool {
	if u := o.of(q).Use; u != nil && !*u {
		return false
	}
	return q != fix || o.Satellites != SatellitesNone
}

// sigma is the one that is given for a quantity, otherwise def.
func (o *Sentences) sigma(q quantity, def float64) float64 {
	u := o.of(q)
	for _, s := range []*float64{u.SigmaM, u.SigmaDeg, u.SigmaDPS, u.SigmaMPS} {
		if s != nil {
			return *s
		}
	}
	if o.SigmasFromSuite {
		return 0
	}
	return def
}

// The default sigmas; see the package's table.

// depthSigmaM is that of IHO S-44 (ed. 6), order 1a: a total vertical
// uncertainty at 95 % of √(a² + (b·d)²) with a = 0.5 m, b = 0.013.
func depthSigmaM(d float64) float64 {
	return math.Sqrt(0.25+0.013*0.013*d*d) / 1.96
}

const (
	trueHeadingSigmaDeg     = 1
	magneticHeadingSigmaDeg = 3
	waterSpeedSigmaMPS      = 0.3
	groundSpeedSigmaMPS     = 0.1
)

// turnRateSigmaDPM takes an indicator's permitted error, 0.5 °/min and 5 % of
// the rate, as two sigma.
func turnRateSigmaDPM(rateDPM float64) float64 { return (0.5 + 0.05*math.Abs(rateDPM)) / 2 }
