package geo

import (
	"errors"
	"math"

	"leadline/engine/kernel"
)

// ErrAntipodal is returned by Ellipsoid.Distance for points so nearly
// opposite that the iteration does not settle.
var ErrAntipodal = errors.New("geo: the points are nearly antipodal: no geodesic found")

// Distance returns the geodesic distance in metres between two positions and
// the azimuth at the first, in radians clockwise from true north.
//
// Source: Vincenty, "Direct and Inverse Solutions of Geodesics on the
// Ellipsoid", Survey Review 23 (1975), inverse formula; error below 1 mm.
func (ell Ellipsoid) Distance(p, q LonLat) (distanceM, azimuthRad float64, err error) {
	b := ell.A * (1 - ell.F)
	reduced := func(lat float64) (sin, cos float64) {
		s, c := kernel.Sincos(lat)
		s *= 1 - ell.F
		h := math.Sqrt(s*s + c*c)
		return s / h, c / h
	}
	s1, c1 := reduced(p.Lat)
	s2, c2 := reduced(q.Lat)
	dLon := WrapPi(q.Lon - p.Lon)
	lambda := dLon
	for range 200 {
		sl, cl := kernel.Sincos(lambda)
		sinSigma := math.Sqrt((c2*sl)*(c2*sl) + (c1*s2-s1*c2*cl)*(c1*s2-s1*c2*cl))
		if sinSigma == 0 {
			return 0, 0, nil
		}
		cosSigma := s1*s2 + c1*c2*cl
		sigma := kernel.Atan2(sinSigma, cosSigma)
		sinAlpha := c1 * c2 * sl / sinSigma
		cos2 := 1 - sinAlpha*sinAlpha
		cos2m := 0.0
		if cos2 > 0 {
			cos2m = cosSigma - 2*s1*s2/cos2
		}
		c := ell.F / 16 * cos2 * (4 + ell.F*(4-3*cos2))
		next := dLon + (1-c)*ell.F*sinAlpha*(sigma+c*sinSigma*(cos2m+c*cosSigma*(-1+2*cos2m*cos2m)))
		if math.Abs(next-lambda) > 1e-12 {
			lambda = next
			continue
		}
		u2 := cos2 * (ell.A*ell.A - b*b) / (b * b)
		a := 1 + u2/16384*(4096+u2*(-768+u2*(320-175*u2)))
		bb := u2 / 1024 * (256 + u2*(-128+u2*(74-47*u2)))
		ds := bb * sinSigma * (cos2m + bb/4*(cosSigma*(-1+2*cos2m*cos2m)-
			bb/6*cos2m*(-3+4*sinSigma*sinSigma)*(-3+4*cos2m*cos2m)))
		return b * a * (sigma - ds), WrapCompass(kernel.Atan2(c2*sl, c1*s2-s1*c2*cl)), nil
	}
	return 0, 0, ErrAntipodal
}
