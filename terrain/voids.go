package terrain

// Voids are the unknown parts of a raster.
type Voids struct {
	Samples        int // without a height
	Areas          int // connected ones; samples touch along rows and columns
	LargestSamples int
	LargestCol     int // a sample of the largest area, its north-westernmost by row
	LargestRow     int
}

// Voids finds the connected void areas by joining runs of void samples row by
// row. Memory is in proportion to the number of runs.
func (r *Raster) Voids() Voids {
	g := r.grid
	out := Voids{Samples: r.scan.Voids}
	if out.Samples == 0 {
		return out
	}
	type run struct{ from, to, area int }
	type area struct{ parent, size, col, row int }
	var areas []area
	find := func(i int) int {
		for areas[i].parent != i {
			areas[i].parent = areas[areas[i].parent].parent
			i = areas[i].parent
		}
		return i
	}
	var before, now []run
	for w := range g.Rows {
		row := r.heights[w*g.Cols : (w+1)*g.Cols]
		now = now[:0]
		k := 0
		for c := 0; c < len(row); c++ {
			if row[c] == row[c] {
				continue
			}
			from := c
			for c < len(row) && row[c] != row[c] {
				c++
			}
			own := -1
			for k < len(before) && before[k].to <= from {
				k++
			}
			for i := k; i < len(before) && before[i].from < c; i++ {
				a := find(before[i].area)
				switch {
				case own < 0:
					own = a
				case own != a: // the older area, with its first sample, stays
					own, a = min(own, a), max(own, a)
					areas[a].parent = own
					areas[own].size += areas[a].size
				}
			}
			if own < 0 {
				own = len(areas)
				areas = append(areas, area{own, 0, from, w})
			}
			areas[own].size += c - from
			now = append(now, run{from, c, own})
		}
		before, now = now, before
	}
	for i, a := range areas {
		if a.parent != i {
			continue
		}
		out.Areas++
		if a.size > out.LargestSamples {
			out.LargestSamples, out.LargestCol, out.LargestRow = a.size, a.col, a.row
		}
	}
	return out
}
