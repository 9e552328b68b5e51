package geo

import (
	"math"

	"leadline/engine/kernel"
)

// Ellipsoid is an ellipsoid of revolution: equatorial radius in metres and
// flattening.
type Ellipsoid struct{ A, F float64 }

// Ellipsoids by their published parameters (EPSG dataset).
var (
	WGS84      = Ellipsoid{6378137, 1 / 298.257223563}
	GRS80      = Ellipsoid{6378137, 1 / 298.257222101}
	Airy1830   = Ellipsoid{6377563.396, 1 / 299.3249646}
	Clarke1866 = Ellipsoid{6378206.4, 1 / 294.978698213898}
)

// TransverseMercator is a transverse Mercator projection. Use
// NewTransverseMercator.
type TransverseMercator struct {
	ell            Ellipsoid
	origin         LonLat
	k0, fe, fn     float64
	e              float64 // first eccentricity
	rectA          float64 // rectifying radius · k0
	alpha, beta    [6]float64
	originNorthing float64
}

// NewTransverseMercator makes the projection with its natural origin, scale
// factor k0 there, and false easting and northing in metres.
//
// Source: Krüger's series to sixth order in the third flattening, as given by
// Karney, "Transverse Mercator with an accuracy of a few nanometers", J.
// Geodesy 85 (2011); error below 1e-8 m within 3000 km of the central
// meridian.
func NewTransverseMercator(ell Ellipsoid, origin LonLat, k0, falseE, falseN float64) *TransverseMercator {
	n := ell.F / (2 - ell.F)
	n2 := n * n
	n3, n4, n5, n6 := n2*n, n2*n2, n2*n2*n, n2*n2*n2
	t := &TransverseMercator{ell: ell, origin: origin, k0: k0, fe: falseE, fn: falseN}
	t.e = math.Sqrt(ell.F * (2 - ell.F))
	t.rectA = k0 * ell.A / (1 + n) * (1 + n2/4 + n4/64 + n6/256)
	t.alpha = [6]float64{
		n/2 - 2*n2/3 + 5*n3/16 + 41*n4/180 - 127*n5/288 + 7891*n6/37800,
		13*n2/48 - 3*n3/5 + 557*n4/1440 + 281*n5/630 - 1983433*n6/1935360,
		61*n3/240 - 103*n4/140 + 15061*n5/26880 + 167603*n6/181440,
		49561*n4/161280 - 179*n5/168 + 6601661*n6/7257600,
		34729*n5/80640 - 3418889*n6/1995840,
		212378941 * n6 / 319334400,
	}
	t.beta = [6]float64{
		n/2 - 2*n2/3 + 37*n3/96 - n4/360 - 81*n5/512 + 96199*n6/604800,
		n2/48 + n3/15 - 437*n4/1440 + 46*n5/105 - 1118711*n6/3870720,
		17*n3/480 - 37*n4/840 - 209*n5/4480 + 5569*n6/90720,
		4397*n4/161280 - 11*n5/504 - 830251*n6/7257600,
		4583*n5/161280 - 108847*n6/3991680,
		20648693 * n6 / 638668800,
	}
	_, t.originNorthing = t.raw(LonLat{origin.Lon, origin.Lat})
	return t
}

// UTM returns the universal transverse Mercator projection of a zone (1 to
// 60) on WGS 84.
func UTM(zone int, south bool) *TransverseMercator {
	fn := 0.0
	if south {
		fn = 10000000
	}
	return NewTransverseMercator(WGS84, LonLat{Rad(float64(6*zone - 183)), 0}, 0.9996, 500000, fn)
}

// conformal returns tan of the conformal latitude for tan of the geodetic
// one (Karney 2011, eq. 7-9).
func (t *TransverseMercator) conformal(tau float64) float64 {
	root := math.Sqrt(1 + tau*tau)
	s := kernel.Sinh(t.e * kernel.Atanh(t.e*tau/root))
	return tau*math.Sqrt(1+s*s) - s*root
}

// raw projects without false origin; x east, y north of the equator.
func (t *TransverseMercator) raw(p LonLat) (x, y float64) {
	x, y, _, _ = t.project(p)
	return x, y
}

func (t *TransverseMercator) project(p LonLat) (x, y, gamma, k float64) {
	sLat, cLat := kernel.Sincos(p.Lat)
	sLon, cLon := kernel.Sincos(WrapPi(p.Lon - t.origin.Lon))
	tau := sLat / math.Max(cLat, 1e-300)
	taup := t.conformal(tau)
	h := math.Sqrt(taup*taup + cLon*cLon)
	xip := kernel.Atan2(taup, cLon)
	etap := kernel.Asinh(sLon / h)
	xi, eta, pr, qr := xip, etap, 1.0, 0.0
	for j := range t.alpha {
		m := float64(2 * (j + 1))
		s, c := kernel.Sincos(m * xip)
		sh, ch := kernel.Sinh(m*etap), kernel.Cosh(m*etap)
		xi += t.alpha[j] * s * ch
		eta += t.alpha[j] * c * sh
		pr += m * t.alpha[j] * c * ch
		qr += m * t.alpha[j] * s * sh
	}
	gamma = kernel.Atan2(taup*sLon, cLon*math.Sqrt(1+taup*taup)) + kernel.Atan2(qr, pr)
	k = t.rectA / t.ell.A * math.Sqrt(pr*pr+qr*qr) *
		math.Sqrt(1-t.e*t.e*sLat*sLat) * math.Sqrt(1+tau*tau) / h
	return t.rectA * eta, t.rectA * xi, gamma, k
}

// Forward projects a position to easting and northing in metres.
func (t *TransverseMercator) Forward(p LonLat) Point {
	x, y := t.raw(p)
	return Point{x + t.fe, y - t.originNorthing + t.fn}
}

// Convergence returns, at a position, the meridian convergence in radians
// (the direction of true north, clockwise from grid north, is -gamma: a true
// azimuth α appears in the frame as α - gamma) and the point scale factor
// (frame length over true length).
func (t *TransverseMercator) Convergence(p LonLat) (gammaRad, scale float64) {
	_, _, g, k := t.project(p)
	return g, k
}

// Inverse returns the position of a projected point.
func (t *TransverseMercator) Inverse(q Point) LonLat {
	eta := (q.E - t.fe) / t.rectA
	xi := (q.N - t.fn + t.originNorthing) / t.rectA
	xip, etap := xi, eta
	for j := range t.beta {
		m := float64(2 * (j + 1))
		s, c := kernel.Sincos(m * xi)
		xip -= t.beta[j] * s * kernel.Cosh(m*eta)
		etap -= t.beta[j] * c * kernel.Sinh(m*eta)
	}
	s, c := kernel.Sincos(xip)
	sh := kernel.Sinh(etap)
	taup := s / math.Sqrt(sh*sh+c*c)
	lon := kernel.Atan2(sh, c)
	tau := taup / (1 - t.e*t.e)
	for range 5 { // Newton (Karney 2011, eq. 19-21); three rounds reach rounding
		tp := t.conformal(tau)
		d := (taup - tp) / math.Sqrt(1+tp*tp) * (1 + (1-t.e*t.e)*tau*tau) /
			((1 - t.e*t.e) * math.Sqrt(1+tau*tau))
		tau += d
	}
	return LonLat{WrapPi(lon + t.origin.Lon), kernel.Atan(tau)}
}
