package score

import (
	"math"
	"slices"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Truth is where the vehicle was at a time, with the standard deviation an
// axis of the truth itself.
type Truth struct {
	TimeNS int64
	At     geo.LonLat
	SigmaM float64
}

// Offset is where and when a truth was measured.
type Offset struct {
	// ForwardM and RightM are where the truth's antenna is, from the vehicle's
	// reference point.
	ForwardM float64 `json:"forward_m"`
	RightM   float64 `json:"right_m"`
	// LateS is by how much the truth's times are late.
	LateS float64 `json:"late_s"`
}

// Bounds of what a truth is taken for.
const (
	// maxTruthGapNS: between truths further apart nothing is known.
	maxTruthGapNS = 2e9
	// A course is that of the way courseS before to courseS after a time, if it
	// is courseLeastM and courseSigmas of the truth's error long.
	courseS      = 1.0
	courseLeastM = 1.0
	courseSigmas = 5
)

// motion is how the truth moves: along is its direction, known if it moves.
type motion struct {
	along    geo.Point // unit vector, true east and north
	speedMPS float64
	known    bool
}

// truths are those of a drive with their offset.
type truths struct {
	list   []Truth
	offset Offset
}

// at returns where the vehicle's reference point was at a time, by the truth
// and its offset, and how it moved; not ok if that is not known. An antenna
// beside the reference point is known to be there only while the truth has a
// course.
func (t *truths) at(ns int64) (Truth, motion, bool) {
	late := ns + int64(math.Round(t.offset.LateS*1e9))
	at, ok := Interpolate(t.list, late)
	if !ok {
		return Truth{}, motion{}, false
	}
	at.TimeNS = ns
	m := t.motion(late, at.SigmaM)
	if t.offset.ForwardM == 0 && t.offset.RightM == 0 {
		return at, m, true
	}
	if !m.known {
		return Truth{}, motion{}, false
	}
	f := geo.NewFrame(at.At)
	forward, right := times(m.along, t.offset.ForwardM), times(rightOf(m.along), t.offset.RightM)
	at.At = f.Inverse(geo.Point{E: -forward.E - right.E, N: -forward.N - right.N})
	return at, m, true
}

// twofold counts the truths that say another place, by more than three standard
// deviations, than the first of their time, which counts.
func (t *truths) twofold() (n int, err error) {
	first := 0
	for i := 1; i < len(t.list); i++ {
		if t.list[i].TimeNS != t.list[first].TimeNS {
			first = i
			continue
		}
		d, _, err := geo.WGS84.Distance(t.list[first].At, t.list[i].At)
		if err != nil {
			return 0, err
		}
		if d > 3*math.Hypot(t.list[first].SigmaM, t.list[i].SigmaM) {
			n++
		}
	}
	return n, nil
}

// farthestM is how far from a truth roads are looked for: there a map's frame, a
// transverse Mercator projection, is off by L²/2R², a hundredth.
const farthestM = 1e6

// fromRoads is how far all truths are from the map's roads at least, up to farthestM.
// It is at most a hundredth less than what the nearest one is: what is known of a truth
// bounds those after it, so that few of many are looked up.
func (t *truths) fromRoads(roads func(geo.LonLat, float64) []Road) (float64, error) {
	nearestM := farthestM // that was found
	for radiusM := float64(rightMostM); radiusM < farthestM; radiusM *= 2 {
		if near := roads(t.list[0].At, radiusM); len(near) > 0 {
			nearestM = near[0].DistM
			break
		}
	}
	leastM, thisM := nearestM, nearestM // bounds: of all, and of the truth under way
	for i := 1; i < len(t.list); i++ {
		m, _, err := geo.WGS84.Distance(t.list[i-1].At, t.list[i].At)
		if err != nil {
			return 0, err
		}
		if thisM -= m; thisM < 0.99*nearestM {
			thisM = nearestM
			if near := roads(t.list[i].At, nearestM); len(near) > 0 {
				nearestM, thisM = near[0].DistM, near[0].DistM
			}
		}
		leastM = math.Min(leastM, thisM)
	}
	return leastM, nil
}

// motion is how the truth moves around a time of its own.
func (t *truths) motion(ns int64, sigmaM float64) motion {
	from, ok := Interpolate(t.list, ns-courseS*1e9)
	if !ok {
		if from, ok = Interpolate(t.list, ns); !ok {
			return motion{}
		}
	}
	to, ok := Interpolate(t.list, ns+courseS*1e9)
	if !ok {
		if to, ok = Interpolate(t.list, ns); !ok {
			return motion{}
		}
	}
	m, azimuth, err := geo.WGS84.Distance(from.At, to.At)
	if err != nil || m < math.Max(courseLeastM, courseSigmas*sigmaM) {
		return motion{}
	}
	sin, cos := kernel.Sincos(azimuth)
	return motion{geo.Point{E: sin, N: cos}, m / (float64(to.TimeNS-from.TimeNS) / 1e9), true}
}

// Interpolate returns the truth at a time: linear in longitude and latitude
// between the neighbours, if they are at most 2 s apart. Over the 2 km that
// anything on or over a map covers in that time, the arc and the line differ
// by L²/8R, less than 8 cm. Of two truths at one time the first counts.
func Interpolate(truth []Truth, timeNS int64) (Truth, bool) {
	return Between(truth, timeNS, maxTruthGapNS)
}

// Between is Interpolate for neighbours that may be so far apart.
func Between(truth []Truth, timeNS, gapNS int64) (Truth, bool) {
	i, found := slices.BinarySearchFunc(truth, timeNS, func(t Truth, ns int64) int {
		switch {
		case t.TimeNS < ns:
			return -1
		case t.TimeNS > ns:
			return 1
		}
		return 0
	})
	if found {
		return truth[i], true
	}
	if i == 0 || i == len(truth) || truth[i].TimeNS-truth[i-1].TimeNS > gapNS {
		return Truth{}, false
	}
	last := i - 1
	for last > 0 && truth[last-1].TimeNS == truth[last].TimeNS {
		last--
	}
	a, b := truth[last], truth[i]
	f := float64(timeNS-a.TimeNS) / float64(b.TimeNS-a.TimeNS)
	return Truth{
		TimeNS: timeNS,
		At: geo.LonLat{
			Lon: geo.WrapPi(a.At.Lon + f*geo.WrapPi(b.At.Lon-a.At.Lon)),
			Lat: a.At.Lat + f*(b.At.Lat-a.At.Lat),
		},
		SigmaM: math.Max(a.SigmaM, b.SigmaM),
	}, true
}

// distance sums the way between the truths from a start up to a time; not ok if
// the truth does not reach from one to the other.
func distance(truth []Truth, startNS, untilNS int64) (sumM float64, ok bool, err error) {
	end, ok := Interpolate(truth, untilNS)
	if !ok || truth[0].TimeNS > startNS+maxTruthGapNS { // the way before the first truth is not known
		return 0, false, nil
	}
	from := truth[0]
	for _, to := range truth {
		if from.TimeNS >= untilNS {
			break
		}
		if to.TimeNS == from.TimeNS {
			continue // the first of a time counts
		}
		if to.TimeNS > untilNS {
			to = end
		}
		m, _, err := geo.WGS84.Distance(from.At, to.At)
		if err != nil {
			return 0, false, err
		}
		sumM += m
		from = to
	}
	return sumM, true, nil
}
