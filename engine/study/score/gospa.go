package score

import "math"

// GOSPA is the generalised optimal sub-pattern assignment metric with α = 2
// between two finite sets,
//
//	( min over assignments of  Σ d(x, y)^p  +  c^p/2 · (missed + false) )^(1/p),
//
// and what it is made of. Source: Rahmathullah, García-Fernández & Svensson,
// 20th Int. Conf. on Information Fusion, 2017.
type GOSPA struct {
	Value float64
	// Paired is Σ d^p of those assigned to one another, all nearer than c.
	Paired        float64
	Missed, False int
	// Of says for each truth which estimate is its own, -1 if none.
	Of []int
}

// NewGOSPA compares n truths with m estimates by their distances, for a cut-off c
// > 0 and an order p ≥ 1.
func NewGOSPA(n, m int, distance func(truth, estimate int) float64, c, p float64) GOSPA {
	if !(c > 0) || !(p >= 1) {
		panic("score: GOSPA wants c > 0 and p >= 1")
	}
	out := GOSPA{Of: make([]int, n)}
	size := max(n, m)
	whole := math.Pow(c, p)
	cost := make([][]float64, size)
	for i := range cost {
		cost[i] = make([]float64, size)
		for j := range cost[i] {
			cost[i][j] = whole / 2 // alone
			if i < n && j < m {
				cost[i][j] = math.Min(math.Pow(distance(i, j), p), whole)
			}
		}
	}
	paired := 0
	for i, j := range assign(cost) {
		if i >= n {
			continue
		}
		out.Of[i] = -1
		if j < m && cost[i][j] < whole {
			out.Of[i] = j
			out.Paired += cost[i][j]
			paired++
		}
	}
	out.Missed, out.False = n-paired, m-paired
	out.Value = math.Pow(out.Paired+whole/2*float64(out.Missed+out.False), 1/p)
	return out
}

// assign gives each row a column of its own so that the sum of costs is least,
// by shortest augmenting paths with potentials: Kuhn, Naval Research Logistics
// Quarterly 2, 1955, in the form of Jonker & Volgenant, Computing 38, 1987.
func assign(cost [][]float64) []int {
	n := len(cost)
	rowOf, before := make([]int, n), make([]int, n)
	u, v := make([]float64, n), make([]float64, n)
	for j := range rowOf {
		rowOf[j] = -1
	}
	for row := range n {
		least, done := make([]float64, n), make([]bool, n)
		for j := range least {
			least[j], before[j] = math.Inf(1), -1
		}
		i, at := row, -1 // the row whose edges are looked at, and its column
		for {
			next, delta := -1, math.Inf(1)
			for j := range n {
				if done[j] {
					continue
				}
				if d := cost[i][j] - u[i] - v[j]; d < least[j] {
					least[j], before[j] = d, at
				}
				if least[j] < delta {
					next, delta = j, least[j]
				}
			}
			u[row] += delta
			for j := range n {
				if done[j] {
					u[rowOf[j]] += delta
					v[j] -= delta
				} else {
					least[j] -= delta
				}
			}
			done[next], at = true, next
			if rowOf[next] < 0 {
				break
			}
			i = rowOf[next]
		}
		for at >= 0 {
			j := before[at]
			if j < 0 {
				rowOf[at] = row
			} else {
				rowOf[at] = rowOf[j]
			}
			at = j
		}
	}
	out := make([]int, n)
	for j, i := range rowOf {
		out[i] = j
	}
	return out
}
