package wire

import (
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	leadlinev1 "leadline/proto/leadline/v1"
)

// kinds are all kinds, with the variants that travel differently.
func kinds() []sensor.Measurement {
	return []sensor.Measurement{
		sensor.Travel{},
		sensor.Turn{},
		sensor.Displacement{},
		sensor.BodyDisplacement{},
		sensor.Speed{},
		sensor.Speed{HasCourse: true},
		sensor.HeadingFix{},
		sensor.Clearance{},
		sensor.Sounding{},
		sensor.Sounding{Beams: make([]sensor.Beam, 3)},
		sensor.Barometer{},
		sensor.Barometer{HasPressure: true},
		sensor.Range{},
		sensor.Range{Beacon: sensor.Beacon{ID: "a"}},
		sensor.Bearing{},
		sensor.Bearing{Beacon: sensor.Beacon{ID: "a"}},
		sensor.AcousticBearing{Post: "p"},
		sensor.Fix{},
		sensor.Sighting{Road: "r", Who: "w"},
		sensor.Sighting{Area: [][]geo.LonLat{make([]geo.LonLat, 4), make([]geo.LonLat, 3)}},
		sensor.Standstill{},
	}
}

// random fills every number of a measurement, except what the variant leaves
// out: course without HasCourse, the other reading of a barometer, a beacon's
// position beside its id.
func random(rng *rand.Rand, z sensor.Measurement) sensor.Measurement {
	v := reflect.New(reflect.TypeOf(z)).Elem()
	v.Set(reflect.ValueOf(z))
	var fill func(v reflect.Value)
	fill = func(v reflect.Value) {
		switch x := v.Addr().Interface().(type) {
		case *float64:
			*x = rng.NormFloat64() * math.Exp(4*rng.NormFloat64())
		case *sensor.Time:
			*x = sensor.Time(rng.Int64N(math.MaxInt64/2) - math.MaxInt64/4)
		case *geo.LonLat:
			*x = geo.FromDegrees(360*rng.Float64()-180, 180*rng.Float64()-90)
		case *sensor.Beacon:
			if x.ID == "" {
				fill(v.FieldByName("Position"))
			}
		default:
			switch v.Kind() {
			case reflect.Struct:
				for i := range v.NumField() {
					name := v.Type().Field(i).Name
					if name == "CourseRad" && !v.FieldByName("HasCourse").Bool() ||
						name == "AltitudeM" && v.FieldByName("HasPressure").IsValid() && v.FieldByName("HasPressure").Bool() ||
						name == "PressureHPa" && !v.FieldByName("HasPressure").Bool() {
						continue
					}
					fill(v.Field(i))
				}
			case reflect.Slice, reflect.Array:
				for i := range v.Len() {
					fill(v.Index(i))
				}
			}
		}
	}
	fill(v)
	return v.Interface().(sensor.Measurement)
}

// numbers lists the numbers of a value in order.
func numbers(dst []float64, v reflect.Value) []float64 {
	switch v.Kind() {
	case reflect.Float64:
		dst = append(dst, v.Float())
	case reflect.Struct:
		for i := range v.NumField() {
			dst = numbers(dst, v.Field(i))
		}
	case reflect.Slice, reflect.Array:
		for i := range v.Len() {
			dst = numbers(dst, v.Index(i))
		}
	}
	return dst
}

// TestRoundTrip proves that what came out of a message goes through another
// one without changing a bit, and that the engine's own values go through
// within the rounding of two angle conversions.
func TestRoundTrip(t *testing.T) {
	const seed = 5
	rng := rand.New(rand.NewPCG(seed, 0))
	seen := map[string]bool{}
	for range 2000 {
		for _, z := range kinds() {
			z = random(rng, z)
			seen[z.Kind()] = true
			once, err := ToMeasurement(sent(t, FromMeasurement(z)))
			if err != nil {
				t.Fatalf("seed %d: %+v: %v", seed, z, err)
			}
			twice, err := ToMeasurement(sent(t, FromMeasurement(once)))
			if err != nil || !reflect.DeepEqual(once, twice) {
				t.Fatalf("seed %d: %+v became %+v, %v", seed, once, twice, err)
			}
			a, b := numbers(nil, reflect.ValueOf(z)), numbers(nil, reflect.ValueOf(once))
			if len(a) != len(b) {
				t.Fatalf("seed %d: %+v became %+v", seed, z, once)
			}
			for i := range a {
				// degrees is right to two units in the last place, Rad adds
				// half of one and the rounding of π/180 another half.
				if math.Abs(a[i]-b[i]) > 3*0x1p-52*math.Abs(a[i]) {
					t.Fatalf("seed %d: %+v became %+v", seed, z, once)
				}
			}
		}
	}
	for _, k := range sensor.Kinds() {
		if !seen[k] {
			t.Errorf("kind %s is not tested", k)
		}
	}
}

// sent passes a message through its bytes.
func sent(t *testing.T, m *leadlinev1.Measurement) *leadlinev1.Measurement {
	t.Helper()
	b, err := proto.Marshal(m)
	if err != nil {
		t.Fatal(err)
	}
	out := &leadlinev1.Measurement{}
	if err := proto.Unmarshal(b, out); err != nil {
		t.Fatal(err)
	}
	return out
}

// TestEvent proves that time, sensor and number travel, to the nanosecond.
func TestEvent(t *testing.T) {
	for _, at := range []sensor.Time{0, 1, -1, 1903867200_123456789, -9e18, 9e18} {
		want := sensor.Event{Time: at, Sensor: "s", Number: math.MaxUint64, Measurement: sensor.Standstill{}}
		got, err := ToEvent(FromEvent(want))
		if err != nil || got != want {
			t.Errorf("%+v became %+v, %v", want, got, err)
		}
	}
	m := FromEvent(sensor.Event{Measurement: sensor.Standstill{}})
	if got, err := ToEvent(m); err != nil || got.Sensor != "standstill" {
		t.Errorf("got %+v, %v; want the kind as the sensor's name", got, err)
	}
}

// TestStart proves that each way to start travels.
func TestStart(t *testing.T) {
	p := geo.FromDegrees(1.52, 42.51)
	for _, want := range []Start{
		{},
		{Point: p, SigmaM: 50},
		{Area: [][]geo.LonLat{{p, geo.FromDegrees(2, 42), geo.FromDegrees(2, 43)}}},
	} {
		got, err := ToStart(FromStart(want))
		if err != nil || !reflect.DeepEqual(got, want) {
			t.Errorf("%+v became %+v, %v", want, got, err)
		}
	}
	if got, err := ToStart(nil); err != nil || !reflect.DeepEqual(got, Start{}) {
		t.Errorf("no start gave %+v, %v; want anywhere", got, err)
	}
}

// TestRefused proves that what a message must hold is missed by name.
func TestRefused(t *testing.T) {
	at := timestamppb.New(FromTime(0).AsTime())
	point := FromPosition(geo.FromDegrees(1, 2))
	ring := func(n int) *leadlinev1.Ring {
		r := &leadlinev1.Ring{}
		for range n {
			r.Points = append(r.Points, point)
		}
		return r
	}
	area := func(rings ...*leadlinev1.Ring) *leadlinev1.Measurement {
		return &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Sighting{Sighting: &leadlinev1.Sighting{
			Place: &leadlinev1.Sighting_Area{Area: &leadlinev1.Polygon{Rings: rings}},
		}}}
	}
	still := &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Standstill{Standstill: &leadlinev1.Standstill{}}}
	bearing := func(b *leadlinev1.Beacon) *leadlinev1.Measurement {
		return &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Bearing{Bearing: &leadlinev1.Bearing{Beacon: b}}}
	}
	long := strings.Repeat("x", MaxName+1)
	for _, c := range []struct {
		m    *leadlinev1.SensorMeasurement
		want string
	}{
		{nil, "time: missing"},
		{&leadlinev1.SensorMeasurement{Time: at}, "measurement has no kind"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: &leadlinev1.Measurement{}}, "measurement has no kind"},
		{&leadlinev1.SensorMeasurement{Time: &timestamppb.Timestamp{Seconds: 1, Nanos: -1}, Measurement: still}, "time: seconds 1, nanos -1 is not a time"},
		{&leadlinev1.SensorMeasurement{Time: &timestamppb.Timestamp{Seconds: 9223372036}, Measurement: still}, "time: 2262-04-11T23:47:16Z is out of range"},
		{&leadlinev1.SensorMeasurement{Time: &timestamppb.Timestamp{Seconds: -9223372036}, Measurement: still}, "time: 1677-09-21T00:12:44Z is out of range"},
		{&leadlinev1.SensorMeasurement{Time: at, Sensor: long, Measurement: still}, "sensor is 257 bytes long: at most 256"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Travel{}}}, "travel: since: missing"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Fix{Fix: &leadlinev1.Fix{}}}}, "fix: lon is missing"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Barometer{}}}, "barometer: no reading"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_AcousticBearing{}}}, "acoustic_bearing: post is missing"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: bearing(nil)}, "bearing: beacon is missing"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: bearing(&leadlinev1.Beacon{Place: &leadlinev1.Beacon_Id{Id: long}})}, "bearing: beacon: id is 257 bytes long"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: bearing(&leadlinev1.Beacon{Place: &leadlinev1.Beacon_Position{}})}, "bearing: beacon: position: missing"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: area()}, "sighting: area: no ring"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: area(ring(2))}, "sighting: area: rings[0] has 2 points"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: area(ring(3), ring(MaxPoints-2))}, "sighting: area: more than 10000 points"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: area(&leadlinev1.Ring{Points: make([]*leadlinev1.Position, 3)})}, "sighting: area: rings[0].points[0]: missing"},
		{&leadlinev1.SensorMeasurement{Time: at, Measurement: &leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Sighting{}}}, "sighting: place is missing"},
	} {
		if _, err := ToEvent(c.m); err == nil || !strings.HasPrefix(err.Error(), c.want) {
			t.Errorf("%v: got %v, want %s", c.m, err, c.want)
		}
	}
	if _, err := ToEvent(&leadlinev1.SensorMeasurement{Time: at, Measurement: area(ring(3), ring(MaxPoints-3))}); err != nil {
		t.Errorf("an area of the most points: %v", err)
	}
}

// FuzzEvent proves that no message panics and that what is taken goes through
// another message unchanged.
func FuzzEvent(f *testing.F) {
	rng := rand.New(rand.NewPCG(1, 0))
	for i, z := range kinds() {
		b, err := proto.Marshal(FromEvent(sensor.Event{Time: 1, Sensor: "s", Number: uint64(i), Measurement: random(rng, z)}))
		if err != nil {
			f.Fatal(err)
		}
		f.Add(b)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		m := &leadlinev1.SensorMeasurement{}
		if len(data) > 1<<16 || proto.Unmarshal(data, m) != nil {
			return
		}
		ev, err := ToEvent(m)
		if err != nil {
			return
		}
		again, err := ToEvent(FromEvent(ev))
		if err != nil {
			t.Fatalf("%+v: %v", ev, err)
		}
		// As messages, where NaN equals itself.
		if a, b := FromEvent(ev), FromEvent(again); !proto.Equal(a, b) {
			t.Fatalf("%v became %v", a, b)
		}
	})
}
