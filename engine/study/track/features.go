package track

import (
	"bufio"
	"encoding/json"
	"io"

	"github.com/paulmach/orb"

	"leadline/engine/study/score"
	"leadline/engine/summary"
)

type geometry struct {
	Type        string       `json:"type"`
	Coordinates orb.Geometry `json:"coordinates"`
}

type feature struct {
	Type       string         `json:"type"`
	Properties map[string]any `json:"properties"`
	Geometry   geometry       `json:"geometry"`
}

// mostCorners bounds the lines of a FeatureCollection: a longer stretch becomes
// several lines, each beginning where the one before ends.
const mostCorners = 10_000

// Features writes track.geojson, a FeatureCollection (RFC 7946): the truth as a
// line, the scored positions as a line for each stretch of one status, and a
// point for each posterior with time, status and 95 % radius.
type Features struct {
	b      *bufio.Writer
	enc    *json.Encoder
	drive  string
	began  bool
	line   orb.LineString
	status summary.Status
}

var _ Writer = (*Features)(nil)

// NewFeatures begins a collection with the truth.
func NewFeatures(w io.Writer, drive string, truth []score.Truth) (*Features, error) {
	b := bufio.NewWriter(w)
	f := &Features{b: b, enc: json.NewEncoder(b), drive: drive}
	// Errors of the buffer come back from Flush.
	_, _ = b.WriteString(`{"type":"FeatureCollection","features":[`)
	for len(truth) > 1 {
		n := min(len(truth), mostCorners)
		line := make(orb.LineString, n)
		for i, at := range truth[:n] {
			line[i] = lonLat(at.At)
		}
		if err := f.put(line, map[string]any{"drive": drive, "what": "truth"}); err != nil {
			return nil, err
		}
		truth = truth[n-1:]
	}
	return f, nil
}

func (f *Features) put(g orb.Geometry, properties map[string]any) error {
	if f.began {
		_ = f.b.WriteByte(',')
	}
	f.began = true
	return f.enc.Encode(feature{"Feature", properties, geometry{g.GeoJSONType(), g}})
}

// Add writes a point, and the line that ends with it.
func (f *Features) Add(s Step) error {
	at := lonLat(Scored(s.Posterior))
	if s.Status != f.status {
		if err := f.end(); err != nil {
			return err
		}
		f.line, f.status = f.line[:0], s.Status
	}
	f.line = append(f.line, at)
	if len(f.line) == mostCorners {
		if err := f.end(); err != nil {
			return err
		}
		f.line = append(f.line[:0], at)
	}
	return f.put(at, map[string]any{"time": stamp(s.TimeNS), "status": s.Status.String(), "radius95_m": s.Radius95M})
}

// end writes the line of a stretch.
func (f *Features) end() error {
	if len(f.line) < 2 {
		return nil
	}
	return f.put(f.line, map[string]any{"drive": f.drive, "what": "estimate", "status": f.status.String()})
}

// Close writes what is left.
func (f *Features) Close() error {
	if err := f.end(); err != nil {
		return err
	}
	_, _ = f.b.WriteString("]}\n")
	return f.b.Flush()
}
