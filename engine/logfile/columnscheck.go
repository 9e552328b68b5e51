package logfile

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
)

// rate words
const (
	rateInterval = "interval"
	rateInstant  = "instant"
)

func (s *SensorColumns) check(p *problems, path, kind string) {
	if len(s.Name) > maxName {
		p.addf(path+".name", "it has %d bytes: at most %d", len(s.Name), maxName)
	}
	if s.When != nil && s.When.Column == "" {
		p.addf(path+".when", "it needs a column, and the text that it equals")
	}
	known := kindTable[kind]
	for _, name := range slices.Sorted(maps.Keys(s.Fields)) {
		i := slices.IndexFunc(known, func(k fieldKind) bool { return k.name == name })
		if i < 0 {
			var names []string
			for _, k := range known {
				names = append(names, k.name)
			}
			p.addf(path+".fields", "a %s has no field %.40q: it has %s", kind, name, strings.Join(names, ", "))
			continue
		}
		f := s.Fields[name]
		f.check(p, path+".fields."+name, known[i])
	}
	s.checkComplete(p, path, kind)
	s.checkIncrements(p, path, kind)
}

// checkComplete reports fields that a measurement needs.
func (s *SensorColumns) checkComplete(p *problems, path, kind string) {
	var choices []string
	chosen := 0
	for _, k := range kindTable[kind] {
		_, there := s.Fields[k.name]
		switch k.role {
		case value, increment:
			if !there {
				p.addf(path, "the field %s is missing", k.name)
			}
		case choice, text:
			choices = append(choices, k.name)
			if there {
				chosen++
			}
		}
	}
	_, lon := s.Fields["lon"]
	_, lat := s.Fields["lat"]
	switch {
	case lon != lat:
		p.addf(path, "lon and lat go together")
	case lon && slices.Contains(choices, "beacon") && chosen == 2:
	case len(choices) > 0 && chosen != 1:
		p.addf(path, "give one of %s", strings.Join(choices, ", "))
	}
	if kind == "standstill" && s.When == nil {
		p.addf(path, "a standstill has no fields: say with when in which rows the vehicle stands")
	}
	if kind == "displacement" {
		_, sigma := s.Fields["sigma_m"]
		_, ee := s.Fields["east_m2"]
		_, nn := s.Fields["north_m2"]
		_, en := s.Fields["east_north_m2"]
		if ee != nn || en && !ee || sigma && ee {
			p.addf(path, "give sigma_m, or east_m2 and north_m2")
		}
	}
}

// checkIncrements reports what concerns the beginning of increments.
func (s *SensorColumns) checkIncrements(p *problems, path, kind string) {
	increments, counted := 0, false
	for _, k := range kindTable[kind] {
		f, there := s.Fields[k.name]
		if k.role == increment && there {
			increments++
			counted = counted || f.Counter || f.Rate == rateInstant
			if f.Column == "" {
				p.addf(path+".fields."+k.name, "an increment comes from a column")
			}
		}
	}
	if increments == 0 {
		if s.MaxGapS != 0 || s.Since != "" || s.Interval != nil {
			p.addf(path, "max_gap_s, since_column and interval concern increments: a %s has none", kind)
		}
		return
	}
	if s.MaxGapS != 0 {
		p.within(path+".max_gap_s", s.MaxGapS, 1e-3, 86400)
	}
	if s.Since != "" && s.Interval != nil {
		p.addf(path, "give since_column or interval, not both")
	}
	if counted && (s.Since != "" || s.Interval != nil) {
		p.addf(path, "counters and instant rates begin at the row before: remove since_column or interval")
	}
	if s.Interval != nil {
		s.Interval.check(p, path+".interval", fieldKind{"interval", duration, value})
	}
}

func (f *Field) check(p *problems, path string, k fieldKind) {
	named := textFields[k.name]
	given := 0
	for _, there := range []bool{f.Column != "", f.Value != nil, f.Text != ""} {
		if there {
			given++
		}
	}
	switch {
	case given != 1:
		p.addf(path, "give a column or a constant, value for numbers, text for names")
	case named && f.Value != nil || !named && f.Text != "":
		p.addf(path, "numbers have a value, names a text")
	}
	if len(f.Text) > maxName {
		p.addf(path+".text", "it has %d bytes: at most %d", len(f.Text), maxName)
	}
	if f.Value != nil {
		p.within(path+".value", *f.Value, -1e9, 1e9)
	}
	if named && (f.Unit != "" || f.Sign != 0 || f.Scale != 0 || f.Offset != 0) {
		p.addf(path, "a name has no unit, sign, scale or offset: remove them")
	}
	if f.Unit != "" {
		f.checkUnit(p, path, k)
	}
	if f.Sign < -1 || f.Sign > 1 {
		p.addf(path+".sign", "%d must be 1 or -1", f.Sign)
	}
	if f.Scale != 0 {
		p.within(path+".scale", f.Scale, -1e12, 1e12)
	}
	p.within(path+".offset", f.Offset, -1e9, 1e9)
	if k.role != increment && (f.Counter || f.Rate != "") {
		p.addf(path, "counter and rate are for increments: %s is none", k.name)
	}
	if f.Rate != "" && f.Rate != rateInterval && f.Rate != rateInstant {
		p.addf(path+".rate", "%.20q must be %s or %s", f.Rate, rateInterval, rateInstant)
	}
	if f.Counter && f.Rate != "" {
		p.addf(path, "it cannot be a counter and a rate")
	}
	if !f.Counter && (f.Wrap != 0 || f.MaxRate != 0) {
		p.addf(path, "wrap and max_rate are for counters")
	}
	if f.Wrap != 0 {
		p.within(path+".wrap", f.Wrap, 1e-6, 1e18)
	}
	if f.MaxRate != 0 {
		p.within(path+".max_rate", f.MaxRate, 1e-6, 1e9)
	}
	if f.Counter && f.Offset != 0 {
		p.addf(path+".offset", "differences of a counter have none: remove it")
	}
}

// checkUnit compares a column's unit with what the field measures.
func (f *Field) checkUnit(p *problems, path string, k fieldKind) {
	u, err := parseUnit(f.Unit)
	if err != nil {
		p.addf(path+".unit", "%v", err)
		return
	}
	want := k.of
	if f.Rate != "" {
		want = map[dimension]dimension{length: speed, angle: turning}[k.of]
	}
	if u.of != want {
		p.addf(path+".unit", "%s is a unit of %s: %s is of %s", f.Unit, u.of, k.name, want)
	}
}

// conversion is how a cell becomes a value in a field's own unit.
type conversion struct {
	scale, offset float64
	unit          unit
}

func (f *Field) conversion() conversion {
	c := conversion{scale: 1, offset: f.Offset, unit: unit{num: 1, den: 1}}
	if f.Scale != 0 {
		c.scale = f.Scale
	}
	if f.Sign < 0 {
		c.scale = -c.scale
	}
	if f.Unit != "" {
		u, err := parseUnit(f.Unit)
		if err != nil {
			panic(fmt.Sprintf("logfile: %v", err)) // checked
		}
		c.unit = u
	}
	return c
}

// of converts a cell; without scale, offset and unit it is the cell's very
// value.
func (c conversion) of(v float64) float64 {
	if c.scale != 1 {
		v *= c.scale
	}
	if v = c.unit.convert(v); c.offset != 0 {
		v += c.offset
	}
	return v
}

// maxRate returns the most that a second of a counter may bring.
func (f *Field) maxRate(of dimension) float64 {
	switch {
	case f.MaxRate != 0:
		return f.MaxRate
	case of == angle:
		return 720
	case of == length:
		return 150
	}
	return math.Inf(1)
}
