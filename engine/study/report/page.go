package report

import (
	"bufio"
	_ "embed"
	"encoding/json"
	"fmt"
	"html"
	"html/template"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"

	"leadline/engine/geo"
	"leadline/engine/study/compare"
	"leadline/engine/study/track"
)

//go:embed page.html
var pageText string

//go:embed page.css
var pageStyle string

var page = template.Must(template.New("page").Funcs(template.FuncMap{
	"num": func(v *float64) string {
		if v == nil {
			return "–"
		}
		return number(*v)
	},
	"value":  number,
	"signed": func(v float64) string { return fmt.Sprintf("%+.3g", v) },
	"percent": func(v *float64) string {
		if v == nil {
			return "–"
		}
		return percent(*v)
	},
	"share": percent,
	"count": func(v *int) string {
		if v == nil {
			return "–"
		}
		return fmt.Sprint(*v)
	},
	"interval": func(low, high *float64) string {
		if low == nil || high == nil {
			return "–"
		}
		return fmt.Sprintf("%+.3g to %+.3g", *low, *high)
	},
	"changes": changes,
	"breaks":  breaks,
}).Parse(pageText))

// breaks lets a long name break after its signs, and not within a word, nor a flag.
func breaks(s string) template.HTML {
	text := flags.ReplaceAllString(signs.ReplaceAllString(html.EscapeString(s), "$0<wbr>"), `<span class="flag">$0</span>`)
	return template.HTML(text) //nolint:gosec // escaped
}

var (
	signs = regexp.MustCompile(`[_=/,:]|[a-z]\.\b`) // no number's point
	flags = regexp.MustCompile(`--[a-z-]+`)
)

func percent(v float64) string { return fmt.Sprintf("%.3g %%", 100*v) }

// shown is a run as the page has it.
type shown struct {
	*Run
	ID, Name    string
	UsableShare string
	Classes     string
	Pictures    []figure
	Details     []detail
	Made        []detail
}

type figure struct {
	SVG     template.HTML
	Caption string
	Note    string
	Wide    bool
	WidthPt int
}

// WriteHTML writes the page.
func (r *Report) WriteHTML(w io.Writer) error {
	var runs []shown
	for i, x := range r.Runs {
		s := shown{Run: x, ID: fmt.Sprintf("run-%d", i+1), Name: x.name(r), UsableShare: "–"}
		if n := x.series.n; n > 0 {
			checked := x.series.checked()
			s.UsableShare = percent(float64(x.series.class[Usable])/float64(n)) + checked
			var parts []string
			for c, k := range x.series.class {
				if k > 0 {
					parts = append(parts, fmt.Sprintf("%s %s", Class(c), percent(float64(k)/float64(n))))
				}
			}
			s.Classes = "Of its posteriors" + checked + ": " + strings.Join(parts, ", ") + "."
		}
		if x.Drawn {
			for _, p := range r.pictures(x) {
				svg, err := p.inline()
				if err != nil {
					return fmt.Errorf("drawing %s of %s: %w", p.file, s.Name, err)
				}
				//nolint:gosec // made by the plotting library, which escapes texts
				s.Pictures = append(s.Pictures, figure{template.HTML(svg), sentence(p.alt), p.note, p.wide, int(math.Ceil(p.w.Points()))})
			}
			s.Details, s.Made = x.details(), x.made()
		}
		runs = append(runs, s)
	}
	b := bufio.NewWriter(w)
	err := page.Execute(b, map[string]any{
		"Title": r.title(), "Style": template.CSS(pageStyle), "Report": r, "Runs": runs, //nolint:gosec // our own
		"Commands": r.commands(), "Command": commandLine(r.Command),
	})
	if err != nil {
		return err
	}
	return b.Flush()
}

// pictures draws a run.
func (r *Report) pictures(x *Run) []*picture {
	ground := r.grounds[x.Run.Map+"\x00"+x.Run.MapFingerprint]
	if ground != nil {
		with := *ground
		with.Places = nil
		for _, p := range x.Run.Places {
			with.Places = append(with.Places, track.Place{Name: p.Name, At: geo.FromDegrees(p.Lon, p.Lat)})
		}
		ground = &with
	}
	all := []*picture{x.overMap(ground), x.overTime(), x.scatter(), x.ranks()}
	for i, s := range x.Score.Sensors {
		if i < mostSensors {
			all = append(all, innovation(i, s))
		}
	}
	return slices.DeleteFunc(all, func(p *picture) bool { return p == nil })
}

// mostSensors is how many components of sensors are drawn.
const mostSensors = 6

// WritePictures writes each picture as SVG and PNG, and figures.json, to a folder.
func (r *Report) WritePictures(dir string) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	text, err := json.MarshalIndent(r, "", "  ")
	if err != nil {
		return err
	}
	if err := os.WriteFile(filepath.Join(dir, "figures.json"), append(text, '\n'), 0o644); err != nil {
		return err
	}
	for i, x := range r.Runs {
		if !x.Drawn {
			continue
		}
		for _, p := range r.pictures(x) {
			for _, format := range []string{"svg", "png"} {
				path := filepath.Join(dir, fmt.Sprintf("%d-%s-%s.%s", i+1, fileName(x.Run.Drive), p.file, format))
				if err := writePicture(path, p, format, x.name(r)); err != nil {
					return err
				}
			}
		}
	}
	return nil
}

func writePicture(path string, p *picture, format, title string) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer f.Close()
	b := bufio.NewWriter(f)
	if err := p.write(b, format, title+": "+p.alt); err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	if err := b.Flush(); err != nil {
		return err
	}
	return f.Close()
}

// fileName keeps letters, digits, - and _ of a name.
func fileName(s string) string {
	return strings.Map(func(c rune) rune {
		if c == '-' || c == '_' || c >= '0' && c <= '9' || c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' {
			return c
		}
		return '_'
	}, s)
}

func sentence(s string) string { return strings.ToUpper(s[:1]) + s[1:] + "." }

func (r *Report) title() string {
	n := len(r.Runs)
	if n == 1 {
		return "How well it was positioned: " + r.Runs[0].Run.Drive
	}
	return fmt.Sprintf("How well they were positioned: %d runs", n)
}

// change is a stretch of a comparison with its drive.
type change struct {
	Drive string
	compare.Stretch
}

// mostChanges of a comparison are shown.
const mostChanges = 20

func changes(c *compare.Comparison) []change {
	var out []change
	for _, p := range c.Pairs {
		for _, s := range p.Stretches {
			out = append(out, change{p.Name, s})
		}
	}
	weight := func(s change) float64 { return math.Abs(s.BM-s.AM) * s.ForS }
	slices.SortStableFunc(out, func(a, b change) int {
		switch d := weight(b) - weight(a); {
		case d > 0:
			return 1
		case d < 0:
			return -1
		}
		return 0
	})
	return out[:min(len(out), mostChanges)]
}
