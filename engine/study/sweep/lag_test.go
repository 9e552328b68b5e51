package sweep

import (
	"strings"
	"testing"
)

// TestLag: what is known of times 4 s later is poorer than with the whole drive and
// better than at once, and each quarter of the lag has a row.
func TestLag(t *testing.T) {
	j := job(t.TempDir(), sail(t, t.TempDir(), "boat", 20))
	j.LagS, j.Smooth = 4, true
	out, _ := outcomes(t, j)
	s := out[0].Score
	l, lines := s.Lagged, strings.Count(files(t, out[0].Dir)["/lagged.csv"], "\n")
	if l == nil || l.LagS != 4 || l.Posteriors < 14 || l.Posteriors > 18 || lines != l.Posteriors+1 {
		t.Fatalf("%d lines, %+v", lines, l)
	}
	if all, at := *s.LookedBack.Smoothed.FiguresAll.RMSEM, *s.FiguresAll.RMSEM; *l.FiguresAll.RMSEM < 0.8*all || *l.FiguresAll.RMSEM > at {
		t.Errorf("rms %v m with a lag, %v m with all, %v m at once", *l.FiguresAll.RMSEM, all, at)
	}
	alone := job(t.TempDir(), j.Drives...)
	alone.LagS = 4
	if out, _ := outcomes(t, alone); *out[0].Score.Lagged.FiguresAll.RMSEM != *l.FiguresAll.RMSEM || out[0].Score.LookedBack != nil {
		t.Errorf("without looking back: %+v", out[0].Score.Lagged)
	}
}
