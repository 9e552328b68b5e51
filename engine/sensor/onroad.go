package sensor

import (
	"errors"
	"slices"
)

// onRoad weighs positions by whether their chart is one of a named road's.
type onRoad struct {
	charts  []int32 // ascending
	in, out float64
}

var errNoCharts = errors.New("sighting: a named road cannot be used yet: give an area")

func newOnRoad(charts []int32, in, out float64) (any, error) {
	return nil, errNoCharts
}

// weigh adds the log likelihood at positions on the given charts.
func (l *onRoad) weigh(dst []float64, chart []int32) {
	for i, c := range chart {
		if _, on := slices.BinarySearch(l.charts, c); on {
			dst[i] += l.in
		} else {
			dst[i] += l.out
		}
	}
}
