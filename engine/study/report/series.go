package report

import (
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/study/track"
	"leadline/engine/summary"
)

// Class says what a posterior was good for, the best first. What is not known
// does not count against it.
type Class int

// A posterior is Usable if it is located and its protection radius within the alert
// limit; Wide if it is located and the radius is beyond, or not bounded; Unlocated
// by its status; and Wrong if the truth is outside a bounded protection radius, or
// farther than the alert limit from what is located.
const (
	Usable Class = iota
	Wide
	Unlocated
	Wrong
	classes
)

func (c Class) String() string {
	return [classes]string{"usable", "protection radius beyond the alert limit", "not located", "error that was not said"}[c]
}

func classOf(row track.Row, limitM float64) Class {
	located := row.Status == summary.Located.String()
	switch {
	case row.ErrorM > row.ProtectionM, located && row.ErrorM > limitM: // comparisons with NaN are false
		return Wrong
	case !located:
		return Unlocated
	case !(row.ProtectionM <= limitM):
		return Wide
	}
	return Usable
}

// point joins rows that follow each other: what is drawn of them. The position is
// the first row's, all else the worst of them.
type point struct {
	ns                          int64
	at, truth                   geo.LonLat
	class                       Class
	known                       bool // truth and errM
	errM, radiusM, protectionM  float64
	located, bounded, unbounded bool
}

// series is a run's table, gathered.
type series struct {
	limitM  float64
	most    int // points are between so many and twice as many once there are more rows
	every   int // rows a point
	n       int
	startNS int64
	points  []point
	class   [classes]int
	grid    map[[2]int16]int // of protection radius and error, see gridOf
	noBound int              // known errors without a bounded radius
	known   int              // errors
	weak    stretches
}

func newSeries(limitM float64, most int) *series {
	return &series{limitM: limitM, most: most, every: 1, grid: map[[2]int16]int{}}
}

func (s *series) add(row track.Row) {
	class := classOf(row, s.limitM)
	s.class[class]++
	if s.n == 0 {
		s.startNS = row.TimeNS
	}
	p := point{
		ns: row.TimeNS, at: row.At, truth: row.Truth, class: class, known: !math.IsNaN(row.ErrorM),
		errM: row.ErrorM, radiusM: row.Radius95M, protectionM: row.ProtectionM, located: row.Status == summary.Located.String(),
	}
	p.bounded = !math.IsNaN(row.ProtectionM)
	p.unbounded = !p.bounded
	if p.known && p.bounded {
		s.grid[[2]int16{gridOf(row.ProtectionM), gridOf(row.ErrorM)}]++
	} else if p.known {
		s.noBound++
	}
	if p.known {
		s.known++
	}
	s.weak.add(row, class, s.startNS)
	if s.n%s.every == 0 {
		s.points = append(s.points, p)
	} else {
		s.points[len(s.points)-1].join(p)
	}
	if s.n++; len(s.points) >= 2*s.most {
		for i := range s.most {
			s.points[i] = s.points[2*i]
			s.points[i].join(s.points[2*i+1])
		}
		s.points = s.points[:s.most]
		s.every *= 2
	}
}

// checked says how much of a run could be compared with a truth, if that is not all.
func (s *series) checked() string {
	switch share := float64(s.known) / float64(max(1, s.n)); {
	case s.known == 0:
		return " (not checked against a truth)"
	case share < 0.99:
		return fmt.Sprintf(" (%s checked against a truth)", percent(math.Floor(100*share)/100))
	}
	return ""
}

// join takes a later point into this one.
func (p *point) join(q point) {
	worse := func(a, b float64) float64 {
		if math.IsNaN(a) || b > a {
			return b
		}
		return a
	}
	p.errM, p.radiusM, p.protectionM = worse(p.errM, q.errM), worse(p.radiusM, q.radiusM), worse(p.protectionM, q.protectionM)
	p.class, p.located = max(p.class, q.class), p.located && q.located
	if !p.known && q.known {
		p.known, p.truth = true, q.truth
	}
	p.bounded, p.unbounded = p.bounded || q.bounded, p.unbounded || q.unbounded
}

func (s *series) counts() map[string]int {
	out := map[string]int{}
	for c, n := range s.class {
		out[Class(c).String()] = n
	}
	return out
}

// The grid of radius and error has gridSteps cells a decade, from gridLeastM up;
// what is below counts as there.
const (
	gridSteps  = 16
	gridLeastM = 0.1
)

func gridOf(m float64) int16 {
	return int16(math.Floor(gridSteps * math.Log10(math.Max(m, gridLeastM)/gridLeastM)))
}

// gridM is the middle of a cell.
func gridM(i int16) float64 { return gridLeastM * math.Pow(10, (float64(i)+0.5)/gridSteps) }
