package network

import (
	"fmt"
	"strings"
)

// String is the report as text for a terminal.
func (r Report) String() string {
	var b strings.Builder
	line := func(label, format string, args ...any) {
		fmt.Fprintf(&b, "%-12s %s\n", label, fmt.Sprintf(format, args...))
	}
	s := r.Size
	line("source", "%s", orUnstated(r.Source))
	line("licence", "%s", strings.ReplaceAll(orUnstated(r.Licence), "\n", "\n             "))
	line("fingerprint", "%s", r.Fingerprint)
	line("size", "%.1f km of road: %d roads, %d junctions; %.1f km of directed edges: %d edges, %d vertices, %d cells; %.1f MB",
		s.RoadKM, s.Roads, s.Junctions, s.EdgeKM, s.Edges, s.Vertices, s.Cells, float64(s.Bytes)/1e6)
	line("bounds", "lon %.5f to %.5f, lat %.5f to %.5f", s.BoundsDeg[0], s.BoundsDeg[2], s.BoundsDeg[1], s.BoundsDeg[3])
	r.Weak.write(line, "weakly", "weakly connected (joined, whatever the direction)")
	r.Strong.write(line, "strongly", "strongly connected (drivable from each place to each other)")
	r.Traps.write(line, "traps", "edges that nothing leaves: a vehicle there leaves the map", "long")
	line("dead ends", "%d; vehicles turn round there", r.DeadEnds)
	r.NearMisses.write(line, "near misses", fmt.Sprintf("dead ends that come within %g m of another road without meeting it", NearMissM), "apart")
	r.Duplicates.write(line, "duplicates", "roads with the same points as another", "long")
	r.Short.write(line, "short", fmt.Sprintf("roads shorter than %g m", shortM), "long")
	t := r.Structures
	line("structures", "%d roads in tunnels, %.2f km; %d on bridges, %.2f km; %d in roundabouts", t.Tunnels, t.TunnelKM, t.Bridges, t.BridgeKM, t.Circles)
	if h := r.Heights; h.KnownShare == 0 {
		line("heights", "none known")
	} else {
		line("heights", "known for %.1f %% of the length, void for %.1f km; %.1f to %.1f m, sigma %.1f m, steepest grade %.1f %%",
			100*h.KnownShare, h.VoidKM, h.LowM, h.HighM, h.SigmaM, 100*h.MaxGrade)
	}
	x := r.Resolution
	line("resolution", "cells of at most %g m, %.3f m on average; segments of %.1f m on average, %.1f m at most; longest edge %.0f m; %d turns of more than 120° within edges",
		x.CellM, x.MeanCellM, x.MeanSegmentM, x.MaxSegmentM, x.MaxEdgeM, x.SharpTurns)
	if r.Note != "" {
		line("built", "%s", r.Note)
	}
	return b.String()
}

func orUnstated(s string) string {
	if s == "" {
		return "unstated"
	}
	return s
}

type writeLine func(label, format string, args ...any)

// listed is how many places the text shows of each list.
const listed = 3

func (p Parts) write(line writeLine, label, what string) {
	if p.Count == 1 {
		line(label, "all %.1f km are %s", p.LargestKM, what)
		return
	}
	others := fmt.Sprintf("the other %d have", p.Count-1)
	if p.Count == 2 {
		others = "the other one has"
	}
	line(label, "%d parts are %s; the largest has %.1f km, %.2f %% of the edges; %s %.1f km",
		p.Count, what, p.LargestKM, 100*p.Share, others, p.OtherKM)
	var why []string
	for _, w := range []struct {
		n    int
		text string
	}{
		{p.Isolated, "isolated: no road leads there, often a car park, an island, or a road cut off where the map ends"},
		{p.EnterOnly, "can be entered but not left: one-way roads that end at the edge of the map or at a missing road"},
		{p.LeaveOnly, "can be left but not entered: one-way roads that begin at the edge of the map"},
		{p.Between, "on the way from one part to another: one-way roads that are passed once"},
	} {
		if w.n > 0 {
			why = append(why, fmt.Sprintf("%d %s", w.n, w.text))
		}
	}
	line("", "of these %s", strings.Join(why, "; "))
	writeSpots(line, p.Others, "long")
}

func (p Places) write(line writeLine, label, what, measure string) {
	line(label, "%d %s", p.Count, what)
	writeSpots(line, p.List, measure)
}

func writeSpots(line writeLine, spots []Spot, measure string) {
	for _, s := range spots[:min(len(spots), listed)] {
		name := s.Name
		if name == "" {
			name = "unnamed"
		}
		other := ""
		if s.Other != "" {
			other = " and " + s.Other
		}
		line("", "  %.6f, %.6f: %.2f m %s, %s (%s%s)", s.LonDeg, s.LatDeg, s.Metres, measure, name, s.Feature, other)
	}
}
