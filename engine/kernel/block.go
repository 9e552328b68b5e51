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

// Faint reports whether there are values above 0, and whether some of these are below
// floor.
func Faint(src []float64, floor float64) (some, below bool) { return faint(src, floor) }

// faintPlain is Faint in plain Go, for values from i on.
func faintPlain(src []float64, floor float64, i int) (some, below bool) {
	for _, v := range src[i:] {
		if v > 0 {
			some = true
			below = below || v < floor
		}
	}
	return some, below
}
