package diagnose

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"leadline/engine/kernel"
)

// A mistake is named from a gain on that leaves a hundred to one for it
// although only one log in a hundred holds one of them (practice), and each of
// those tried is as likely as the next: by Bayes' rule
//
//	gain ≥ ln 99 + ln 99 + ln tried.
//
// What is less than ln 99 + ln 99 behind the best is named with it: two
// mistakes do not differ in how usual they are.
var logOdds = 2 * kernel.Log(99)

func needed(tried int) float64 { return logOdds + kernel.Log(float64(tried)) }

// judge orders the candidates, names those that explain the log and says so.
func (r *Report) judge() {
	slices.SortStableFunc(r.Candidates, func(a, b Candidate) int {
		if done := cmp.Compare(boolInt(a.GivenUpAfter != nil), boolInt(b.GivenUpAfter != nil)); done != 0 {
			return done
		}
		return cmp.Compare(b.GainNats, a.GainNats)
	})
	top := math.Inf(-1)
	for _, k := range r.Candidates {
		if k.eligible {
			top = math.Max(top, k.GainNats)
		}
	}
	var named []*Candidate
	for i := range r.Candidates {
		k := &r.Candidates[i]
		k.Named = k.eligible && k.GainNats >= r.NeededNats && k.GainNats >= top-logOdds && !r.isKnown(k)
		if k.Named {
			named = append(named, k)
		}
	}
	r.Verdict = r.say(named)
}

// say puts the verdict in words.
func (r *Report) say(named []*Candidate) string {
	var b strings.Builder
	switch len(named) {
	case 0:
		fmt.Fprintf(&b, "none of the usual mistakes explains it: one is named from %.1f nats on", r.NeededNats)
		for _, k := range r.Candidates {
			if k.GivenUpAfter == nil && k.GainNats >= r.NeededNats {
				fmt.Fprintf(&b, "; %s gains %.0f, but so little is an error that sensors, tides or weather have", k.mistake, k.GainNats)
			}
		}
		return b.String()
	case 1:
		k := named[0]
		fmt.Fprintf(&b, "%s. With that undone the log evidence is %s%.0f nats higher. To do: %s", k.mistake, r.atLeast(), k.GainNats, k.Remedy)
	default:
		b.WriteString("one of these, which explain it about equally:")
		for i, k := range named {
			if i > 0 {
				b.WriteByte(';')
			}
			fmt.Fprintf(&b, " %s (%s%.0f nats; %s)", k.mistake, r.atLeast(), k.GainNats, k.Remedy)
		}
	}
	if bad := named[0].Bad; len(bad) > 0 {
		fmt.Fprintf(&b, ". Even so %s fits badly: there is something else, too", strings.Join(bad, ", "))
	}
	return b.String()
}

func (r *Report) atLeast() string {
	if r.BaseGivenUpAfter != nil {
		return "at least "
	}
	return ""
}

// isKnown reports whether an angle that was searched for is that of a known
// north: one that explains the log as well, but for what the search may gain by
// chance among the values it tells apart.
func (r *Report) isKnown(k *Candidate) bool {
	if k.mistake.search == nil {
		return false
	}
	return slices.ContainsFunc(r.Candidates, func(o Candidate) bool {
		return o.GivenUpAfter == nil && o.mistake.search == nil && o.mistake.family == k.mistake.family &&
			o.GainNats >= k.GainNats-kernel.Log(float64(k.mistake.search.values()))
	})
}

func boolInt(b bool) int {
	if b {
		return 1
	}
	return 0
}
