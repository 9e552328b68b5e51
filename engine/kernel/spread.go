package kernel

// Spread writes a symmetric sum of neighbours,
//
//	dst[i] = weight[0]·src[at+i] + Σ weight[n]·(src[at+i-n·stride] + src[at+i+n·stride]),
//
// added from the middle outwards, first at i-n·stride. All that it reads must lie
// in src, which dst must not overlap. The stride may be negative.
func Spread(dst, src []float64, at, stride int, weight []float64) {
	SpreadRows(dst, src, at, stride, len(dst), len(dst), weight)
}

// SpreadRows is Spread for rows of cols values, one after the other in dst and from values
// apart in src: at is the first one's.
func SpreadRows(dst, src []float64, at, stride, cols, from int, weight []float64) {
	if len(dst) == 0 {
		return
	}
	if cols <= 0 || from < 0 || len(dst)%cols != 0 {
		panic("kernel: rows that go back or are not whole")
	}
	reach := (len(weight) - 1) * max(stride, -stride)
	_, _ = src[at-reach], src[at+(len(dst)/cols-1)*from+cols-1+reach]
	spread(dst, src, at, stride, cols, from, weight)
}

// spreadRowsPlain is SpreadRows in plain Go.
func spreadRowsPlain(dst, src []float64, at, stride, cols, from int, weight []float64) {
	for ; len(dst) > 0; dst = dst[cols:] {
		spreadPlain(dst[:cols], src, at, stride, weight, 0)
		at += from
	}
}

// spreadPlain is Spread in plain Go, from index i of dst on.
func spreadPlain(dst, src []float64, at, stride int, weight []float64, i int) {
	if i == len(dst) {
		return
	}
	out := dst[i:]
	at += i
	for x, v := range src[at : at+len(out)] {
		out[x] = float64(weight[0] * v)
	}
	for n, w := range weight[1:] {
		shift := (n + 1) * stride
		below, above := src[at-shift:][:len(out)], src[at+shift:][:len(out)]
		for x := range out {
			sum := out[x] + float64(w*below[x])
			out[x] = sum + float64(w*above[x])
		}
	}
}
