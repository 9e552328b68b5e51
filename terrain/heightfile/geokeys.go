package heightfile

import (
	"fmt"
	"math"
	"strings"

	"leadline/engine/geo"
	"leadline/terrain"
)

// Keys of OGC GeoTIFF 1.1.
const (
	keyModel           = 1024 // 1 projected, 2 geographic, 3 geocentric
	keyRaster          = 1025 // 1 pixel is area, 2 pixel is point
	keyCitation        = 1026
	keyGeodetic        = 2048
	keyGeodeticDatum   = 2050
	keyPrimeMeridian   = 2051
	keyAngularUnit     = 2054
	keyEllipsoid       = 2056
	keySemiMajor       = 2057
	keyInvFlattening   = 2059
	keyProjected       = 3072
	keyProjection      = 3074
	keyMethod          = 3075
	keyLinearUnit      = 3076
	keyNatOriginLon    = 3080
	keyNatOriginLat    = 3081
	keyFalseEasting    = 3082
	keyFalseNorthing   = 3083
	keyScale           = 3092
	keyVertical        = 4096
	keyVerticalText    = 4097
	keyVerticalUnit    = 4099
	userDefined        = 32767
	methodTM           = 1
	unitMetre          = 9001
	unitFoot           = 9002
	unitUSSurveyFoot   = 9003
	unitDegree         = 9102
	primeGreenwich     = 8901
	depthBelowSeaLevel = 5715 // EPSG: MSL depth
)

// geoKeys are the GeoTIFF keys of a file.
type geoKeys struct {
	code map[uint16]int
	num  map[uint16]float64
	text map[uint16]string
}

func (t *tiff) geoKeys() (geoKeys, error) {
	k := geoKeys{map[uint16]int{}, map[uint16]float64{}, map[uint16]string{}}
	dir, err := t.ints(tagGeoKeys)
	if err != nil || len(dir) == 0 {
		return k, err
	}
	doubles, err := t.floats(tagGeoDoubles)
	if err != nil {
		return k, err
	}
	ascii, err := t.text(tagGeoASCII)
	if err != nil {
		return k, err
	}
	if len(dir) < 4 || dir[0] != 1 || uint64(len(dir)) < 4+4*dir[3] {
		return k, fmt.Errorf("tag %d: the GeoTIFF key directory is damaged", tagGeoKeys)
	}
	for e := dir[4 : 4+4*dir[3]]; len(e) > 0; e = e[4:] {
		id, place, count, at := uint16(e[0]), e[1], e[2], e[3]
		switch {
		case place == 0:
			k.code[id] = int(at)
		case place == tagGeoDoubles && count == 1 && at < uint64(len(doubles)):
			k.num[id] = doubles[at]
		case place == tagGeoDoubles && count > 1: // no key used here
		case place == tagGeoASCII && at+count <= uint64(len(ascii))+1:
			k.text[id] = strings.TrimRight(ascii[at:min(at+count, uint64(len(ascii)))], "|\x00")
		default:
			return k, fmt.Errorf("tag %d: key %d points nowhere", tagGeoKeys, id)
		}
	}
	return k, nil
}

// crs returns the horizontal coordinate system, zero where there is none.
func (k geoKeys) crs() (terrain.CRS, error) {
	const todo = "reproject with gdalwarp -t_srs EPSG:4326"
	model, ok := k.code[keyModel]
	if !ok {
		return terrain.CRS{}, nil
	}
	switch model {
	case 2:
		return k.geographic()
	case 1:
	case 3:
		return terrain.CRS{}, fmt.Errorf("key %d: coordinates are geocentric, which is not supported: %s", keyModel, todo)
	default:
		return terrain.CRS{}, nil // undefined or user-defined model: --crs decides
	}
	if u, ok := k.code[keyLinearUnit]; ok && u != unitMetre {
		return terrain.CRS{}, fmt.Errorf("key %d: coordinates are in unit %d, not metres (9001): %s", keyLinearUnit, u, todo)
	}
	if code, ok := k.code[keyProjected]; ok && code != userDefined {
		c, err := terrain.FromEPSG(code)
		if err != nil {
			return c, fmt.Errorf("key %d: %w", keyProjected, err)
		}
		return c, nil
	}
	base, err := k.geographic()
	if err != nil {
		return base, err
	}
	if p := k.code[keyProjection]; p > 16000 && p <= 16060 || p > 16100 && p <= 16160 {
		if base.Shifted() {
			tm := terrain.TM{LonDeg: float64(6*(p%100) - 183), Scale: 0.9996, FalseEastM: 500000, GRS80: true}
			if p > 16100 {
				tm.FalseNorthM = 1e7
			}
			return terrain.TransverseMercator(tm)
		}
		return terrain.UTM(p%100, p > 16100)
	}
	if m, ok := k.code[keyMethod]; !ok || m != methodTM {
		return terrain.CRS{}, fmt.Errorf("key %d: projection method %d is not supported, only transverse Mercator (1): %s", keyMethod, m, todo)
	}
	tm := terrain.TM{
		LonDeg: k.num[keyNatOriginLon], LatDeg: k.num[keyNatOriginLat], Scale: 1,
		FalseEastM: k.num[keyFalseEasting], FalseNorthM: k.num[keyFalseNorthing], GRS80: base.Shifted(),
	}
	if s, ok := k.num[keyScale]; ok {
		tm.Scale = s
	}
	return terrain.TransverseMercator(tm)
}

// geographic returns the geodetic system, also that below a projection, if it
// is WGS 84 or near it.
func (k geoKeys) geographic() (terrain.CRS, error) {
	refuse := func(key uint16, what string, v any) (terrain.CRS, error) {
		return terrain.CRS{}, fmt.Errorf("key %d: %s %v is not WGS 84 or close to it: reproject with gdalwarp -t_srs EPSG:4326", key, what, v)
	}
	if u, ok := k.code[keyAngularUnit]; ok && u != unitDegree {
		return refuse(keyAngularUnit, "angular unit", u)
	}
	if p, ok := k.code[keyPrimeMeridian]; ok && p != primeGreenwich {
		return refuse(keyPrimeMeridian, "prime meridian", p)
	}
	grs80, _ := terrain.FromEPSG(4258)
	code, ok := k.code[keyGeodetic]
	switch {
	case code == 4326 || code == 4030: // 4030: unknown datum on the WGS 84 ellipsoid
		return terrain.LonLat(), nil
	case code == 4258 || code == 4269:
		return terrain.FromEPSG(code)
	case code == 4019: // unknown datum on GRS 80
		return grs80, nil
	case ok && code != userDefined:
		return refuse(keyGeodetic, "geodetic system EPSG", code)
	}
	switch d, ok := k.code[keyGeodeticDatum]; {
	case ok && d == 6326:
		return terrain.LonLat(), nil
	case ok && (d == 6258 || d == 6269):
		return grs80, nil
	case ok && d != userDefined && d != 6019 && d != 6030:
		return refuse(keyGeodeticDatum, "geodetic datum EPSG", d)
	}
	a, hasA := k.num[keySemiMajor]
	f, hasF := k.num[keyInvFlattening]
	switch e := k.code[keyEllipsoid]; {
	case e == 7030:
		return terrain.LonLat(), nil
	case e == 7019:
		return grs80, nil
	case hasA && hasF && math.Abs(a-geo.WGS84.A) < 1e-3 && math.Abs(f-1/geo.WGS84.F) < 1e-8:
		return terrain.LonLat(), nil
	case hasA && hasF && math.Abs(a-geo.GRS80.A) < 1e-3 && math.Abs(f-1/geo.GRS80.F) < 1e-8:
		return grs80, nil
	case hasA || hasF || e != 0:
		return refuse(keyEllipsoid, "ellipsoid", fmt.Sprintf("%d (%v, 1/%v)", e, a, f))
	case !ok && k.code[keyModel] == 1:
		return refuse(keyGeodetic, "geodetic system", "unnamed")
	}
	return refuse(keyGeodetic, "geodetic system", "user-defined")
}

// verticalNames are the vertical systems that height rasters come in.
var verticalNames = map[int]string{
	3855: "EGM2008", 5773: "EGM96", 5703: "NAVD88", 5714: "mean sea level", 5715: "mean sea level",
	5701: "Newlyn (ODN)", 5621: "EVRF2007", 5783: "DHHN92", 7837: "DHHN2016", 5798: "EGM84", 4979: "WGS 84 ellipsoid",
}

func (k geoKeys) vertical(f *raw) {
	switch code := k.code[keyVertical]; {
	case verticalNames[code] != "":
		f.meta.VerticalDatum = verticalNames[code]
		if code == depthBelowSeaLevel {
			f.vertical = Down
		}
	case code != 0 && code != userDefined:
		f.meta.VerticalDatum = fmt.Sprintf("EPSG:%d", code)
	case k.text[keyVerticalText] != "":
		f.meta.VerticalDatum = k.text[keyVerticalText]
	}
	switch k.code[keyVerticalUnit] {
	case unitMetre:
		f.unit = Metre
	case unitFoot:
		f.unit = Foot
	case unitUSSurveyFoot:
		f.unit = USSurveyFoot
	}
}
