package main

import (
	"bytes"
	"context"
	"strings"
	"testing"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/study/tune"
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

// contradicted is a posterior whose figures do not hold.
func contradicted() *leadlinev1.Posterior {
	return &leadlinev1.Posterior{
		Vehicle: "van", Status: leadlinev1.Status_STATUS_CONTRADICTED, Protection: &leadlinev1.Protection{}, Lost: 0.9996,
		Modes:  []*leadlinev1.Mode{{Mass: 1, Mean: &leadlinev1.Position{}}},
		Alarms: []*leadlinev1.Alarm{{Kind: leadlinev1.AlarmKind_ALARM_KIND_SPREAD, Sensor: "fix", Since: timestamppb.New(time.Unix(0, 0))}},
	}
}

// TestWarningFirst: what says that figures do not hold stands before them.
func TestWarningFirst(t *testing.T) {
	var b bytes.Buffer
	printPosterior(&b, contradicted())
	if at := strings.Index(b.String(), "  mean "); strings.Index(b.String(), "  lost           100.0 %") > at || strings.Index(b.String(), "  alarm ") > at || strings.Count(b.String(), "  alarm ") != 1 || strings.Count(b.String(), "  lost ") != 1 {
		t.Error(b.String())
	}
	b.Reset()
	if err := new(followOptions).print(&b, &leadlinev1.FollowResponse{Vehicle: "van", News: &leadlinev1.FollowResponse_Posterior{Posterior: contradicted()}}); err != nil {
		t.Fatal(err)
	}
	lost, alarm, lon := strings.Index(b.String(), "100.0 % lost"), strings.Index(b.String(), "alarm: fix"), strings.Index(b.String(), "lon 0")
	if lost < 0 || alarm < lost || lon < alarm {
		t.Error(b.String())
	}
	b.Reset()
	printPosterior(&b, &leadlinev1.Posterior{Protection: &leadlinev1.Protection{}})
	if strings.Contains(b.String(), "lost") || strings.Contains(b.String(), "alarm") {
		t.Error(b.String())
	}
}

// TestNotCarried: why a belief was not carried on to the present.
func TestNotCarried(t *testing.T) {
	for _, c := range []struct {
		now  bool
		a    *leadlinev1.WhereAnswer
		want string
	}{
		{true, &leadlinev1.WhereAnswer{Posterior: &leadlinev1.Posterior{AgeS: -107702964}}, "3.4 years ahead of the server's clock"},
		{true, &leadlinev1.WhereAnswer{Ended: true, Posterior: &leadlinev1.Posterior{AgeS: 420}}, "ended"},
		{true, &leadlinev1.WhereAnswer{Posterior: &leadlinev1.Posterior{PredictedS: 3}}, ""},
		{true, &leadlinev1.WhereAnswer{Failure: &leadlinev1.Failure{}}, ""},
		{false, &leadlinev1.WhereAnswer{Ended: true, Posterior: &leadlinev1.Posterior{AgeS: 420}}, ""},
	} {
		o := whereOptions{now: c.now}
		if got := o.notCarried(c.a); !strings.Contains(got, c.want) || (got == "") != (c.want == "") {
			t.Errorf("%v: %q, want %q", c.a, got, c.want)
		}
	}
}

// TestFollowNobody: a vehicle that is not known yet is waited for, which is said.
func TestFollowNobody(t *testing.T) {
	t.Parallel()
	town, _ := compiledTown(t, t.TempDir(), 20)
	srv := serveMaps(t, "--map", town)
	ctx, cancel := context.WithTimeout(t.Context(), patience)
	defer cancel()
	errs := &lockedBuffer{}
	c := command(ctx, "follow", "nobody", "--count", "1", "--at", srv.address)
	c.Stderr = errs
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	defer func() {
		_ = c.Process.Kill()
		_ = c.Wait()
	}()
	for begun := time.Now(); !strings.Contains(errs.String(), `no vehicle "nobody" is known at `+srv.address+" yet: waiting"); time.Sleep(10 * time.Millisecond) {
		if time.Since(begun) > 20*time.Second {
			t.Fatalf("it does not say that it waits: %q", errs)
		}
	}
}

// TestTunedWords: what a search that was cut short found is said to be not firm, of
// each figure; what ended by itself is not, and has its range.
func TestTunedWords(t *testing.T) {
	value, from, to, sigma := 0.2, 0.15, 0.25, 0.13
	r := &tune.Result{Drives: 2, Before: -20, After: -10, Figures: []tune.Tuned{
		{Key: "sensors.odo.noise.sigma_m", Known: tune.Estimated, Value: &value, LogSigma: &sigma, From: &from, To: &to, Given: true, Before: 0.1},
		{Key: "vehicle.corner_sigma_m", Known: tune.BestSoFar, Value: &value, Before: 2},
	}}
	for _, converged := range []bool{true, false} {
		r.Converged = converged
		var b strings.Builder
		if err := printTuned(&b, r); err != nil {
			t.Fatal(err)
		}
		want := 2
		if converged {
			want = 0
		}
		if n := strings.Count(b.String(), "(not firm: the search was cut short)"); n != want || !strings.Contains(b.String(), "sensors.odo.noise.sigma_m: 0.2, 95 % from 0.15 to 0.25") {
			t.Errorf("converged %v: not firm %d times, want %d:\n%s", converged, n, want, b.String())
		}
	}
}
