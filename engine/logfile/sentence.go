package logfile

import (
	"math"
	"time"
)

const metresPerSecond = 1852.0 / 3600 // of a knot

// said is what one sentence says.
type said struct {
	readings []reading
	hasTime  bool
	ns       int64     // of the day
	day      time.Time // zero if it says none
	void     bool      // says itself that it has nothing
	trust    bool      // the receiver knows the time
}

// read makes readings of a sentence; used is false for a type that has no use.
func (s *sentence) read() (out said, used bool, bad *refusal) {
	r := &reader{s: s}
	switch s.kind() {
	case "DPT":
		r.dpt(&out)
	case "DBT":
		r.dbt(&out)
	case "VHW":
		r.vhw(&out)
	case "VTG":
		r.vtg(&out)
	case "VBW":
		r.vbw(&out)
	case "HDT":
		if v, ok := r.number(0, 0, 360); ok {
			r.unit(1, "T")
			out.add(reading{of: heading, v: v})
		}
	case "HDG":
		r.hdg(&out)
	case "HDM":
		if v, ok := r.number(0, 0, 360); ok {
			r.unit(1, "M")
			out.add(reading{of: heading, v: v, magnetic: true, reduce: true})
		}
	case "ROT":
		if v, ok := r.number(0, -10000, 10000); ok && r.text(1) == "A" {
			out.add(reading{of: turnRate, v: v})
		}
	case "GGA":
		r.gga(&out)
	case "RMC":
		r.rmc(&out)
	case "GLL":
		r.gll(&out)
	case "ZDA":
		r.zda(&out)
	default:
		return out, false, nil
	}
	out.void = len(out.readings) == 0 && s.kind() != "ZDA"
	for i := range out.readings {
		out.readings[i].address = s.address
	}
	return out, true, r.bad
}

func (o *said) add(r reading) { o.readings = append(o.readings, r) }

// dpt: depth below transducer m, offset m, range.
func (r *reader) dpt(o *said) {
	d, ok := r.number(0, 0, 12000)
	offset, has := r.number(1, -100, 100)
	if ok {
		o.add(reading{of: depth, v: d, extra: offset, has: has && offset >= 0})
	}
}

// dbt: depth below transducer in feet, metres and fathoms.
func (r *reader) dbt(o *said) {
	for _, u := range []struct {
		i       int
		letter  string
		inMetre float64
	}{{2, "M", 1}, {0, "f", 0.3048}, {4, "F", 1.8288}} {
		if d, ok := r.number(u.i, 0, 12000/u.inMetre); ok {
			r.unit(u.i+1, u.letter)
			o.add(reading{of: depth, v: d * u.inMetre})
			return
		}
	}
}

// knots reads a speed in knots, or beside it in km/h.
func (r *reader) knots(i int) (mps float64, ok bool) {
	const most = 2000
	if v, ok := r.number(i, 0, most); ok {
		r.unit(i+1, "N")
		return v * metresPerSecond, true
	}
	if v, ok := r.number(i+2, 0, most); ok {
		r.unit(i+3, "K")
		return v / 3.6, true
	}
	return 0, false
}

// vhw: heading true, magnetic, speed through the water in knots and km/h.
func (r *reader) vhw(o *said) {
	if v, ok := r.number(0, 0, 360); ok {
		r.unit(1, "T")
		o.add(reading{of: heading, v: v})
	} else if v, ok := r.number(2, 0, 360); ok {
		r.unit(3, "M")
		o.add(reading{of: heading, v: v, magnetic: true, reduce: true})
	}
	if v, ok := r.knots(4); ok {
		o.add(reading{of: waterSpeed, v: v, body: true})
	}
}

// vtg: course true, magnetic, speed over ground in knots and km/h, mode.
func (r *reader) vtg(o *said) {
	if r.voidMode(8) {
		return
	}
	if v, ok := r.knots(4); ok {
		course, has := r.number(0, 0, 360)
		if has {
			r.unit(1, "T")
		}
		o.add(reading{of: groundSpeed, v: v, extra: course, has: has})
	}
}

// voidMode tells the modes in which a receiver does not measure: none,
// estimated, manual, simulated.
func (r *reader) voidMode(i int) bool {
	switch r.text(i) {
	case "N", "E", "M", "S":
		return true
	}
	return false
}

// vbw: speeds in knots through the water, ahead and to starboard, status; over
// ground likewise.
func (r *reader) vbw(o *said) {
	for i, of := range []quantity{waterSpeed, groundSpeed} {
		v, ok := r.number(3*i, -200, 200)
		across, has := r.number(3*i+1, -200, 200)
		if ok && r.text(3*i+2) == "A" {
			o.add(reading{of: of, v: v * metresPerSecond, extra: across * metresPerSecond, has: has, body: true})
		}
	}
}

// hdg: magnetic heading, deviation E/W, variation E/W.
func (r *reader) hdg(o *said) {
	v, ok := r.number(0, 0, 360)
	if !ok {
		return
	}
	deviation, _ := r.signed(1, 180, "E", "W")
	variation, has := r.signed(3, 180, "E", "W")
	if r.text(3) != "" && !has {
		return // wrong, and said so
	}
	o.add(reading{of: heading, v: v + deviation + variation, magnetic: true, reduce: !has})
}

// The default sigmas of a fix, along each axis (practice): what a receiver's
// pseudorange error of some 5 m, 1.5 m if corrected, makes of a HDOP, over √2.
var fixSigmas = map[string]struct{ perHDOP, fixed float64 }{
	"1": {perHDOP: 4},
	"2": {perHDOP: 1},
	"3": {perHDOP: 4},
	"4": {fixed: 0.05},
	"5": {fixed: 0.5},
}

// position reads latitude and longitude from field i on.
func (r *reader) position(i int) (p reading, ok bool) {
	lat, okLat := r.angle(i, 90, "N", "S")
	lon, okLon := r.angle(i+2, 180, "E", "W")
	return reading{of: fix, timed: true, lat: lat, lon: lon}, okLat && okLon
}

// gga: time, latitude, longitude, quality, satellites, HDOP, height, …
func (r *reader) gga(o *said) {
	o.ns, o.hasTime = r.timeOfDay(0)
	p, ok := r.position(1)
	q, measured := fixSigmas[r.text(5)]
	if !measured || !ok { // 0 no fix, 6 estimated, 7 manual, 8 simulated
		return
	}
	o.trust = true
	hdop, has := r.number(7, 0, 1000)
	if !has {
		hdop = 2
	}
	p.sigmaM = math.Max(q.perHDOP*hdop+q.fixed, 0.01)
	p.extra, p.has = r.number(8, -20000, 100000)
	o.add(p)
}

// rmc: time, status, latitude, longitude, speed in knots, course, date,
// variation, mode.
func (r *reader) rmc(o *said) {
	o.ns, o.hasTime = r.timeOfDay(0)
	o.day, _ = r.day(8)
	if r.text(1) != "A" || r.voidMode(11) {
		return
	}
	o.trust = true
	if p, ok := r.position(2); ok {
		p.sigmaM = modeSigma(r.text(11))
		o.add(p)
	}
	if v, ok := r.number(6, 0, 2000); ok {
		course, has := r.number(7, 0, 360)
		o.add(reading{of: groundSpeed, timed: true, v: v * metresPerSecond, extra: course, has: has})
	}
}

// gll: latitude, longitude, time, status, mode.
func (r *reader) gll(o *said) {
	o.ns, o.hasTime = r.timeOfDay(4)
	if r.text(5) != "A" || r.voidMode(6) {
		return
	}
	o.trust = true
	if p, ok := r.position(0); ok {
		p.sigmaM = modeSigma(r.text(6))
		o.add(p)
	}
}

// modeSigma is that of a fix by its mode letter, at a HDOP of 2.
func modeSigma(mode string) float64 {
	q := map[string]string{"D": "2", "R": "4", "F": "5"}[mode]
	if q == "" {
		q = "1"
	}
	return 2*fixSigmas[q].perHDOP + fixSigmas[q].fixed
}

// zda: time, day, month, year, zone.
func (r *reader) zda(o *said) {
	o.ns, o.hasTime = r.timeOfDay(0)
	d, okD := r.number(1, 1, 31)
	m, okM := r.number(2, 1, 12)
	y, okY := r.number(3, 1970, 2260)
	if !o.hasTime || !okD || !okM || !okY {
		o.hasTime = false
		return
	}
	o.day, o.hasTime = r.civil(1, int(y), int(m), int(d))
	o.trust = true
}
