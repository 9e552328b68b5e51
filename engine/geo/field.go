package geo

// Field is a height over a metric frame: sea floor, terrain, or anything that
// a map gives a number for at every point.
type Field interface {
	// Frame is the frame of the points given to Sample.
	Frame() Frame
	// Bounds is the part of the frame outside which every height is unknown.
	Bounds() Box
	// Sample writes height, gradient and error variance at the points
	// (eastM[i], northM[i]). All slices have one length. Where the height is
	// unknown (a void, or off the field) HeightM[i] is NaN and the other
	// columns are 0.
	Sample(dst Heights, eastM, northM []float64)
}

// Heights are the columns that Field.Sample fills. A nil column other than
// HeightM is not wanted and stays nil.
type Heights struct {
	HeightM    []float64 // height above the field's vertical datum, metres, up
	SlopeE     []float64 // ∂height/∂east in the frame, metres per metre
	SlopeN     []float64 // ∂height/∂north
	VarianceM2 []float64 // variance of the map's own vertical error, m²
}
