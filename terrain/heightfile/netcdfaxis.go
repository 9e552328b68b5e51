package heightfile

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// ncAxis is a coordinate variable.
type ncAxis struct {
	v       *ncVar
	north   bool // latitude or y, else longitude or x
	degrees bool
}

// axisOf tells whether a one-dimensional variable is a horizontal axis.
func axisOf(v *ncVar) (a ncAxis, ok bool) {
	a.v = v
	units := strings.ToLower(attText(v.atts, "units"))
	standard := strings.ToLower(attText(v.atts, "standard_name"))
	long := strings.ToLower(attText(v.atts, "long_name"))
	name := strings.ToLower(v.name)
	is := func(s string, all ...string) bool { return slices.Contains(all, s) }
	switch {
	case is(units, "degrees_north", "degree_north", "degrees_n", "degree_n", "degreesn", "degreen"):
		return ncAxis{v, true, true}, true
	case is(units, "degrees_east", "degree_east", "degrees_e", "degree_e", "degreese", "degreee"):
		return ncAxis{v, false, true}, true
	case standard == "projection_y_coordinate":
		return ncAxis{v, true, false}, true
	case standard == "projection_x_coordinate":
		return ncAxis{v, false, false}, true
	case standard == "latitude" || long == "latitude" || is(name, "lat", "latitude"):
		return ncAxis{v, true, true}, true
	case standard == "longitude" || long == "longitude" || is(name, "lon", "long", "longitude"):
		return ncAxis{v, false, true}, true
	case name == "y":
		return ncAxis{v, true, false}, true
	case name == "x":
		return ncAxis{v, false, false}, true
	}
	return a, false
}

// ncLine is an axis with even steps.
type ncLine struct {
	name        string
	first, last float64
	uneven      float64 // largest departure, in steps
}

// evenness is the largest departure from even steps that is taken as
// rounding: 180° as float32 rounds to 7.6e-6°, 3 % of an arc second.
const evenness = 0.05

func (f *netCDF) axis(a ncAxis, n int64) (ncLine, error) {
	fail := func(format string, args ...any) (ncLine, error) {
		return ncLine{}, fmt.Errorf("axis %s: %s", quote(a.v.name), fmt.Sprintf(format, args...))
	}
	if n > f.size { // a byte each at least
		return fail("%d values are more than %d bytes can hold: is the file cut short?", n, f.size)
	}
	width := ncSizes[a.v.kind]
	c, buf := make([]float64, n), make([]byte, n*width)
	if f.dims[a.v.dims[0]].length == 0 {
		for i := range c {
			if err := f.read(c[i:i+1], a.v.begin+int64(i)*f.recSize, a.v.kind, buf); err != nil {
				return fail("%v", err)
			}
		}
	} else if err := f.read(c, a.v.begin, a.v.kind, buf); err != nil {
		return fail("%v", err)
	}
	scale := 1.0
	if units := strings.ToLower(attText(a.v.atts, "units")); !a.degrees {
		switch units {
		case "", "m", "metre", "meter", "metres", "meters":
		case "km", "kilometre", "kilometer", "kilometres", "kilometers":
			scale = 1000
		default:
			return fail("unit %s is not supported: m and km are", quote(units))
		}
	}
	l := ncLine{name: quote(a.v.name), first: c[0] * scale, last: c[n-1] * scale}
	step := (l.last - l.first) / float64(n-1)
	if step == 0 || step-step != 0 {
		return fail("it runs from %v to %v", l.first, l.last)
	}
	for i, v := range c {
		d := math.Abs((v*scale-l.first)/step - float64(i))
		if !(d <= evenness) {
			return fail("value %d is %v where even steps give %v: resample the file, for example with gdalwarp", i, v*scale, l.first+float64(i)*step)
		}
		l.uneven = math.Max(l.uneven, d)
	}
	return l, nil
}
