package score

import (
	"math"
	"slices"
)

// Sample takes values of 0 or more and gives their quantiles, in bounded memory: it
// keeps mostExact of them, and of more than that counts in bins that are sampleStep
// wide each in terms of their value, so that a quantile is within 0.05 % of an order
// statistic, or within leastSample of it. The zero value is ready.
type Sample struct {
	exact  []float64
	bins   []uint64 // nil while all are kept; of the last one the values are mostSample or more
	n      int
	max    float64
	sorted bool
}

const (
	mostExact   = 1 << 18
	sampleStep  = 1e-3
	leastSample = 1e-6
	mostSample  = 1e9
)

// binOf is the bin of a value: the first is below leastSample.
func binOf(x float64) int {
	if !(x >= leastSample) {
		return 0
	}
	return 1 + int(math.Log(math.Min(x, mostSample)/leastSample)/sampleStep)
}

// Add takes a value.
func (s *Sample) Add(x float64) {
	s.n++
	s.max = math.Max(s.max, x)
	if s.bins == nil && len(s.exact) < mostExact {
		s.exact, s.sorted = append(s.exact, x), false
		return
	}
	if s.bins == nil {
		s.bins = make([]uint64, binOf(mostSample)+1)
		for _, x := range s.exact {
			s.bins[binOf(x)]++
		}
		s.exact = nil
	}
	s.bins[binOf(x)]++
}

// Len is how many values there are, Max the greatest.
func (s *Sample) Len() int     { return s.n }
func (s *Sample) Max() float64 { return s.max }

// Quantile interpolates linearly between order statistics, the first at 0 and the
// last at 1. It panics if there is none.
func (s *Sample) Quantile(q float64) float64 {
	if s.bins == nil {
		if !s.sorted {
			slices.Sort(s.exact)
			s.sorted = true
		}
		return sortedQuantile(s.exact, q)
	}
	at := q * float64(s.n-1)
	i := min(int(at), s.n-1)
	below := s.rank(i)
	return below + (at-float64(i))*(s.rank(min(i+1, s.n-1))-below)
}

// rank is the order statistic of a number from 0.
func (s *Sample) rank(i int) float64 {
	if i == s.n-1 {
		return s.max
	}
	left := uint64(i)
	for b, k := range s.bins {
		if left < k {
			if b == 0 {
				return 0
			}
			return math.Min(leastSample*math.Exp((float64(b)-0.5)*sampleStep), s.max)
		}
		left -= k
	}
	panic("score: the bins of a sample do not sum to its number")
}

// series keeps values in their order, for IndependentOf: of more than mostExact each
// second, then each fourth, and so on.
type series struct {
	x     []float64
	every int // 0 is 1
	n     int
}

func (s *series) add(x float64) {
	s.every = max(s.every, 1)
	if s.n%s.every == 0 {
		s.x = append(s.x, x)
	}
	s.n++
	if len(s.x) > mostExact {
		half := s.x[:0]
		for i := 0; i < len(s.x); i += 2 {
			half = append(half, s.x[i])
		}
		s.x, s.every = half, 2*s.every
	}
}
