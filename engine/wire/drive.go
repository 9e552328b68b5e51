package wire

import (
	"errors"
	"fmt"
	"math"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/emptypb"

	"leadline/engine/geo"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Header says whose drive it is and what to read it with; Map and Suite may
// be empty.
type Header struct {
	Vehicle, Map, Suite string
	Start               Start
	// Traffic says that it is a road's, by that name: it has no map and no start.
	Traffic bool
	// PosteriorS is the least time between posteriors, in seconds.
	PosteriorS float64
}

// maxPosteriorS is session.MaxPosteriorS.
const maxPosteriorS = 3600

// Start is what is known of the position at the beginning: near Point with
// standard deviation SigmaM along each axis if SigmaM is positive, otherwise
// inside Area (exterior ring, then holes) if there is one, otherwise anywhere.
type Start struct {
	Point  geo.LonLat
	SigmaM float64
	Area   [][]geo.LonLat
}

// ToHeader converts a header. The vehicle is required.
func ToHeader(m *leadlinev1.DriveHeader) (Header, error) {
	h := Header{Vehicle: m.GetVehicle(), Map: m.GetMap(), Suite: m.GetSuite(), Traffic: m.GetTraffic(), PosteriorS: m.GetPosteriorIntervalS()}
	if h.Vehicle == "" {
		return h, errors.New("vehicle is missing: give the vehicle a name")
	}
	err := errors.Join(Name("vehicle", h.Vehicle), Name("map", h.Map), Name("suite", h.Suite))
	if err != nil {
		return h, err
	}
	h.Start, err = ToStart(m.GetStart())
	if err != nil {
		return h, fmt.Errorf("start: %w", err)
	}
	if h.Traffic && (h.Map != "" || h.Start.SigmaM > 0 || len(h.Start.Area) > 0) {
		return h, errors.New("traffic has no map and no start: its suite describes the road; leave them out")
	}
	if !(h.PosteriorS >= 0 && h.PosteriorS <= maxPosteriorS) {
		return h, fmt.Errorf("posterior_interval_s is %v: it must be from 0 to %d seconds", h.PosteriorS, maxPosteriorS)
	}
	if h.Traffic && h.PosteriorS > 0 {
		return h, errors.New("traffic has no posteriors: leave posterior_interval_s out")
	}
	return h, nil
}

// FromHeader is the inverse of ToHeader.
func FromHeader(h Header) *leadlinev1.DriveHeader {
	return &leadlinev1.DriveHeader{Vehicle: h.Vehicle, Map: h.Map, Suite: h.Suite, Start: FromStart(h.Start), Traffic: h.Traffic, PosteriorIntervalS: h.PosteriorS}
}

// ToStart converts a start; nil and an empty one mean anywhere.
func ToStart(m *leadlinev1.Start) (Start, error) {
	switch p := m.GetPlace().(type) {
	case *leadlinev1.Start_Point:
		at, err := position(p.Point, p.Point.Lon != nil, p.Point.Lat != nil)
		if err != nil {
			return Start{}, fmt.Errorf("point: %w", err)
		}
		s := p.Point.GetSigmaM()
		if !(s > 0) || math.IsInf(s, 0) {
			return Start{}, fmt.Errorf("point: sigma_m is %v: it must be positive and finite, in metres", s)
		}
		return Start{Point: at, SigmaM: s}, nil
	case *leadlinev1.Start_Area:
		area, err := Polygon(p.Area)
		if err != nil {
			return Start{}, fmt.Errorf("area: %w", err)
		}
		return Start{Area: area}, nil
	}
	return Start{}, nil
}

// FromStart is the inverse of ToStart.
func FromStart(s Start) *leadlinev1.Start {
	switch {
	case s.SigmaM > 0:
		return &leadlinev1.Start{Place: &leadlinev1.Start_Point{Point: &leadlinev1.StartPoint{
			Lon:    proto.Float64(degrees(s.Point.Lon)),
			Lat:    proto.Float64(degrees(s.Point.Lat)),
			SigmaM: s.SigmaM,
		}}}
	case len(s.Area) > 0:
		return &leadlinev1.Start{Place: &leadlinev1.Start_Area{Area: FromPolygon(s.Area)}}
	}
	return &leadlinev1.Start{Place: &leadlinev1.Start_Anywhere{Anywhere: &emptypb.Empty{}}}
}

// Truth is where a vehicle really was.
type Truth struct {
	Position  geo.LonLat
	HasHeight bool
	HeightM   float64 // above the map's vertical datum
	SigmaM    float64 // along each axis, 0 if exact
	Vehicle   string  // the header's if empty
}

// ToTruth converts a truth.
func ToTruth(m *leadlinev1.Truth) (Truth, error) {
	p, err := position(m, m.Lon != nil, m.Lat != nil)
	if err != nil {
		return Truth{}, err
	}
	t := Truth{p, m.HeightM != nil, m.GetHeightM(), m.GetSigmaM(), m.GetVehicle()}
	if !geo.Finite(t.HeightM) {
		return t, fmt.Errorf("height_m is %v: leave it out if it is unknown", t.HeightM)
	}
	if !(t.SigmaM >= 0) || math.IsInf(t.SigmaM, 0) {
		return t, fmt.Errorf("sigma_m is %v: it must be 0 or more, in metres", t.SigmaM)
	}
	return t, Name("vehicle", t.Vehicle)
}

// FromTruth is the inverse of ToTruth.
func FromTruth(t Truth) *leadlinev1.Truth {
	m := &leadlinev1.Truth{
		Lon:    proto.Float64(degrees(t.Position.Lon)),
		Lat:    proto.Float64(degrees(t.Position.Lat)),
		SigmaM: t.SigmaM, Vehicle: t.Vehicle,
	}
	if t.HasHeight {
		m.HeightM = proto.Float64(t.HeightM)
	}
	return m
}
