package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/protobuf/encoding/protojson"

	"leadline/engine/drivefile"
	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/network/roadfile"
	leadlinev1 "leadline/proto/leadline/v1"
	"leadline/terrain/heightfile"
)

// rehearsal is a demonstration under way. It works by this program's own
// commands, and prints them. Its exported fields are what --json prints.
type rehearsal struct {
	Note    string        `json:"note"`
	Caution string        `json:"caution"`
	Version string        `json:"version"`
	Seed    uint64        `json:"seed"`
	Dir     string        `json:"dir"`
	Scenes  []*rehearsed  `json:"scenes"`
	Traffic *heardTraffic `json:"traffic,omitempty"`
	Next    []string      `json:"next"` // commands to try
	Passed  bool          `json:"passed"`

	c       *cobra.Command
	asJSON  bool
	program string // as the user can call it again
}

// rehearsed is what came out of a scene.
type rehearsed struct {
	Title     string       `json:"title"`
	Story     string       `json:"story"`
	Drive     string       `json:"drive"` // and vehicle
	Map       string       `json:"map"`
	Licence   string       `json:"licence"` // of the map
	MapImage  string       `json:"map_png"`
	DriveFile string       `json:"drive_file"`
	Suite     string       `json:"suite,omitempty"`
	Results   string       `json:"results"` // folder
	Picture   string       `json:"track_png"`
	Score     *score.Score `json:"score"`
	Served    served       `json:"served"`
	Gates     any          `json:"gates"`
	Missed    []string     `json:"missed"` // gates, and whether server and replay differ
	Seconds   float64      `json:"seconds"`

	missed func(*score.Score) []string
}

// served is what the server said of a drive.
type served struct {
	PosteriorSHA256 string          `json:"posterior_sha256"`
	Same            bool            `json:"same_as_replay"`
	Where           json.RawMessage `json:"where"`
}

func newRehearsal(c *cobra.Command, o *demoOptions) *rehearsal {
	return &rehearsal{
		Note: inventedNote, Caution: strings.ReplaceAll(caution, "\n", " "), Version: versionText(), Seed: o.seed, Dir: o.dir,
		Next: []string{}, c: c, asJSON: o.asJSON, program: programName(),
	}
}

func (r *rehearsal) path(name string) string { return filepath.Join(r.Dir, name) }

// say prints unless JSON is wanted.
func (r *rehearsal) say(format string, args ...any) {
	if !r.asJSON {
		fmt.Fprintf(r.c.OutOrStdout(), format, args...)
	}
}

// command prints and runs a command of this program, and returns what it
// prints.
func (r *rehearsal) command(args ...string) ([]byte, error) {
	r.say("   $ %s\n", r.line(args...))
	var out bytes.Buffer
	root := newRoot()
	root.SetArgs(args)
	root.SetOut(&out)
	root.SetErr(r.c.ErrOrStderr())
	err := root.Execute()
	return out.Bytes(), err
}

// line is a command as it is typed.
func (r *rehearsal) line(args ...string) string {
	words := []string{r.program}
	for _, a := range args {
		words = append(words, shellWord(a))
	}
	return strings.Join(words, " ")
}

func mapSuffix(kind string) string {
	if kind == "roads" {
		return roadfile.Suffix
	}
	return heightfile.Suffix
}

// compile makes the map and its picture, unless an earlier scene did.
func (r *rehearsal) compile(s *rehearsed, source, kind string, args []string) error {
	s.MapImage = r.path(mapName(s.Map) + ".png")
	for _, earlier := range r.Scenes {
		if earlier.Map == s.Map {
			s.Licence = earlier.Licence
			return nil
		}
	}
	if _, err := r.command(append([]string{"map", kind, source, "-o", s.Map}, args...)...); err != nil {
		return err
	}
	text, err := r.command("map", "check", s.Map, "--png", s.MapImage, "--json")
	if err != nil {
		return err
	}
	if err := json.Unmarshal(text, &struct {
		Licence *string `json:"licence"`
	}{&s.Licence}); err != nil {
		return fmt.Errorf("what map check printed: %w", err)
	}
	r.say("   licence   %s\n", s.Licence)
	return nil
}

// replay replays the drive and prints how good it is.
func (r *rehearsal) replay(s *rehearsed) error {
	text, err := r.command("replay", s.DriveFile, "--map", s.Map, "--out", r.Dir, "--diagnose", "never", "--json")
	if err != nil {
		return err
	}
	s.Score = &score.Score{}
	if err := json.Unmarshal(text, s.Score); err != nil {
		return fmt.Errorf("what replay printed: %w", err)
	}
	s.Results = r.path(filepath.Join(results.Given, s.Drive))
	s.Picture = filepath.Join(s.Results, "track.png")
	s.Missed = append([]string{}, s.missed(s.Score)...)
	r.say("   located   %s\n", locatedText(s.Score))
	if f := s.Score.Figures; f.P95M != nil {
		r.say("   error     50 %% within %.1f m, 95 %% within %.1f m; the 95 %% radius holds %.1f %% of the truths\n", *f.P50M, *f.P95M, 100**f.Coverage95)
	}
	for _, m := range s.Missed {
		r.say("   MISSED    %s\n", m)
	}
	r.say("   picture   %s\n", s.Picture)
	return nil
}

func locatedText(s *score.Score) string {
	switch {
	case s.LocatedAfterS == nil:
		return "never"
	case s.LocatedAfterM == nil:
		return fmt.Sprintf("after %.0f s", *s.LocatedAfterS)
	}
	return fmt.Sprintf("after %.0f s and %.0f m", *s.LocatedAfterS, *s.LocatedAfterM)
}

// serveArgs are the arguments with which `serve` offers all scenes.
func (r *rehearsal) serveArgs() []string {
	args := []string{"serve"}
	given := map[string]bool{}
	for _, s := range r.Scenes {
		if !given[s.Map] {
			args = append(args, "--map", s.Map)
		}
		given[s.Map] = true
		if s.Suite != "" {
			args = append(args, "--suite", s.Suite)
		}
	}
	if r.Traffic != nil {
		args = append(args, "--suite", r.Traffic.Suite)
	}
	return args
}

// serve feeds each drive to a server and compares its posteriors with those of
// the replay.
func (r *rehearsal) serve() (err error) {
	srv, err := r.start("127.0.0.1:0")
	if err != nil {
		return err
	}
	defer func() {
		_, stopped := srv.stop(5 * time.Second)
		err = errors.Join(err, stopped)
	}()
	r.say("   $ %s   # here within this program, at a free port\n", r.line(append(r.serveArgs(), "--listen", srv.address)...))
	for _, s := range r.Scenes {
		began := time.Now()
		text, err := r.command("feed", s.DriveFile, "--to", srv.address, "--json")
		if err != nil {
			return err
		}
		var closed leadlinev1.Closed
		if err := protojson.Unmarshal(text, &closed); err != nil {
			return fmt.Errorf("what feed printed: %w", err)
		}
		if text, err = r.command("where", s.Drive, "--at", srv.address, "--json"); err != nil {
			return err
		}
		var answer leadlinev1.WhereAnswer
		if err := protojson.Unmarshal(text, &answer); err != nil {
			return fmt.Errorf("what where printed: %w", err)
		}
		p := answer.GetPosterior()
		s.Served = served{closed.GetPosteriorSha256(), closed.GetPosteriorSha256() == s.Score.PosteriorSHA256, json.RawMessage(text)}
		r.say("   %s is %s at lon %.6f, lat %.6f, 95 %% within %.1f m\n", s.Drive, words(p.GetStatus().String(), "STATUS_"),
			p.GetMean().GetLon(), p.GetMean().GetLat(), p.GetRadii().GetRadius95M())
		if s.Served.Same {
			r.say("   its %d posteriors are those of the replay, bit for bit: %s\n", closed.GetPosteriors(), closed.GetPosteriorSha256())
		} else {
			missed := fmt.Sprintf("the server's posteriors have the hash %s, the replay's %s: they must be equal; report this with the drive file",
				closed.GetPosteriorSha256(), s.Score.PosteriorSHA256)
			r.say("   MISSED    %s\n", missed)
			s.Missed = append(s.Missed, missed)
		}
		s.Seconds += time.Since(began).Seconds()
	}
	return nil
}

// end prints what to do next, and fails if a scene did.
func (r *rehearsal) end() error {
	first, last := r.Scenes[0], r.Scenes[len(r.Scenes)-1]
	r.Next = []string{
		r.line("replay", last.DriveFile, "--map", last.Map),
		r.line(r.serveArgs()...),
		r.line("feed", first.DriveFile, "--speed", "10"),
		r.line("where", first.Drive, "--region", "95"),
		r.line("suite", "truck"),
	}
	r.say("\nLook at the pictures:\n")
	for _, s := range r.Scenes {
		r.say("   %s\n", s.Picture)
	}
	r.say("Try next (serve in one terminal, feed and where in another; stop it with Ctrl-C):\n")
	for _, line := range r.Next {
		r.say("   %s\n", line)
	}
	r.say("\nCaution: %s\n", caution)
	var missed []string
	for _, s := range r.Scenes {
		for _, m := range s.Missed {
			missed = append(missed, s.Drive+": "+m)
		}
	}
	if r.Traffic != nil {
		missed = append(missed, r.Traffic.Missed...)
	}
	r.Passed = len(missed) == 0
	if r.asJSON {
		if err := printJSON(r.c.OutOrStdout(), r); err != nil {
			return err
		}
	}
	if !r.Passed {
		return failure{fmt.Errorf("seed %d: %s", r.Seed, strings.Join(missed, "; "))}
	}
	return nil
}

// writeBytes writes a file whole.
func writeBytes(path string, text []byte) error {
	return writeFile(path, func(w io.Writer) error {
		_, err := w.Write(text)
		return err
	})
}

// writeDrive writes a drive file.
func writeDrive(path string, d *drivefile.Drive) error {
	return writeFile(path, func(f io.Writer) error { return writeRecords(f, d) })
}

// writeRecords writes a drive.
func writeRecords(f io.Writer, d *drivefile.Drive) error {
	out := drivefile.NewWriter(f)
	if err := out.Write(&drivefile.Record{Time: d.Time, Header: &d.Header}); err != nil {
		return err
	}
	for _, ev := range d.Events {
		if err := out.WriteEvent(ev); err != nil {
			return err
		}
	}
	for _, t := range d.Truths {
		if err := out.Write(&drivefile.Record{Time: t.Time, Truth: &t.Truth}); err != nil {
			return err
		}
	}
	return nil
}
