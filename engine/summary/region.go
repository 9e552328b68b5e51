package summary

import (
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Region is the part of the plane that holds a probability.
type Region struct {
	Level float64 // asked for
	Holds float64 // computed; at least Level
	AreaM2,
	PixelM float64
	// Polygons are rings of positions: the exterior counter-clockwise, then
	// holes clockwise, each closed (RFC 7946). Edges are straight in the
	// map's frame.
	Polygons [][][]geo.LonLat
}

// The raster behind a region.
const (
	maxPixels = 1 << 16
	// maxDabs and dabsEach bound the evaluations of a density: in all, and for
	// each Gaussian more (one of blur pixels takes 36).
	maxDabs, dabsEach = 1 << 24, 64
	paintSigmas       = 4.5 // beyond, 4e-5 of the mass
	blur              = 0.6
)

// Region returns the outline of the densest part of the last belief that was
// summarized, holding at least level of it. level is in (0, 1).
//
// The mixture is rastered into square pixels a quarter of the tightest heavy
// mode's minor sigma, or as wide as the belief's own grain if that is less
// (half a Gaussian's sigma, half the lateral one of roads, a cell of a lattice),
// doubled as often as it takes to stay within 65536 pixels and Options.MaxVertices corners. The raster blurs by 0.6 pixels, so that
// the region is a little too wide: by 1 % where the pixels stay as they are. The
// densest pixels are taken until they hold level and a margin, 5 % of the rest
// and 0.002, for the pixels' ragged edge.
func (s *Summarizer) Region(level float64) (*Region, error) {
	if len(s.mass) == 0 {
		return nil, ErrNothing
	}
	if !(level > 0 && level < 1) {
		return nil, fmt.Errorf("summary: region of level %v; it must be between 0 and 1", level)
	}
	ra := &s.raster
	pixel := s.modeSigmaM
	if _, minor := s.spread.Axes(); math.IsInf(pixel, 0) {
		pixel = minor
	}
	pixel = math.Min(pixel/4, s.grainM)
	pixel = math.Max(math.Max(pixel, 0.01), extent(s.box())/(1<<30))
	for ; ; pixel *= 2 {
		if !s.paint(pixel) {
			continue
		}
		holds, n := ra.pick(math.Min(level+0.05*(1-level)+0.002, 1-1e-9))
		rings := ra.trace(n)
		corners := 0
		for _, r := range rings {
			corners += len(r)
		}
		if corners > s.opt.MaxVertices && n > 1 {
			continue
		}
		return &Region{
			Level: level, Holds: holds, AreaM2: float64(n) * pixel * pixel, PixelM: pixel,
			Polygons: s.polygons(rings, pixel),
		}, nil
	}
}

// raster is mass on pixels; pixel (col, row) spans col…col+1 times the side.
type raster struct {
	hills  hills // its hash of nodes, one a pixel
	order  []uint64
	spare  []uint64
	chosen []bool
}

// paint spreads the mixture over pixels by its density at their middles; false
// if that takes too many. A Gaussian narrower than blur pixels is widened to
// that: the sum over pixels is then its mass to 2·exp(-2π²·0.6²) = 0.2 %.
func (s *Summarizer) paint(pixel float64) bool {
	h := &s.raster.hills
	h.reset(pixel, 0)
	work, most := 0, maxDabs+dabsEach*len(s.mass)
	inverse := 1 / pixel
	for i, m := range s.mass {
		if m == 0 {
			continue
		}
		// Everything in pixels.
		c := s.covs[i]
		ee := c.EE*inverse*inverse + blur*blur
		en := c.EN * inverse * inverse
		nn := c.NN*inverse*inverse + blur*blur
		det := float64(ee*nn) - float64(en*en)
		pee, pen, pnn := nn/det, -en/det, ee/det
		m *= 1 / (2 * math.Pi * math.Sqrt(det))
		e, n := s.east[i]*inverse-0.5, s.north[i]*inverse-0.5
		re, rn := paintSigmas*math.Sqrt(ee), paintSigmas*math.Sqrt(nn)
		if work += int(math.Min((2*re+1)*(2*rn+1), 1e9)); work > most {
			return false
		}
		for row := int32(math.Ceil(n - rn)); float64(row) <= n+rn; row++ {
			y := float64(row) - n
			for col := int32(math.Ceil(e - re)); float64(col) <= e+re; col++ {
				x := float64(col) - e
				q := float64(pee*float64(x*x)) + float64(2*pen*float64(x*y)) + float64(pnn*float64(y*y))
				if q < paintSigmas*paintSigmas {
					h.mass[h.place(col, row)] += float64(m * kernel.Exp(-0.5*q))
				}
			}
		}
		if len(h.mass) > maxPixels {
			return false
		}
	}
	return true
}

// pick chooses the densest pixels until they hold target, and returns how much
// they hold and how many they are.
func (r *raster) pick(target float64) (holds float64, n int) {
	h := &r.hills
	r.order, r.spare = resize(r.order, len(h.mass))[:0], resize(r.spare, len(h.mass))
	total := 0.0
	for i, m := range h.mass {
		if m == 0 {
			continue
		}
		total += m
		r.order = append(r.order, packHeight(m, i))
	}
	sortPacked(r.order, r.spare[:len(r.order)])
	r.chosen = resize(r.chosen, len(h.mass))
	clear(r.chosen)
	for _, o := range r.order {
		if holds >= target*total {
			break
		}
		node := uint32(o)
		holds += h.mass[node]
		r.chosen[node] = true
		n++
	}
	return holds / total, n
}

// corner is a corner of pixels.
type corner struct{ col, row int32 }

// has reports a chosen pixel.
func (r *raster) has(col, row int32) bool {
	n := r.hills.blocks.has(col, row)
	return n >= 0 && r.chosen[n]
}

// trace walks around the n chosen pixels with them on its left: rings of the
// corners where it turns, exteriors counter-clockwise, holes clockwise. Pixels
// that touch at a corner only are apart.
func (r *raster) trace(n int) [][]corner {
	// The four ways to go: east, north, west, south, and the pixel on the left
	// of an edge that starts at a corner.
	step := [4]corner{{1, 0}, {0, 1}, {-1, 0}, {0, -1}}
	left := [4]corner{{0, 0}, {-1, 0}, {-1, -1}, {0, -1}}
	right := [4]corner{{0, -1}, {0, 0}, {-1, 0}, {-1, -1}}
	edge := func(c corner, way int) bool {
		l, o := left[way], right[way]
		return r.has(c.col+l.col, c.row+l.row) && !r.has(c.col+o.col, c.row+o.row)
	}
	type start struct {
		corner
		way int
	}
	seen := make(map[start]bool, 4*n) // looked up only, never ranged over
	var rings [][]corner
	for _, o := range r.order[:n] {
		col, row := r.hills.blocks.place(int32(uint32(o)))
		pixel := corner{col, row}
		// The edges of a pixel: each has it on the left.
		for way, c := range [4]corner{
			pixel, {pixel.col + 1, pixel.row}, {pixel.col + 1, pixel.row + 1}, {pixel.col, pixel.row + 1},
		} {
			if seen[start{c, way}] || !edge(c, way) {
				continue
			}
			var ring []corner
			for at, w := c, way; !seen[start{at, w}]; {
				seen[start{at, w}] = true
				next := corner{at.col + step[w].col, at.row + step[w].row}
				// Left first keeps to the same pixel, so that pixels that
				// touch at a corner stay apart.
				turn := w
				for _, d := range [3]int{1, 0, 3} {
					if turn = (w + d) & 3; edge(next, turn) {
						break
					}
				}
				if turn != w {
					ring = append(ring, next)
				}
				at, w = next, turn
			}
			rings = append(rings, ring)
		}
	}
	return rings
}

// polygons closes the rings and puts holes after the exteriors they lie in.
func (s *Summarizer) polygons(rings [][]corner, pixel float64) [][][]geo.LonLat {
	position := func(ring []corner) []geo.LonLat {
		out := make([]geo.LonLat, 0, len(ring)+1)
		for _, c := range ring {
			out = append(out, s.frame.Inverse(geo.Point{E: float64(c.col) * pixel, N: float64(c.row) * pixel}))
		}
		return append(out, out[0])
	}
	var out [][][]geo.LonLat
	var exteriors [][]corner
	var areas []float64
	for _, r := range rings {
		if a := area(r); a > 0 {
			exteriors = append(exteriors, r)
			areas = append(areas, a)
			out = append(out, [][]geo.LonLat{position(r)})
		}
	}
	for _, r := range rings {
		if area(r) > 0 {
			continue
		}
		// The smallest exterior around it. A hole's first corner may lie on
		// an exterior, where a pixel touches another one at a corner; the
		// middle of the pixel left of its first edge is inside for certain.
		e, n := inner(r)
		home := -1
		for i, x := range exteriors {
			if around(x, e, n) && (home < 0 || areas[i] < areas[home]) {
				home = i
			}
		}
		if home >= 0 {
			out[home] = append(out[home], position(r))
		}
	}
	return out
}

// area is twice the signed area in pixels.
func area(ring []corner) float64 {
	sum := 0.0
	for i, a := range ring {
		b := ring[(i+1)%len(ring)]
		sum += float64(float64(a.col-ring[0].col)*float64(b.row-ring[0].row)) -
			float64(float64(a.row-ring[0].row)*float64(b.col-ring[0].col))
	}
	return sum
}

// inner returns the middle of the pixel on the left of a ring's first edge.
func inner(ring []corner) (e, n float64) {
	a, b := ring[0], ring[1]
	de, dn := float64(sign(b.col-a.col)), float64(sign(b.row-a.row))
	return float64(a.col) + 0.5*(de-dn), float64(a.row) + 0.5*(de+dn)
}

func sign(v int32) int32 {
	switch {
	case v > 0:
		return 1
	case v < 0:
		return -1
	}
	return 0
}

// around reports a ring of axis-parallel edges around a pixel's middle.
func around(ring []corner, e, n float64) bool {
	in := false
	for i, a := range ring {
		b := ring[(i+1)%len(ring)]
		if a.col == b.col && float64(a.col) > e && (float64(a.row) > n) != (float64(b.row) > n) {
			in = !in
		}
	}
	return in
}
