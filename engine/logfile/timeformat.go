package logfile

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"leadline/engine/sensor"
)

// TimeFormat says how times are written.
type TimeFormat struct {
	// Format is rfc3339; unix_s, unix_ms, unix_us or unix_ns, counted since
	// 1970; since_s or since_ms, counted since Start; or layout.
	Format string `yaml:"format"`
	// Start is an RFC 3339 time.
	Start string `yaml:"start"`
	// Layout shows where the parts stand: YYYY, MM, DD, hh, mm, ss, each with
	// all its digits, and f for one or more digits of a fraction of a second.
	// What is none of these stands as it is: "DD.MM.YYYY hh:mm:ss,f".
	Layout string `yaml:"layout"`
	// Zone is that of a layout, such as +02:00; Z unless said.
	Zone string `yaml:"zone"`
}

// timeParser reads one time.
type timeParser func(text string) (sensor.Time, error)

const timeFormats = "rfc3339, unix_s, unix_ms, unix_us, unix_ns, since_s, since_ms, layout"

// compile checks the format; the problems are keyed by the key that they are of.
func (f TimeFormat) compile() (timeParser, map[string]string) {
	wrong := map[string]string{}
	counts := map[string]int64{"unix_s": 1e9, "unix_ms": 1e6, "unix_us": 1e3, "unix_ns": 1, "since_s": 1e9, "since_ms": 1e6}
	since := strings.HasPrefix(f.Format, "since_")
	if f.Start != "" && !since {
		wrong["start"] = "only since_s and since_ms count from a start: remove it"
	}
	if (f.Layout != "" || f.Zone != "") && f.Format != "layout" {
		wrong["format"] = fmt.Sprintf("layout and zone go with the format layout, not %.20q", f.Format)
	}
	var parse timeParser
	switch unit, counted := counts[f.Format]; {
	case f.Format == "rfc3339":
		parse = parseRFC3339
	case counted:
		start := sensor.Time(0)
		if since {
			var err error
			if start, err = parseRFC3339(f.Start); err != nil {
				wrong["start"] = fmt.Sprintf("%.40q is no RFC 3339 time: give it like 2030-05-01T12:00:00Z", f.Start)
			}
		}
		parse = func(text string) (sensor.Time, error) { return parseCount(text, unit, start) }
	case f.Format == "layout":
		l, err := compileLayout(f.Layout, f.Zone)
		if err != nil {
			wrong["layout"] = err.Error()
		}
		parse = l.parse
	case f.Format == "":
		wrong["format"] = "it is missing: the formats are " + timeFormats
	default:
		wrong["format"] = fmt.Sprintf("%.20q is no format of times: they are %s", f.Format, timeFormats)
	}
	return parse, wrong
}

func fromTime(t time.Time) (sensor.Time, error) {
	if y := t.UTC().Year(); y < 1970 || y > 2260 {
		return 0, errTime
	}
	return sensor.Time(t.UnixNano()), nil
}

// parseRFC3339 takes a space for the T, which RFC 3339 allows, too.
func parseRFC3339(text string) (sensor.Time, error) {
	if len(text) > 10 && text[10] == ' ' {
		text = text[:10] + "T" + text[11:]
	}
	t, err := time.Parse(time.RFC3339Nano, strings.ToUpper(text))
	if err != nil {
		return 0, errors.New("it is no RFC 3339 time, such as 2030-05-01T12:00:00.25Z: state another format, or a layout")
	}
	return fromTime(t)
}

// parseCount reads a number of units of so many nanoseconds after start,
// exactly where it is written without an exponent.
func parseCount(text string, unitNS int64, start sensor.Time) (sensor.Time, error) {
	if !numeric(text) {
		return 0, errors.New("it is no number")
	}
	whole, fraction, _ := strings.Cut(strings.TrimLeft(text, "+-"), ".")
	n, err := strconv.ParseInt("0"+whole, 10, 64)
	if err != nil || strings.ContainsAny(fraction, "eE") || n > math.MaxInt64/unitNS-1 {
		v, err := strconv.ParseFloat(text, 64)
		ns := math.Round(v * float64(unitNS))
		if err != nil || !(math.Abs(ns) < float64(lastTime)) {
			return 0, errTime
		}
		return after(start, int64(ns))
	}
	ns := n * unitNS
	for i, scale := 0, unitNS; i < len(fraction) && scale > 1; i++ {
		scale /= 10
		ns += int64(fraction[i]-'0') * scale
	}
	if strings.HasPrefix(text, "-") {
		ns = -ns
	}
	return after(start, ns)
}

func after(start sensor.Time, ns int64) (sensor.Time, error) {
	t := start + sensor.Time(ns)
	if t < 0 || ns > 0 && t < start || t > lastTime {
		return 0, errTime
	}
	return t, nil
}

// numeric reports whether a text is a decimal number: no infinities, no
// hexadecimals, which the standard library would take.
func numeric(s string) bool {
	digits, point, exponent := 0, false, false
	for i := 0; i < len(s); i++ {
		switch c := s[i]; {
		case c >= '0' && c <= '9':
			digits++
		case (c == '-' || c == '+') && (i == 0 || s[i-1] == 'e' || s[i-1] == 'E'):
		case c == '.' && !point && !exponent:
			point = true
		case (c == 'e' || c == 'E') && digits > 0 && !exponent:
			exponent, digits = true, 0
		default:
			return false
		}
	}
	return digits > 0
}

// layout is a layout taken apart.
type layout struct {
	parts []layoutPart
	zone  *time.Location
}

// layoutPart is a part of a time, or text that stands as it is (part 0).
type layoutPart struct {
	part byte
	text string
}

var layoutWords = []struct {
	word string
	part byte
}{{"YYYY", 'Y'}, {"MM", 'M'}, {"DD", 'D'}, {"hh", 'h'}, {"mm", 'm'}, {"ss", 's'}, {"f", 'f'}}

func compileLayout(text, zone string) (layout, error) {
	l := layout{zone: time.UTC}
	if zone != "" && zone != "Z" {
		t, err := time.Parse("-07:00", zone)
		if err != nil {
			return l, fmt.Errorf("the zone %.20q is neither Z nor of the form +02:00", zone)
		}
		l.zone = t.Location()
	}
	seen := map[byte]bool{}
next:
	for text != "" {
		for _, w := range layoutWords {
			if rest, ok := strings.CutPrefix(text, w.word); ok {
				if seen[w.part] {
					return l, fmt.Errorf("%s is there twice", w.word)
				}
				seen[w.part] = true
				l.parts = append(l.parts, layoutPart{part: w.part, text: w.word})
				text = rest
				continue next
			}
		}
		l.parts = append(l.parts, layoutPart{text: text[:1]})
		text = text[1:]
	}
	for _, w := range layoutWords[:6] {
		if !seen[w.part] {
			return l, fmt.Errorf("%s is missing: a layout needs YYYY, MM, DD, hh, mm and ss", w.word)
		}
	}
	return l, nil
}

func (l layout) parse(text string) (sensor.Time, error) {
	got := map[byte]int{}
	rest := text
	for _, p := range l.parts {
		n := len(p.text)
		if p.part == 'f' {
			for n = 0; n < len(rest) && rest[n] >= '0' && rest[n] <= '9'; n++ {
			}
			if n == 0 {
				return 0, fmt.Errorf("byte %d: the fraction of a second is missing", len(text)-len(rest)+1)
			}
			got['f'] = nanoseconds(rest[:n])
			rest = rest[n:]
			continue
		}
		if len(rest) < n {
			return 0, fmt.Errorf("it ends where %s should be", p.text)
		}
		if p.part == 0 {
			if rest[:n] != p.text {
				return 0, fmt.Errorf("byte %d is %q where the layout has %q", len(text)-len(rest)+1, rest[:n], p.text)
			}
		} else {
			v, err := strconv.ParseUint(rest[:n], 10, 32)
			if err != nil {
				return 0, fmt.Errorf("byte %d: %q is no %s", len(text)-len(rest)+1, rest[:n], p.text)
			}
			got[p.part] = int(v)
		}
		rest = rest[n:]
	}
	if rest != "" {
		return 0, fmt.Errorf("byte %d: the layout ends before %.20q", len(text)-len(rest)+1, rest)
	}
	t, err := civil(got['Y'], got['M'], got['D'], got['h'], got['m'], got['s'], got['f'], l.zone)
	if err != nil {
		return 0, err
	}
	return fromTime(t)
}

// nanoseconds reads digits after a decimal point; what is below a nanosecond
// is cut off.
func nanoseconds(digits string) (ns int) {
	for i, scale := 0, 100_000_000; i < len(digits) && scale > 0; i, scale = i+1, scale/10 {
		ns += int(digits[i]-'0') * scale
	}
	return ns
}

// civil is time.Date for parts that are in their ranges; second 60, which a
// leap second has, is the beginning of the next minute.
func civil(y, mo, d, h, mi, s, ns int, zone *time.Location) (time.Time, error) {
	day := time.Date(y, time.Month(mo), d, 0, 0, 0, 0, time.UTC)
	if day.Year() != y || int(day.Month()) != mo || day.Day() != d {
		return day, fmt.Errorf("there is no day %04d-%02d-%02d", y, mo, d)
	}
	if h < 0 || h > 23 || mi < 0 || mi > 59 || s < 0 || s > 60 {
		return day, fmt.Errorf("there is no time %02d:%02d:%02d", h, mi, s)
	}
	return time.Date(y, time.Month(mo), d, h, mi, s, ns, zone), nil
}
