package terrain

import (
	"fmt"
	"math"

	"leadline/engine/geo"
)

// mapping is the way from frame points to columns and rows of the grid.
//
// The exact way (inverse of the frame's projection, then the raster's CRS)
// costs microseconds, so it is tabulated: over square patches of the frame
// column and row are biquadratic polynomials through the nine exact values at
// the patch's corners, edge middles and middle. Neighbouring patches share the
// three nodes of their common edge, so the mapping is continuous. Its error is
// at most |f”'| (size/2)³/(9√3) an axis; f”', in metres, is about
// (1 + 2 tan²φ)/R² for a geographic grid. newMapping halves the patches until
// the error measured where it is largest is below mappingTolM.
type mapping struct {
	min     geo.Point
	perM    float64 // patches a metre
	nE, nN  int
	limE    float64 // float64(nE), float64(nN)
	limN    float64
	patches []patch // nE·nN, east fastest
}

// patch holds coefficients of u^i v^j at [3·j+i], u and v in [0, 1] across
// the patch.
type patch struct{ col, row poly }

type poly [9]float64

// eval returns the polynomial and its derivatives by u and v.
func (a *poly) eval(u, v float64) (f, fu, fv float64) {
	p0 := a[0] + float64(u*(a[1]+float64(u*a[2])))
	p1 := a[3] + float64(u*(a[4]+float64(u*a[5])))
	p2 := a[6] + float64(u*(a[7]+float64(u*a[8])))
	q0 := a[1] + float64(2*u*a[2])
	q1 := a[4] + float64(2*u*a[5])
	q2 := a[7] + float64(2*u*a[8])
	f = p0 + float64(v*(p1+float64(v*p2)))
	fu = q0 + float64(v*(q1+float64(v*q2)))
	fv = p1 + float64(2*v*p2)
	return f, fu, fv
}

// mappingTolM is the error that newMapping accepts where it measures; tests
// hold random points to 1 cm.
const mappingTolM = 0.002

// maxPatches bounds the table: 9 MB, made in half a second, enough for 2000 km
// square at 65°.
const maxPatches = 1 << 16

func newMapping(frame geo.Frame, g Grid, box geo.Box) (*mapping, error) {
	size := math.Max(box.Max.E-box.Min.E, box.Max.N-box.Min.N)
	for ; ; size /= 2 {
		nE := int(math.Ceil((box.Max.E - box.Min.E) / size))
		nN := int(math.Ceil((box.Max.N - box.Min.N) / size))
		if nE*nN > maxPatches {
			return nil, fmt.Errorf("the grid's coordinates bend too much to tabulate within %d patches: cut it into pieces", maxPatches)
		}
		m := tabulate(frame, g, box.Min, size, nE, nN)
		switch e := m.errorM(frame, g, size); {
		case e <= mappingTolM:
			return m, nil
		case e != e:
			return nil, fmt.Errorf("the grid's coordinates cannot be computed with")
		}
	}
}

func tabulate(frame geo.Frame, g Grid, min geo.Point, size float64, nE, nN int) *mapping {
	m := &mapping{min: min, perM: 1 / size, nE: nE, nN: nN, limE: float64(nE), limN: float64(nN)}
	w := 2*nE + 1
	nodes := make([][2]float64, w*(2*nN+1))
	for j := 0; j <= 2*nN; j++ {
		for i := 0; i <= 2*nE; i++ {
			q := min.Add(geo.Point{E: float64(i) * size / 2, N: float64(j) * size / 2})
			c, r := g.index(frame.Inverse(q))
			nodes[j*w+i] = [2]float64{c, r}
		}
	}
	m.patches = make([]patch, nE*nN)
	for j := range nN {
		for i := range nE {
			p := &m.patches[j*nE+i]
			var f [2]poly
			for b := range 3 {
				for a := range 3 {
					n := nodes[(2*j+b)*w+2*i+a]
					f[0][3*b+a], f[1][3*b+a] = n[0], n[1]
				}
			}
			p.col, p.row = power(f[0]), power(f[1])
		}
	}
	return m
}

// power turns values at u, v in {0, ½, 1} into coefficients: along each axis
// a0 = f0, a1 = -3f0 + 4f½ - f1, a2 = 2f0 - 4f½ + 2f1.
func power(f poly) poly {
	line := func(x poly, at, step int) poly {
		f0, fh, f1 := x[at], x[at+step], x[at+2*step]
		x[at+step] = float64(4*fh) - float64(3*f0) - f1
		x[at+2*step] = float64(2*f0) - float64(4*fh) + float64(2*f1)
		return x
	}
	for k := range 3 {
		f = line(f, 3*k, 1)
	}
	for k := range 3 {
		f = line(f, k, 3)
	}
	return f
}

// at evaluates column and row at a point, and their derivatives by frame
// metres. ok is false off the table.
func (m *mapping) at(q geo.Point) (col, row float64, jac [4]float64, ok bool) {
	fe, fn := float64((q.E-m.min.E)*m.perM), float64((q.N-m.min.N)*m.perM)
	if !(fe >= 0 && fe <= m.limE && fn >= 0 && fn <= m.limN) {
		return 0, 0, jac, false
	}
	i, j := min(int(fe), m.nE-1), min(int(fn), m.nN-1)
	p := &m.patches[j*m.nE+i]
	col, cu, cv := p.col.eval(fe-float64(i), fn-float64(j))
	row, ru, rv := p.row.eval(fe-float64(i), fn-float64(j))
	return col, row, [4]float64{cu * m.perM, cv * m.perM, ru * m.perM, rv * m.perM}, true
}

// errorM measures the error in metres at the quarter points of a lattice of
// at most 9 × 9 patches that includes the outermost, where third derivatives
// of projections are largest.
func (m *mapping) errorM(frame geo.Frame, g Grid, size float64) float64 {
	worst := 0.0
	lastJ := -1
	for kj := 0; kj <= 8; kj++ {
		j := (m.nN - 1) * kj / 8
		lastI := -1
		for ki := 0; ki <= 8 && j != lastJ; ki++ {
			i := (m.nE - 1) * ki / 8
			if i == lastI {
				continue
			}
			lastI = i
			for _, uv := range [][2]float64{{0.25, 0.25}, {0.75, 0.25}, {0.25, 0.75}, {0.75, 0.75}, {0.25, 0.5}, {0.5, 0.75}} {
				q := m.min.Add(geo.Point{E: float64((float64(i) + uv[0]) * size), N: float64((float64(j) + uv[1]) * size)})
				worst = math.Max(worst, m.errorAt(frame, g, q))
			}
		}
		lastJ = j
	}
	return worst
}

// errorAt returns the distance in frame metres between a point and the point
// that the tabulated column and row stand for, by the inverse Jacobian.
func (m *mapping) errorAt(frame geo.Frame, g Grid, q geo.Point) float64 {
	c, r, jac, ok := m.at(q)
	if !ok {
		return 0
	}
	ce, re := g.index(frame.Inverse(q))
	dc, dr := c-ce, r-re
	det := float64(jac[0]*jac[3]) - float64(jac[1]*jac[2])
	return geo.Point{
		E: (float64(jac[3]*dc) - float64(jac[1]*dr)) / det,
		N: (float64(jac[0]*dr) - float64(jac[2]*dc)) / det,
	}.Norm()
}
