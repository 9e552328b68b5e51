package server

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/plane"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestMassByteRounds proves that the table agrees with the logarithm, rounded.
func TestMassByteRounds(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for range 200_000 {
		share := math.Exp(-18 * rng.Float64())
		exact := 255 + 16*kernel.Log(share)
		want := byte(min(max(math.Round(exact), 0), 255))
		if got := massByte(share*3, 3); got != want && math.Abs(exact-math.Floor(exact)-0.5) > 1e-9 {
			t.Fatalf("byte of %v is %d, want %d", share, got, want)
		}
	}
}

// TestPicturesRest proves that who asks for what takes long waits, gets the latest
// then, and the drive's last at once.
func TestPicturesRest(t *testing.T) {
	fl := newFleet(Limits{})
	sub := fl.open("a")
	r := fl.read(t, &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_REGION})
	fl.waits = 20 * time.Millisecond
	for i := range 3 {
		fl.say(sub, summary.Unsure, i)
	}
	if us := r.all(); len(us) != 0 || fl.answered != 0 {
		t.Errorf("told %v after %d answers, want nothing yet", us, fl.answered)
	}
	fl.waits = 0
	for end := time.Now().Add(10 * time.Second); !fl.poked(); time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatal("the owner is not asked again")
		}
	}
	if us := r.all(); len(us) != 1 || us[0].posterior.p.TimeNS != int64(began)+2e9 || us[0].skipped != 2 || fl.answered != 1 || fl.charged != 1 {
		t.Errorf("told %+v after %d answers, want the last, 2 skipped", us, fl.answered)
	}
	fl.waits = time.Hour
	fl.say(sub, summary.Unsure, 3)
	fl.farewell(sub, &leadlinev1.Farewell{Ended: true}, fl)
	if us := r.all(); len(us) != 2 || us[0].posterior == nil || us[0].posterior.p.TimeNS != int64(began)+3e9 || us[1].farewell == nil {
		t.Errorf("at its end told %+v, want the last and the end", us)
	}

	var x extras
	p := &summary.Posterior{}
	w := want{belief: &usual}
	if x.charge(pictureFree / 2); x.wait(p, w) != 0 {
		t.Error("what takes little makes somebody wait")
	}
	x.charge(time.Second)
	if d := x.wait(p, w); d <= 3*time.Second || d > pictureRest*time.Second {
		t.Errorf("after a second's work the next waits for %v", d)
	}
	if x.wait(p, want{fractions: []float64{0.5}}) != 0 {
		t.Error("who wants no picture has to wait")
	}
	x.of, x.beliefs = p, map[picture]*leadlinev1.Belief{usual: {}}
	if x.wait(p, w) != 0 {
		t.Error("a picture that is there has to be waited for")
	}
}

// wideBelief is a session of a belief as wide as can be shown.
type wideBelief struct {
	Session
	cloud filter.Cloud
}

func (s *wideBelief) ReadBelief(dst *filter.Cloud) {
	dst.East, dst.North, dst.Mass = append(dst.East[:0], s.cloud.East...), append(dst.North[:0], s.cloud.North...), append(dst.Mass[:0], s.cloud.Mass...)
}
func (s *wideBelief) Cells() (int, filter.Lattice) { return 0, filter.Lattice{SpacingM: 5} }

// restless lets nobody wait.
type restless struct{ *extras }

func (restless) wait(*summary.Posterior, want) time.Duration { return 0 }

// BenchmarkWatched is how much of a vehicle's time goes to those who watch its
// belief of a million cells, ten times a second each and out of step, while it
// has 100 posteriors a second: with the rest between pictures and without.
func BenchmarkWatched(b *testing.B) {
	const cells = maxBeliefCells
	for _, watchers := range []int{1, 8} {
		for _, rests := range []bool{false, true} {
			b.Run(fmt.Sprintf("watchers=%d/rests=%v", watchers, rests), func(b *testing.B) {
				session := &wideBelief{cloud: blob(1000)}
				fl := newFleet(Limits{Followers: 100})
				sub := fl.open("a")
				h := newHub(fl.limits, time.Now, func() bool { return false })
				h.begin(sub)
				x := newExtras(session, plane.Open(geo.FromDegrees(-30, 45), 100e3, 20))
				var a answerer = x
				if !rests {
					a = restless{x}
				}
				var fs []*follower
				told := 0
				var busy, all time.Duration
				for i := 0; b.Loop(); i++ {
					if i < watchers {
						f, _, err := h.follow(&leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_BELIEF, MinIntervalS: 0.1, BeliefCells: cells})
						if err != nil {
							b.Fatal(err)
						}
						fs = append(fs, f)
					}
					began := time.Now()
					p := &summary.Posterior{TimeNS: int64(1e18) + int64(i)*1e7, Status: summary.Located}
					h.told(sub, []*summary.Posterior{p}, nil, p, 0, a)
					busy += time.Since(began)
					for _, f := range fs {
						for {
							u, _, _ := h.take(f, f.reader)
							if u == nil {
								break
							}
							if u.posterior != nil && u.posterior.extra != nil && u.posterior.extra.belief != nil {
								told++
							}
						}
					}
					time.Sleep(max(0, 10*time.Millisecond-time.Since(began)))
					all += time.Since(began)
				}
				b.ReportMetric(100*busy.Seconds()/all.Seconds(), "%-of-the-vehicle")
				b.ReportMetric(float64(told)/all.Seconds()/float64(len(fs)), "pictures/s/watcher")
			})
		}
	}
}
