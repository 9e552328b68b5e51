package server

import (
	"fmt"
	"testing"

	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// BenchmarkFollowers is what one posterior costs: its vehicle, with followers
// that read and with those that stand still, and each follower that reads, its
// message included but for the wire.
func BenchmarkFollowers(b *testing.B) {
	set := func(b *testing.B, followers int) (*fleet, *subject, []*follower) {
		fl := newFleet(Limits{Followers: 1000})
		sub := fl.open("a")
		sub.onMap = sea()
		var fs []*follower
		for range followers {
			f, _, err := fl.follow(&leadlinev1.FollowRequest{})
			if err != nil {
				b.Fatal(err)
			}
			fs = append(fs, f)
		}
		return fl, sub, fs
	}
	posterior := func(i int) []*summary.Posterior {
		return []*summary.Posterior{{TimeNS: int64(began) + int64(i)*1e8, Status: summary.Located}}
	}
	for _, n := range []int{0, 1, 10, 100} {
		b.Run(fmt.Sprintf("vehicle/still=%d", n), func(b *testing.B) {
			fl, sub, _ := set(b, n)
			for i := 0; b.Loop(); i++ {
				ps := posterior(i)
				fl.told(sub, ps, nil, ps[0], 0, fl)
			}
		})
	}
	for _, n := range []int{1, 10, 100} {
		b.Run(fmt.Sprintf("vehicle/reading=%d", n), func(b *testing.B) {
			fl, sub, fs := set(b, n)
			for i := 0; b.Loop(); i++ {
				ps := posterior(i)
				fl.told(sub, ps, nil, ps[0], 0, fl)
				b.StopTimer()
				for _, f := range fs {
					_, _, _ = fl.take(f, f.reader)
				}
				b.StartTimer()
			}
		})
	}
	b.Run("follower", func(b *testing.B) {
		fl, sub, fs := set(b, 1)
		s := &Server{cfg: Config{Now: fl.now}, hub: fl.hub, atlas: newAtlas([]Map{sea()})}
		for i := 0; b.Loop(); i++ {
			ps := posterior(i)
			fl.told(sub, ps, nil, ps[0], 0, fl)
			u, _, _ := fl.take(fs[0], fs[0].reader)
			s.followed(fs[0], u)
		}
	})
}
