package filter

import (
	"math"

	"leadline/engine/geo"
)

// Read spells a belief out into dst, for those who read it.
func (b *Belief) Read(dst *Cloud, space Space, w *Workspace) {
	k := len(b.Quantities)
	if len(b.Axes) > 0 {
		b.margin(&w.slices).readTiles(dst)
		return
	}
	if k == 0 {
		b.readTiles(dst)
		return
	}
	n := len(b.Key)
	w.locate(b, space, WantPosition)
	for _, s := range []*[]float64{&dst.East, &dst.North, &dst.Mass, &dst.VarEE, &dst.VarEN, &dst.VarNN} {
		*s = fit(*s, n)
	}
	copy(dst.East, w.at.East)
	copy(dst.North, w.at.North)
	copy(dst.Mass, b.Mass)
	dst.Mean = fit(dst.Mean, n*k)
	copy(dst.Mean, b.Mean)
	p := k * (k + 1) / 2
	lines := n
	if b.Dim == 2 {
		lines = 0
	}
	dst.Chart, dst.AlongM, dst.VarM2 = fit(dst.Chart, lines), fit(dst.AlongM, lines), fit(dst.VarM2, lines)
	for i := range n {
		if b.Dim == 2 {
			dst.VarEE[i], dst.VarEN[i], dst.VarNN[i] = b.Cov[i*p], b.Cov[i*p+1], b.Cov[i*p+2]
			continue
		}
		v, te, tn := b.Cov[i*p], w.at.TangentE[i], w.at.TangentN[i]
		dst.VarEE[i] = float64(v * float64(te*te))
		dst.VarEN[i] = float64(v * float64(te*tn))
		dst.VarNN[i] = float64(v * float64(tn*tn))
		dst.Chart[i], dst.AlongM[i], dst.VarM2[i] = w.chart[i], w.along[i], v
	}
}

// fit is resize with little to spare: what is read is as large as the belief.
func fit[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n, n+n/16)
	}
	return s[:n]
}

func (b *Belief) readTiles(dst *Cloud) {
	n := b.occupiedCells()
	for _, s := range []*[]float64{&dst.East, &dst.North, &dst.Mass, &dst.VarEE, &dst.VarEN, &dst.VarNN} {
		*s = resize(*s, n)
	}
	*dst = Cloud{East: dst.East, North: dst.North, Mass: dst.Mass, VarEE: dst.VarEE, VarEN: dst.VarEN, VarNN: dst.VarNN}
	// A cell stands for its square only where the lattice is coarse; where it
	// is fine, the masses' own variance is the belief's. What changing the
	// spacing added comes off, as far as a cell has it.
	h := b.Lattice.SpacingM
	within := 0.0
	if h > fineScale*b.ScaleM() {
		within = h * h / 12
	}
	ee := math.Max(0, within-b.Tiles.Surplus[0])
	nn := math.Max(0, within-b.Tiles.Surplus[2])
	clear(dst.VarEN)
	j := 0
	for i, at := range b.Tiles.At {
		east, north := b.Lattice.axes(at)
		for x, v := range b.Tiles.tile(i) {
			if v > 0 {
				dst.East[j], dst.North[j], dst.Mass[j] = east[x%TileSide], north[x/TileSide], v
				dst.VarEE[j], dst.VarNN[j] = ee, nn
				j++
			}
		}
	}
}

// Moments returns mass, mean and covariance (EE, EN, NN, m²) of the position,
// exactly as Predict keeps them: the variance within cells included and the
// surplus of a lattice taken off.
func (b *Belief) Moments(space Space, w *Workspace) (mass float64, mean geo.Point, cov [3]float64) {
	if len(b.Axes) > 0 {
		m := b.Slices.moments()
		return m.Mass, geo.Point{E: m.Mean[0], N: m.Mean[1]}, [3]float64{m.Cov[0], m.Cov[1], m.Cov[2]}
	}
	if len(b.Quantities) == 0 {
		m := b.latticeMoments()
		s := b.Tiles.Surplus
		return m.mass, m.mean, [3]float64{m.ee - s[0], m.en - s[1], m.nn - s[2]}
	}
	var c Cloud
	b.Read(&c, space, w)
	// Relative to the first entry, so that far-off frames cost no digits.
	o := geo.Point{E: c.East[0], N: c.North[0]}
	for i, m := range c.Mass {
		mass += m
		mean.E += float64(m * (c.East[i] - o.E))
		mean.N += float64(m * (c.North[i] - o.N))
	}
	mean.E /= mass
	mean.N /= mass
	for i, m := range c.Mass {
		de, dn := c.East[i]-o.E-mean.E, c.North[i]-o.N-mean.N
		cov[0] += float64(m * (c.VarEE[i] + float64(de*de)))
		cov[1] += float64(m * (c.VarEN[i] + float64(de*dn)))
		cov[2] += float64(m * (c.VarNN[i] + float64(dn*dn)))
	}
	for i := range cov {
		cov[i] /= mass
	}
	return mass, mean.Add(o), cov
}

// Moment returns mean and variance of a nuisance that is no angle; false where
// the belief has none of the name.
func (b *Belief) Moment(name string) (mean, variance float64, ok bool) {
	d, k := Index(b.Quantities, name), len(b.Quantities)
	if d < b.Dim || b.Quantities[d].Angular {
		return 0, 0, false
	}
	p := k * (k + 1) / 2
	total := 0.0
	for i, m := range b.Mass {
		total += m
		mean += float64(m * b.Mean[i*k+d])
	}
	mean /= total
	for i, m := range b.Mass {
		x := b.Mean[i*k+d] - mean
		variance += float64(m * (b.Cov[i*p+Packed(d, d)] + float64(x*x)))
	}
	return mean, variance / total, true
}

// Clone returns a copy that shares nothing that changes.
func (b *Belief) Clone() *Belief {
	c := *b
	c.Key = append([]uint64(nil), b.Key...)
	c.Mass = append([]float64(nil), b.Mass...)
	c.Mean = append([]float64(nil), b.Mean...)
	c.Cov = append([]float64(nil), b.Cov...)
	c.Tiles.At = append([]TileAt(nil), b.Tiles.At...)
	c.Tiles.Mass = append([]float64(nil), b.Tiles.Mass...)
	c.Slices = b.Slices.clone()
	return &c
}
