package score

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/engine/summary"
)

// Estimate is what a truth's offset may be, beyond the one that was taken off,
// by least squares over the scored positions while they are located and the
// truth moves: the error is taken for
//
//	truth - estimate = forward·along + right·across - late·speed·along
//
// with the weight of the posterior's and the truth's variance. Standard errors
// are for as many errors as are independent. Forward and late are told apart by
// changes of speed alone: with a constant one their standard errors are large. A
// bias of the posteriors themselves (a late sensor, a map that is shifted) looks
// the same.
type Estimate struct {
	ForwardM      float64 `json:"estimate_forward_m"`
	RightM        float64 `json:"estimate_right_m"`
	LateS         float64 `json:"estimate_late_s"`
	ForwardSigmaM float64 `json:"estimate_forward_sigma_m"`
	RightSigmaM   float64 `json:"estimate_right_sigma_m"`
	LateSigmaS    float64 `json:"estimate_late_sigma_s"`
}

// fit gathers normal equations over forward, right, late.
type fit struct {
	a *mat.SymDense
	b [3]float64
	n int
}

func newFit() *fit { return &fit{a: mat.NewSymDense(3, nil)} }

func (f *fit) add(e one, p *summary.Posterior, truth Truth, m motion) {
	if !m.known || p.Status != summary.Located {
		return
	}
	f.n++
	r := truth.SigmaM * truth.SigmaM
	u, v := m.along, rightOf(m.along)
	c := p.Cov
	varAlong := u.E*u.E*c.EE + 2*u.E*u.N*c.EN + u.N*u.N*c.NN + r
	varAcross := v.E*v.E*c.EE + 2*v.E*v.N*c.EN + v.N*v.N*c.NN + r
	f.row([3]float64{1, 0, -m.speedMPS}, -dot(e.off, u), varAlong)
	f.row([3]float64{0, 1, 0}, -dot(e.off, v), varAcross)
}

// row adds z = h·x + noise of a variance.
func (f *fit) row(h [3]float64, z, variance float64) {
	for i := range h {
		f.b[i] += h[i] * z / variance
		for j := range i + 1 {
			f.a.SetSym(i, j, f.a.At(i, j)+h[i]*h[j]/variance)
		}
	}
}

// estimate solves; nil if there is not enough to tell the three apart.
func (f *fit) estimate(independent float64) *Estimate {
	if f.n < 3 {
		return nil
	}
	var chol mat.Cholesky
	if !chol.Factorize(f.a) || chol.Cond() > 1e10 {
		return nil
	}
	var x mat.VecDense
	var inverse mat.SymDense
	if chol.SolveVecTo(&x, mat.NewVecDense(3, f.b[:])) != nil || chol.InverseTo(&inverse) != nil {
		return nil
	}
	// n errors that are worth fewer.
	worth := math.Max(1, float64(f.n)/independent)
	sigma := func(i int) float64 { return math.Sqrt(inverse.At(i, i) * worth) }
	return &Estimate{x.AtVec(0), x.AtVec(1), x.AtVec(2), sigma(0), sigma(1), sigma(2)}
}
