package server

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"math"
	"time"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// want is what a follower asks for beside posteriors.
type want struct {
	area       *area
	onlyInside bool // nothing more if the vehicle is outside
	fractions  []float64
	belief     *picture
}

func (w want) anything() bool { return w.area != nil || w.fractions != nil || w.belief != nil }

// extra is what was asked for.
type extra struct {
	inside  float64 // probability
	regions []*leadlinev1.Region
	belief  *leadlinev1.Belief
}

// answerer adds to the latest posterior of a session; on its owner's goroutine.
type answerer interface {
	extra(p *summary.Posterior, w want) (*extra, error)
	// wait is for how long what is wanted is not to be added, since what was added before took
	// long: watching must not hold up the vehicle.
	wait(p *summary.Posterior, w want) time.Duration
	// charge says that adding took so long.
	charge(took time.Duration)
}

// Of an owner's time at most a fifth goes into pictures of its belief: after one that took so
// long, whoever wants the next waits for four times that, and all who wait get the same one.
// What takes less than a millisecond, a hundredth of the time at ten a second, is free.
const (
	pictureRest = 4
	pictureFree = time.Millisecond
)

// extras is an owner's answerer. It answers the same question about one
// posterior once.
type extras struct {
	session Session
	space   filter.Space
	boxes   map[[sha256.Size]byte]geo.Box // of areas, in the map's frame

	of      *summary.Posterior // whose answers these are:
	inside  map[[sha256.Size]byte]float64
	regions map[float64]*leadlinev1.Region
	beliefs map[picture]*leadlinev1.Belief
	cloud   filter.Cloud

	due time.Time // before which no picture is made
}

func (x *extras) wait(p *summary.Posterior, w want) time.Duration {
	if w.belief == nil || x.of == p && x.beliefs[*w.belief] != nil {
		return 0
	}
	return max(0, time.Until(x.due))
}

func (x *extras) charge(took time.Duration) {
	if took >= pictureFree {
		x.due = time.Now().Add(pictureRest * took)
	}
}

func newExtras(session Session, space filter.Space) *extras {
	return &extras{session: session, space: space, boxes: map[[sha256.Size]byte]geo.Box{}}
}

func (x *extras) extra(p *summary.Posterior, w want) (*extra, error) {
	if x.of != p {
		x.of = p
		x.inside, x.regions, x.beliefs = map[[sha256.Size]byte]float64{}, map[float64]*leadlinev1.Region{}, map[picture]*leadlinev1.Belief{}
	}
	asker, ok := x.session.(Asker)
	if !ok && (w.area != nil || w.fractions != nil) {
		return nil, refuse(leadlinev1.Reason_REASON_NOT_OFFERED, nil, "follow: this server tells posteriors alone: leave out the area, and ask for another detail")
	}
	out := &extra{}
	if w.area != nil {
		in, ok := x.inside[w.area.key]
		if !ok {
			if w.onlyInside && x.outside(p, w.area) {
				return out, nil
			}
			var err error
			if in, err = asker.Inside(w.area.rings); err != nil {
				return nil, badField("area", "follow: area: %v", err)
			}
			x.inside[w.area.key] = in
		}
		if out.inside = in; w.onlyInside && in < w.area.least {
			return out, nil
		}
	}
	for _, fraction := range w.fractions {
		m := x.regions[fraction]
		if m == nil {
			r, err := asker.Region(fraction)
			if err != nil {
				return nil, badField("region_fractions", "follow: region_fractions: %v: %v", fraction, err)
			}
			m = region(r)
			x.regions[fraction] = m
		}
		out.regions = append(out.regions, m)
	}
	if w.belief != nil {
		if x.beliefs[*w.belief] == nil {
			reader, ok := x.session.(BeliefReader)
			if !ok {
				return nil, refuse(leadlinev1.Reason_REASON_NOT_OFFERED, nil, "follow: this server tells no beliefs: ask for another detail")
			}
			reader.ReadBelief(&x.cloud)
			level, lattice := reader.Cells()
			x.beliefs[*w.belief] = w.belief.of(&x.cloud, x.space, level, lattice)
		}
		out.belief = x.beliefs[*w.belief]
	}
	return out, nil
}

// outside reports whether a vehicle is surely inside an area with less than
// its probability: the circle that holds 99 % of it does not touch the area.
// It spares the weighing of a belief against the areas of other towns.
func (x *extras) outside(p *summary.Posterior, a *area) bool {
	frame := x.space.Frame()
	if farM(frame.Origin(), a.rings[0][0]) > maxMapM+maxAreaM {
		return true
	}
	if !(a.least > 0.01) {
		return false
	}
	box, ok := x.boxes[a.key]
	if !ok {
		box = geo.EmptyBox()
		for _, q := range a.rings[0] {
			box = box.Extend(frame.Forward(q))
		}
		if len(x.boxes) >= maxBoxes {
			clear(x.boxes)
		}
		x.boxes[a.key] = box
	}
	m := p.MeanFrame
	gap := math.Hypot(max(0, box.Min.E-m.E, m.E-box.Max.E), max(0, box.Min.N-m.N, m.N-box.Max.N))
	// Radii are true metres and never too small; the frame's scale is within 5 %
	// up to 2000 km off its middle.
	return gap > 1.1*p.Radius99M
}

const (
	maxMapM  = 2e6 // from a map's middle to any vehicle on it
	maxBoxes = 64
)

// area is an area that vehicles may be in.
type area struct {
	key   [sha256.Size]byte // of its rings
	rings [][]geo.LonLat
	least float64 // the probability from which a vehicle counts as inside
}

func newArea(m *leadlinev1.Polygon) (*area, error) {
	rings, err := wire.Area(m)
	if err != nil {
		return nil, err
	}
	a := &area{rings: rings, least: defaultInside}
	corners := 0
	sum := sha256.New()
	for _, ring := range rings {
		if corners += len(ring); corners > maxAreaCorners {
			return nil, fmt.Errorf("more than %d points: simplify the outline", maxAreaCorners)
		}
		var b []byte
		b = binary.LittleEndian.AppendUint64(b, uint64(len(ring)))
		for _, p := range ring {
			b = binary.LittleEndian.AppendUint64(b, math.Float64bits(p.Lon))
			b = binary.LittleEndian.AppendUint64(b, math.Float64bits(p.Lat))
			if farM(rings[0][0], p) > maxAreaM {
				return nil, fmt.Errorf("it is more than %g km across: follow without an area", maxAreaM/1e3)
			}
		}
		sum.Write(b)
	}
	a.key = [sha256.Size]byte(sum.Sum(nil))
	return a, nil
}

// farM is the distance of two places on a sphere of the Earth's size, by the
// haversine formula, m.
func farM(p, q geo.LonLat) float64 {
	a, b := math.Sin((q.Lat-p.Lat)/2), math.Sin((q.Lon-p.Lon)/2)
	h := a*a + math.Cos(p.Lat)*math.Cos(q.Lat)*b*b
	return 2 * 6371e3 * math.Asin(math.Min(1, math.Sqrt(h)))
}
