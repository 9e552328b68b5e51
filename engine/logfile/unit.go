package logfile

import (
	"fmt"
	"maps"
	"slices"
	"strings"
)

// dimension is what a unit measures.
type dimension string

const (
	plain    dimension = "number"
	length   dimension = "length"
	area     dimension = "length squared"
	angle    dimension = "angle"
	speed    dimension = "speed"
	turning  dimension = "angular rate"
	pressure dimension = "pressure"
	duration dimension = "time"
)

// unit is a factor to the unit that drive files use: m, m², °, m/s, °/s, hPa,
// s. The factor is a quotient, so that 1852/3600 is rounded once.
type unit struct {
	of       dimension
	num, den float64
}

func (u unit) convert(v float64) float64 {
	if u.num == u.den {
		return v
	}
	return v * u.num / u.den
}

const degPerRad = 57.295779513082320876798154814105 // 180/π

// The foot and the mile are the international ones (0.3048 m exactly since
// 1959), the nautical mile 1852 m (1929), a fathom six feet.
var units = map[string]unit{
	"":     {plain, 1, 1},
	"m":    {length, 1, 1},
	"mm":   {length, 1, 1e3},
	"cm":   {length, 1, 100},
	"km":   {length, 1e3, 1},
	"ft":   {length, 0.3048, 1},
	"fm":   {length, 1.8288, 1},
	"mi":   {length, 1609.344, 1},
	"nmi":  {length, 1852, 1},
	"m2":   {area, 1, 1},
	"deg":  {angle, 1, 1},
	"rad":  {angle, degPerRad, 1},
	"mrad": {angle, degPerRad, 1e3},
	"turn": {angle, 360, 1},
	"kn":   {speed, 1852, 3600},
	"mph":  {speed, 1609.344, 3600},
	"rpm":  {turning, 360, 60},
	"hPa":  {pressure, 1, 1},
	"mbar": {pressure, 1, 1},
	"Pa":   {pressure, 1, 100},
	"kPa":  {pressure, 10, 1},
	"bar":  {pressure, 1000, 1},
	"s":    {duration, 1, 1},
	"ms":   {duration, 1, 1e3},
	"us":   {duration, 1, 1e6},
	"ns":   {duration, 1, 1e9},
	"min":  {duration, 60, 1},
	"h":    {duration, 3600, 1},
}

// parseUnit knows the units of the table, and a length or an angle over a time,
// such as km/h and rad/s.
func parseUnit(name string) (unit, error) {
	if u, ok := units[name]; ok {
		return u, nil
	}
	if of, per, ok := strings.Cut(name, "/"); ok {
		a, b := units[of], units[per]
		rates := map[dimension]dimension{length: speed, angle: turning}
		if rate, ok := rates[a.of]; ok && b.of == duration {
			return unit{rate, a.num * b.den, a.den * b.num}, nil
		}
	}
	known := slices.Sorted(maps.Keys(units))
	return unit{}, fmt.Errorf("%.20q is no unit: known are %s, and lengths and angles over times, such as km/h", name, strings.Join(known[1:], ", "))
}
