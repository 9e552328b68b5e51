package filter

// transition is the F of a step: of the rows that differ from the identity,
// what is not zero. Most steps have one or two such rows, of two entries each.
type transition struct {
	k, n  int // quantities; rows that differ
	row   [MaxK]int
	size  [MaxK]int
	col   [MaxK][MaxK]int
	value [MaxK][MaxK]float64
	c     [MaxK][MaxK]float64 // apply's
}

// set takes a k×k matrix by rows; nil is the identity.
func (t *transition) set(k int, f []float64) {
	t.k, t.n = k, 0
	for i := 0; i*k < len(f); i++ {
		size, same := 0, true
		for j, v := range f[i*k : i*k+k] {
			want := 0.0
			if j == i {
				want = 1
			}
			same = same && v == want
			if v != 0 {
				t.col[t.n][size], t.value[t.n][size] = j, v
				size++
			}
		}
		if !same {
			t.row[t.n], t.size[t.n] = i, size
			t.n++
		}
	}
}

// advance sets g to the Gaussian of F x + add + w, w ~ N(0, q). The
// covariances of the quantities whose rows differ from the identity alone
// change.
func (g *gaussian) advance(t *transition, add, q []float64) {
	if t.n > 0 {
		g.apply(t)
	}
	for i, v := range add[:t.k] {
		g.mean[i] += v
	}
	for i, v := range q {
		g.cov[i] += v
	}
}

func (g *gaussian) apply(t *transition) {
	c := &t.c // C fᵀ of each row f
	var mean [MaxK]float64
	k := t.k
	for a := range t.n {
		ca := c[a][:k]
		clear(ca)
		m := 0.0
		for x := range t.size[a] {
			j, v := t.col[a][x], t.value[a][x]
			m += float64(v * g.mean[j])
			row := g.cov[Packed(j, 0):][:j+1] // C of j and those up to it
			for i, r := range row {
				ca[i] += float64(v * r)
			}
			at := Packed(j+1, j)
			for i := j + 1; i < k; i++ {
				ca[i] += float64(v * g.cov[at])
				at += i + 1
			}
		}
		mean[a] = m
	}
	for a := range t.n {
		r := t.row[a]
		g.mean[r] = mean[a]
		ca := c[a][:k]
		copy(g.cov[Packed(r, 0):][:r], ca)
		at := Packed(r, r)
		for i := r; i < k; i++ {
			g.cov[at] = ca[i]
			at += i + 1
		}
	}
	for a := range t.n { // between two such quantities, fᵢ C fⱼᵀ
		for b := range a + 1 {
			s := 0.0
			for x := range t.size[b] {
				s += float64(t.value[b][x] * c[a][t.col[b][x]])
			}
			g.cov[Packed(t.row[a], t.row[b])] = s
		}
	}
}
