package server

import (
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// statuses are the API's words for a summary's.
var statuses = map[summary.Status]leadlinev1.Status{
	summary.Contradicted: leadlinev1.Status_STATUS_CONTRADICTED,
	summary.OffMap:       leadlinev1.Status_STATUS_OFF_MAP,
	summary.Located:      leadlinev1.Status_STATUS_LOCATED,
	summary.Ambiguous:    leadlinev1.Status_STATUS_AMBIGUOUS,
	summary.Unsure:       leadlinev1.Status_STATUS_UNSURE,
}

// message converts a posterior, as of a time. malformed is how many
// measurements were refused before they reached the session.
func (s *Server) message(p *summary.Posterior, vehicle string, m Map, malformed uint64, now time.Time) *leadlinev1.Posterior {
	out := message(p, vehicle, m, now)
	out.Counts.Refused += malformed
	out.Durable = s.journal != nil
	out.NewerMapFingerprint = s.atlas.newer(m.Name, p.Map)
	return out
}

// message converts a posterior, as of a time. Only one on roads has edges, and
// the index of a cell there is that of an edge.
func message(p *summary.Posterior, vehicle string, m Map, now time.Time) *leadlinev1.Posterior {
	out := &leadlinev1.Posterior{
		Time:           wire.FromTime(sensor.Time(p.TimeNS)),
		Vehicle:        vehicle,
		Map:            m.Name,
		MapFingerprint: p.Map,
		Status:         statuses[p.Status],
		Mean:           wire.FromPosition(p.Mean),
		Covariance:     covariance(p.Cov),
		MostProbable: &leadlinev1.Place{
			Position: wire.FromPosition(p.MostProbable.Position), Probability: p.MostProbable.Mass,
		},
		ModeCount: uint32(p.ModeCount), ModeRest: p.ModeRest,
		Edges: edges(p.Edges), EdgeCount: uint32(p.EdgeCount), EdgeRest: p.EdgeRest,
		Radii:       &leadlinev1.Radii{Radius50M: p.Radius50M, Radius95M: p.Radius95M, Radius99M: p.Radius99M},
		Protection:  protection(p.Protection),
		EntropyNats: p.EntropyNats, LogEvidence: p.LogEvidence,
		Counts: &leadlinev1.Counts{
			Accepted: p.Counts.Accepted, Refused: p.Counts.Refused,
			Pruned: p.Counts.Pruned, LeftMap: p.Counts.LeftMap, Restart: p.Counts.Restart,
		},
		AlertLimitM: p.AlertLimitM,
		GapS:        p.GapS, Revises: p.Revises,
		OffMap: p.OffMap, Lost: p.Lost, LostAlarm: p.LostAlarm,
		AsOf: timestamppb.New(now), AgeS: now.Sub(time.Unix(0, p.TimeNS)).Seconds(),
	}
	if p.EdgeCount > 0 {
		out.MostProbable.Edge = proto.Uint32(uint32(p.MostProbable.Index[0]))
		out.MostProbable.AlongM = p.MostProbable.AlongM
		out.MostProbable.Name = p.MostProbable.Name
	}
	for _, d := range p.Modes {
		out.Modes = append(out.Modes, &leadlinev1.Mode{
			Mass: d.Mass, Mean: wire.FromPosition(d.Mean), Covariance: covariance(d.Cov),
			Edges: edges(d.Charts[:d.ChartCount]),
		})
	}
	if p.Heading.Known {
		out.Heading = &leadlinev1.Direction{Deg: geo.Deg(p.Heading.TrueRad), SigmaDeg: geo.Deg(p.Heading.SigmaRad)}
	}
	if p.Speed.Known {
		out.Speed = &leadlinev1.SpeedEstimate{Mps: p.Speed.MPS, SigmaMps: p.Speed.SigmaMPS}
	}
	out.Nuisances = nuisances(p.Nuisances)
	for _, e := range p.Evidence {
		out.Evidence = append(out.Evidence, &leadlinev1.Evidence{
			Sensor: e.Sensor, Number: e.Number, Kind: e.Kind, LogEvidence: e.LogEvidence,
			Withheld: e.Withheld,
		})
	}
	monitored(out, p)
	return out
}

func nuisances(qs []summary.Nuisance) []*leadlinev1.Nuisance {
	var out []*leadlinev1.Nuisance
	for _, q := range qs {
		n := &leadlinev1.Nuisance{}
		n.Name, n.Unit, n.Mean, n.Sigma = sensor.InUnits(q.Name, q.Mean, q.Sigma)
		out = append(out, n)
	}
	return out
}

func covariance(c summary.Cov) *leadlinev1.Covariance {
	return &leadlinev1.Covariance{EastM2: c.EE, EastNorthM2: c.EN, NorthM2: c.NN}
}

func edges(es []summary.Edge) []*leadlinev1.EdgeProbability {
	out := make([]*leadlinev1.EdgeProbability, len(es))
	for i, e := range es {
		out[i] = &leadlinev1.EdgeProbability{Edge: uint32(e.Chart), Name: e.Name, Probability: e.Probability}
		if e.Twin >= 0 {
			out[i].Twin = proto.Uint32(uint32(e.Twin))
		}
	}
	return out
}

func protection(p summary.Protection) *leadlinev1.Protection {
	out := &leadlinev1.Protection{Risk: p.Risk, UnboundedReason: p.Reason}
	if p.Bounded {
		out.RadiusM = proto.Float64(p.RadiusM)
	}
	return out
}

func region(r *summary.Region) *leadlinev1.Region {
	out := &leadlinev1.Region{Fraction: r.Level, Probability: r.Holds, AreaM2: r.AreaM2, PixelM: r.PixelM}
	for _, p := range r.Polygons {
		out.Polygons = append(out.Polygons, wire.FromPolygon(p))
	}
	return out
}
