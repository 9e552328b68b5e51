package heightfile

import (
	"errors"
	"fmt"
	"math"

	"leadline/terrain"
)

// Unit is a unit of height.
type Unit string

// The units of height that files come in.
const (
	UnitUnset    Unit = ""      // what the file says, else metres
	Metre        Unit = "m"     //
	Foot         Unit = "ft"    // international, 0.3048 m exactly
	USSurveyFoot Unit = "us-ft" // 1200/3937 m exactly
)

func (u Unit) metres() float64 {
	switch u {
	case Foot:
		return 0.3048
	case USSurveyFoot:
		return 1200.0 / 3937
	}
	return 1
}

// Vertical is the direction in which a file's numbers grow.
type Vertical string

// The directions.
const (
	VerticalUnset Vertical = ""     // what the file says, else up
	Up            Vertical = "up"   // heights
	Down          Vertical = "down" // depths
)

// Options say about a file what it does not say itself; where they are set
// they prevail over the file, with a warning where the two disagree. The zero
// value takes the file's word.
type Options struct {
	CRS           terrain.CRS // horizontal coordinate system
	Unit          Unit        // of the numbers
	Vertical      Vertical    // direction in which the numbers grow
	SigmaM        float64     // standard deviation of the heights' error, metres; 0 unset
	LE90M         float64     // or linear error at 90 %, metres; 0 unset
	VerticalDatum string      // what heights are above
	Source        string      // where the file comes from
	Licence       string      // licence text or name
	Variable      string      // netCDF: the variable that holds heights
	MaxSamples    int         // refuse larger rasters; 0: terrain.MaxSamples
}

// Validate lists everything that is wrong with the options.
func (o Options) Validate() error {
	var errs []error
	bad := func(format string, args ...any) { errs = append(errs, fmt.Errorf(format, args...)) }
	switch o.Unit {
	case UnitUnset, Metre, Foot, USSurveyFoot:
	default:
		bad("unit %q is unknown: use m, ft or us-ft", o.Unit)
	}
	switch o.Vertical {
	case VerticalUnset, Up, Down:
	default:
		bad("vertical %q is unknown: use up or down", o.Vertical)
	}
	for _, x := range []struct {
		name string
		m    float64
	}{{"sigma", o.SigmaM}, {"LE90", o.LE90M}} {
		if math.IsNaN(x.m) || x.m < 0 || x.m > 1e4 {
			bad("the vertical %s is %v m: it must lie between 0 and 10 000 m", x.name, x.m)
		}
	}
	if o.SigmaM > 0 && o.LE90M > 0 {
		bad("both a vertical sigma (%v m) and an LE90 (%v m) are given: give one", o.SigmaM, o.LE90M)
	}
	for _, s := range []struct{ name, text string }{{"vertical datum", o.VerticalDatum}, {"source", o.Source}, {"licence", o.Licence}} {
		if len(s.text) > maxText {
			bad("the %s is %d bytes long, over the limit of %d", s.name, len(s.text), maxText)
		}
	}
	if o.MaxSamples < 0 {
		bad("the limit of samples is %d: it must not be negative", o.MaxSamples)
	}
	return errors.Join(errs...)
}

// maxText bounds source, licence and datum texts.
const maxText = 64 << 10

func (o Options) maxSamples() int {
	if o.MaxSamples == 0 || o.MaxSamples > terrain.MaxSamples {
		return terrain.MaxSamples
	}
	return o.MaxSamples
}

// room refuses sizes that no raster may have, before anything is allocated.
func (o Options) room(cols, rows int64) error {
	switch {
	case cols < 2 || rows < 2:
		return fmt.Errorf("it has %d columns and %d rows: at least 2 of each are needed", cols, rows)
	case cols > int64(o.maxSamples())/rows:
		return fmt.Errorf("it has %d × %d samples, over the limit of %d: cut it into pieces or thin it out", cols, rows, o.maxSamples())
	}
	return nil
}
