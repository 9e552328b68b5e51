package sweep

import (
	"context"
	"errors"
	"math"
	"path/filepath"

	"leadline/engine/study/results"
)

// SummaryFile is in a job's folder.
const SummaryFile = "summary.json"

// Summary is what a job's runs come to, for each setting: the drives by which a
// setting may be chosen apart from those that are held out.
type Summary struct {
	// SettingsTried counts those of this job, and of earlier ones in its folder:
	// the best of many settings looks better than it is, the more there are.
	SettingsTried int      `json:"settings_tried"`
	Runs          int      `json:"runs"`
	Resumed       int      `json:"resumed"` // of them taken from an earlier job
	Failed        int      `json:"failed"`
	CutShort      int      `json:"cut_short"` // their results are partial
	HeldOut       []string `json:"held_out"`  // drives
	Partial       bool     `json:"partial"`
	Rows          []Row    `json:"settings"`
	// Best is the setting with the most evidence on the drives that are not held
	// out, "" if fewer than two can be compared.
	Best string `json:"best_by_evidence"`
}

// Row is one setting.
type Row struct {
	Setting  string   `json:"setting"`
	Set      []string `json:"set"`
	CutShort int      `json:"cut_short"` // of its runs: its figures are of less
	Figures  Pooled   `json:"drives"`
	HeldOut  *Pooled  `json:"held_out,omitempty"`
}

// Pooled sums up the scores of several drives; figures of errors are of those that
// have a truth, from the first located posterior on.
type Pooled struct {
	Drives       int      `json:"drives"`
	NeverLocated int      `json:"never_located"`
	Scored       int      `json:"scored"`
	RMSEM        *float64 `json:"rmse_m"`     // of all errors together
	P95M         *float64 `json:"p95_m"`      // mean over drives
	Coverage95   *float64 `json:"coverage95"` // of all posteriors together
	CRPSM        *float64 `json:"crps_m"`
	LogEvidence  float64  `json:"log_evidence"` // sum
	Beyond       int      `json:"beyond_protection"`

	square, inside, crps, p95 float64
	withP95                   int
}

func newSummary() *Summary { return &Summary{HeldOut: []string{}, Rows: []Row{}} }

func (s *Summary) add(o *Outcome) {
	s.Runs++
	if o.Resumed {
		s.Resumed++
	}
	switch {
	case o.Score == nil && errors.Is(o.Err, context.Canceled):
		s.CutShort++
		return
	case o.Score == nil:
		s.Failed++
		return
	case o.Score.Partial:
		s.CutShort++
	}
	if n := len(s.Rows); n == 0 || s.Rows[n-1].Setting != o.Setting.Name {
		row := Row{Setting: o.Setting.Name, Set: []string{}}
		for _, c := range o.Setting.Changes {
			row.Set = append(row.Set, c.String())
		}
		s.Rows = append(s.Rows, row)
	}
	row := &s.Rows[len(s.Rows)-1]
	if o.Score.Partial {
		row.CutShort++
	}
	p := &row.Figures
	if o.HeldOut {
		if row.HeldOut == nil {
			row.HeldOut = &Pooled{}
		}
		p = row.HeldOut
		if len(s.Rows) == 1 {
			s.HeldOut = append(s.HeldOut, o.Drive.Name)
		}
	}
	p.add(o)
}

func (p *Pooled) add(o *Outcome) {
	p.Drives++
	p.LogEvidence += o.Score.LogEvidence
	if o.Score.LocatedAfterS == nil {
		p.NeverLocated++
	}
	f := o.Score.Figures
	if f.RMSEM == nil {
		return
	}
	n := float64(f.Scored)
	p.Scored += f.Scored
	p.square += n * *f.RMSEM * *f.RMSEM
	p.inside += n * *f.Coverage95
	p.p95, p.withP95 = p.p95+*f.P95M, p.withP95+1
	p.Beyond += *f.BeyondProtection
	if o.Score.CRPSM != nil {
		p.crps += n * *o.Score.CRPSM
	}
}

func (p *Pooled) end() {
	if p.Scored == 0 {
		return
	}
	n := float64(p.Scored)
	rmse, p95, inside, crps := math.Sqrt(p.square/n), p.p95/float64(p.withP95), p.inside/n, p.crps/n
	p.RMSEM, p.P95M, p.Coverage95, p.CRPSM = &rmse, &p95, &inside, &crps
}

// end sums up, and writes the summary beside the runs.
func (s *Summary) end(j *Job) error {
	most, drives := math.Inf(-1), 0
	for i := range s.Rows {
		r := &s.Rows[i]
		r.Figures.end()
		if r.HeldOut != nil {
			r.HeldOut.end()
		}
		drives = max(drives, r.Figures.Drives)
	}
	compared := 0
	for _, r := range s.Rows {
		if r.CutShort > 0 || r.Figures.Drives < drives { // its evidence is of less
			continue
		}
		if compared++; r.Figures.LogEvidence > most {
			most, s.Best = r.Figures.LogEvidence, r.Setting
		}
	}
	if compared < 2 {
		s.Best = ""
	}
	s.SettingsTried = len(s.Rows)
	if j.Dir == "" || len(s.Rows) == 0 {
		return nil
	}
	names, err := results.Settings(j.Dir)
	if err != nil {
		return err
	}
	s.SettingsTried = len(names)
	return results.WriteJSON(filepath.Join(j.Dir, SummaryFile), s)
}
