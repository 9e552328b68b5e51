package kernel

// Weigh writes mass[i]·Exp(logs[i] - most), and 0 where mass[i] is less than
// least. No log is NaN or above most where the mass is not; dst may be mass.
func Weigh(dst, mass, logs []float64, most, least float64) {
	mass, logs = mass[:len(dst)], logs[:len(dst)]
	weigh(dst, mass, logs, most, least)
}

// weighPlain is Weigh in plain Go, from index i on.
func weighPlain(dst, mass, logs []float64, most, least float64, i int) {
	for ; i < len(dst); i++ {
		m := mass[i]
		if dst[i] = 0; m >= least {
			dst[i] = float64(m * Exp(logs[i]-most))
		}
	}
}
