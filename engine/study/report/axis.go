package report

import (
	"cmp"
	"html"
	"math"
	"slices"
	"strconv"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
)

// logAxis makes an axis logarithmic from a little below the least to a little
// above the most.
func logAxis(a *plot.Axis, least, most float64) {
	if !(most > 0) {
		least, most = 1, 10
	}
	least = math.Max(least, gridLeastM/2)
	a.Scale, a.Tick.Marker = plot.LogScale{}, plot.TickerFunc(logTicks)
	a.Min, a.Max = least/1.3, math.Max(most, least*4)*1.3
}

// logTicks marks 1, 2 and 5 times each power of ten, and names the powers, or all
// of them where there are few.
func logTicks(lo, hi float64) (out []plot.Tick) {
	for d := math.Pow(10, math.Floor(math.Log10(lo))); d <= hi; d *= 10 {
		for _, m := range []float64{1, 2, 5} {
			if v := m * d; v >= lo && v <= hi {
				tick := plot.Tick{Value: v}
				if m == 1 || hi < 60*lo {
					tick.Label = number(v)
				}
				out = append(out, tick)
			}
		}
	}
	return out
}

// evenTicks marks some six round places.
func evenTicks(lo, hi float64) (out []plot.Tick) {
	if !(hi > lo) {
		return nil
	}
	step := math.Pow(10, math.Floor(math.Log10((hi-lo)/5)))
	for _, m := range []float64{1, 2, 5, 10} {
		if (hi-lo)/(step*m) <= 7 {
			step *= m
			break
		}
	}
	for i := math.Ceil(lo/step - 1e-9); i*step <= hi+1e-9*step; i++ {
		v := i*step + 0 // no negative zero
		out = append(out, plot.Tick{Value: v, Label: number(v)})
	}
	return out
}

// number is a figure with three digits, or all of those before the point.
func number(v float64) string {
	if math.Abs(v) >= 1000 {
		return strconv.FormatFloat(v, 'f', 0, 64)
	}
	return strconv.FormatFloat(v, 'g', 3, 64)
}

func escape(s string) string { return html.EscapeString(s) }

func sortXYs(xys plotter.XYs) {
	slices.SortFunc(xys, func(a, b plotter.XY) int { return cmp.Or(cmp.Compare(a.X, b.X), cmp.Compare(a.Y, b.Y)) })
}
