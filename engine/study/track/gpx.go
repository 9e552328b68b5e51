package track

import (
	"bufio"
	"bytes"
	"encoding/xml"
	"fmt"
	"io"
	"strconv"

	"leadline/engine/geo"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// GPX writes track.gpx, GPX 1.1: the truth as a track, and the scored positions as
// another, in segments of one status, which each point's comment names with its 95 %
// radius. The format has no place for the rest.
type GPX struct {
	b      *bufio.Writer
	began  bool
	status summary.Status
}

var _ Writer = (*GPX)(nil)

// NewGPX begins with the truth.
func NewGPX(w io.Writer, drive, version string, truth []score.Truth) (*GPX, error) {
	g := &GPX{b: bufio.NewWriter(w)}
	// Errors of the buffer come back from Flush.
	g.text("<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n<gpx version=\"1.1\" creator=\"leadline ", quoted(version),
		"\" xmlns=\"http://www.topografix.com/GPX/1/1\" xmlns:xsi=\"http://www.w3.org/2001/XMLSchema-instance\"",
		" xsi:schemaLocation=\"http://www.topografix.com/GPX/1/1 http://www.topografix.com/GPX/1/1/gpx.xsd\">\n",
		"<metadata><desc>Posteriors of a filter: an aid, not certified.</desc></metadata>\n")
	if len(truth) > 0 {
		g.text("<trk><name>", quoted(drive), " truth</name><trkseg>\n")
		for _, t := range truth {
			g.point(t.At, t.TimeNS, "")
		}
		g.text("</trkseg></trk>\n")
	}
	g.text("<trk><name>", quoted(drive), "</name>\n")
	return g, nil
}

func (g *GPX) text(parts ...string) {
	for _, p := range parts {
		_, _ = g.b.WriteString(p)
	}
}

// point writes one; the comment is markup already.
func (g *GPX) point(at geo.LonLat, ns int64, comment string) {
	degrees := func(rad float64) string { return strconv.FormatFloat(geo.Deg(rad), 'f', 8, 64) }
	g.text(`<trkpt lat="`, degrees(at.Lat), `" lon="`, degrees(at.Lon), `"><time>`, stamp(ns), "</time>")
	if comment != "" {
		g.text("<cmt>", comment, "</cmt>")
	}
	g.text("</trkpt>\n")
}

// Add writes a point.
func (g *GPX) Add(s Step) error {
	switch {
	case !g.began:
		g.text("<trkseg>\n")
	case s.Status != g.status:
		g.text("</trkseg><trkseg>\n")
	}
	g.began, g.status = true, s.Status
	g.point(Scored(s.Posterior), s.TimeNS, fmt.Sprintf("%s, 95 %% radius %.4g m", s.Status, s.Radius95M))
	return nil
}

// Close writes what is left.
func (g *GPX) Close() error {
	if g.began {
		g.text("</trkseg>")
	}
	g.text("</trk>\n</gpx>\n")
	return g.b.Flush()
}

// quoted is text as XML has it; what XML cannot hold becomes U+FFFD.
func quoted(s string) string {
	var b bytes.Buffer
	if err := xml.EscapeText(&b, []byte(s)); err != nil {
		panic("track: " + err.Error()) // a buffer has none
	}
	return b.String()
}
