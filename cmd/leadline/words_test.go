package main

import (
	"bytes"
	"strings"
	"testing"

	leadlinev1 "leadline/proto/leadline/v1"
)

// TestSpans: times are in words that a person takes in, and one thing is one.
func TestSpans(t *testing.T) {
	for s, want := range map[float64]string{
		0: "0.0 s ago", 119: "119.0 s ago", 600: "10 minutes ago", 7 * 3600: "7 hours ago", 30 * 86400: "30 days ago",
		-107702964: "3.4 years ahead of the server's clock", -3: "3.0 s ahead of the server's clock",
	} {
		if got := age(s); got != want {
			t.Errorf("%v: %q, want %q", s, got, want)
		}
	}
	if got := count(1, "piece") + ", " + count(0, "piece") + ", " + count(3, "piece"); got != "1 piece, 0 pieces, 3 pieces" {
		t.Error(got)
	}
}

// TestModesOfNothing: a mode that would be printed as 0.0 % is left out.
func TestModesOfNothing(t *testing.T) {
	var b bytes.Buffer
	at := &leadlinev1.Position{}
	printPosterior(&b, &leadlinev1.Posterior{Protection: &leadlinev1.Protection{}, Modes: []*leadlinev1.Mode{{Mass: 0.9996, Mean: at}, {Mass: 0.0004, Mean: at}}})
	if strings.Count(b.String(), "  mode ") != 1 || strings.Contains(b.String(), " 0.0 %") {
		t.Error(b.String())
	}
}
