package forecast

import (
	"io"
	"math"
	"slices"

	"leadline/engine/geo"
)

// Whole sums up the spots of a map.
type Whole struct {
	Places  int `json:"places"`
	Unknown int `json:"unknown"` // without figures
	// RMSM and Ambiguity are medians; the former is null if a half of the places tell
	// nothing. Ambiguous is the part of the places whose ambiguity is above a half.
	RMSM      *float64 `json:"rms_m"`
	Ambiguity float64  `json:"ambiguity"`
	Ambiguous float64  `json:"ambiguous"`
}

// SumUp sums up.
func SumUp(spots []Spot) Whole {
	w := Whole{Places: len(spots)}
	var rms, ambiguity []float64
	for _, s := range spots {
		if s.RMSM != s.RMSM {
			w.Unknown++
			continue
		}
		rms, ambiguity = append(rms, s.RMSM), append(ambiguity, s.Ambiguity)
		if s.Ambiguity > 0.5 {
			w.Ambiguous++
		}
	}
	if len(rms) == 0 {
		return w
	}
	slices.Sort(rms)
	slices.Sort(ambiguity)
	if m := quantile(rms, 0.5); !math.IsInf(m, 0) && m == m {
		w.RMSM = &m
	}
	w.Ambiguity, w.Ambiguous = quantile(ambiguity, 0.5), w.Ambiguous/float64(len(rms))
	return w
}

// Edge is a directed edge to be drawn.
type Edge struct {
	Name string
	Line []geo.LonLat
}

// WriteEdges writes the edges of a road map with their figures as a
// FeatureCollection (RFC 7946); rms_m is null where a road tells nothing.
func WriteEdges(w io.Writer, spots []Spot, edges []Edge) error {
	var out []feature
	for _, s := range spots {
		var line [][]float64
		for _, p := range edges[s.Chart].Line {
			lon, lat := p.Degrees()
			line = append(line, []float64{round8(lon), round8(lat)})
		}
		var rms any
		if !math.IsInf(s.RMSM, 0) {
			rms = s.RMSM
		}
		out = append(out, feature{"Feature", geometry{"LineString", line}, map[string]any{
			"edge": s.Chart, "name": edges[s.Chart].Name, "rms_m": rms, "ambiguity": s.Ambiguity,
		}})
	}
	return writeFeatures(w, out)
}
