package session

import (
	"fmt"
	"math"

	"leadline/engine/filter"
)

// A step that would make a belief much wider is taken in parts, with the
// resolution adapted between them. At the fine spacing of a located belief a
// long gap would fill millions of cells of a lattice; it is spread by at most
// maxWidening of its own scale at once. On lines each Gaussian of a wide spread
// would follow every way through many junctions, whose number grows
// exponentially; in parts of partM, some three of which reach over a block of
// houses, the ways meet and merge. Cells of a third of the spread do for it.
const (
	maxWidening = 2.0
	partM       = 30.0
	fewParts    = 512 // beyond, they are up to twice as long
	partShiftM  = 50.0
	maxShifts   = 4096 // beyond 205 km at once, they are longer
	wideCells   = 3.0  // cells in a spread
)

// Spreading over the roads of a town takes more work than it tells: after
// maxFollowed pieces of Gaussians, in one move of the belief, what is left of a
// step is not followed over the roads any more (filter.Scatter): some 20 s of
// silence in a city, and a few seconds of work.
func (s *Session) maxFollowed() float64 {
	if s.followLimit > 0 {
		return s.followLimit
	}
	return max(1e6, float64(followedShare*s.maxCells))
}

const followedShare = 20

// manyPieces is how many one part of a step may make at the cells that the belief
// has. Beyond, a wide belief that is spread often, as by increments that tell
// little, is taken to cells of a third of the spread first, which is as fine as
// what follows can tell: some 0.2 s of work a step where it was 3 to 12.
const manyPieces = 1e6

// part is about how many pieces a part of a step makes, with a spread: each
// Gaussian is cut up to 3.5 sigmas to either side, and at junctions a piece
// becomes two.
func (s *Session) part(sigmaM float64) float64 {
	return float64(s.state.belief.Cells()) * (1 + float64(14*sigmaM)/s.cellM())
}

// spread predicts the belief by a step.
func (s *Session) spread(step filter.Step) {
	if s.lines != nil {
		s.spreadOnRoads(step)
		return
	}
	b := s.state.belief
	if len(b.Quantities) > 0 { // Predict bounds what it does
		filter.Predict(b, s.space, step, &s.desk().work)
		return
	}
	for left := 1.0; ; {
		scale := maxWidening * b.ScaleM()
		share := math.Min(left, scale*scale/math.Max(step.Q[0], step.Q[2]))
		filter.Predict(b, s.space, portion(step, share), &s.desk().work)
		if share == left {
			return
		}
		left -= share
		for range maxAdaptations {
			if !filter.Adapt(b, s.maxCells, &s.desk().work) {
				break
			}
		}
	}
}

// maxAdaptations bounds the halvings or doublings of a spacing at one time.
const maxAdaptations = 64

func (s *Session) spreadOnRoads(step filter.Step) {
	b := s.state.belief
	if step.Local != nil && step.Q[0] > partM*partM { // what it moves by comes whole, its noise in parts
		noise := filter.NewStep(len(step.Add))
		noise.Q[0] = step.Q[0]
		step.Q = append([]float64(nil), step.Q...)
		step.Q[0] = 0
		s.spreadOnRoads(step)
		s.spreadOnRoads(noise)
		return
	}
	for left := 1.0; ; {
		share := left
		if step.Local == nil {
			share = math.Min(left, shareOnRoads(step))
		}
		if shiftM, far := s.far(step); far {
			if step.Q[0] > partM*partM {
				s.coarsen(math.Max(partM/2, math.Sqrt(step.Q[0])/wideCells))
			}
			part := s.part(math.Sqrt(float64(share * step.Q[0])))
			// No less than this is to come, since the belief gets wider.
			if s.followed+part*math.Ceil(left/share) > s.maxFollowed() {
				s.scatter(step, left, shiftM)
				return
			}
			s.followed += part
		} else if sigma := math.Sqrt(step.Q[0]); s.part(sigma) > s.manyPieces {
			s.coarsen(sigma / wideCells)
		}
		filter.Predict(b, s.space, portion(step, share), &s.desk().work)
		if share == left {
			return
		}
		left -= share
	}
}

// far is how far a step moves, m, and whether it reaches too far to be taken at
// once.
func (s *Session) far(step filter.Step) (shiftM float64, far bool) {
	shiftM = math.Abs(step.Add[0])
	if step.Local != nil {
		shiftM = s.motion.TravelledM()
	}
	return shiftM, shiftM > partShiftM || step.Q[0] > partM*partM
}

// scatterShare is the part of maxCells that a belief which is scattered begins
// with at most.
const scatterShare = 8

// scatter takes what is left of a step without following it over the roads.
func (s *Session) scatter(step filter.Step, left, shiftM float64) {
	k := len(step.Add)
	varM2 := float64(left*left)*shiftM*shiftM + float64(left*step.Q[0])
	if err := filter.Scatter(s.state.belief, s.lines, varM2, s.maxCells/scatterShare, &s.desk().work); err != nil {
		panic(fmt.Sprintf("session: %v", err)) // the belief itself is on the roads
	}
	// The other quantities' parts: what they gain does not depend on the place.
	rest := filter.NewStep(k)
	for i := 1; i < k; i++ {
		rest.Add[i] = float64(left * step.Add[i])
		for j := 1; j <= i; j++ {
			rest.Q[filter.Packed(i, j)] = float64(left * step.Q[filter.Packed(i, j)])
		}
	}
	filter.Predict(s.state.belief, s.space, rest, &s.desk().work)
}

// coarsen takes cells of up to a width.
func (s *Session) coarsen(cellM float64) {
	b := s.state.belief
	for l := b.Level + 1; l < s.lines.Levels() && s.cellsM[l] <= cellM; l++ {
		filter.Relevel(b, s.lines, l, &s.desk().work)
	}
}

// shareOnRoads is how much of a step may be taken at once on roads.
func shareOnRoads(step filter.Step) float64 {
	part := min(max(partM*partM, step.Q[0]/fewParts), 4*partM*partM)
	shift := math.Abs(step.Add[0])
	return math.Min(part/step.Q[0], math.Max(partShiftM, shift/maxShifts)/shift)
}

// portion is a part of a step. What F does to the positions comes from
// quantities that it leaves alone, so that parts of F - I add up as well.
func portion(step filter.Step, share float64) filter.Step {
	if share == 1 {
		return step
	}
	k := len(step.Add)
	part := filter.NewStep(k)
	for i, v := range step.Add {
		part.Add[i] = share * v
	}
	for i, v := range step.Q {
		part.Q[i] = share * v
	}
	for i, v := range step.F {
		if row, col := i/k, i%k; row != col && v != 0 {
			part.SetF(row, col, share*v)
		}
	}
	return part
}
