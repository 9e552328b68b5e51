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
		if a.GivenUpAfter != nil {
			if later := cmp.Compare(*b.GivenUpAfter, *a.GivenUpAfter); later != 0 {
				return later
			}
		}
		return cmp.Compare(b.GainNats, a.GainNats)
	})
	top := math.Inf(-1)
	for _, k := range r.Candidates {
		if k.explains() {
			top = math.Max(top, k.GainNats)
		}
	}
	var named []*Candidate
	for i := range r.Candidates {
		k := &r.Candidates[i]
		k.Named = k.explains() && k.GainNats >= r.NeededNats && k.GainNats >= top-logOdds && !r.isKnown(k)
		if k.Named {
			named = append(named, k)
		}
	}
	r.Verdict = r.say(named)
}

// challengeNats is what the best factor may gain over the true one by chance:
// twice that is χ² of one degree of freedom (Wilks), and more than 3 nats come
// in 1.4 % of logs.
const challengeNats = 3.0

// challenge holds against a unit that a factor between the units fits better, unless
// it is that unit's but for the sensor's own scale (nearUnit), or
// against an offset of depths that a factor does, and against that factor that it
// is no unit: it is there to challenge others, and so many would fit this or that
// log that it is not named itself. Of an offset that it fits about as well as, the
// remedy says so: the depths differ too little to tell.
func (r *Report) challenge() {
	for i := range r.Candidates {
		f := &r.Candidates[i]
		s := f.mistake.search
		if s == nil || s.against == nil {
			continue
		}
		f.Suspect = append(f.Suspect, "no usual unit has that factor")
		for j := range r.Candidates {
			k := &r.Candidates[j]
			switch behind := f.GainNats - k.GainNats; {
			case !s.challenges(k.mistake) || f.GivenUpAfter != nil:
			case behind > challengeNats && s.nearUnit(k.mistake, f.mistake):
				k.Remedy += fmt.Sprintf("; what is then left, a factor of %.3g, is as little as the sensor's own scale may be off", kernel.Exp(f.mistake.Value-k.mistake.lnFactor))
			case behind > challengeNats:
				k.Suspect = append(k.Suspect, fmt.Sprintf("a factor of no usual unit, ×%.3g, fits better", f.Value))
			case behind > -logOdds && k.mistake.search != nil: // neither is more usual than the other
				k.Remedy += fmt.Sprintf("; or multiply by %.3g, which fits about as well", f.Value)
			}
		}
	}
}

// nearUnit reports whether a factor that was searched for is that of a unit, but for
// as little as sensors are off by themselves. A unit that is mistaken by a sensor
// whose scale is off as well is the likelier story, however many nats that scale
// brings: by Bayes' rule the unit is one of a few, and the scale lies within some 3 %
// of one (practice), while a factor of no unit may lie anywhere within the search's
// reach, some eighty times as wide.
func (s *scan) nearUnit(unit, factor *Mistake) bool {
	return unit.lnFactor != 0 && unit.family == s.family && math.Abs(factor.Value-unit.lnFactor) < s.least
}

// explains reports whether a log with a mistake undone is one that nothing
// speaks against: that it fits better than the log as it stands is not enough,
// where both are wrong.
func (k *Candidate) explains() bool { return k.eligible && len(k.Suspect) == 0 }

// say puts the verdict in words.
func (r *Report) say(named []*Candidate) string {
	var b strings.Builder
	switch len(named) {
	case 0:
		fmt.Fprintf(&b, "none of the usual mistakes that were tried explains the log; one is named from %.1f nats on, if nothing speaks against the log with it undone", r.NeededNats)
		best := false
		for _, k := range r.Candidates {
			switch {
			case k.GivenUpAfter != nil || k.GainNats < r.NeededNats:
			case !k.eligible:
				fmt.Fprintf(&b, "; %s gains %.0f, but so little is an error that sensors, tides or weather have", k.mistake, k.GainNats)
			case !best && len(k.Suspect) > 0:
				best = true
				fmt.Fprintf(&b, "; the best of them, %s, gains %s%.0f, but even so %s", k.mistake, r.atLeast(), k.GainNats, strings.Join(k.Suspect, ", "))
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
