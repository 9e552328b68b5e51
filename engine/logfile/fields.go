package logfile

import (
	"strconv"
	"strings"
	"time"
)

// reader takes the fields of a sentence apart and keeps what is wrong first.
type reader struct {
	s   *sentence
	bad *refusal
}

func (r *reader) text(i int) string {
	if i < len(r.s.fields) {
		return string(r.s.fields[i].text)
	}
	return ""
}

func (r *reader) fail(i int, reason string) {
	if r.bad == nil {
		byte := 1
		if i < len(r.s.fields) {
			byte = r.s.fields[i].byte
		}
		r.bad = &refusal{byte, r.s.kind() + ": " + reason, strconv.Quote(r.text(i))}
	}
}

// number reads a field; ok is false if it is empty.
func (r *reader) number(i int, lo, hi float64) (v float64, ok bool) {
	s := r.text(i)
	if s == "" {
		return 0, false
	}
	v, err := strconv.ParseFloat(s, 64)
	if len(s) > 24 || !numeric(s) || err != nil || strings.ContainsAny(s, "eE") {
		r.fail(i, "not a number")
		return 0, false
	}
	if !(v >= lo && v <= hi) {
		r.fail(i, "out of range")
		return 0, false
	}
	return v, true
}

// unit wants a letter after a number.
func (r *reader) unit(i int, letter string) {
	if r.text(i) != letter {
		r.fail(i, "the unit is not "+letter)
	}
}

// signed reads a number and the letter of its direction.
func (r *reader) signed(i int, hi float64, plus, minus string) (v float64, ok bool) {
	if v, ok = r.number(i, 0, hi); !ok {
		return 0, false
	}
	switch r.text(i + 1) {
	case plus:
		return v, true
	case minus:
		return -v, true
	}
	r.fail(i+1, "the direction is neither "+plus+" nor "+minus)
	return 0, false
}

// angle reads degrees and minutes, as 4807.038: the last two digits before
// the point are whole minutes.
func (r *reader) angle(i int, hi float64, plus, minus string) (deg float64, ok bool) {
	s := r.text(i)
	if s == "" {
		return 0, false
	}
	whole, fraction, _ := strings.Cut(s, ".")
	if len(whole) < 3 || len(whole) > 5 || !digits(whole) || len(fraction) > 12 || !digits(fraction) {
		r.fail(i, "not degrees and minutes")
		return 0, false
	}
	d, _ := strconv.ParseFloat(whole[:len(whole)-2], 64)
	m, _ := strconv.ParseFloat(whole[len(whole)-2:]+"."+fraction, 64)
	if m >= 60 || d+m/60 > hi {
		r.fail(i, "out of range")
		return 0, false
	}
	switch r.text(i + 1) {
	case plus:
		return d + m/60, true
	case minus:
		return -(d + m/60), true
	}
	r.fail(i+1, "the direction is neither "+plus+" nor "+minus)
	return 0, false
}

func digits(s string) bool {
	for i := 0; i < len(s); i++ {
		if s[i] < '0' || s[i] > '9' {
			return false
		}
	}
	return true
}

// timeOfDay reads hhmmss or hhmmss.ss.
func (r *reader) timeOfDay(i int) (ns int64, ok bool) {
	s := r.text(i)
	if s == "" {
		return 0, false
	}
	whole, fraction, _ := strings.Cut(s, ".")
	if len(whole) != 6 || !digits(whole) || !digits(fraction) {
		r.fail(i, "not a time")
		return 0, false
	}
	h, m, sec := two(whole), two(whole[2:]), two(whole[4:])
	if h > 23 || m > 59 || sec > 60 { // a leap second has 60
		r.fail(i, "not a time")
		return 0, false
	}
	return int64(h*3600+m*60+sec)*1e9 + int64(nanoseconds(fraction)), true
}

func two(s string) int { return int(s[0]-'0')*10 + int(s[1]-'0') }

// day reads ddmmyy; years from 80 on are of the last century (GPS time begins
// in 1980).
func (r *reader) day(i int) (day time.Time, ok bool) {
	s := r.text(i)
	if s == "" {
		return day, false
	}
	if len(s) != 6 || !digits(s) {
		r.fail(i, "not a date")
		return day, false
	}
	year := 2000 + two(s[4:])
	if year >= 2080 {
		year -= 100
	}
	return r.civil(i, year, two(s[2:]), two(s))
}

func (r *reader) civil(i, y, m, d int) (day time.Time, ok bool) {
	day, err := civil(y, m, d, 0, 0, 0, 0, time.UTC)
	if err != nil || y < 1970 || y > 2260 {
		r.fail(i, "not a date")
		return day, false
	}
	return day, true
}
