package track

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"iter"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"leadline/engine/geo"
)

// Row is a line of track.csv as studies want it. What is not known is NaN.
type Row struct {
	TimeNS      int64
	Status      string
	At          geo.LonLat // the scored position
	Truth       geo.LonLat // if ErrorM is known
	ErrorM      float64
	Radius95M   float64
	ProtectionM float64
	Alarms      []string // that held, in words
}

// wanted are the columns that a row is made of.
var wanted = [...]string{"time", "status", "lon_deg", "lat_deg", "truth_lon_deg", "truth_lat_deg", "error_m", "radius95_m", "protection_m"}

// Rows reads a table that Table wrote; an error is the last. Further columns, in
// whatever order, are passed over; name is used in errors only.
func Rows(r io.Reader, name string) iter.Seq2[Row, error] {
	return func(yield func(Row, error) bool) {
		in := csv.NewReader(r)
		in.ReuseRecord = true
		var at [len(wanted)]int
		fail := func(line int, err error) {
			yield(Row{}, fmt.Errorf("%s:%d: %w: make the table again with `leadline replay --out`", name, line, err))
		}
		head, err := in.Read()
		if err != nil {
			fail(1, err)
			return
		}
		alarms := slices.Index(head, "alarms") // tables of older programs have none
		for i, w := range wanted {
			at[i] = -1
			for k, column := range head {
				if column == w {
					at[i] = k
				}
			}
			if at[i] < 0 {
				fail(1, fmt.Errorf("there is no column %s", w))
				return
			}
		}
		for {
			fields, err := in.Read()
			if errors.Is(err, io.EOF) {
				return
			}
			if err != nil {
				var where *csv.ParseError
				line := 2
				if errors.As(err, &where) {
					line = where.Line
				}
				fail(line, err)
				return
			}
			line, _ := in.FieldPos(0)
			row, err := rowOf(fields, at)
			if err != nil {
				fail(line, err)
				return
			}
			if alarms >= 0 && fields[alarms] != "" {
				row.Alarms = strings.Split(strings.Clone(fields[alarms]), "; ")
			}
			if !yield(row, nil) {
				return
			}
		}
	}
}

func rowOf(fields []string, at [len(wanted)]int) (Row, error) {
	t, err := time.Parse(time.RFC3339Nano, fields[at[0]])
	if err != nil {
		return Row{}, fmt.Errorf("time: %w", err)
	}
	var n [len(wanted)]float64
	for i := 2; i < len(wanted); i++ {
		n[i] = math.NaN()
		if text := fields[at[i]]; text != "" {
			if n[i], err = strconv.ParseFloat(text, 64); err != nil {
				return Row{}, fmt.Errorf("%s: %w", wanted[i], err)
			}
		}
	}
	return Row{
		TimeNS: t.UnixNano(), Status: string([]byte(fields[at[1]])),
		At: geo.FromDegrees(n[2], n[3]), Truth: geo.FromDegrees(n[4], n[5]), ErrorM: n[6], Radius95M: n[7], ProtectionM: n[8],
	}, nil
}
