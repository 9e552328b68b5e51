package filter

import (
	"errors"
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// priorSigmas is how far from its mean a prior velocity reaches: beyond are 6e-7.
const priorSigmas = 5.0

// seedSlices seeds a plane with velocity axes: the prior of the position, as on a
// lattice without, times a normal one of each velocity.
func (b *Belief) seedSlices(s PlaneSpace, prior Prior, maxCells int) error {
	var share [2][]float64
	v := &b.Slices
	cells := 1
	for a := range 2 {
		q := b.Axes[2+a]
		sigma := math.Sqrt(q.PriorVar)
		if !(sigma > 0) || math.IsInf(sigma, 1) {
			return errors.New("filter: a velocity needs a prior with a spread")
		}
		v.SpacingMPS[a], v.BaseMPS[a] = sliceFine*sigma, q.PriorMean
		n := int32(math.Ceil(priorSigmas / sliceFine))
		v.Low[a] = -n
		for i := -n; i <= n; i++ {
			z := float64(float64(i) * sliceFine)
			share[a] = append(share[a], kernel.Exp(-0.5*z*z))
		}
		cells *= len(share[a])
	}
	flat := &Belief{Map: b.Map, Dim: 2}
	if err := flat.seedPlane(s, prior, max(1, maxCells/cells)); err != nil {
		return err
	}
	b.Lattice = flat.Lattice
	h := b.Lattice.SpacingM
	v.SpacingM = [2]float64{h, h}
	for a, o := range [2]float64{b.Lattice.Origin.E, b.Lattice.Origin.N} {
		for range share[a] {
			v.OriginM[a] = append(v.OriginM[a], o)
		}
	}
	// Dense rows of the positions' lattice.
	lo, hi := TileAt{math.MaxInt32, math.MaxInt32}, TileAt{math.MinInt32, math.MinInt32}
	each := func(use func(col, row int32, mass float64)) {
		for i, at := range flat.Tiles.At {
			for x, m := range flat.Tiles.tile(i) {
				if m > 0 {
					use(at.Col*TileSide+int32(x%TileSide), at.Row*TileSide+int32(x/TileSide), m)
				}
			}
		}
	}
	each(func(col, row int32, _ float64) {
		lo, hi = TileAt{min(lo.Col, col), min(lo.Row, row)}, TileAt{max(hi.Col, col), max(hi.Row, row)}
	})
	n := hi.Row - lo.Row + 1
	first, end := make([]int32, n), make([]int32, n)
	for r := range first {
		first[r], end[r] = math.MaxInt32, math.MinInt32
	}
	each(func(col, row int32, _ float64) {
		first[row-lo.Row], end[row-lo.Row] = min(first[row-lo.Row], col), max(end[row-lo.Row], col+1)
	})
	for j, y := range share[1] {
		for i, x := range share[0] {
			c := v.placeClear([2]int32{v.Low[0] + int32(i), v.Low[1] + int32(j)}, lo.Row, first, end)
			rows := v.Rows[c.First:]
			each(func(col, row int32, mass float64) {
				r := rows[row-lo.Row]
				v.Mass[r.Start+int(col-r.Col)] = mass * float64(x*y)
			})
			c.Mass = float64(x * y)
		}
	}
	v.rescale()
	b.trimSlices()
	v.rescale()
	return nil
}

// State returns mean and covariance of east, north and their velocities, of a belief
// that has velocities; false otherwise.
func (b *Belief) State(space Space, w *Workspace) (StateMoments, bool) {
	if len(b.Axes) > 0 {
		return b.Slices.moments(), true
	}
	qs := b.Quantities
	if len(qs) < 4 || b.Dim != 2 || qs[2].Name != VelocityEast || qs[3].Name != VelocityNorth {
		return StateMoments{}, false
	}
	k := len(qs)
	p := k * (k + 1) / 2
	w.locate(b, space, WantPosition)
	var m StateMoments
	ref := geo.Point{E: w.at.East[0], N: w.at.North[0]}
	at := func(i int) [4]float64 {
		return [4]float64{w.at.East[i] - ref.E, w.at.North[i] - ref.N, b.Mean[i*k+2], b.Mean[i*k+3]}
	}
	for i, mass := range b.Mass {
		m.Mass += mass
		for d, x := range at(i) {
			m.Mean[d] += float64(mass * x)
		}
	}
	for d := range m.Mean {
		m.Mean[d] /= m.Mass
	}
	for i, mass := range b.Mass {
		x := at(i)
		for d := range x {
			x[d] -= m.Mean[d]
			for e := range d + 1 {
				m.Cov[Packed(d, e)] += float64(mass/m.Mass) * (b.Cov[i*p+Packed(d, e)] + float64(x[d]*x[e]))
			}
		}
	}
	m.Mean[0] += ref.E
	m.Mean[1] += ref.N
	return m, true
}
