package monitor

import (
	"math"
	"math/rand/v2"
	"reflect"
	"testing"
)

var first, second, third = Key{Sensor: "a", Kind: "fix"}, Key{Sensor: "b", Kind: "range"}, Key{Sensor: "c", Kind: "range"}

func seconds(i int) int64 { return int64(i) * 1e9 }

// TestRuleOfIsolation: of three sensors the one that errs is isolated, two that
// err are not, and neither is one that is alone or beside a comparison with the
// map only.
func TestRuleOfIsolation(t *testing.T) {
	const seed = 41
	for _, c := range []struct {
		name     string
		keys     []Key
		err      []float64 // scores are multiplied by
		ofMap    bool
		isolated bool
	}{
		{"one of three", []Key{first, second, third}, []float64{3, 1, 1}, false, true},
		{"two of three", []Key{first, second, third}, []float64{3, 3, 1}, false, false},
		{"one of one", []Key{first}, []float64{3}, false, false},
		{"one, and the map", []Key{first}, []float64{3}, true, false},
		{"none", []Key{first, second}, []float64{1, 1}, false, false},
	} {
		rng := rand.New(rand.NewPCG(seed, 0))
		m := New(3.6e6)
		for i := range 300 {
			for j, k := range c.keys {
				m.Take(k, seconds(i), 0, []float64{c.err[j] * rng.NormFloat64()}, nil)
			}
			if c.ofMap {
				m.TakeOfMap(Key{Sensor: "road"}, seconds(i), 0, []float64{rng.NormFloat64()})
			}
			for _, k := range c.keys[1:] {
				if m.Isolated(k) {
					t.Fatalf("%s: %v is isolated", c.name, k)
				}
			}
		}
		if m.Isolated(first) != c.isolated {
			t.Errorf("%s: isolated %v, want %v; %+v", c.name, m.Isolated(first), c.isolated, m.Alarms())
		}
		if wrong := c.err[0] > 1; m.Contradicted() != (wrong && !c.isolated) {
			t.Errorf("%s: contradicted %v; %+v", c.name, m.Contradicted(), m.Alarms())
		}
		if !c.isolated {
			continue
		}
		for i := 300; m.Isolated(first); i++ {
			if i > 450 {
				t.Fatalf("%s: not readmitted: %+v", c.name, m.Alarms())
			}
			m.Take(first, seconds(i), 0, []float64{rng.NormFloat64()}, nil)
		}
	}
}

// TestMapContradicts: a comparison with the map that errs contradicts, by itself,
// and a clone is a monitor of its own.
func TestMapContradicts(t *testing.T) {
	m := New(3.6e6)
	road := Key{Sensor: "road", Kind: "turn"}
	for i := range 10 {
		m.TakeOfMap(road, seconds(i), 0, []float64{0.1})
	}
	before := m.Clone()
	for i := 10; !m.Contradicted(); i++ {
		if i > 20 {
			t.Fatal("ten scores of 2.8 contradict nothing")
		}
		m.TakeOfMap(road, seconds(i), 0, []float64{2.8})
	}
	a := m.Alarms()
	if len(a) != 1 || a[0].Kind != Spread || a[0].Key != road || a[0].BeganNS != seconds(10) || a[0].RaisedNS <= a[0].BeganNS || a[0].Evidence != a[0].Threshold {
		t.Errorf("alarms %+v", a)
	}
	if m.Isolated(road) || before.Contradicted() || reflect.DeepEqual(before, m) {
		t.Error("the map is isolated, or the clone changed")
	}
	for i := 20; m.Contradicted(); i++ {
		if i > 60 {
			t.Fatal("forty scores of 0 do not clear it")
		}
		m.TakeOfMap(road, seconds(i), 0, []float64{0})
	}
}

// TestImpossible: at once, and over after ten that are possible and ten seconds.
func TestImpossible(t *testing.T) {
	m := New(3600)
	m.Impossible(first, seconds(5))
	if a := m.Alarms(); !m.Contradicted() || len(a) != 1 || a[0].Kind != Impossible || a[0].Key != first || !math.IsInf(a[0].Evidence, 1) {
		t.Errorf("alarms %+v", a)
	}
	for i := range 30 {
		m.Possible(seconds(5) + int64(i)*1e8)
	}
	if !m.Contradicted() {
		t.Error("three seconds clear it")
	}
	m.Impossible(second, seconds(9))
	for i := 10; i < 19; i++ {
		m.Possible(seconds(i))
	}
	if !m.Contradicted() || m.Alarms()[0].RaisedNS != seconds(5) {
		t.Errorf("nine clear it: %+v", m.Alarms())
	}
	if m.Possible(seconds(19)); m.Contradicted() {
		t.Error("ten in ten seconds do not clear it")
	}
}

// TestDue: measurements that follow one another within the spacing are not due.
func TestDue(t *testing.T) {
	m := New(3600)
	if !m.Due(first, 0, 0, 1, 100) {
		t.Error("the first is not due")
	}
	m.Take(first, 0, 0, []float64{0}, nil)
	for _, c := range []struct {
		s, way float64
		due    bool
	}{{0.5, 500, false}, {5, 50, false}, {1, 100, true}, {0.995, 100, true}} {
		if got := m.Due(first, int64(c.s*1e9), c.way, 1, 100); got != c.due {
			t.Errorf("after %v s and %v m: %v", c.s, c.way, got)
		}
	}
}
