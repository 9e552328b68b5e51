package server

import (
	"bytes"
	"fmt"
	"log/slog"
	"regexp"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// logged gathers lines; slog writes each at once.
type logged struct {
	mu  sync.Mutex
	buf bytes.Buffer
}

func (l *logged) Write(b []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.buf.Write(b)
}

func (l *logged) lines() []string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return strings.Split(strings.TrimSpace(l.buf.String()), "\n")
}

// moody is a session whose status the sensor's name says.
type moody struct{ tally }

func (m *moody) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	for s := summary.Contradicted; s <= summary.Unsure; s++ {
		if s.String() == ev.Sensor {
			m.last = &summary.Posterior{TimeNS: int64(ev.Time), Status: s, Radius95M: 12}
			m.count++
			return []*summary.Posterior{m.last}, nil
		}
	}
	return nil, &session.Refusal{Reason: session.TooLate, Detail: "no such mood"}
}

// TestLog proves that each event of a drive is one line, that a status that
// flickers is not a line each time, and that refusals are told once for each
// reason and then counted.
func TestLog(t *testing.T) {
	var clock atomic.Int64
	log := &logged{}
	s, conn := serve(t, Config{
		NewSession: func(c session.Config) (Session, error) {
			s, err := newTally(c)
			return &moody{*s.(*tally)}, err
		},
		Now:    func() time.Time { return time.Unix(clock.Load(), 0) },
		Log:    slog.New(slog.NewTextHandler(log, nil)),
		Limits: Limits{Vehicles: 2},
	})
	sequence := uint64(0)
	say := func(st rawStream, words ...string) {
		t.Helper()
		var evs []sensor.Event
		for i, w := range words {
			evs = append(evs, sensor.Event{Time: began, Sensor: w, Number: uint64(i), Measurement: sensor.Standstill{}})
		}
		sequence++
		b := batch(sequence, evs...)
		for i, w := range words {
			if w == "" {
				b.GetBatch().Measurements[i] = &leadlinev1.SensorMeasurement{}
			}
		}
		if err := st.Send(b); err != nil {
			t.Fatal(err)
		}
		for {
			m, err := st.Recv()
			if err != nil {
				t.Fatal(err)
			}
			if m.GetReceipt() != nil {
				return
			}
		}
	}
	d := &leadlinev1.Open{Header: header("v"), Drive: "one"}
	st, _ := openRaw(t, conn, d)
	say(st, "unsure", "unsure", "located")
	for range 5 {
		say(st, "ambiguous", "located") // within 10 s: no line
	}
	say(st, "contradicted")
	clock.Add(10)
	say(st, "contradicted")
	clock.Add(10)
	say(st, "late", "late", "", "late")
	next, _ := openRaw(t, conn, d)
	_ = ends(st)
	say(next, "located") // not the first time
	if err := next.Send(ending); err != nil {
		t.Fatal(err)
	}
	_ = ends(next)
	sequence = 0
	st, _ = openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "two"})
	say(st, "off map", "late")
	_, _ = openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "three", Replace: true})
	_ = ends(st)
	if _, err := fed(limited(t), conn, client.Drive{Header: header("w"), Name: "four"}, nil); err != nil {
		t.Fatal(err)
	}
	if _, err := fed(limited(t), conn, client.Drive{Header: header("x"), Name: "five"}, nil); err != nil {
		t.Fatal(err) // w made room
	}
	if err := s.Shutdown(limited(t)); err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, line := range log.lines() {
		line = regexp.MustCompile(`^time=\S+ level=(\S+) `).ReplaceAllString(line, "$1 ")
		got = append(got, line)
	}
	refusal := func(reason, sensor, detail string) string {
		return fmt.Sprintf(`WARN msg="measurement refused: the first for this reason, others are counted" vehicle=v drive=%%s reason=%s sensor=%s number=%%d drive_time=%%s detail=%s`, reason, sensor, detail)
	}
	at := "2030-05-01T12:00:00.000Z"
	want := []string{
		`INFO msg="drive opened" vehicle=v drive=one map=sea suite=""`,
		`INFO msg="first located" vehicle=v drive=one drive_time=` + at + ` radius95_m=12`,
		`INFO msg="status changed" vehicle=v drive=one from=located to=contradicted changes=11 drive_time=` + at + ` radius95_m=12`,
		fmt.Sprintf(refusal("REASON_TOO_LATE", "late", `"no such mood"`), "one", 0, at),
		fmt.Sprintf(refusal("REASON_UNUSABLE", `""`, `"time: missing: give it as RFC 3339, like 2030-05-01T12:00:00.25Z"`), "one", 0, "1970-01-01T00:00:00.000Z"),
		`INFO msg="drive resumed" vehicle=v drive=one after_batch=9 takes_over=true`,
		`INFO msg="status changed" vehicle=v drive=one from=contradicted to=located changes=1 drive_time=` + at + ` radius95_m=12`,
		`INFO msg="drive ended" vehicle=v drive=one posteriors=16 accepted=16 refused=1 refused_for.REASON_UNUSABLE=1 refused_for.REASON_TOO_LATE=3`,
		`INFO msg="drive opened" vehicle=v drive=two map=sea suite=""`,
		`INFO msg="ended drive forgotten" vehicle=v drive=one why="vehicle \"v\" has opened drive \"two\" in place of drive \"one\""`,
		fmt.Sprintf(refusal("REASON_TOO_LATE", "late", `"no such mood"`), "two", 1, at),
		`INFO msg="drive opened" vehicle=v drive=three map=sea suite=""`,
		`INFO msg="drive dropped" vehicle=v drive=two why="vehicle \"v\" has opened drive \"three\" in place of drive \"two\"" posteriors=1 accepted=1 refused=0 refused_for.REASON_TOO_LATE=1`,
		`INFO msg="drive opened" vehicle=w drive=four map=sea suite=""`,
		`INFO msg="drive ended" vehicle=w drive=four posteriors=0 accepted=0 refused=0`,
		`INFO msg="drive opened" vehicle=x drive=five map=sea suite=""`,
		`INFO msg="ended drive forgotten" vehicle=w drive=four why="drive \"four\" of vehicle \"w\" had ended, and makes room for another vehicle's"`,
		`INFO msg="drive ended" vehicle=x drive=five posteriors=0 accepted=0 refused=0`,
		`INFO msg="drive dropped" vehicle=v drive=three why="the server stops: open the drive again later; what was not acknowledged must be sent again" posteriors=0 accepted=0 refused=0`,
	}
	// What different drives say may come in any order.
	for _, w := range want {
		n := 0
		for _, g := range got {
			if g == w {
				n++
			}
		}
		if n != 1 {
			t.Errorf("%d times: %s", n, w)
		}
	}
	if len(got) != len(want) {
		t.Errorf("%d lines, want %d", len(got), len(want))
	}
	if t.Failed() {
		t.Log("\n" + strings.Join(got, "\n"))
	}
}

// TestLogOfARealDrive follows a voyage: it is located once, and nothing is said
// at every second.
func TestLogOfARealDrive(t *testing.T) {
	log := &logged{}
	_, conn := serve(t, Config{Log: slog.New(slog.NewTextHandler(log, nil))})
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v")}, voyage(3, 20)); err != nil {
		t.Fatal(err)
	}
	var words []string
	for _, line := range log.lines() {
		words = append(words, regexp.MustCompile(`msg="?([a-z ]+)`).FindStringSubmatch(line)[1])
	}
	if got := strings.Join(words, ", "); got != "drive opened, first located, drive ended" {
		t.Errorf("the log says: %s", got)
	}
}
