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
	four  [2][4]float64       // the first two whole, of four quantities
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
			if t.n < len(t.four) {
				copy(t.four[t.n][:], f[i*k:i*k+k])
			}
			t.row[t.n], t.size[t.n] = i, size
			t.n++
		}
	}
}

// advance sets g to the Gaussian of F x + add + w, w ~ N(0, q). The
// covariances of the quantities whose rows differ from the identity alone
// change.
func (g *gaussian) advance(t *transition, add, q []float64) {
	advance(g.mean[:t.k], g.cov[:len(q)], t, add, q)
}

// advance is gaussian.advance of a mean and a covariance.
func advance(mean, cov []float64, t *transition, add, q []float64) {
	switch {
	case t.n == 0:
	case t.n <= 2 && t.k == 4:
		t.applyFour((*[4]float64)(mean), (*[10]float64)(cov))
	default:
		t.apply(mean, cov)
	}
	for i, v := range add[:len(mean)] {
		mean[i] += v
	}
	for i, v := range q[:len(cov)] {
		cov[i] += v
	}
}

// fourth says where rows of a covariance over four quantities are in its packed one.
var fourth = [4][4]uint8{{0, 1, 3, 6}, {1, 2, 4, 7}, {3, 4, 5, 8}, {6, 7, 8, 9}}

// applyFour is apply of one or two rows over four quantities, without loops: to the bit,
// as rowOfFour is.
func (t *transition) applyFour(mean *[4]float64, cov *[10]float64) {
	var c, d [4]float64
	f, r := &t.four[0], t.row[0]&3
	own, m := rowOfFour(&c, f, cov), dotFour(f, mean)
	if t.n == 1 {
		setRow(cov, r, &c, own)
		mean[r] = m
		return
	}
	h, s := &t.four[1], t.row[1]&3
	second, n := rowOfFour(&d, h, cov), dotFour(h, mean)
	cross := dotFour(f, &d)
	setRow(cov, r, &c, own)
	setRow(cov, s, &d, second)
	cov[fourth[r][s]] = cross
	mean[r], mean[s] = m, n
}

// setRow writes a row of a covariance, of which own is on the diagonal.
func setRow(cov *[10]float64, r int, c *[4]float64, own float64) {
	at := &fourth[r&3]
	cov[at[0]], cov[at[1]], cov[at[2]], cov[at[3]] = c[0], c[1], c[2], c[3]
	cov[at[r&3]] = own
}

func dotFour(f, x *[4]float64) float64 {
	return 0 + float64(f[0]*x[0]) + float64(f[1]*x[1]) + float64(f[2]*x[2]) + float64(f[3]*x[3])
}

func (t *transition) apply(of, cov []float64) {
	c := &t.c // C fᵀ of each row f
	var mean [MaxK]float64
	k := t.k
	for a := range t.n {
		ca := c[a][:k]
		clear(ca)
		m := 0.0
		for x := range t.size[a] {
			j, v := t.col[a][x], t.value[a][x]
			m += float64(v * of[j])
			row := cov[Packed(j, 0):][:j+1] // C of j and those up to it
			for i, r := range row {
				ca[i] += float64(v * r)
			}
			at := Packed(j+1, j)
			for i := j + 1; i < k; i++ {
				ca[i] += float64(v * cov[at])
				at += i + 1
			}
		}
		mean[a] = m
	}
	for a := range t.n {
		r := t.row[a]
		of[r] = mean[a]
		ca := c[a][:k]
		copy(cov[Packed(r, 0):][:r], ca)
		at := Packed(r, r)
		for i := r; i < k; i++ {
			cov[at] = ca[i]
			at += i + 1
		}
	}
	for a := range t.n { // between two such quantities, fᵢ C fⱼᵀ
		for b := range a + 1 {
			s := 0.0
			for x := range t.size[b] {
				s += float64(t.value[b][x] * c[a][t.col[b][x]])
			}
			cov[Packed(t.row[a], t.row[b])] = s
		}
	}
}
