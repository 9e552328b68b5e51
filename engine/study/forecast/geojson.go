package forecast

import (
	"encoding/json"
	"io"
	"math"
)

type feature struct {
	Type       string         `json:"type"`
	Geometry   geometry       `json:"geometry"`
	Properties map[string]any `json:"properties"`
}

type geometry struct {
	Type        string `json:"type"`
	Coordinates any    `json:"coordinates"`
}

// round8 keeps eight decimals of a degree, about a millimetre.
func round8(deg float64) float64 { return math.Round(deg*1e8) / 1e8 }

func writeFeatures(w io.Writer, all []feature) error {
	return json.NewEncoder(w).Encode(struct {
		Type     string    `json:"type"`
		Features []feature `json:"features"`
	}{"FeatureCollection", all})
}

// WriteGeoJSON writes forecasts as a FeatureCollection (RFC 7946): for each a line
// between every two samples with what is predicted at its end (what: "route"), a
// point at the end of each stretch that was looked at for alike places (what:
// "ambiguity"), and a point for all that would help (what: "help").
func WriteGeoJSON(w io.Writer, all []*Forecast) error {
	var out []feature
	point := func(lon, lat float64) []float64 { return []float64{round8(lon), round8(lat)} }
	for _, f := range all {
		for i := 1; i < len(f.Samples); i++ {
			a, b := f.Samples[i-1], f.Samples[i]
			p := map[string]any{
				"what": "route", "route": f.Route, "way_m": b.WayM, "radius95_m": b.Radius95M, "bound_radius95_m": b.BoundRadius95M,
				"bound_protection_m": b.BoundProtectionM, "beyond_limit": b.Radius95M > f.LimitM,
			}
			if b.Runs != nil {
				p["runs"] = b.Runs
			}
			out = append(out, feature{"Feature", geometry{"LineString", [][]float64{point(a.Lon, a.Lat), point(b.Lon, b.Lat)}}, p})
		}
		for _, a := range f.Alike {
			s := f.At(a.ToM)
			out = append(out, feature{"Feature", geometry{"Point", point(s.Lon, s.Lat)}, map[string]any{
				"what": "ambiguity", "route": f.Route, "from_m": a.FromM, "to_m": a.ToM, "ambiguity": a.Ambiguity, "located_m": a.LocatedM,
			}})
		}
		for _, s := range f.Weak {
			for _, h := range s.Help {
				out = append(out, feature{"Feature", geometry{"Point", point(h.Lon, h.Lat)}, map[string]any{
					"what": "help", "route": f.Route, "help": h.What, "sigma_m": h.SigmaM, "before_m": h.BeforeM, "after_m": h.AfterM,
					"weak_before_m": h.WeakBeforeM, "weak_after_m": h.WeakAfterM,
				}})
			}
		}
	}
	return writeFeatures(w, out)
}
