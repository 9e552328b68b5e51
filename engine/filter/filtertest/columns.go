package filtertest

import (
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"leadline/engine/filter"
)

// columns lists the columns of c by name, nil ones included.
func columns(c *filter.Columns) (names []string, values [][]float64) {
	v := reflect.ValueOf(*c)
	for i := range v.NumField() {
		field := v.Type().Field(i)
		if !field.IsExported() {
			continue
		}
		if s, ok := v.Field(i).Interface().([]float64); ok {
			names, values = append(names, field.Name), append(values, s)
		}
	}
	return names, values
}

// poison fills what a space has to write.
func poison(c *filter.Columns) {
	_, values := columns(c)
	for _, s := range values {
		for i := range s {
			s[i] = 1e77
		}
	}
}

func columnsAreSane(t *testing.T, c *filter.Columns) {
	t.Helper()
	names, values := columns(c)
	for j, s := range values {
		for i, v := range s {
			unknown := len(c.Height) > 0 && math.IsNaN(c.Height[i])
			switch {
			case names[j] == "Height" && unknown:
			case math.IsNaN(v) || math.Abs(v) >= 1e77:
				t.Fatalf("%s[%d] is %v: only an unknown height is NaN, and every wanted column is written", names[j], i, v)
			case names[j] == "HeightVar" && unknown, (names[j] == "SlopeE" || names[j] == "SlopeN") && unknown:
				if v != 0 {
					t.Fatalf("%s[%d] is %v where the height is unknown: want 0", names[j], i, v)
				}
			case (names[j] == "HeightVar" || names[j] == "HeadingVar") && v < 0:
				t.Fatalf("%s[%d] is %v", names[j], i, v)
			}
		}
	}
}

// repeatable proves that a sample depends on the position alone: alone or in
// company, in another order, with fewer columns, and after other samples.
func repeatable(t *testing.T, a *filter.Columns, n int, sample func(dst *filter.Columns, wants filter.Wants, pick []int)) {
	t.Helper()
	rng := rand.New(rand.NewPCG(conformSeed, 2))
	names, first := columns(a)
	kept := make([][]float64, len(first))
	for j, s := range first {
		kept[j] = append([]float64(nil), s...)
	}
	for _, wants := range []filter.Wants{allWants, 0, filter.WantPosition, filter.WantHeading, filter.WantHeight} {
		var b filter.Columns
		for _, pick := range [][]int{rng.Perm(n), {n - 1}, {}, {0, 0, 0}} {
			sample(&b, wants, pick)
			_, again := columns(&b)
			for j, s := range again {
				if s == nil {
					continue
				}
				if len(s) != len(pick) {
					t.Fatalf("wants %b: column %s is %d long, want %d", wants, names[j], len(s), len(pick))
				}
				for x, i := range pick {
					if math.Float64bits(s[x]) != math.Float64bits(kept[j][i]) && !(math.IsNaN(s[x]) && math.IsNaN(kept[j][i])) {
						t.Fatalf("wants %b: %s of position %d is %v, and was %v in other company", wants, names[j], i, s[x], kept[j][i])
					}
				}
			}
		}
	}
	for j, s := range first {
		for i, v := range s {
			if math.Float64bits(v) != math.Float64bits(kept[j][i]) {
				t.Fatalf("%s[%d] of an earlier sample changed: the space kept the slice", names[j], i)
			}
		}
	}
}
