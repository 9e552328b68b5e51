package score

import "fmt"

// Details are what a score says beyond its figures, from the first located
// posterior on.
type Details struct {
	// P75M, with p50_m and p95_m, are the percentiles in which EN 16803-1 states
	// horizontal accuracy (from memory).
	P75M *float64 `json:"p75_m"`
	// Along and across the truth's direction of motion, while it moves: of the
	// scored position, forward and right positive.
	AlongMeanM  *float64 `json:"along_mean_m"`
	AlongRMSEM  *float64 `json:"along_rmse_m"`
	AlongP95M   *float64 `json:"along_p95_m"` // of the absolute value
	AcrossMeanM *float64 `json:"across_mean_m"`
	AcrossRMSEM *float64 `json:"across_rmse_m"`
	AcrossP95M  *float64 `json:"across_p95_m"`
	// Independent is how many independent errors the scored ones are worth: as
	// many as would have the same variance of their mean (Geyer's initial
	// positive sequence).
	Independent *float64 `json:"independent"`
	// LogScore is the mean of -ln of the posterior's density at the truth, nats
	// relative to one square metre; CRPSM the mean of the continuous ranked
	// probability score along and across, metres. Both are of the mixture of the
	// posterior's modes, with the truth's own variance added. Smaller is better,
	// and no posterior does better in the mean than the right one (Gneiting &
	// Raftery, 2007).
	LogScore *float64 `json:"log_score"`
	CRPSM    *float64 `json:"crps_m"`
	// RankAlong and RankAcross count in which twentieth of the posterior the
	// truth fell, along and across, the rearmost and leftmost first: flat if it is
	// right, heaped at the ends if it is too sure, in the middle if it is not sure
	// enough, sloping if it is biased.
	RankAlong  []int `json:"rank_along"`
	RankAcross []int `json:"rank_across"`
	// LongestWrong is the longest stretch that says located with the truth
	// outside the 99 % radius and the truth's own 95 %; null if there is none.
	LongestWrong *Stretch `json:"longest_wrong"`
	// Protection is how often the truth was outside the protection radius.
	Protection *Exceedance `json:"protection"`
	// TruthNote says what the truth itself is worth.
	TruthNote *TruthNote `json:"truth"`
	// TruthElsewhen is of truths of which none is of the time of a posterior.
	TruthElsewhen *Elsewhen `json:"truth_elsewhen,omitempty"`
	// TruthOffMap is of truths of which none is at a road of the map.
	TruthOffMap *OffMap `json:"truth_off_map,omitempty"`
	// HeldOutFixes compares satellite fixes with what was known without them.
	HeldOutFixes *HeldOut `json:"held_out_fixes,omitempty"`
	// LookedBack is of the drive as it is known once it is over, where that was
	// asked for.
	LookedBack *LookedBack `json:"looked_back,omitempty"`
	// Lagged is of what was known of each time a lag later, where that was asked for.
	Lagged *Lagged `json:"lagged,omitempty"`
	// Sensors say how the measurements of each sensor fell in what was expected.
	Sensors []Innovation `json:"sensors"`
}

// Elsewhen is when truths are that no posterior can be compared with: first and last,
// in seconds after the drive's start.
type Elsewhen struct {
	Truths int     `json:"truths"`
	FromS  float64 `json:"truths_from_s"`
	ToS    float64 `json:"truths_to_s"`
}

// String says so, and what to look at.
func (e *Elsewhen) String() string {
	return fmt.Sprintf("none of the %d truths, of %.0f s to %.0f s after the drive's start, is of the time of a posterior. Are clocks or dates apart?", e.Truths, e.FromS, e.ToS)
}

// OffMap is how far a drive's truths are from a map's roads, if none that is compared
// lies within 15 m of one.
type OffMap struct {
	Truths int `json:"truths_off_map"`
	// NearestM is the way from the nearest of them to its nearest road, metres; of
	// more than 1000 km, 1000 km.
	NearestM float64 `json:"nearest_road_m"`
}

// String says so, and what to look at.
func (o *OffMap) String() string {
	far := fmt.Sprintf("%.0f m", o.NearestM)
	if o.NearestM >= 10_000 {
		far = fmt.Sprintf("%.0f km", o.NearestM/1000)
	}
	return fmt.Sprintf("all %d truths lie off the map, at least %s from its nearest road. Is it the map of that place, and are longitude and latitude in their order?", o.Truths, far)
}

// Stretch is a part of a drive.
type Stretch struct {
	StartS float64 `json:"start_s"` // after the drive's start
	ForS   float64 `json:"for_s"`
	ForM   float64 `json:"for_m"` // by the truth
}

// Exceedance counts truths outside of a bounded protection radius.
type Exceedance struct {
	Bounded  int `json:"bounded"` // posteriors that have one
	Beyond   int `json:"beyond"`
	Episodes int `json:"episodes"` // of consecutive ones
	// Share is beyond over bounded; Low and High hold its true value with 95 %
	// (Clopper & Pearson, Biometrika 26, 1934), for as many trials as the errors
	// are independent: Trials. They are null with fewer than leastTrials. Risk is the
	// largest that was asked for.
	Share  *float64 `json:"share"`
	Low    *float64 `json:"share_low"`
	High   *float64 `json:"share_high"`
	Risk   float64  `json:"risk"`
	Trials float64  `json:"trials"`
}

// leastTrials is how many independent errors an interval takes. Of a single trial that
// of Clopper and Pearson is 0 to 0.975 or 0.025 to 1, whatever is true: it says what
// was seen, and there is no second error to say whether that is chance.
const leastTrials = 2

// TruthNote says what a truth is worth.
type TruthNote struct {
	// SigmaM is the root mean square of the truths' standard deviations, P50M and
	// P95M what errors would be of a position that is exact.
	SigmaM float64 `json:"sigma_m"`
	P50M   float64 `json:"truth_p50_m"`
	P95M   float64 `json:"truth_p95_m"`
	// Offset is what was stated and taken off.
	Offset
	// Below names the figures that are smaller than the truth's own error:
	// nothing is claimed by them.
	Below []string `json:"below_truth"`
	// Twofold is how many truths have the time of an earlier one of the file that says
	// another place, by more than three of their standard deviations: the first counts.
	Twofold int `json:"twofold"`
	// Estimate is what may remain, where it was asked for. It is not taken off.
	Estimate *Estimate `json:"estimate,omitempty"`
}

// HeldOut compares satellite fixes with the posterior just before each. Errors
// are from the scored position to the fix, whose own error is in them.
type HeldOut struct {
	Fixes   int      `json:"fixes"`
	RMSEM   *float64 `json:"fix_rmse_m"`
	P50M    *float64 `json:"fix_p50_m"`
	P95M    *float64 `json:"fix_p95_m"`
	ANEES   *float64 `json:"fix_anees"` // with the fix's own variance; 2 is exact
	SigmaM  *float64 `json:"fix_sigma_m"`
	Outside *float64 `json:"fix_outside95"` // share of fixes outside of what 95 % should be in
}
