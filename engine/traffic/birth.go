package traffic

import (
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// birth is what may be a new vehicle: that of one bearing, or of two.
type birth struct {
	bearings []int
	expected float64 // vehicles per radian (or per radian²) that give them
	grid     *grid
	heard    heardAs
	prob     float64
}

// leastCell is from how many vehicles on a cell of the unseen is looked at: fewer
// make no birth, all of them together.
const leastCell = 1e-9

// births looks for what each bearing, and where vehicles may give two each pair
// of them, may be of the unseen; and thins the unseen by what was not heard.
func (f *Filter) births(e *ear, bearings []Bearing) (out []*birth) {
	u := f.unseen
	n := len(bearings)
	cells := u.count()
	near := make([][]bool, n) // the cells that may have made a bearing
	for j := range near {
		near[j] = make([]bool, cells)
	}
	f.work.factors = zeros(f.work.factors, cells)
	around := make([]float64, n*n) // vehicles that are expected where both bearings may be from
	all := e.say(nil, bearings)
	at := 0
	for k, s := range u.slices {
		v, piece := u.speed(k), e.road.piece(s.fromM)
		lo, hi := u.within(s, e)
		for i := lo; i < hi; i++ {
			p := s.mass[i]
			if p < leastCell {
				continue
			}
			x := s.fromM + float64(float64(i)*u.stepM)
			var where, distance float64
			where, distance, piece = e.emission(x, v, piece)
			pd := f.model.detection(distance)
			f.work.factors[at+i] = pd
			if n == 0 {
				continue
			}
			offset := e.offset(where, piece)
			width := (u.stepM + f.model.AxleM + float64(gateSigma*f.model.LateralM)) / max(distance-u.stepM, 1)
			for j := range all {
				if all[j].may(offset, distance, float64(gateSigma*all[j].SigmaRad)+width) {
					near[j][at+i] = true
					for k := range j + 1 {
						if near[k][at+i] {
							around[k*n+j] += float64(p * pd)
						}
					}
				}
			}
		}
		at += len(s.mass)
	}
	for j, b := range bearings {
		peak := kernel.InvSqrt2Pi / b.SigmaRad
		if f.model.TwoBearings < 1 && around[j*n+j]*peak > leastBirth*f.model.clutter() {
			out = append(out, f.look(e, bearings, []int{j}, near[j]))
		}
		for k := j + 1; k < n && f.model.TwoBearings > 0; k++ {
			peak2 := 2 * peak * kernel.InvSqrt2Pi / bearings[k].SigmaRad
			if around[j*n+k]*peak2 > leastBirth*f.model.clutter()*f.model.clutter() {
				both := make([]bool, cells)
				for c := range both {
					both[c] = near[j][c] && near[k][c]
				}
				out = append(out, f.look(e, bearings, []int{j, k}, both))
			}
		}
	}
	at = 0
	for _, s := range u.slices {
		lo, hi := u.within(s, e)
		for i := lo; i < hi; i++ {
			heard := float64(s.mass[i] * f.work.factors[at+i])
			f.account.LogEvidence -= heard
			s.mass[i] -= heard
		}
		at += len(s.mass)
	}
	return out
}

// within are the cells of a slice that a post may hear: where it hears a place,
// and as far again as the fastest get meanwhile.
func (u *unseen) within(s slice, e *ear) (lo, hi int) {
	late := e.lateM + u.stepM
	lo = max(0, int((e.from-late-s.fromM)/u.stepM))
	hi = min(len(s.mass), int((e.to+late-s.fromM)/u.stepM)+1)
	return min(lo, hi), hi
}

// may reports whether a bearing may be of a place at an offset and distance,
// seen with a tolerance. The chord between two directions is no longer than
// their angle.
func (s *said) may(offset geo.Point, distanceM, toleranceRad float64) bool {
	chord2 := float64(toleranceRad * toleranceRad)
	near := func(u geo.Point) bool {
		return 2-2*(float64(u.E*offset.E)+float64(u.N*offset.N))/distanceM < chord2
	}
	return near(s.toward) || s.mirrored && near(s.mirror)
}

// look makes a density of what the unseen may be that gave one or two bearings.
func (f *Filter) look(e *ear, bearings []Bearing, set []int, keep []bool) *birth {
	b := &birth{bearings: set, grid: f.unseen.window(keep)}
	var these []Bearing
	for _, j := range set {
		these = append(these, bearings[j])
	}
	b.heard.listen(b.grid, e, &f.model, these)
	mean := b.heard.one[0]
	if len(set) == 2 {
		mean = b.heard.two[0]
	}
	b.expected = b.grid.total() * mean
	return b
}

// begin makes a new vehicle of a birth that is probable enough; else, or beyond
// the budget, it goes back to the unseen.
func (f *Filter) begin(b *birth) {
	if !(b.prob > 0) || !(b.expected > 0) {
		return
	}
	one, two := make([]float64, len(b.heard.one)), make([]float64, len(b.heard.two))
	if len(b.bearings) == 1 {
		one[0] = 1
	} else {
		two[0] = 1
	}
	b.heard.reweigh(b.grid, 0, one, two, 1)
	full := len(f.tracks) >= f.model.MaxVehicles
	if full && b.prob >= 0.5 {
		f.account.Refused++
	}
	if full || b.prob < leastExistence {
		f.unseen.takeBack(b.grid, b.prob)
		return
	}
	f.last++
	t := &track{label: f.last, existence: b.prob, grid: *b.grid}
	f.account.Pruned += float64(t.existence * t.grid.trim())
	f.tracks = append(f.tracks, t)
}
