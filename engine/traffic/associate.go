package traffic

// association is what is computed of a scan and the vehicles that may have made
// it, at most mostBearings bearings in it.
//
// Let vehicle i hear bearings o (none, one, or two) with weight w_i(o); let
// those that no vehicle takes be new or false, alone with weight a + n_j
// (false, new) and in pairs with weight n_jk. The probability of a joint
// association is the product of its weights over the sum of all products; what
// is wanted are the marginals. They are summed exactly, over the subsets of
// bearings that the vehicles up to the i-th have taken (forward) and those that
// are left to the others (backward): n·2^m·(ways) operations in place of the
// number of joint associations.
//
// Sources: joint integrated probabilistic data association, Musicki & Evans, IEEE
// Trans. Aerosp. Electron. Syst. 40, 2004; the same marginals as an
// approximation of the exact posterior by a (labelled) multi-Bernoulli density,
// with vehicles never heard as a Poisson process: Reuter, Vo, Vo & Dietmayer,
// IEEE Trans. Signal Process. 62, 2014; Williams, IEEE Trans. Aerosp. Electron.
// Syst. 51, 2015.
type association struct {
	bearings int
	spurious float64     // a: the same for every bearing
	new1     []float64   // by bearing
	new2     []float64   // by pair; nil if there are no pairs
	vehicles [][]float64 // w_i: nothing, each bearing, each pair

	// What marginals fills in: of vehicle i by way; of the new ones.
	taken [][]float64
	born1 []float64
	born2 []float64
}

// mostBearings that are associated together: 4096 subsets.
const mostBearings = 12

// ways lists the subsets of bearings that one vehicle may take, in the order of
// w_i: none, single ones, pairs.
func ways(n int, pairs bool) []int {
	out := []int{0}
	for j := range n {
		out = append(out, 1<<j)
	}
	if pairs {
		for j := range n {
			for k := j + 1; k < n; k++ {
				out = append(out, 1<<j|1<<k)
			}
		}
	}
	return out
}

// marginals returns the sum of all products.
func (a *association) marginals() float64 {
	n := a.bearings
	full := 1<<n - 1
	sets := ways(n, a.new2 != nil)
	rest := a.rest()

	// backward[i][taken]: of vehicles i, i+1, … and the rest.
	v := len(a.vehicles)
	backward := make([][]float64, v+1)
	backward[v] = make([]float64, full+1)
	for taken := range full + 1 {
		backward[v][taken] = rest[full&^taken]
	}
	for i := v - 1; i >= 0; i-- {
		backward[i] = make([]float64, full+1)
		for taken := range full + 1 {
			sum := 0.0
			for o, set := range sets {
				if w := a.vehicles[i][o]; w > 0 && set&taken == 0 {
					sum += float64(w * backward[i+1][taken|set])
				}
			}
			backward[i][taken] = sum
		}
	}
	z := backward[0][0]
	a.taken = make([][]float64, v)
	a.born1, a.born2 = make([]float64, n), make([]float64, len(a.new2))
	if !(z > 0) {
		return z
	}
	forward, next := make([]float64, full+1), make([]float64, full+1)
	forward[0] = 1
	for i := range a.vehicles {
		a.taken[i] = make([]float64, len(sets))
		clear(next)
		for taken, f := range forward {
			if f == 0 {
				continue
			}
			for o, set := range sets {
				if w := a.vehicles[i][o]; w > 0 && set&taken == 0 {
					next[taken|set] += float64(f * w)
					a.taken[i][o] += float64(f*w) * backward[i+1][taken|set] / z
				}
			}
		}
		forward, next = next, forward
	}
	for taken, f := range forward {
		if f == 0 {
			continue
		}
		left := full &^ taken
		for j := range n {
			if left&(1<<j) == 0 {
				continue
			}
			a.born1[j] += float64(f*a.new1[j]) * rest[left&^(1<<j)] / z
			for k := j + 1; k < n && a.new2 != nil; k++ {
				if left&(1<<k) != 0 {
					q := pair(j, k, n)
					a.born2[q] += float64(f*a.new2[q]) * rest[left&^(1<<j|1<<k)] / z
				}
			}
		}
	}
	return z
}

// rest is, for each set of bearings, the sum over the ways in which they are
// false, new, or new in pairs.
func (a *association) rest() []float64 {
	n := a.bearings
	rest := make([]float64, 1<<n)
	rest[0] = 1
	for set := 1; set < len(rest); set++ {
		j := 0
		for set&(1<<j) == 0 {
			j++
		}
		left := set &^ (1 << j)
		sum := float64((a.spurious + a.new1[j]) * rest[left])
		for k := j + 1; k < n && a.new2 != nil; k++ {
			if left&(1<<k) != 0 {
				sum += float64(a.new2[pair(j, k, n)] * rest[left&^(1<<k)])
			}
		}
		rest[set] = sum
	}
	return rest
}
