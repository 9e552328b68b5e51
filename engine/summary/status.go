package summary

// Status says in one word what a posterior is worth. The numbers enter the
// hash and never change.
type Status uint8

// The statuses, in the order in which they are tried: the first that holds is
// the posterior's.
const (
	// Contradicted: the measurements contradict the belief.
	Contradicted Status = 1
	// OffMap: at least half of the probability is off the map.
	OffMap Status = 2
	// Located: one mode holds at least 0.95 and the 95 % radius is within the
	// alert limit.
	Located Status = 3
	// Ambiguous: two or more modes hold at least 0.05 each.
	Ambiguous Status = 4
	// Unsure: none of these.
	Unsure Status = 5
)

// String returns the name used in the API and in files.
func (s Status) String() string {
	switch s {
	case Contradicted:
		return "contradicted"
	case OffMap:
		return "off map"
	case Located:
		return "located"
	case Ambiguous:
		return "ambiguous"
	case Unsure:
		return "unsure"
	}
	return "unknown"
}

// The bounds of the statuses.
const (
	offMapFrom    = 0.5
	locatedFrom   = 0.95
	ambiguousFrom = 0.05
)

// statusOf applies the rule: best is the mass of the heaviest mode, heavy the
// number of modes that hold at least ambiguousFrom.
func statusOf(contradicted bool, offMap, best float64, heavy int, radius95M, alertLimitM float64) Status {
	switch {
	case contradicted:
		return Contradicted
	case offMap >= offMapFrom:
		return OffMap
	case best >= locatedFrom && radius95M <= alertLimitM:
		return Located
	case heavy >= 2:
		return Ambiguous
	}
	return Unsure
}
