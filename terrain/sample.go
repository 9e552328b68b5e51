package terrain

import (
	"math"

	"leadline/engine/geo"
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
	m, cols := r.mapping, r.grid.Cols
	lastC, lastR := float64(cols-1), float64(r.grid.Rows-1)
	variance := r.meta.SigmaM * r.meta.SigmaM
	slopes := dst.SlopeE != nil || dst.SlopeN != nil
	for k, e := range eastM {
		fe, fn := float64((e-m.min.E)*m.perM), float64((northM[k]-m.min.N)*m.perM)
		var h, se, sn float64
		known := false
		if fe >= 0 && fe <= m.limE && fn >= 0 && fn <= m.limN {
			i, j := min(int(fe), m.nE-1), min(int(fn), m.nN-1)
			p := &m.patches[j*m.nE+i]
			col, cu, cv := p.col.eval(fe-float64(i), fn-float64(j))
			row, ru, rv := p.row.eval(fe-float64(i), fn-float64(j))
			if col >= -r.slackC && col <= lastC+r.slackC && row >= -r.slackR && row <= lastR+r.slackR {
				c := max(0, min(int(col), cols-2))
				w := max(0, min(int(row), r.grid.Rows-2))
				u, v := col-float64(c), row-float64(w)
				at := w*cols + c
				north, south := r.heights[at:at+2:at+2], r.heights[at+cols:at+cols+2:at+cols+2]
				h00 := float64(north[0])
				dc, dr := float64(north[1])-h00, float64(south[0])-h00
				twist := float64(south[1]) - float64(south[0]) - dc
				h = h00 + float64(u*dc) + float64(v*dr) + float64(u*v*twist)
				known = h == h
				if slopes && known {
					hc, hr := (dc+float64(v*twist))*m.perM, (dr+float64(u*twist))*m.perM
					se = float64(hc*cu) + float64(hr*ru)
					sn = float64(hc*cv) + float64(hr*rv)
				}
			}
		}
		x := variance
		if !known {
			h, x = math.NaN(), 0
		}
		dst.HeightM[k] = h
		if dst.SlopeE != nil {
			dst.SlopeE[k] = se
		}
		if dst.SlopeN != nil {
			dst.SlopeN[k] = sn
		}
		if dst.VarianceM2 != nil {
			dst.VarianceM2[k] = x
		}
	}
}
