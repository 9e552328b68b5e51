package filter

import "fmt"

// Floor is the mass below which a Gaussian or a lattice cell is dropped, and
// counted as pruned. Over an hour of 10 Hz steps with a few hundred Gaussians
// it costs below 1e-6 of the mass.
const Floor = 1e-12

// Workspace is the memory of Predict and Update, kept between steps. The zero
// value is ready; one goroutine owns it.
type Workspace struct {
	at     Columns
	out    Gaussians
	merger merger
	mover  mover
	tape   *Tape   // nil: nothing is recorded
	into   []int32 // of what is recorded
	// What has gone over ends, where that is kept (Depart).
	departs  bool
	departed Gaussians

	chart         []int32
	along         []float64
	add, f        []float64
	terms         Terms
	logs, scratch []float64
	blunt         []float32 // a lattice's cells: see noiseWork.blunt
	keep          []bool    // and keepNear
	faint         bool      // of outcomeOf
	cells         []uint16  // those of a tile that have mass
	cellLogs      []float64
	residual      []float64 // and what densities works with
	variance      []float64
	loose         looseWork
	tiles         tileSpace
	slices        sliceSpace

	tempered    tempered
	foretell    *Predictive
	predictions predictions
}

// Predict moves a belief in place by one step.
//
// Each Gaussian moves whole, x' = F x + Add, and gains covariance Q; its mean
// then decides in which cell it is at home. Only when its position is wider
// than half a cell is it cut at the cell edges, each piece with the mass,
// mean and covariance of the truncated Gaussian, so that mass, mean and
// variance of the whole are kept. On a plane a Gaussian whose heading is wide
// is cut into sectors likewise, and one of little mass beside the others is
// not cut at all; wide noise is taken axis by axis, on a lattice that it leaves
// fine enough. Gaussians that meet in a cell merge by moments. On a plane
// without quantities the lattice's origin takes the
// displacement and the masses spread by kernels of exactly the variance asked
// for. The cost is linear in the occupied cells.
//
// At the end of a line the links share the mass out; where there are none it
// has left the map and is counted in b.LeftMap, or kept (Workspace.Depart). The masses then sum to less
// than 1 until the next Update. A belief of which nothing would be left stays as
// it is, and counts as gone.
//
// The belief must have been seeded over the same space; another one, or a
// step of the wrong size, is a mistake of the caller and panics.
func Predict(b *Belief, space Space, step Step, w *Workspace) {
	k := len(b.Quantities)
	if want := max(len(b.Moved()), b.Dim); len(step.Add) != want || len(step.Q) != want*(want+1)/2 || step.F != nil && len(step.F) != want*want {
		panic(fmt.Sprintf("filter: step over %d quantities for a belief over %d", len(step.Add), want))
	}
	if b.Map != space.Fingerprint() {
		panic("filter: the belief was seeded over another map")
	}
	if len(b.Axes) > 0 {
		b.predictSlices(step, w)
		return
	}
	if k == 0 {
		b.predictTiles(step, w)
		return
	}
	if b.Dim == 1 {
		b.move(space, step, w)
		return
	}
	if v := narrow(step.Q); v > square(b.Lattice.SpacingM) {
		b.makeRoom(v, w)
	}
	step, noise := b.apart(step)
	b.move(space, step, w)
	for _, step := range noise {
		b.move(space, step, w)
	}
}

// move is Predict for Gaussians.
func (b *Belief) move(space Space, step Step, w *Workspace) {
	k := len(b.Quantities)
	mv := w.newMover(b, step)
	u := w.turn(b, moved)
	if b.Dim == 1 {
		mv.lines = space.(LineSpace).Lines(b.Level)
	} else {
		mv.lattice = b.Lattice
		var most float64
		w.tiles.density, most = b.densities(w.tiles.density, b.Mass, k, b.Lattice.SpacingM)
		mv.faint = cutShare * most
	}
	if step.Local != nil {
		w.locate(b, space, step.Local.Wants())
		n := len(b.Key)
		w.add = resize(w.add, n*b.Dim)
		w.f = resize(w.f, n*b.Dim*k)
		step.Local.Local(w.add, w.f, &w.at, b.Mean, b.Cov)
		mv.stepAdd = append(mv.stepAdd[:0], step.Add...)
		mv.stepF = step.fullF(mv.stepF, k)
	}
	if u != nil {
		u.take(step, w, b.Dim*len(b.Key), k)
	}
	if b.Dim == 2 {
		// What the noise alone would be cut into, without trying.
		for float64(len(b.Key))*pieces(step.Q[0], mv.lattice)*pieces(step.Q[2], mv.lattice) > maxPieces {
			mv.lattice = mv.lattice.coarser()
		}
	}
	for mv.follow(u); !mv.send(b, w); mv.follow(u) {
		mv.lattice = mv.lattice.coarser()
	}
	b.Lattice = mv.lattice
	b.Pruned += mv.pruned
	b.LeftMap += mv.left
	if len(w.out.Key) == 0 && len(w.departed.Key) == 0 {
		if u != nil {
			w.unturn(b, w.turned()-1)
		}
		return // nothing would be left: it stays where it is, and counts as gone
	}
	into := w.intoFor(u, len(w.out.Key))
	w.merger.merge(&b.Gaussians, &w.out, k, mv.angular, perCell(b.Dim), into)
	w.end(u, b, &w.out, into, mv.source, mv.offset)
}

// maxPieces is how many pieces one step may cut a belief on a plane into, over
// the Gaussians that it has. A step so wide that it would be more is cut on a
// coarser lattice; no moment changes.
const maxPieces = 1 << 19

// send moves every Gaussian and sends it to its cells. It reports false if
// that makes too many pieces.
func (mv *mover) send(b *Belief, w *Workspace) bool {
	step, k := &mv.step, mv.k
	mv.out.empty(len(b.Key), k)
	mv.pruned, mv.left, mv.cuts = 0, 0, 0
	add := step.Add
	if step.Local != nil {
		add = mv.stepAdd
	} else {
		mv.f.set(k, step.F)
	}
	if b.Dim == 1 {
		mv.sendLines(b, w, add)
		return true
	}
	g := &mv.g
	for i := range b.Key {
		b.load(g, i, k)
		mv.advance(g, w, b.Dim, i, add)
		mv.index = int32(i)
		mv.plane(b.Lattice, b.Key[i], g, w.tiles.density[i] < mv.faint)
		if mv.cuts > maxPieces {
			return false
		}
	}
	return true
}

// advance moves g, which is Gaussian i, by the step.
func (mv *mover) advance(g *gaussian, w *Workspace, dim, i int, add []float64) {
	mv.local(w, dim, i)
	g.advance(&mv.f, add, mv.step.Q)
}

// local makes the step that of Gaussian i, if it has its own.
func (mv *mover) local(w *Workspace, dim, i int) {
	if k := mv.k; mv.step.Local != nil {
		copy(mv.stepAdd, w.add[i*dim:(i+1)*dim])
		copy(mv.stepF, w.f[i*dim*k:(i+1)*dim*k])
		mv.f.set(k, mv.stepF)
	}
}

func resize[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n, n+n/4)
	}
	return s[:n]
}

// mover sends Gaussians to their cells.
type mover struct {
	k, dim       int
	step         Step
	stepAdd      []float64
	stepF        []float64
	f            transition
	g, piece     gaussian
	line         lineMove
	angular      uint
	lines        *Lines
	lattice      Lattice
	faint        float64 // the density below which a Gaussian on a plane is not cut
	cuts         int     // pieces made on a plane, less the Gaussians cut
	out          *Gaussians
	departed     *Gaussians      // nil: what leaves the map is counted alone
	taps         [MaxK][]float64 // of each quantity, since cuts nest
	pruned, left float64
	// Of what is recorded: the entry that is being sent, where a piece of it is in
	// terms of its old cell, and what comes of that.
	taped  bool
	index  int32
	from   [2]float64
	moved  [2]float64 // how a cell of a plane became one of another lattice
	source []int32
	offset []float64
}

// newMover makes the workspace's mover ready for a belief, keeping what memory
// there is.
func (w *Workspace) newMover(b *Belief, step Step) *mover {
	mv := &w.mover
	mv.k, mv.dim, mv.step, mv.out, mv.angular = len(b.Quantities), b.Dim, step, &w.out, angularMask(b.Quantities)
	mv.lines, mv.departed, mv.taped = nil, nil, false
	mv.lattice, mv.faint, mv.cuts, mv.pruned, mv.left = Lattice{}, 0, 0, 0, 0
	if w.departs && b.Dim == 1 {
		mv.departed = &w.departed
	}
	return mv
}

// locate fills w.at with the columns at the Gaussians' positions.
func (w *Workspace) locate(b *Belief, space Space, wants Wants) {
	n, k := len(b.Key), len(b.Quantities)
	w.at.Resize(wants, b.Dim, n)
	if b.Dim == 1 {
		ls := space.(LineSpace)
		lines := ls.Lines(b.Level)
		w.chart = resize(w.chart, n)
		w.along = resize(w.along, n)
		widest := 0.0
		for i, key := range b.Key {
			chart, cell := LineCell(key)
			h := lines.WidthM[chart]
			if h > widest {
				widest = h
			}
			w.chart[i] = chart
			w.along[i] = float64((float64(cell)+0.5)*h) + b.Mean[i*k]
		}
		ls.Sample(&w.at, w.chart, w.along, widest)
		return
	}
	for i, key := range b.Key {
		col, row := Cell(key)
		c := b.Lattice.Centre(col, row)
		w.at.East[i] = c.E + b.Mean[i*k]
		w.at.North[i] = c.N + b.Mean[i*k+1]
	}
	space.(PlaneSpace).Sample(&w.at)
}
