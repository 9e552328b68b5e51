package filter

import (
	"slices"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Smooth runs a tape backward. h is a copy of the belief as it is at the end of
// the tape, or what smoothing a later tape has made of it; it becomes what is
// known of the belief at the beginning given all that was measured, and see, if
// not nil, is given it after each n turns, from the last to none. See docs/smoothing.md:
//
//	γ(i) = Σ_j∈i γ'(t(j)) · α(j) ∫ N_j R_t(j) / Σ_l∈t(j) α(l) ∫ N_l R_t(j)
//
// over the pieces j that entry i was sent as, with R_t the ratio of what is known
// of entry t later to what was predicted; and of each piece a Rauch-Tung-Striebel
// step. A lattice is run backward by the transposed kernel.
//
// It is the forward-backward recursion in its filter form (Kitagawa, JASA 82,
// 1987) over cells, and within them the smoother for linear Gaussian models
// (Rauch, Tung & Striebel, AIAA J. 3, 1965), with merging by moments.
func (t *Tape) Smooth(h *Belief, w *Workspace, see func(turns int, h *Belief)) {
	t.smooth(h, nil, w, see)
}

// smooth is Smooth along a way alone, where there is one.
func (t *Tape) smooth(h *Belief, ways []Way, w *Workspace, see func(turns int, h *Belief)) {
	var s smoother
	for n := len(t.turns); ; n-- {
		if see != nil {
			see(n, h)
		}
		if n == 0 {
			return
		}
		s.way = nil
		if ways != nil {
			s.way = &ways[n-1]
		}
		t.turns[n-1].undo(h, &s, &w.tiles)
	}
}

// smoother is the memory of Smooth.
type smoother struct {
	first, pieces []int32 // of each target: where its pieces begin, and these
	post          Gaussians
	out           Gaussians
	ratio         Tiles
	way           *Way // before the turn; nil: all that there is
}

func (u *turn) undo(h *Belief, s *smoother, ts *tileSpace) {
	switch u.kind {
	case moved, regrouped:
		u.undoPieces(h, s)
	case thinned:
		k := len(h.Quantities)
		p := k * (k + 1) / 2
		out := Gaussians{slices.Clone(u.before.Key), make([]float64, len(u.before.Key)), slices.Clone(u.before.Mean), slices.Clone(u.before.Cov)}
		for i, j := range u.kept {
			out.Mass[j] = h.Mass[i]
			copy(out.Mean[int(j)*k:], h.Mean[i*k:(i+1)*k])
			copy(out.Cov[int(j)*p:], h.Cov[i*p:(i+1)*p])
		}
		h.Gaussians = out
	case given:
		u.restart(h, s)
	case shifted:
	case spreadOut:
		u.undoSpread(h, s, ts)
	case refined:
		u.undoRefined(h)
	case coarsened:
		u.undoCoarsened(h)
	case blended:
		u.undoBlended(h)
	}
	h.Level, h.Lattice = u.level, u.lattice
}

// restart makes h what it was before: nothing that came later tells of it.
func (u *turn) restart(h *Belief, s *smoother) {
	h.Gaussians = Gaussians{slices.Clone(u.before.Key), slices.Clone(u.before.Mass), slices.Clone(u.before.Mean), slices.Clone(u.before.Cov)}
	if s.way != nil {
		s.way.Restrict(h)
	}
}

// undoPieces takes h back over a turn of Gaussians.
func (u *turn) undoPieces(h *Belief, s *smoother) {
	k := len(h.Quantities)
	angular := angularMask(h.Quantities)
	u.weighPieces(h, s, k, angular)
	n := len(u.before.Key)
	s.out.empty(n, k)
	var back backward
	back.begin(u, k)
	total := 0.0
	for i, j := 0, 0; i < n; i++ {
		var sum gaussian
		ready := false
		for ; j < len(u.source) && u.source[j] < int32(i); j++ {
		}
		for ; j < len(u.source) && u.source[j] == int32(i); j++ {
			if s.post.Mass[j] == 0 {
				continue
			}
			if !ready {
				back.of(u, i, h.Dim)
				ready = true
			}
			var g gaussian
			s.post.load(&g, j, k)
			for d := range h.Dim {
				g.mean[d] += u.offset[j*h.Dim+d]
			}
			back.step(&g, angular)
			if sum.mass == 0 {
				sum = g
			} else {
				sum.absorb(k, &g, angular)
			}
		}
		if sum.mass == 0 {
			u.before.load(&sum, i, k)
			sum.mass = 0
		}
		for d := range k {
			if angular>>uint(d)&1 != 0 {
				sum.mean[d] = geo.WrapPi(sum.mean[d])
			}
		}
		total += sum.mass
		s.out.push(u.before.Key[i], k, &sum)
	}
	if !(total > 0) { // all came from elsewhere
		u.restart(h, s)
		return
	}
	for i := range s.out.Mass {
		s.out.Mass[i] /= total
	}
	h.Gaussians, s.out = s.out, h.Gaussians
}

// weighPieces writes into s.post what is known of each piece, in terms of its
// target.
func (u *turn) weighPieces(h *Belief, s *smoother, k int, angular uint) {
	n, targets := len(u.target), len(u.after.Mass)
	s.first = resize(s.first, targets+1)
	clear(s.first)
	for _, t := range u.target {
		s.first[t+1]++
	}
	for t := range targets {
		s.first[t+1] += s.first[t]
	}
	s.pieces = resize(s.pieces, n)
	at := slices.Clone(s.first)
	for j, t := range u.target {
		s.pieces[at[t]] = int32(j)
		at[t]++
	}
	p := k * (k + 1) / 2
	s.post = Gaussians{nil, resize(s.post.Mass, n), resize(s.post.Mean, n*k), resize(s.post.Cov, n*p)}
	clear(s.post.Mass)
	for t := range targets {
		pieces := s.pieces[s.first[t]:s.first[t+1]]
		if s.way != nil {
			pieces = s.way.along(pieces)
		}
		if h.Mass[t] == 0 || len(pieces) == 0 {
			continue
		}
		var g gaussian
		if len(pieces) == 1 {
			h.load(&g, t, k)
			s.post.store(&g, int(pieces[0]), k)
			s.post.Mass[pieces[0]] = g.mass
			continue
		}
		var r ratio
		var later, predicted gaussian
		h.load(&later, t, k)
		u.after.load(&predicted, t, k)
		r.set(&later, &predicted, k, angular)
		most := 0.0
		for x, j := range pieces {
			u.piece.load(&g, int(j), k)
			log := r.weigh(&g, k, angular)
			s.post.store(&g, int(j), k)
			s.post.Mass[j] = log
			if x == 0 || log > most {
				most = log
			}
		}
		sum := 0.0
		for _, j := range pieces {
			s.post.Mass[j] = s.way.share(j) * u.piece.Mass[j] * kernel.Exp(s.post.Mass[j]-most)
			sum += s.post.Mass[j]
		}
		for _, j := range pieces {
			s.post.Mass[j] *= later.mass / sum
		}
	}
}

// backward is the Rauch-Tung-Striebel step of one entry: x given y = F x + Add + w is
// N(mean + G (y - predicted), rest), whatever part of y is cut off.
type backward struct {
	k         int
	same      bool // y is x
	t         transition
	full      []float64
	mean      [MaxK]float64
	predicted [MaxK]float64
	gain      [MaxK][MaxK]float64
	rest      [maxPacked]float64
}

func (b *backward) begin(u *turn, k int) {
	b.k, b.same = k, u.kind == regrouped
	if !b.same && u.step.Local == nil {
		b.t.set(k, u.step.F)
		b.full = u.step.fullF(b.full, k)
	}
}

// of sets it to entry i.
func (b *backward) of(u *turn, i, dim int) {
	if b.same {
		return
	}
	k := b.k
	add := u.step.Add
	if u.step.Local != nil {
		add = slices.Clone(add)
		copy(add, u.add[i*dim:(i+1)*dim])
		b.full = u.step.fullF(b.full, k)
		copy(b.full, u.f[i*dim*k:(i+1)*dim*k])
		b.t.set(k, b.full)
	}
	var g gaussian
	u.before.load(&g, i, k)
	b.mean = g.mean
	prior := g
	g.advance(&b.t, add, u.step.Q)
	b.predicted = g.mean
	// G = C Fᵀ P⁻¹, row by row: P Gᵀ = F C.
	var f factor
	f.set(&g.cov, k)
	for x := range k {
		var row [MaxK]float64
		for y := range k {
			for z := range k {
				if v := b.full[y*k+z]; v != 0 {
					row[y] += float64(v * prior.at(x, z))
				}
			}
		}
		b.gain[x] = row
		f.solve(&b.gain[x])
		for y := 0; y <= x; y++ {
			// (C - G F C)(x, y), with F C of column y: what was row[·] of y.
			s := prior.cov[Packed(x, y)]
			for z := range k {
				fc := 0.0
				for v := range k {
					fc += float64(b.full[z*k+v] * prior.at(v, y))
				}
				s -= float64(b.gain[x][z] * fc)
			}
			if x == y && s < 0 {
				s = 0
			}
			b.rest[Packed(x, y)] = s
		}
	}
}

// step takes what is known of y, in the coordinates of the entry that it came
// from, to what is known of x.
func (b *backward) step(g *gaussian, angular uint) {
	if b.same {
		return
	}
	k := b.k
	var d [MaxK]float64
	for x := range k {
		d[x] = g.mean[x] - b.predicted[x]
		if angular>>uint(x)&1 != 0 {
			d[x] = geo.WrapPi(d[x])
		}
	}
	var gc [MaxK][MaxK]float64 // G times the covariance
	for x := range k {
		for y := range k {
			for z := range k {
				gc[x][y] += float64(b.gain[x][z] * g.at(z, y))
			}
		}
	}
	for x := range k {
		m := b.mean[x]
		for z := range k {
			m += float64(b.gain[x][z] * d[z])
		}
		g.mean[x] = m
		for y := 0; y <= x; y++ {
			c := b.rest[Packed(x, y)]
			for z := range k {
				c += float64(gc[x][z] * b.gain[y][z])
			}
			g.cov[Packed(x, y)] = c
		}
	}
}

// Present is a copy of what has mass in a belief, or in what is known of it later.
func (b *Belief) Present() *Belief {
	c := *b
	if len(b.Quantities) == 0 {
		return &c
	}
	k := len(b.Quantities)
	c.Gaussians = Gaussians{}
	for i, m := range b.Mass {
		if m >= Floor {
			c.pushFrom(&b.Gaussians, i, k)
		}
	}
	return &c
}
