package roadfile

import (
	"encoding/json"
	"testing"

	"leadline/engine/filter"
	"leadline/network"
)

// walk samples every chart of a map at its ends and middle and visits its
// parts, so that a map that only looks whole shows itself.
func walk(m *network.Map) *filter.Columns {
	var at filter.Columns
	n := m.Charts()
	at.Resize(filter.WantPosition|filter.WantHeading|filter.WantHeight, 1, 0)
	chart, along := make([]int32, 0, 3*n), make([]float64, 0, 3*n)
	for c := range int32(n) {
		l := m.LengthM(c)
		chart = append(chart, c, c, c)
		along = append(along, 0, l/2, l)
	}
	m.Sample(&at, chart, along, 8)
	m.Components()
	p, _ := m.Ends(0)
	m.Near(p, 10)
	return &at
}

func jsonText(tb testing.TB, v any) string {
	tb.Helper()
	b, err := json.Marshal(v)
	if err != nil {
		tb.Fatal(err)
	}
	return string(b)
}
