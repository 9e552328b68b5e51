package sensor

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// constantInformation is what n measurements at places stepM apart say of a
// constant: 1ᵀ C⁻¹ 1, with C the covariance of an error of the map that is
// correlated over lengthM and of the sensor's own.
func constantInformation(t *testing.T, n int, stepM, lengthM, mapVar, sensorVar float64) float64 {
	t.Helper()
	c := mat.NewSymDense(n, nil)
	ones := mat.NewVecDense(n, nil)
	for i := range n {
		ones.SetVec(i, 1)
		for j := i; j < n; j++ {
			c.SetSym(i, j, mapVar*math.Exp(-float64(j-i)*stepM/lengthM))
		}
		c.SetSym(i, i, mapVar+sensorVar)
	}
	var factor mat.Cholesky
	if !factor.Factorize(c) {
		t.Fatal("no covariance")
	}
	var x mat.VecDense
	if err := factor.SolveVecTo(&x, ones); err != nil {
		t.Fatal(err)
	}
	return mat.Dot(ones, &x)
}
