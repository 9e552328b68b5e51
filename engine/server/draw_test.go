package server

import (
	"math"
	"slices"
	"testing"

	"google.golang.org/protobuf/proto"

	"leadline/engine/geo"
	"leadline/engine/plane"
	leadlinev1 "leadline/proto/leadline/v1"
)

// bent is roads of our own: a bend that a straight line may stand for at 3 m and
// not at 1 m, its twin, a short road, and one far off.
type bent struct{}

var _ Roads = bent{}

var bentLines = [][2][]float64{
	{{0, 50, 100}, {0, 2, 0}},
	{{100, 50, 0}, {0, 2, 0}},
	{{0, 4}, {10, 10}},
	{{9000, 9100}, {0, 0}},
}

func (bent) Charts() int { return len(bentLines) }
func (bent) Polyline(c int32) (eastM, northM []float64) {
	return bentLines[c][0], bentLines[c][1]
}
func (bent) Twin(c int32) int32 { return []int32{1, 0, -1, -1}[c] }
func (bent) Name(c int32) string {
	return []string{"Bend", "Bend", "Short", "Far"}[c]
}
func (bent) Class(int32) string  { return "residential" }
func (bent) Tunnel(c int32) bool { return c == 2 }
func (bent) Bridge(c int32) bool { return c == 3 }

// at is a place in the frame of the sea.
func at(e, n float64) geo.LonLat { return geo.NewFrame(middle).Inverse(geo.Point{E: e, N: n}) }

func corner(p geo.LonLat) *leadlinev1.Position {
	lon, lat := p.Degrees()
	return &leadlinev1.Position{Lon: proto.Float64(lon), Lat: proto.Float64(lat)}
}

// TestDrawRoads proves that a drawing has the roads of its rectangle, each once,
// as fine as was asked for.
func TestDrawRoads(t *testing.T) {
	m := sea()
	m.Roads = bent{}
	_, conn := serve(t, Config{Maps: []Map{m}})
	c := leadlinev1.NewPositionServiceClient(conn)
	for _, k := range []struct {
		detail  float64
		within  bool
		names   []string
		points  int
		leftOut uint32
	}{
		{0, false, []string{"Bend", "Short", "Far"}, 7, 0},
		{3, false, []string{"Bend", "Short", "Far"}, 7, 0},
		{5, false, []string{"Bend", "Short", "Far"}, 6, 0},
		{10, false, []string{"Bend", "Far"}, 4, 1},
		{0, true, []string{"Bend", "Short"}, 5, 0},
	} {
		req := &leadlinev1.DrawMapRequest{Map: "sea", DetailM: k.detail}
		if k.within {
			req.SouthWest, req.NorthEast = corner(at(-50, -50)), corner(at(50, 50))
		}
		got, err := c.DrawMap(limited(t), req)
		if err != nil {
			t.Fatal(err)
		}
		var names []string
		points := 0
		for _, l := range got.GetLines() {
			names = append(names, l.GetName())
			points += len(l.GetEastCm())
		}
		if !slices.Equal(names, k.names) || points != k.points || got.GetLeftOut() != k.leftOut || got.GetDetailM() != k.detail {
			t.Errorf("%+v: %q with %d points, %d left out, detail %v", k, names, points, got.GetLeftOut(), got.GetDetailM())
		}
		end := int32(0)
		for _, d := range got.GetLines()[0].GetEastCm() {
			end += d
		}
		if l := got.GetLines()[0]; l.GetOneWay() || l.GetTunnel() || end != 10000 {
			t.Errorf("%+v: first line %v ends at %d cm", k, l, end)
		}
	}
}

// TestSimplified compares the kept points with what they must be: no point of
// the line is farther than the tolerance from what is kept, and without any
// tolerance nothing that bends is lost.
func TestSimplified(t *testing.T) {
	const n = 200
	east, north := make([]float64, n), make([]float64, n)
	for i := range n {
		east[i], north[i] = float64(i), 20*math.Sin(float64(i)/15)
	}
	last := n
	for _, tolerance := range []float64{0, 0.01, 0.3, 2, 100} {
		keep := simplified(east, north, tolerance)
		if keep[0] != 0 || keep[len(keep)-1] != n-1 || len(keep) > last {
			t.Errorf("tolerance %v: kept %v", tolerance, keep)
		}
		last = len(keep)
		for k := 1; k < len(keep); k++ {
			for i := keep[k-1]; i <= keep[k]; i++ {
				if d := distanceToSegment(east, north, i, keep[k-1], keep[k]); d > tolerance {
					t.Errorf("tolerance %v: point %d is %v off", tolerance, i, d)
				}
			}
		}
	}
	if last != 2 || len(simplified(east, north, 0)) != n {
		t.Errorf("%d points at 100 m, %d at 0", last, len(simplified(east, north, 0)))
	}
}

// hill is a height that rises to the east and is unknown in the far north.
type hill struct{}

func (hill) Frame() geo.Frame { return geo.NewFrame(middle) }
func (hill) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -1000, N: -1000}, Max: geo.Point{E: 1000, N: 1000}}
}

func (hill) Sample(dst geo.Heights, east, north []float64) {
	for i := range east {
		dst.HeightM[i] = 100 + 0.1*east[i]
		if north[i] > 500 {
			dst.HeightM[i] = math.NaN()
		}
		for _, c := range [][]float64{dst.SlopeE, dst.SlopeN, dst.VarianceM2} {
			if c != nil {
				c[i] = 0
			}
		}
	}
}

// TestDrawRelief proves that bytes stand for the heights, that what is unknown
// is 0, that an answer is bounded, and that ground that rises to the east is
// brighter than flat ground, which has the shade cos 45°.
func TestDrawRelief(t *testing.T) {
	land := Map{Name: "land", Space: plane.Over(hill{}, "hill", 10)}
	_, conn := serve(t, Config{Maps: []Map{land, sea()}})
	c := leadlinev1.NewPositionServiceClient(conn)
	for _, detail := range []float64{0, 50, 400} {
		got, err := c.DrawMap(limited(t), &leadlinev1.DrawMapRequest{Map: "land", DetailM: detail})
		if err != nil {
			t.Fatal(err)
		}
		r := got.GetRelief()
		n := int(r.GetColumns() * r.GetRows())
		if n == 0 || n > maxReliefSamples || len(r.GetHeight()) != n || len(r.GetShade()) != n || r.GetStepM() < detail || got.GetDetailM() != r.GetStepM() {
			t.Fatalf("detail %v: %d × %d, step %v", detail, r.GetColumns(), r.GetRows(), r.GetStepM())
		}
		for i, b := range r.GetHeight() {
			col, row := i%int(r.GetColumns()), i/int(r.GetColumns())
			east, north := r.GetWestM()+float64(col)*r.GetStepM(), r.GetSouthM()+float64(row)*r.GetStepM()
			if north > 500+r.GetStepM() || north < 500-r.GetStepM() {
				if unknown := b == 0; unknown != (north > 500) {
					t.Fatalf("detail %v: byte %d at north %v", detail, b, north)
				}
			}
			if b == 0 {
				continue
			}
			h := r.GetLowestM() + float64(b-1)/254*(r.GetHighestM()-r.GetLowestM())
			if want := 100 + 0.1*east; math.Abs(h-want) > (r.GetHighestM()-r.GetLowestM())/254 {
				t.Fatalf("detail %v: %v at east %v, want %v", detail, h, east, want)
			}
			if s := r.GetShade()[i]; float64(s) <= 255*math.Sqrt2/2 {
				t.Fatalf("detail %v: shade %d", detail, s)
			}
		}
	}
	got, err := c.DrawMap(limited(t), &leadlinev1.DrawMapRequest{Map: "sea"})
	if err != nil || got.GetRelief() != nil {
		t.Errorf("a plane without heights: %v, %v", got.GetRelief(), err)
	}
}
