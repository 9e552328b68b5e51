package main

import (
	"bytes"
	"strings"
	"testing"
	"unicode/utf8"

	"leadline/engine/study/score"
	"leadline/engine/study/sweep"
)

// TestSweepTable: columns stay in line however long a setting's name is, those of drives
// that are held out, too.
func TestSweepTable(t *testing.T) {
	long := "sensors.odo.noise.sigma_m_per_sqrt_m=0.03,vehicle.corner_sigma_m=1,übrig=2"
	rms := 2.5
	s := &sweep.Summary{HeldOut: []string{"night"}, Rows: []sweep.Row{
		{Setting: long, Figures: sweep.Pooled{Drives: 3, LogEvidence: 1234567.8, RMSEM: &rms}, HeldOut: &sweep.Pooled{Drives: 1}},
		{Setting: "given", Figures: sweep.Pooled{Drives: 12, LogEvidence: -3.2}, HeldOut: &sweep.Pooled{Drives: 1}},
	}}
	var b bytes.Buffer
	if err := printSweep(&b, s); err != nil {
		t.Fatal(err)
	}
	ends, rows := map[int]bool{}, 0
	for line := range strings.Lines(b.String()) {
		if line = strings.TrimRight(line, "\n"); strings.HasPrefix(line, "  ") {
			ends[utf8.RuneCountInString(line)] = true
			rows++
		}
	}
	if rows != 6 || len(ends) != 1 || !strings.Contains(b.String(), "evidence nats") {
		t.Errorf("%d rows end in columns %v:\n%s", rows, ends, b.String())
	}
}

// TestScoreText: bounds are of independent errors, nothing is said by fewer than two, and
// truths off the map and of other times are told.
func TestScoreText(t *testing.T) {
	v, n, few, beyond := 3.0, 80.4, 1.2, 19
	s := &score.Score{Drive: "d"}
	s.Figures = score.Figures{Scored: 4, RMSEM: &v, MeanM: &v, P50M: &v, P95M: &v, MaxM: &v, ANEES: &v, Coverage50: &v, Coverage95: &v, Coverage99: &v, BeyondProtection: &beyond}
	s.Protection = &score.Exceedance{Bounded: 97, Beyond: 19, Episodes: 1, Share: &v, Trials: 0.3, Risk: 1e-4}
	s.TruthOffMap = &score.OffMap{Truths: 819, NearestM: 1e6}
	text := func() string {
		var b bytes.Buffer
		if err := printScore(&b, &sweep.Outcome{Score: s}); err != nil {
			t.Fatal(err)
		}
		return b.String()
	}
	s.Independent = &n
	low, high := 0.2, 0.4
	for _, want := range []string{"95 % of means of 80 independent errors in 1.59 to 2.46", "share 3, too few independent errors for an interval", "all 819 truths lie off the map, at least 1000 km"} {
		if got := text(); !strings.Contains(got, want) {
			t.Errorf("%q is not said:\n%s", want, got)
		}
	}
	s.Independent, s.Protection.Low, s.Protection.High = &few, &low, &high
	for _, want := range []string{"too few independent errors for bounds", "95 % in 0.2 to 0.4"} {
		if got := text(); !strings.Contains(got, want) {
			t.Errorf("%q is not said:\n%s", want, got)
		}
	}
	s = &score.Score{Drive: "d"}
	s.TruthElsewhen = &score.Elsewhen{Truths: 819, FromS: -3600, ToS: -2782}
	if got := text(); !strings.Contains(got, "not known: none of the 819 truths, of -3600 s to -2782 s after the drive's start, is of the time of a posterior. Are clocks or dates apart?") {
		t.Error(got)
	}
}
