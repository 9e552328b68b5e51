package network

import (
	"fmt"
	"math"
	"sync"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// levels is the number of cell sizes: 1, 2, 4, 8, 16 and 32 times the finest.
const levels = 6

// Map is a road map: a filter.LineSpace with named parts. It is immutable and
// may be shared by any number of goroutines.
type Map struct {
	d                 *Data
	frame             geo.Frame
	fingerprint       string
	lines             [levels]filter.Lines
	forward, backward filter.Links
	wide              float64 // half window of SpreadW
	stationsPerM      []float64

	index func() *index // built when first asked for
	parts func() *components
	// survey is taken once: each session of the map asks for it.
	survey func() filter.Survey
}

var _ filter.Surveyed = (*Map)(nil)

// Survey implements filter.Surveyed.
func (m *Map) Survey() filter.Survey { return m.survey() }

// FromData makes a map of columns, which it keeps. The fingerprint is computed
// if it is empty; a caller that knows it, from a file whose columns it has
// verified, saves the time of hashing them. The error says what is wrong with
// the columns.
func FromData(d *Data, fingerprint string) (*Map, error) {
	if err := d.Check(); err != nil {
		return nil, fmt.Errorf("the columns of the map do not fit together: %w", err)
	}
	if fingerprint == "" {
		fingerprint = d.Fingerprint()
	}
	m := &Map{d: d, frame: geo.NewFrame(d.Origin), fingerprint: fingerprint, wide: wideM(d.CellM)}
	m.reverseLinks()
	m.cutCells()
	m.index = sync.OnceValue(m.buildIndex)
	m.parts = sync.OnceValue(m.findComponents)
	m.survey = sync.OnceValue(func() filter.Survey { return filter.SurveyOf(m) })
	return m, nil
}

// cutCells cuts each chart, at each level, into as few equal cells as keep the
// finest below CellM and each level's about twice as wide as those below.
func (m *Map) cutCells() {
	d := m.d
	n := d.Charts()
	length := make([]float64, n)
	m.stationsPerM = make([]float64, n)
	for c := range n {
		length[c] = d.Along[d.VertexStart[c+1]-1]
		m.stationsPerM[c] = float64(d.StationStart[c+1]-d.StationStart[c]-1) / length[c]
	}
	for l := range m.lines {
		w := d.CellM * float64(int(1)<<l)
		cells, width := make([]int32, n), make([]float64, n)
		for c := range n {
			// A length that is a whole number of cells but for rounding does
			// not get another cell.
			k := math.Max(1, math.Ceil(length[c]/w*(1-1e-12)))
			cells[c], width[c] = int32(k), length[c]/k
		}
		m.lines[l] = filter.Lines{
			Level: l, LengthM: length, Cells: cells, WidthM: width,
			Forward: m.forward, Backward: m.backward,
		}
	}
}

// Fingerprint identifies the map; see Data.Fingerprint.
func (m *Map) Fingerprint() string { return m.fingerprint }

// Frame is the metric frame of the map's points.
func (m *Map) Frame() geo.Frame { return m.frame }

// Levels is the number of cell sizes.
func (m *Map) Levels() int { return levels }

// Lines returns the topology at a level from 0 to Levels()-1.
func (m *Map) Lines(level int) *filter.Lines { return &m.lines[level] }

// Data returns the map's columns, which must not be changed.
func (m *Map) Data() *Data { return m.d }

// Charts returns the number of directed edges.
func (m *Map) Charts() int { return m.d.Charts() }

// LengthM returns the true length of a chart in metres.
func (m *Map) LengthM(chart int32) float64 { return m.lines[0].LengthM[chart] }

// HasHeights reports whether any height is known.
func (m *Map) HasHeights() bool { return len(m.d.Height) > 0 }
