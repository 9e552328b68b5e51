package kernel

// Ground compares a measured height with the ground's straight below places of a plane.
type Ground struct {
	TopM, DistanceM float64 // residual is TopM - height - DistanceM
	// The residual's variance is MapFactor times the map's, SlopeVar for each unit of
	// slope², and Tilt.
	MapFactor, SlopeVar, Tilt float64
	Flat                      float64 // where the height is NaN
}

// Terms writes residual, variance and slopes (two numbers a place), and NaN to flat;
// where the height is NaN, and with it neither slope nor variance, 0 and Flat.
func (g *Ground) Terms(residual, extra, row, flat, height, slopeE, slopeN, variance []float64) {
	n := len(residual)
	ground(g, residual, extra[:n], row[:2*n], flat[:n], height[:n], slopeE[:n], slopeN[:n], variance[:n])
}

// groundPlain is Ground.Terms in plain Go, from index i on.
func groundPlain(g *Ground, residual, extra, row, flat, height, slopeE, slopeN, variance []float64, i int) {
	for ; i < len(residual); i++ {
		h := height[i]
		if h != h {
			residual[i], extra[i], row[2*i], row[2*i+1], flat[i] = 0, 0, 0, 0, g.Flat
			continue
		}
		sE, sN := slopeE[i], slopeN[i]
		residual[i] = g.TopM - h - g.DistanceM
		extra[i] = float64(g.MapFactor*variance[i]) + float64((float64(sE*sE)+float64(sN*sN))*g.SlopeVar) + g.Tilt
		row[2*i], row[2*i+1], flat[i] = sE, sN, unknown
	}
}
