package logfile

import (
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"time"
)

// ReadIGC reads the track points of an IGC file, the records of which gliders'
// flight recorders make: its B records, and of its headers the date alone. Headers
// that name people are not looked at. Positions are on WGS 84; the height is that
// of the receiver, above the ellipsoid by the standard, which not every recorder
// keeps; a standard deviation is not stated by point, so that it is that of a
// receiver at a HDOP of 2. A point without a fix in three dimensions is passed
// over. What is known of the format is from memory of the FAI's Technical
// Specification for GNSS Flight Recorders, appendix A.
func ReadIGC(r io.Reader, name string, truth bool, emit Emit) (*Tally, error) {
	t := &track{truth: truth, emit: emit, tally: newTally(name)}
	lines := NewLines(r, 512)
	var u utc
	for {
		line, whole, err := lines.Next()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return t.tally.Sum(), fmt.Errorf("%s:%d: %w", name, t.tally.Lines+1, err)
		}
		t.tally.Lines++
		at := place{t.tally.Lines, 1}
		switch {
		case len(line) == 0:
		case !whole && line[0] == 'B':
			t.tally.refuse(at, "a line that is too long", fmt.Sprintf("%.40q", line))
		case len(line) > 5 && string(line[:5]) == "HFDTE":
			day, ok := igcDate(line[5:])
			if !ok {
				t.tally.refuse(at, "a date that is none", fmt.Sprintf("%.40q", line))
				continue
			}
			if u.day.IsZero() {
				u.day = day
			}
		case line[0] != 'B':
			t.tally.pass("records " + printable(string(line[:1])))
		default:
			if err := t.igcPoint(line, at, &u); err != nil {
				return t.tally.Sum(), err
			}
		}
	}
	if u.day.IsZero() {
		return t.tally.Sum(), fmt.Errorf("%s: it has no date (a line HFDTE and day, month, year): the day of its points is not known", name)
	}
	return t.tally.Sum(), nil
}

// igcPoint takes B HHMMSS DDMMmmmN DDDMMmmmE V PPPPP GGGGG.
func (t *track) igcPoint(line []byte, at place, u *utc) error {
	refuse := func(reason string) error {
		t.tally.refuse(at, reason, fmt.Sprintf("%.40q", line))
		return nil
	}
	if len(line) < 35 {
		return refuse("a B record that is cut off")
	}
	text := string(line)
	if !digits(text[1:7]) || two(text[1:]) > 23 || two(text[3:]) > 59 || two(text[5:]) > 60 {
		return refuse("a time that is none")
	}
	if u.day.IsZero() {
		t.tally.pass("B records before the date")
		return nil
	}
	ns := int64(two(text[1:])*3600+two(text[3:])*60+two(text[5:])) * 1e9
	when, ok := u.undated(ns)
	if !ok {
		return refuse("its time goes back")
	}
	switch text[24] {
	case 'A':
	case 'V':
		t.tally.pass("B records without a fix in three dimensions")
		return nil
	default:
		return refuse("a B record that says neither A nor V")
	}
	lat, okLat := igcAngle(text[7:14], 2, text[14], 'N', 'S')
	lon, okLon := igcAngle(text[15:23], 3, text[23], 'E', 'W')
	if !okLat || !okLon {
		return refuse("a position that is none")
	}
	s := spot{place: at, at: when, lon: lon, lat: lat, sigmaM: trackSigmaM}
	if v, err := strconv.Atoi(text[30:35]); err == nil {
		s.heightM, s.hasHeight = float64(v), true
	}
	return t.take(s)
}

// igcAngle reads degrees and thousandths of minutes.
func igcAngle(s string, degrees int, letter, plus, minus byte) (float64, bool) {
	if !digits(s) || letter != plus && letter != minus {
		return math.NaN(), false
	}
	d, _ := strconv.Atoi(s[:degrees])
	m, _ := strconv.Atoi(s[degrees:])
	if m >= 60_000 {
		return math.NaN(), false
	}
	v := float64(d) + float64(m)/60_000
	if letter == minus {
		v = -v
	}
	return v, true
}

// igcDate reads DDMMYY, after DATE: in newer files.
func igcDate(b []byte) (time.Time, bool) {
	s := string(b)
	for len(s) > 0 && (s[0] < '0' || s[0] > '9') {
		s = s[1:]
	}
	if len(s) < 6 || !digits(s[:6]) {
		return time.Time{}, false
	}
	y := 2000 + two(s[4:])
	if y >= 2080 { // recorders are no older
		y -= 100
	}
	day := time.Date(y, time.Month(two(s[2:])), two(s), 0, 0, 0, 0, time.UTC)
	return day, day.Day() == two(s) && int(day.Month()) == two(s[2:])
}
