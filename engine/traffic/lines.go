package traffic

import (
	"math"

	"leadline/engine/sensor"
)

// lineMarginM: a line nearer to an end could be passed by what leaves there
// before it was told beyond the line.
const lineMarginM = 20

// sure is the probability from which on a vehicle is on one side of a line.
const sure = 0.9

// line is where vehicles are counted.
type line struct {
	atM      float64
	count    [2]int     // forward, backward
	expected [2]float64 // the sums of their existence
	recent   []Crossing
}

// Crossing is a vehicle that passed a line, at the time at which that was known.
type Crossing struct {
	Time      sensor.Time
	Label     uint64
	Forward   bool
	Existence float64
}

// mostCrossings are remembered for each line, the latest.
const mostCrossings = 4096

// countPast counts who is now surely beyond a line, or before it, and was
// surely on its other side, and exists with probability ½ or more.
func (f *Filter) countPast() {
	if len(f.lines) == 0 {
		return
	}
	for _, t := range f.tracks {
		if t.sides == nil {
			t.sides = make([]int8, len(f.lines))
		}
		if t.existence < 0.5 {
			continue
		}
		lo, hi := t.grid.ends()
		for i := range f.lines {
			l := &f.lines[i]
			side := int8(0)
			switch {
			case lo > l.atM:
				side = 1
			case hi < l.atM:
				side = -1
			default:
				if p := t.grid.beyond(l.atM); p >= sure {
					side = 1
				} else if p <= 1-sure {
					side = -1
				}
			}
			if side == 0 || side == t.sides[i] {
				continue
			}
			if t.sides[i] != 0 {
				l.pass(Crossing{f.now, t.label, side > 0, t.existence})
			}
			t.sides[i] = side
		}
	}
}

func (l *line) pass(c Crossing) {
	way := 0
	if !c.Forward {
		way = 1
	}
	l.count[way]++
	l.expected[way] += c.Existence
	if len(l.recent) == mostCrossings {
		l.recent = append(l.recent[:0], l.recent[1:]...)
	}
	l.recent = append(l.recent, c)
}

// ends are the positions between which a density's cells lie.
func (g *grid) ends() (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, s := range g.slices {
		if len(s.mass) > 0 {
			lo, hi = math.Min(lo, s.fromM), math.Max(hi, s.fromM+float64(float64(len(s.mass)-1)*g.stepM))
		}
	}
	return lo, hi
}
