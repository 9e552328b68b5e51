// Package compare sets two folders of results against each other, drive by drive.
package compare

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"leadline/engine/study/results"
	"leadline/engine/study/score"
)

// Comparison is what changed from results A to results B.
type Comparison struct {
	A string `json:"a"`
	B string `json:"b"`
	// How says whether the same program is compared bit for bit, or different
	// ones by tolerance, in words.
	How string `json:"how"`
	// Tolerance is the relative difference up to which figures of different
	// programs or machines count as the same; 0 for the same.
	Tolerance float64 `json:"tolerance"`
	Drives    int     `json:"drives"`    // compared
	Runs      int     `json:"runs"`      // of these drives, one a setting
	SameBits  int     `json:"same_bits"` // runs
	// OnlyA and OnlyB are runs without a counterpart; Notes what else makes the
	// comparison doubtful.
	OnlyA   []string  `json:"only_a"`
	OnlyB   []string  `json:"only_b"`
	Notes   []string  `json:"notes"`
	Figures []Changed `json:"figures"`
	Pairs   []Pair    `json:"pairs"`
}

// Changed is one figure over all drives in which both sides have it. A drive counts
// once, by the mean over its settings: what several settings make of one drive is not
// independent, and would make an interval too narrow.
type Changed struct {
	Name   string  `json:"name"`
	Drives int     `json:"drives"`
	A      float64 `json:"a_mean"`
	B      float64 `json:"b_mean"`
	// Difference is the mean of B - A over drives, Low and High its 95 % interval
	// (score.MeanInterval), Interval how that was made; null and "" with fewer than
	// three.
	Difference float64  `json:"difference"`
	Low        *float64 `json:"difference_low"`
	High       *float64 `json:"difference_high"`
	Interval   string   `json:"difference_interval"`
	Better     int      `json:"better"` // drives in which B is
	Worse      int      `json:"worse"`
	WorstB     float64  `json:"b_worst"` // of any run
	WorstDrive string   `json:"b_worst_drive"`
}

// Pair is one drive with one setting on both sides.
type Pair struct {
	Name     string             `json:"name"`
	SameBits bool               `json:"same_bits"`
	A        map[string]float64 `json:"a"`
	B        map[string]float64 `json:"b"`
	// Stretches are where the error differs for long, the worst first.
	Stretches []Stretch `json:"stretches"`

	a, b *results.Result
}

// Of different programs or machines: sums in another order differ by about this.
const tolerance = 1e-6

// resamples of the bootstrap: of 8 drives 6 in a thousand means are beyond either end,
// 60 of these, so that the ends are good to a few per cent of the interval's width.
const resamples = 10_000

// leastDrives is from how many drives on an interval is given: of two that of Student
// is 25 times as wide as its standard error, and nothing shows whether they are normal.
const leastDrives = 3

// Few says what intervals of few drives are worth, "" where none is of few.
func (c *Comparison) Few() string {
	most, student := 0, 0
	for _, f := range c.Figures {
		most = max(most, f.Drives)
		if f.Interval == score.ByStudent {
			student = max(student, f.Drives)
		}
	}
	switch {
	case student > 0:
		return fmt.Sprintf("intervals of up to %d drives are Student's, which hold 95 %% if the differences between drives are normal: so few do not show whether they are", student)
	case most < leastDrives:
		return fmt.Sprintf("fewer than %d drives are too few for an interval: a difference may be chance", leastDrives)
	}
	return ""
}

// Apart says what is counted where drives were run with several settings, "" where not.
func (c *Comparison) Apart() string {
	if c.Runs == c.Drives {
		return ""
	}
	return "each drive counts once, by the mean over its settings: what several settings make of one drive is not independent"
}

// Of compares results. Sides of one setting each are paired by drive, others by
// setting and drive. It is an error if nothing can be paired.
func Of(a, b []*results.Result) (*Comparison, error) {
	c := &Comparison{How: "the same program on the same kind of machine: posteriors that are the same are the same bit for bit", OnlyA: []string{}, OnlyB: []string{}, Notes: []string{}, Figures: []Changed{}, Pairs: []Pair{}}
	name := func(r *results.Result) string { return r.Drive }
	if oneSetting(a) == "" || oneSetting(b) == "" {
		name = func(r *results.Result) string { return r.Setting + "/" + r.Drive }
	}
	of := map[string]*results.Result{}
	for _, r := range b {
		of[name(r)] = r
	}
	for _, r := range a {
		other := of[name(r)]
		if other == nil {
			c.OnlyA = append(c.OnlyA, name(r))
			continue
		}
		delete(of, name(r))
		if err := c.pair(name(r), r, other); err != nil {
			return nil, err
		}
	}
	for _, r := range b {
		if of[name(r)] != nil {
			c.OnlyB = append(c.OnlyB, name(r))
		}
	}
	if len(c.Pairs) == 0 {
		return nil, fmt.Errorf("no drive is in both: the first has %s, the second %s", some(c.OnlyA), some(c.OnlyB))
	}
	drives := map[string]bool{}
	for _, p := range c.Pairs {
		drives[p.a.Drive] = true
	}
	c.Drives, c.Runs = len(drives), len(c.Pairs)
	if c.Tolerance > 0 {
		c.How = fmt.Sprintf("different programs or machines: compared by tolerance, figures that differ by less than %g of themselves count as the same", tolerance)
	}
	for i := range Figures {
		if ch, ok := c.changed(&Figures[i]); ok {
			c.Figures = append(c.Figures, ch)
		}
	}
	return c, nil
}

func oneSetting(rs []*results.Result) string {
	setting := rs[0].Setting
	for _, r := range rs {
		if r.Setting != setting {
			return ""
		}
	}
	return setting
}

func some(names []string) string {
	if len(names) > 3 {
		return fmt.Sprintf("%s, %s, %s and %d more", names[0], names[1], names[2], len(names)-3)
	}
	return fmt.Sprint(names)
}

func (c *Comparison) pair(name string, a, b *results.Result) error {
	p := Pair{Name: name, A: map[string]float64{}, B: map[string]float64{}, a: a, b: b}
	p.SameBits = a.Score.PosteriorSHA256 == b.Score.PosteriorSHA256
	if p.SameBits {
		c.SameBits++
	}
	note := func(format string, args ...any) { c.Notes = append(c.Notes, name+": "+fmt.Sprintf(format, args...)) }
	if a.DriveSHA256 != b.DriveSHA256 {
		note("the two are of different drive files")
	}
	if a.MapFingerprint != b.MapFingerprint {
		note("the two are on different maps")
	}
	if a.Partial || b.Partial {
		note("one is partial: %s", a.Stopped+b.Stopped)
	}
	if a.TruthOffset != b.TruthOffset {
		note("the truth was taken with different offsets")
	}
	if a.Program != b.Program || a.Version != b.Version || a.Architecture != b.Architecture {
		c.Tolerance = tolerance
	}
	if t := b.Score.TruthNote; t != nil && len(t.Below) > 0 {
		note("the truth's own error is %.2f m an axis; nothing is claimed by %v", t.SigmaM, t.Below)
	}
	for i := range Figures {
		f := &Figures[i]
		if v := f.of(a.Score); v != nil {
			p.A[f.Name] = *v
		}
		if v := f.of(b.Score); v != nil {
			p.B[f.Name] = *v
		}
	}
	var err error
	if !p.SameBits {
		p.Stretches, err = stretches(a, b)
	} else {
		p.Stretches = []Stretch{}
	}
	c.Pairs = append(c.Pairs, p)
	return err
}

// changed sums up a figure; not ok if no drive has it on both sides.
func (c *Comparison) changed(f *Figure) (Changed, bool) {
	out := Changed{Name: f.Name}
	type sums struct {
		a, b float64
		runs int
	}
	of := map[string]*sums{}
	var order []*sums
	for _, p := range c.Pairs {
		a, inA := p.A[f.Name]
		b, inB := p.B[f.Name]
		if !inA || !inB {
			continue
		}
		s := of[p.a.Drive]
		if s == nil {
			s = new(sums)
			of[p.a.Drive] = s
			order = append(order, s)
		}
		s.a, s.b, s.runs = s.a+a, s.b+b, s.runs+1
		if out.WorstDrive == "" || f.worse(b) > f.worse(out.WorstB) {
			out.WorstB, out.WorstDrive = b, p.Name
		}
	}
	var diffs []float64
	for _, s := range order {
		a, b := s.a/float64(s.runs), s.b/float64(s.runs)
		d := b - a
		diffs = append(diffs, d)
		out.A, out.B, out.Difference = out.A+a, out.B+b, out.Difference+d
		if same := math.Abs(d) <= c.Tolerance*math.Max(math.Abs(a), math.Abs(b)); !same {
			switch worse := f.worse(b) - f.worse(a); {
			case worse > 0:
				out.Worse++
			case worse < 0:
				out.Better++
			}
		}
	}
	n := float64(len(diffs))
	if out.Drives = len(diffs); n == 0 {
		return out, false
	}
	out.A, out.B, out.Difference = out.A/n, out.B/n, out.Difference/n
	if len(diffs) >= leastDrives {
		low, high, how := score.MeanInterval(rand.New(rand.NewPCG(1, 0)), diffs, resamples, 0.95)
		out.Low, out.High, out.Interval = &low, &high, how
	}
	return out, true
}

// figure finds one.
func (c *Comparison) figure(name string) (*Changed, bool) {
	i := slices.IndexFunc(c.Figures, func(f Changed) bool { return f.Name == name })
	if i < 0 {
		return nil, false
	}
	return &c.Figures[i], true
}
