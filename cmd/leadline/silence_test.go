package main

import (
	"bytes"
	"errors"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
)

// TestSilence: a server that does not answer for an hour, asked each second, is
// told of once with the reason and a few times with how long it has lasted.
func TestSilence(t *testing.T) {
	var b bytes.Buffer
	now := time.Unix(1e9, 0)
	s := &silence{errs: &b, at: "127.0.0.1:7700", now: func() time.Time { return now }}
	for range 3600 {
		s.onBreak(status.Error(codes.Unavailable, "connection refused"), false)
		now = now.Add(time.Second)
	}
	lines := strings.Split(strings.TrimSpace(b.String()), "\n")
	if len(lines) != 10 || strings.Count(b.String(), "refused") != 1 || !strings.HasSuffix(lines[0], "is it running there? Trying again.") || lines[1] != "leadline: no answer for 10s, still trying" {
		t.Errorf("%d lines:\n%s", len(lines), b.String())
	}
	s.over()
	b.Reset()
	s.onBreak(status.Error(codes.Unavailable, "connection refused"), false)
	if !strings.Contains(b.String(), "refused") {
		t.Errorf("a new silence: %q", b.String())
	}
}

// TestSentences: two sentences in one line are two.
func TestSentences(t *testing.T) {
	for first, want := range map[string]string{
		"it is gone (STOPPING)": "it is gone (STOPPING). Feed it again",
		"is it there?":          "is it there? Feed it again",
	} {
		if got := sentences(errors.New(first), "Feed it again").Error(); got != want {
			t.Errorf("%q", got)
		}
	}
}
