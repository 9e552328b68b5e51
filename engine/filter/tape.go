package filter

import "slices"

// Tape is what was done to a belief, in its order: enough to run it backward
// (Smooth) and to find the most probable path (Best, Trace). It holds a copy of
// the cells for each move of the belief and for each change of its cells, and
// nothing of a measurement but what it left.
type Tape struct {
	belief *Belief
	turns  []turn
	start  Tiles // the masses at which it begins: of Gaussians these alone
	bytes  int
}

// turn is one change of a belief's cells: they moved, were regrouped (another
// lattice, another level, mass from elsewhere), were thinned out, or were given
// up for others.
type turn struct {
	kind turnKind
	// What there was before.
	level   int
	lattice Lattice
	before  Gaussians
	tiles   Tiles
	// Of Gaussians: the step, with what a Local made of it for each of them; and the
	// pieces, each with where it came from (-1: from elsewhere), the entry that it
	// went into, and the position of its new cell in terms of its old one.
	step           Step
	add, f         []float64
	piece          Gaussians
	source, target []int32
	offset         []float64
	after          Gaussians // the entries, merged
	kept           []int32   // of what was thinned out
	// Of a lattice.
	spread taps
	then   Tiles
	share  float64 // of what was blended in
}

type turnKind uint8

const (
	moved     turnKind = iota // by a step
	regrouped                 // no motion
	thinned
	given // up: what follows comes from anywhere
	shifted
	spreadOut
	refined
	coarsened
	blended // with mass from elsewhere
)

// Record has what is done to b with this workspace go to t, which it empties; nil stops it.
// What the belief does is the same with and without.
func (w *Workspace) Record(t *Tape, b *Belief) {
	w.tape = t
	if t == nil {
		return
	}
	clear(t.turns)
	*t = Tape{belief: b, turns: t.turns[:0]}
	t.start = Tiles{At: slices.Clone(b.Tiles.At), Mass: slices.Clone(b.masses())}
	t.bytes = 8 * len(t.start.Mass)
}

// Follow goes on recording with another copy of the same belief.
func (w *Workspace) Follow(b *Belief) {
	if w.tape != nil {
		w.tape.belief = b
	}
}

// Release gives back the memory; what is recorded, and what departs, stays.
func (w *Workspace) Release() { *w = Workspace{tape: w.tape, departs: w.departs} }

// Turns is how many turns there are so far. Bytes is about what they take.
func (t *Tape) Turns() int { return len(t.turns) }
func (t *Tape) Bytes() int { return t.bytes }

func (b *Belief) masses() []float64 {
	if len(b.Quantities) == 0 {
		return b.Tiles.Mass
	}
	return b.Mass
}

// turn begins one of a kind: nil where b is not recorded.
func (w *Workspace) turn(b *Belief, kind turnKind) *turn {
	t := w.tape
	if t == nil || t.belief != b {
		return nil
	}
	t.turns = append(t.turns, turn{kind: kind, level: b.Level, lattice: b.Lattice})
	u := &t.turns[len(t.turns)-1]
	if len(b.Quantities) == 0 {
		u.tiles = Tiles{slices.Clone(b.Tiles.At), slices.Clone(b.Tiles.Mass), b.Tiles.Surplus}
		t.bytes += 8*len(u.tiles.Mass) + 8*len(u.tiles.At)
		return u
	}
	u.before = Gaussians{slices.Clone(b.Key), slices.Clone(b.Mass), slices.Clone(b.Mean), slices.Clone(b.Cov)}
	t.bytes += 8 * (2*len(u.before.Key) + len(u.before.Mean) + len(u.before.Cov))
	return u
}

// unturn takes back the turns after the first n: a measurement that turned out
// to be impossible left the belief as it was.
func (w *Workspace) unturn(b *Belief, n int) {
	if w.tape != nil && w.tape.belief == b {
		w.tape.turns = w.tape.turns[:n]
	}
}

// turned is the number of turns so far.
func (w *Workspace) turned() int {
	if w.tape == nil {
		return 0
	}
	return len(w.tape.turns)
}

// follow has a mover note where the pieces come from, for a turn that is not nil.
func (mv *mover) follow(u *turn) {
	mv.taped = u != nil
	mv.source, mv.offset = mv.source[:0], mv.offset[:0]
}

// note notes the piece that was put out last, whose first quantities were from
// in its old cell.
func (mv *mover) note(mean []float64) {
	if !mv.taped {
		return
	}
	mv.source = append(mv.source, mv.index)
	for d := range mv.dim {
		mv.offset = append(mv.offset, mv.from[d]-mean[d])
	}
}

// take copies the step of a move, and of a Local what it made of it.
func (u *turn) take(step Step, w *Workspace, n, k int) {
	u.step = Step{F: slices.Clone(step.F), Add: slices.Clone(step.Add), Q: slices.Clone(step.Q), Local: step.Local}
	if step.Local != nil {
		u.add, u.f = slices.Clone(w.add[:n]), slices.Clone(w.f[:n*k])
	}
}

// end completes a turn of Gaussians: out are the pieces, into the entries that
// they went into.
func (w *Workspace) end(u *turn, b *Belief, out *Gaussians, into []int32, source []int32, offset []float64) {
	if u == nil {
		return
	}
	u.piece = Gaussians{nil, slices.Clone(out.Mass), slices.Clone(out.Mean), slices.Clone(out.Cov)}
	u.source, u.target, u.offset = slices.Clone(source), slices.Clone(into), slices.Clone(offset)
	u.after = Gaussians{slices.Clone(b.Key), slices.Clone(b.Mass), slices.Clone(b.Mean), slices.Clone(b.Cov)}
	w.tape.bytes += 8*(len(out.Mass)+len(out.Mean)+len(out.Cov)+len(source)+len(offset)) + 8*(len(b.Mass)+len(b.Mean)+len(b.Cov)+len(u.add)+len(u.f))
}

// gave completes a turn by which a belief was given up for another one.
func (u *turn) gave(b *Belief) {
	if u != nil {
		u.after.Mass = slices.Clone(b.Mass)
	}
}

// intoFor is the memory in which merge notes the entries, nil without a turn.
func (w *Workspace) intoFor(u *turn, n int) []int32 {
	if u == nil {
		return nil
	}
	w.into = resize(w.into, n)
	return w.into
}

// endTiles completes a turn of a lattice.
func (w *Workspace) endTiles(u *turn, b *Belief) {
	if u == nil {
		return
	}
	u.then = Tiles{slices.Clone(b.Tiles.At), slices.Clone(b.Tiles.Mass), b.Tiles.Surplus}
	w.tape.bytes += 8*len(u.then.Mass) + 8*len(u.then.At)
}
