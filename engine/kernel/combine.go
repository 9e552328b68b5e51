package kernel

// AddScaled adds weight·src[i] to dst[i]. dst and src have one length and do not
// overlap.
func AddScaled(dst, src []float64, weight float64) {
	src = src[:len(dst)]
	addScaled(dst, src, weight)
}

// addScaledPlain is AddScaled in plain Go, from index i on.
func addScaledPlain(dst, src []float64, weight float64, i int) {
	for ; i < len(dst); i++ {
		dst[i] += float64(weight * src[i])
	}
}

// Combine writes a weighted sum of stretches of src,
//
//	dst[i] = Σ weight[k]·src[at[k]+i],
//
// added in their order. All that it reads must lie in src, which dst must not
// overlap; there is at least one stretch.
func Combine(dst, src []float64, at []int, weight []float64) {
	if len(dst) == 0 {
		return
	}
	weight = weight[:len(at)]
	within(src, len(dst), at)
	combine(dst, src, at, weight)
}

// within panics unless n values from each place on lie in src.
func within(src []float64, n int, at []int) {
	last := uint(len(src[n:]))
	for _, a := range at {
		if uint(a) > last {
			panic("kernel: a stretch that is not in what it is of")
		}
	}
}

// combinePlain is Combine in plain Go, from index i of dst on.
func combinePlain(dst, src []float64, at []int, weight []float64, i int) {
	if i == len(dst) {
		return
	}
	out := dst[i:]
	for x, v := range src[at[0]+i:][:len(out)] {
		out[x] = float64(weight[0] * v)
	}
	for k, a := range at[1:] {
		w := weight[k+1]
		for x, v := range src[a+i:][:len(out)] {
			out[x] += float64(w * v)
		}
	}
}

// WeighBy writes mass[i] times what Combine would write to dst[i], and 0 where that is
// not above 0, and returns the sum; dst may be mass. The sum is one of sixteen, of every
// sixteenth value of whole sixteens; of what is left, the first four get every fourth.
// They are added in pairs, four apart before those beside each other.
func WeighBy(dst, mass, src []float64, at []int, weight []float64) float64 {
	if len(dst) == 0 {
		return 0
	}
	mass, weight = mass[:len(dst)], weight[:len(at)]
	within(src, len(dst), at)
	var sum [16]float64
	weighBy(dst, mass, src, at, weight, &sum)
	return sumOf(&sum)
}

// weighByPlain is WeighBy in plain Go, from index i on, a multiple of 4.
func weighByPlain(dst, mass, src []float64, at []int, weight []float64, sum *[16]float64, i int) {
	whole := len(dst) &^ 15
	for ; i < len(dst); i++ {
		v := float64(weight[0] * src[at[0]+i])
		for k, a := range at[1:] {
			v += float64(weight[k+1] * src[a+i])
		}
		v = float64(mass[i] * v)
		if !(v > 0) {
			v = 0
		}
		dst[i] = v
		if i < whole {
			sum[i&15] += v
		} else {
			sum[i&3] += v
		}
	}
}
