package logfile

import (
	"errors"
	"fmt"
	"slices"
	"sort"
	"strings"
	"time"

	"leadline/engine/sensor"
)

// Bounds of a tally, so that no log makes it large.
const (
	maxReasons = 100 // and names of what was passed over
	maxPlaces  = 5   // of one reason
)

var (
	errTime  = errors.New("the time is not between 1970 and 2261")
	errTruth = errors.New("height_m and sigma_m of a truth must be finite, sigma_m 0 or more")
)

// Tally says what became of a log.
type Tally struct {
	Log   string `json:"log"`
	Lines int    `json:"lines"` // read, blank ones and comments included
	// Measurements by sensor and kind, in the order of names.
	Measurements []Count `json:"measurements"`
	Truths       int     `json:"truths"`
	// From and To span measurements and truths; nil without any.
	From *time.Time `json:"from"`
	To   *time.Time `json:"to"`
	// PassedOver counts what is no fault and was not used, by what it is.
	PassedOver map[string]int `json:"passed_over"`
	// Refused lists what could not be used, the most frequent first.
	Refused []Refused `json:"refused"`

	counts  map[[2]string]*Count
	reasons map[string]*Refused
}

// Count is how much one sensor said.
type Count struct {
	Sensor string    `json:"sensor"`
	Kind   string    `json:"kind"`
	Count  int       `json:"count"`
	From   time.Time `json:"from"`
	To     time.Time `json:"to"`
}

// Refused is a reason for not using something, and where that was.
type Refused struct {
	Reason string `json:"reason"`
	Count  int    `json:"count"`
	// First are the first places, LOG:LINE:BYTE, with what was there.
	First []string `json:"first"`
}

func newTally(log string) *Tally {
	return &Tally{
		Log: log, Measurements: []Count{}, PassedOver: map[string]int{}, Refused: []Refused{},
		counts: map[[2]string]*Count{}, reasons: map[string]*Refused{},
	}
}

// took counts a record.
func (t *Tally) took(r Record) {
	var at time.Time
	if r.Truth != nil {
		t.Truths++
		at = clock(r.Truth.Time)
	} else {
		at = clock(r.Event.Time)
		key := [2]string{r.Event.Sensor, r.Event.Measurement.Kind()}
		c := t.counts[key]
		if c == nil { // sensors are few: those of a column file, or of the sentences
			c = &Count{Sensor: key[0], Kind: key[1], From: at, To: at}
			t.counts[key] = c
		}
		c.Count++
		widen(&c.From, &c.To, at)
	}
	if t.From == nil {
		from, to := at, at
		t.From, t.To = &from, &to
	}
	widen(t.From, t.To, at)
}

func widen(from, to *time.Time, at time.Time) {
	if at.Before(*from) {
		*from = at
	}
	if at.After(*to) {
		*to = at
	}
}

func clock(t sensor.Time) time.Time { return time.Unix(0, int64(t)).UTC() }

func stamp(t sensor.Time) string { return clock(t).Format(time.RFC3339Nano) }

// lastTime is the last that sensor.Suite.Prepare takes, in 2261.
const lastTime = sensor.Time(9.2e18)

// pass counts what is no fault and is not used.
func (t *Tally) pass(what string) {
	if _, known := t.PassedOver[what]; !known && len(t.PassedOver) >= maxReasons {
		what = "other"
	}
	t.PassedOver[what]++
}

// refuse counts what cannot be used. The reasons are few; detail is what was
// there.
func (t *Tally) refuse(p place, reason, detail string) {
	r := t.reasons[reason]
	if r == nil {
		if len(t.reasons) >= maxReasons {
			reason = "other"
		}
		if r = t.reasons[reason]; r == nil {
			r = &Refused{Reason: reason, First: []string{}}
			t.reasons[reason] = r
		}
	}
	r.Count++
	if len(r.First) < maxPlaces {
		r.First = append(r.First, fmt.Sprintf("%s:%d:%d: %s", t.Log, p.line, p.byte, printable(detail)))
	}
}

// place is where something stands: a line of the log and a byte of the line,
// both counted from 1.
type place struct{ line, byte int }

// Sum brings the lists up to date and returns t.
func (t *Tally) Sum() *Tally {
	t.Measurements, t.Refused = t.Measurements[:0], t.Refused[:0]
	for _, c := range t.counts {
		t.Measurements = append(t.Measurements, *c)
	}
	sort.Slice(t.Measurements, func(i, j int) bool {
		a, b := t.Measurements[i], t.Measurements[j]
		return a.Sensor < b.Sensor || a.Sensor == b.Sensor && a.Kind < b.Kind
	})
	for _, r := range t.reasons {
		t.Refused = append(t.Refused, *r)
	}
	sort.Slice(t.Refused, func(i, j int) bool {
		a, b := t.Refused[i], t.Refused[j]
		return a.Count > b.Count || a.Count == b.Count && a.Reason < b.Reason
	})
	return t
}

// Usable is the number of measurements so far, Unusable that of refusals.
func (t *Tally) Usable() (n int) {
	for _, c := range t.counts {
		n += c.Count
	}
	return n
}

// Unusable is the number of refusals so far.
func (t *Tally) Unusable() (n int) {
	for _, r := range t.reasons {
		n += r.Count
	}
	return n
}

// FirstRefusal words one refusal of the most frequent reason; "" if there is
// none.
func (t *Tally) FirstRefusal() string {
	if t.Sum(); len(t.Refused) == 0 {
		return ""
	}
	r := t.Refused[0]
	return fmt.Sprintf("%s (%s)", r.First[0], r.Reason)
}

// Passed lists what was passed over, the most frequent first.
func (t *Tally) Passed() []string {
	var names []string
	for n := range t.PassedOver {
		names = append(names, n)
	}
	slices.SortFunc(names, func(a, b string) int {
		if d := t.PassedOver[b] - t.PassedOver[a]; d != 0 {
			return d
		}
		return strings.Compare(a, b)
	})
	return names
}

// printable makes text of what a log may hold, in one short line.
func printable(s string) string {
	const most = 160
	cut := ""
	if len(s) > most {
		s, cut = s[:most], "…"
	}
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f || r == '\ufffd' {
			return '·'
		}
		return r
	}, s) + cut
}
