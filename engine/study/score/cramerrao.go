package score

import (
	"errors"
	"fmt"

	"gonum.org/v1/gonum/mat"
)

// ErrInformation is returned by CramerRaoStep when a matrix that must be
// inverted is singular or not positive definite.
var ErrInformation = errors.New("score: the information is not positive definite")

// CramerRaoStep returns the posterior Cramér–Rao information after one step
// with identity dynamics, x' = x + u + w, w ~ N(0, Q), and measurements that
// add the information gain (for scalar z = h(x) + v: E[∇h ∇hᵀ]/R, see
// MeasurementInformation; nil adds nothing):
//
//	J' = (J⁻¹ + Q)⁻¹ + gain.
//
// All are n×n. The inverse of J bounds the mean squared error of any estimate
// from below. Along a known track the expectation in gain is the value there:
// the bound for that track, and for a linear h the information of the Kalman
// filter. J must be positive definite, else ErrInformation; Q may be zero.
//
// Source: Tichavský, Muravchik & Nehorai, IEEE Trans. Signal Processing 46(5),
// 1998, for identity dynamics.
func CramerRaoStep(information, noise, gain mat.Symmetric) (*mat.SymDense, error) {
	n := information.SymmetricDim()
	if noise.SymmetricDim() != n || gain != nil && gain.SymmetricDim() != n {
		panic(fmt.Sprintf("score: a Cramér–Rao step over %d quantities with noise over %d", n, noise.SymmetricDim()))
	}
	covariance, err := invert(information)
	if err != nil {
		return nil, err
	}
	covariance.AddSym(covariance, noise)
	next, err := invert(covariance)
	if err != nil {
		return nil, err
	}
	if gain != nil {
		next.AddSym(next, gain)
	}
	return next, nil
}

// MeasurementInformation returns E[∇h ∇hᵀ]/R for a scalar measurement with
// noise variance R > 0 from gradients of h at one or more states, one a row.
func MeasurementInformation(gradients mat.Matrix, varianceR float64) *mat.SymDense {
	rows, n := gradients.Dims()
	if !(varianceR > 0) || rows == 0 {
		panic("score: a measurement needs a gradient and a positive variance")
	}
	sum := mat.NewSymDense(n, nil)
	for i := range n {
		for j := range i + 1 {
			s := 0.0
			for r := range rows {
				s += gradients.At(r, i) * gradients.At(r, j)
			}
			sum.SetSym(i, j, s/float64(rows)/varianceR)
		}
	}
	return sum
}

func invert(m mat.Symmetric) (*mat.SymDense, error) {
	var chol mat.Cholesky
	if !chol.Factorize(m) {
		return nil, ErrInformation
	}
	var inverse mat.SymDense
	if err := chol.InverseTo(&inverse); err != nil {
		return nil, fmt.Errorf("%w: %w", ErrInformation, err)
	}
	return &inverse, nil
}
