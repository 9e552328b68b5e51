package kernel

// CopyBlock copies a block of rows of cols values, which are to and from values apart.
func CopyBlock(dst, src []float64, cols, rows, to, from int) {
	if cols <= 0 || rows <= 0 {
		return
	}
	if to < 0 || from < 0 {
		panic("kernel: rows that go back")
	}
	_, _ = dst[(rows-1)*to+cols-1], src[(rows-1)*from+cols-1]
	copyBlock(dst, src, cols, rows, to, from)
}

// copyBlockPlain is CopyBlock in plain Go.
func copyBlockPlain(dst, src []float64, cols, rows, to, from int) {
	for r := range rows {
		copy(dst[r*to:r*to+cols], src[r*from:r*from+cols])
	}
}

// DropBelow zeroes what is above 0 and below floor. It reports whether values above 0 are left,
// and the sum of what went: value i goes into sum i%4, which are added in pairs.
func DropBelow(dst []float64, floor float64) (some bool, dropped float64) {
	var sums [4]float64
	some = dropBelow(&sums, dst, floor)
	return some, (sums[0] + sums[1]) + (sums[2] + sums[3])
}

// dropBelowPlain is DropBelow in plain Go, for values from i on.
func dropBelowPlain(sums *[4]float64, dst []float64, floor float64, i int) (some bool) {
	for ; i < len(dst); i++ {
		switch v := dst[i]; {
		case v > 0 && v < floor:
			sums[i%4] += v
			dst[i] = 0
		case v > 0:
			some = true
		}
	}
	return some
}
