package terrain

import "math"

// Roughness is a class of ground by its slope. The bounds are practice, with
// no source: each about three times the last, since what terrain tells about
// position grows in proportion to slope.
type Roughness int

// The classes, by slope in metres per metre.
const (
	Flat    Roughness = iota // below 0.01
	Gentle                   // 0.01 to 0.03
	Rolling                  // 0.03 to 0.1
	Hilly                    // 0.1 to 0.3
	Steep                    // 0.3 and more
	roughnesses
)

// Roughnesses is how many classes there are.
const Roughnesses = int(roughnesses)

var roughness = [...]struct {
	name  string
	below float64
}{{"flat", 0.01}, {"gentle", 0.03}, {"rolling", 0.1}, {"hilly", 0.3}, {"steep", math.Inf(1)}}

// RoughnessOf returns the class of a slope, which may be the root mean square
// of several. NaN gives -1, which prints as unknown.
func RoughnessOf(slope float64) Roughness {
	for i, c := range roughness {
		if slope < c.below || slope == c.below && i == len(roughness)-1 {
			return Roughness(i)
		}
	}
	return -1
}

func (c Roughness) String() string {
	if c < 0 || int(c) >= len(roughness) {
		return "unknown"
	}
	return roughness[c].name
}

// Below returns the slope at which the class ends, +Inf for the last.
func (c Roughness) Below() float64 { return roughness[c].below }

// Slopes are statistics of the slope at the middles of all cells whose four
// corners are known.
type Slopes struct {
	Cells     int
	RMS, Max  float64              // metres per metre
	Share     [Roughnesses]float64 // of Cells, by class
	Unrounded bool                 // heights are not all whole metres
}

// Slopes reads every height once. Distances are true ground distances.
// Without a single known cell all figures are 0.
func (r *Raster) Slopes() Slopes {
	g := r.grid
	var out Slopes
	var count [Roughnesses]int
	total := 0.0
	for w := range g.Rows - 1 {
		eM, nM := g.stepM(float64(g.Cols-1)/2, float64(w)+0.5)
		north, south := r.heights[w*g.Cols:(w+1)*g.Cols], r.heights[(w+1)*g.Cols:(w+2)*g.Cols]
		sum := 0.0
		for c := range g.Cols - 1 {
			a, b, d, e := float64(north[c]), float64(north[c+1]), float64(south[c]), float64(south[c+1])
			x, y := (b-a+e-d)/(2*eM), (d-a+e-b)/(2*nM)
			s2 := x*x + y*y
			if s2 != s2 {
				continue
			}
			out.Unrounded = out.Unrounded || a != math.Trunc(a)
			s := math.Sqrt(s2)
			sum += s2
			out.Max = math.Max(out.Max, s)
			out.Cells++
			count[RoughnessOf(s)]++
		}
		total += sum
	}
	if out.Cells == 0 {
		return out
	}
	out.RMS = math.Sqrt(total / float64(out.Cells))
	for i, n := range count {
		out.Share[i] = float64(n) / float64(out.Cells)
	}
	return out
}
