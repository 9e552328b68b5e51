package terrain

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"leadline/engine/geo"
)

// CRS is a horizontal coordinate reference system of a raster: longitude and
// latitude in degrees, or a transverse Mercator projection in metres. The zero
// value is none.
//
// Horizontal datums that agree with WGS 84 within about two metres (ETRS89,
// NAD83) are taken as WGS 84; Shifted tells. Others are refused where files
// are read, since taking them for WGS 84 would move the map by tens to
// hundreds of metres.
type CRS struct {
	name string // canonical text; "" is no CRS
	epsg int
	tm   *TM
	proj *geo.TransverseMercator
}

// TM are the parameters of a transverse Mercator projection: natural origin
// in degrees, scale factor there, false easting and northing in metres. GRS80
// tells that it is on the GRS 80 ellipsoid and not that of WGS 84 (the two
// differ by 0.1 mm).
type TM struct {
	LonDeg, LatDeg float64
	Scale          float64
	FalseEastM     float64
	FalseNorthM    float64
	GRS80          bool
}

// LonLat is WGS 84 longitude and latitude in degrees, EPSG:4326.
func LonLat() CRS { return CRS{name: "EPSG:4326", epsg: 4326} }

// UTM is a universal transverse Mercator zone (1 to 60) on WGS 84.
func UTM(zone int, south bool) (CRS, error) {
	code := 32600 + zone
	if south {
		code += 100
	}
	if zone < 1 || zone > 60 {
		return CRS{}, fmt.Errorf("UTM zone %d does not exist: zones are 1 to 60", zone)
	}
	return FromEPSG(code)
}

// TransverseMercator is a projection by its parameters.
func TransverseMercator(p TM) (CRS, error) {
	if !geo.Finite(p.LonDeg, p.LatDeg, p.Scale, p.FalseEastM, p.FalseNorthM) || math.Abs(p.LonDeg) > 180 ||
		math.Abs(p.LatDeg) > 90 || p.Scale < 0.5 || p.Scale > 2 {
		return CRS{}, fmt.Errorf("no transverse Mercator has origin lon %v, lat %v, scale %v, false origin %v, %v", p.LonDeg, p.LatDeg, p.Scale, p.FalseEastM, p.FalseNorthM)
	}
	g := func(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
	c := CRS{name: "tm:" + strings.Join([]string{g(p.LonDeg), g(p.LatDeg), g(p.Scale), g(p.FalseEastM), g(p.FalseNorthM)}, ",")}
	ell := geo.WGS84
	if p.GRS80 {
		c.name += ",grs80"
		ell = geo.GRS80
	}
	c.tm = &p
	c.proj = geo.NewTransverseMercator(ell, geo.FromDegrees(p.LonDeg, p.LatDeg), p.Scale, p.FalseEastM, p.FalseNorthM)
	return c, nil
}

// FromEPSG knows the codes 4326 (WGS 84), 4258 (ETRS89), 4269 (NAD83),
// 32601–32660 and 32701–32760 (WGS 84 / UTM), 25828–25838 (ETRS89 / UTM) and
// 26901–26923 (NAD83 / UTM).
func FromEPSG(code int) (CRS, error) {
	var zone int
	var south, grs80 bool
	switch {
	case code == 4326:
		return LonLat(), nil
	case code == 4258 || code == 4269:
		return CRS{name: fmt.Sprintf("EPSG:%d", code), epsg: code}, nil
	case code > 32600 && code <= 32660:
		zone = code - 32600
	case code > 32700 && code <= 32760:
		zone, south = code-32700, true
	case code >= 25828 && code <= 25838:
		zone, grs80 = code-25800, true
	case code >= 26901 && code <= 26923:
		zone, grs80 = code-26900, true
	default:
		return CRS{}, fmt.Errorf("EPSG:%d is not supported: use EPSG:4326 or a UTM zone (EPSG:32601–32660, 32701–32760), for example after gdalwarp -t_srs EPSG:4326", code)
	}
	fn := 0.0
	if south {
		fn = 10000000
	}
	c, err := TransverseMercator(TM{float64(6*zone - 183), 0, 0.9996, 500000, fn, grs80})
	c.name, c.epsg = fmt.Sprintf("EPSG:%d", code), code
	return c, err
}

// ParseCRS reads EPSG:CODE, utm:ZONE followed by N or S, lonlat, or
// tm:LON,LAT[,SCALE,FALSE_EAST,FALSE_NORTH[,grs80]] (degrees and metres; scale
// 1 and no false origin unless given, which lays a bare metric grid around a
// place).
func ParseCRS(s string) (CRS, error) {
	bad := func(why string) (CRS, error) {
		return CRS{}, fmt.Errorf("coordinate system %q: %s: use EPSG:4326, EPSG:326ZZ, EPSG:327ZZ, utm:33N, lonlat or tm:LON,LAT", s, why)
	}
	t := strings.ToLower(strings.ReplaceAll(strings.TrimSpace(s), " ", ""))
	kind, rest, _ := strings.Cut(t, ":")
	switch kind {
	case "lonlat":
		return LonLat(), nil
	case "epsg":
		code, err := strconv.Atoi(rest)
		if err != nil {
			return bad("the EPSG code is no number")
		}
		return FromEPSG(code)
	case "utm":
		if len(rest) < 2 {
			return bad("the zone is missing")
		}
		zone, err := strconv.Atoi(rest[:len(rest)-1])
		half := rest[len(rest)-1]
		if err != nil || (half != 'n' && half != 's') {
			return bad("the zone must be a number followed by N or S")
		}
		return UTM(zone, half == 's')
	case "tm":
		p := TM{Scale: 1}
		parts := strings.Split(rest, ",")
		if len(parts) == 6 && parts[5] == "grs80" {
			p.GRS80, parts = true, parts[:5]
		}
		if len(parts) != 2 && len(parts) != 5 {
			return bad("tm takes two or five numbers")
		}
		for i, dst := range []*float64{&p.LonDeg, &p.LatDeg, &p.Scale, &p.FalseEastM, &p.FalseNorthM}[:len(parts)] {
			x, err := strconv.ParseFloat(parts[i], 64)
			if err != nil {
				return bad(fmt.Sprintf("%q is no number", parts[i]))
			}
			*dst = x
		}
		return TransverseMercator(p)
	}
	return bad("unknown kind")
}

// IsZero reports that there is no CRS.
func (c CRS) IsZero() bool { return c.name == "" }

// Geographic reports longitude and latitude in degrees.
func (c CRS) Geographic() bool { return !c.IsZero() && c.tm == nil }

// EPSG returns the code, or 0 for a projection by parameters.
func (c CRS) EPSG() int { return c.epsg }

// TM returns the parameters of a projected CRS; ok is false for others.
func (c CRS) TM() (p TM, ok bool) {
	if c.tm == nil {
		return TM{}, false
	}
	return *c.tm, true
}

// Shifted reports a datum other than WGS 84 that is taken for it and may be
// up to about two metres off.
func (c CRS) Shifted() bool {
	return c.epsg == 4258 || c.epsg == 4269 || c.tm != nil && c.tm.GRS80
}

// String returns a text that ParseCRS reads, one for each CRS.
func (c CRS) String() string {
	if c.IsZero() {
		return "none"
	}
	return c.name
}

// forward returns the coordinates of a position: degrees or metres.
func (c CRS) forward(p geo.LonLat) (x, y float64) {
	if c.tm == nil {
		return p.Degrees()
	}
	q := c.proj.Forward(p)
	return q.E, q.N
}

// inverse returns the position of coordinates in degrees or metres.
func (c CRS) inverse(x, y float64) geo.LonLat {
	if c.tm == nil {
		p := geo.FromDegrees(x, y)
		p.Lon = geo.WrapPi(p.Lon)
		return p
	}
	return c.proj.Inverse(geo.Point{E: x, N: y})
}
