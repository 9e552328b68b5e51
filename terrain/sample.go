package terrain

import (
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Sample writes bilinear heights at frame points, their exact gradients (of
// the bilinear patch, through the derivative of the mapping: they equal the
// limit of finite differences) and the map's error variance. With h00, h10,
// h01, h11 at a cell's corners and (u, v) within it
//
//	h = h00 + u (h10-h00) + v (h01-h00) + u v (h00-h10-h01+h11).
//
// A cell with a void corner is unknown, and so is everything off the raster:
// there height is NaN and the rest 0. Points up to a centimetre off the edge,
// the bound of the mapping's error, count as on it. A coordinate that is NaN
// or infinite is off the raster. The variance is Meta.SigmaM squared, 0 where
// sigma is unstated. Slices must have one length; it panics otherwise.
// Nothing is allocated.
func (r *Raster) Sample(dst geo.Heights, eastM, northM []float64) {
	n := len(eastM)
	bad := func(col []float64) bool { return col != nil && len(col) != n }
	if len(northM) != n || len(dst.HeightM) != n || bad(dst.SlopeE) || bad(dst.SlopeN) || bad(dst.VarianceM2) {
		panic("terrain: Sample: slices of different lengths")
	}
	m := r.mapping
	var p kernel.Patch
	for k := 0; k < n; {
		fe, fn := float64((eastM[k]-m.min.E)*m.perM), float64((northM[k]-m.min.N)*m.perM)
		if !(fe >= 0 && fe <= m.limE && fn >= 0 && fn <= m.limN) {
			dst.HeightM[k] = math.NaN()
			for _, slope := range [2][]float64{dst.SlopeE, dst.SlopeN} {
				if slope != nil {
					slope[k] = 0
				}
			}
			k++
			continue
		}
		r.patch(&p, min(int(fe), m.nE-1), min(int(fn), m.nN-1))
		if dst.SlopeE != nil && dst.SlopeN != nil {
			k += p.Sample(dst.HeightM[k:], dst.SlopeE[k:], dst.SlopeN[k:], eastM[k:], northM[k:])
			continue
		}
		var slopeE, slopeN [64]float64
		to := min(k+len(slopeE), n)
		done := p.Sample(dst.HeightM[k:to], slopeE[:], slopeN[:], eastM[k:to], northM[k:to])
		if dst.SlopeE != nil {
			copy(dst.SlopeE[k:], slopeE[:done])
		}
		if dst.SlopeN != nil {
			copy(dst.SlopeN[k:], slopeN[:done])
		}
		k += done
	}
	if dst.VarianceM2 == nil {
		return
	}
	variance := r.meta.SigmaM * r.meta.SigmaM
	variances := dst.VarianceM2[:n]
	for k, h := range dst.HeightM {
		v := variance
		if h != h {
			v = 0
		}
		variances[k] = v
	}
}

// patch makes p the one of a column and row of the mapping's; what lies at its last edges
// is in the last ones.
func (r *Raster) patch(p *kernel.Patch, i, j int) {
	m := r.mapping
	end := func(i, n int) float64 {
		if i == n-1 {
			return math.Nextafter(float64(n), math.Inf(1))
		}
		return float64(i + 1)
	}
	of := &m.patches[j*m.nE+i]
	*p = kernel.Patch{
		MinE: m.min.E, MinN: m.min.N, PerM: m.perM,
		LowE: float64(i), HighE: end(i, m.nE), LowN: float64(j), HighN: end(j, m.nN),
		Col: of.col, Row: of.row,
		LeastCol: -r.slackC, MostCol: float64(r.grid.Cols-1) + r.slackC,
		LeastRow: -r.slackR, MostRow: float64(r.grid.Rows-1) + r.slackR,
		Heights: r.heights, Cols: r.grid.Cols, Rows: r.grid.Rows,
	}
}
