package kernel

// Dense reports whether no value is 0.
func Dense(src []float64) bool { return dense(src) }

// densePlain is Dense in plain Go, for values from i on.
func densePlain(src []float64, i int) bool {
	for _, v := range src[i:] {
		if v == 0 {
			return false
		}
	}
	return true
}

// Scale multiplies by a number and counts what is then above 0, and what is at least floor.
func Scale(dst []float64, by, floor float64) (some, enough int) { return scaleBy(dst, by, floor) }

// scalePlain is Scale in plain Go, from index i on.
func scalePlain(dst []float64, by, floor float64, i int) (some, enough int) {
	for ; i < len(dst); i++ {
		v := dst[i] * by
		dst[i] = v
		if v > 0 {
			some++
		}
		if v >= floor {
			enough++
		}
	}
	return some, enough
}

// BlockMoments are sums over a block of cells: of v, x·v, y·v, x²·v, xy·v and y²·v, where x
// and y are cells from the block's middle. cols is a multiple of 4, or it panics. Column c
// goes into sums c%4, of a row and then of the block, which are added in pairs.
func BlockMoments(src []float64, cols int) (m [6]float64) {
	if cols <= 0 || cols%4 != 0 || len(src)%cols != 0 {
		panic("kernel: a block that is not whole rows of whole lanes")
	}
	var sums [24]float64
	if len(src) > 0 {
		blockMoments(&sums, src, cols)
	}
	for k := range m {
		s := sums[4*k:]
		m[k] = (s[0] + s[1]) + (s[2] + s[3])
	}
	return m
}

// blockMomentsPlain is BlockMoments in plain Go.
func blockMomentsPlain(sums *[24]float64, src []float64, cols int) {
	y := -0.5 * float64(len(src)/cols-1)
	for ; len(src) > 0; src = src[cols:] {
		var row [12]float64
		x := -0.5 * float64(cols-1)
		for c, v := range src[:cols] {
			xv := float64(v * x)
			row[c%4] += v
			row[4+c%4] += xv
			row[8+c%4] += float64(xv * x)
			x++
		}
		for k := range 4 {
			yv := float64(row[k] * y)
			sums[k] += row[k]
			sums[4+k] += row[4+k]
			sums[8+k] += yv
			sums[12+k] += row[8+k]
			sums[16+k] += float64(row[4+k] * y)
			sums[20+k] += float64(yv * y)
		}
		y++
	}
}
