package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"net"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/drivefile"
	"leadline/engine/study/score"
	"leadline/fixtures/scenes"
)

type demoOptions struct {
	dir, roads string
	andorra    bool
	seed       uint64
	turns      int
	asJSON     bool
	stay       string // address at which it goes on
}

func demoCommand() *cobra.Command {
	var o demoOptions
	c := &cobra.Command{
		Use:   "demo",
		Short: "Show the whole job on invented ground: a van, a craft, listening posts; or on a real map",
		Long: `Demo invents a town, a sea floor and roadside posts, and what moves there without
a satellite fix: a van that knows nothing of its start, a survey craft, a lorry
that posts hear. For each it compiles the map, replays the drive, scores it,
feeds it to a server on this machine, asks where the vehicle is, and compares
the posteriors of both. And it follows the traffic of a road, unnamed vehicles
past listening posts, and counts it. It prints every command that it runs, and needs nothing
but this program.

With --andorra it does the same with an invented van on OpenStreetMap's extract
of Andorra, which it takes out of a Go module and so needs Go; with --roads on a
road file of your own.

Exit status 1 says that a scene missed what it must reach, or that server and
replay differ.`,
		Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error { return demo(c, &o) },
	}
	f := c.Flags()
	f.StringVar(&o.dir, "out", "", "folder for maps, drives and pictures (default: a new one in the system's folder for temporary files)")
	f.Uint64Var(&o.seed, "seed", 1, "seed of everything that is invented")
	f.BoolVar(&o.andorra, "andorra", false, "drive over a real map, OpenStreetMap's extract of Andorra")
	f.StringVar(&o.roads, "roads", "", "drive over this GeoJSON or OpenStreetMap file")
	f.IntVar(&o.turns, "turns", 12, "turns of 45° or more that the drive over --andorra or --roads has")
	f.BoolVar(&o.asJSON, "json", false, "print what came out as JSON")
	f.StringVar(&o.stay, "stay", "", "go on afterwards: a server at this address (alone: "+defaultAddress+") has a page on which everything moves, until control-C")
	f.Lookup("stay").NoOptDefVal = defaultAddress
	return c
}

func (o *demoOptions) scenes(c *cobra.Command) ([]scenes.Scene, error) {
	if o.turns < 1 || o.turns > 200 {
		return nil, fmt.Errorf("--turns is %d: give 1 to 200", o.turns)
	}
	switch {
	case o.andorra && o.roads != "":
		return nil, errors.New("--andorra and --roads are two maps: give one of them")
	case o.andorra:
		s, err := scenes.Andorra(o.turns)
		if err != nil {
			return nil, fmt.Errorf("the extract of Andorra comes with a Go module: %w; install Go, or give a map of your own with --roads", err)
		}
		return []scenes.Scene{s}, nil
	case o.roads != "":
		if err := exists(o.roads); err != nil {
			return nil, fmt.Errorf("--roads: %w", err)
		}
		name, _, _ := strings.Cut(filepath.Base(o.roads), ".")
		return []scenes.Scene{scenes.Over(o.roads, name, o.turns)}, nil
	case c.Flags().Changed("turns"):
		return nil, errors.New("--turns is of a drive over --andorra or --roads: the invented scenes have routes of their own")
	}
	return scenes.Invented(), nil
}

const (
	inventedNote = "INVENTED: no place, vehicle or person is meant."
	caution      = "This is an aid and not certified. Defer to charts, controllers, local rules and licensed\n" +
		"navigators; a position is only as good as the map and the sensors behind it."
)

func demo(c *cobra.Command, o *demoOptions) error {
	if o.stay != "" {
		if o.asJSON {
			return errors.New("--stay goes on until it is ended, and --json says what came out: give one of them")
		}
		if err := checkAddress("--stay", o.stay); err != nil {
			return err
		}
		// What is taken is said now, and not after all scenes.
		l, err := net.Listen("tcp", o.stay)
		if err != nil {
			return fmt.Errorf("--stay %s: %w: give another address or port", o.stay, errors.Unwrap(err))
		}
		_ = l.Close()
	}
	list, err := o.scenes(c)
	if err != nil {
		return err
	}
	if o.dir == "" {
		o.dir, err = os.MkdirTemp("", "leadline-demo-")
	} else {
		err = os.MkdirAll(o.dir, 0o755)
	}
	if err != nil {
		return fmt.Errorf("--out: %w", err)
	}
	r := newRehearsal(c, o)
	r.say("Everything that moves here is %s Seed %d, folder %s\n", inventedNote, o.seed, o.dir)
	for i, s := range list {
		r.say("\n%d. %s\n   %s\n", i+1, s.Title, wrap(s.Story, 88, "   "))
		if err := r.scene(s); err != nil {
			return fmt.Errorf("%s: %w", s.Title, err)
		}
	}
	steps := len(list)
	if !o.andorra && o.roads == "" {
		if err := r.traffic(); err != nil {
			return fmt.Errorf("traffic: %w", err)
		}
		steps++
	}
	r.say("\n%d. The drives through a server on this machine\n", steps+1)
	if err := r.serve(); err != nil {
		return err
	}
	if err := r.end(); err != nil || o.stay == "" {
		return err
	}
	return r.stay(o.stay)
}

// scene writes a scene's files, compiles its map, and replays its drive.
func (r *rehearsal) scene(s scenes.Scene) error {
	began := time.Now()
	source := s.Map.Path
	if source == "" {
		source = r.path(s.Map.File)
		text, err := s.Map.Data(r.Seed)
		if err != nil {
			return err
		}
		if err := writeBytes(source, text); err != nil {
			return err
		}
	}
	out := &rehearsed{
		Title: s.Title, Story: s.Story, Drive: s.Vehicle, Map: r.path(s.Map.Name + mapSuffix(s.Map.Kind)), Gates: s.Gates,
		DriveFile: r.path(s.Vehicle + drivefile.Suffix),
	}
	if s.SuiteName != "" {
		out.Suite = r.path(s.SuiteName + ".yaml")
		if err := writeBytes(out.Suite, s.Suite); err != nil {
			return err
		}
	}
	out.missed = func(got *score.Score) []string { return s.Gates.Missed(got) }
	if err := r.compile(out, source, s.Map.Kind, s.Map.Args); err != nil {
		return err
	}
	m, err := openMap(out.Map)
	if err != nil {
		return err
	}
	d, err := s.Drive(r.Seed, m.Roads, m.Heights)
	m.Close()
	if err != nil {
		return fmt.Errorf("inventing the drive: %w", err)
	}
	if err := writeDrive(out.DriveFile, d); err != nil {
		return err
	}
	if err := r.replay(out); err != nil {
		return err
	}
	out.Seconds = time.Since(began).Seconds()
	r.Scenes = append(r.Scenes, out)
	return nil
}

// heardTraffic is what came out of the scene of traffic.
type heardTraffic struct {
	DriveFile string   `json:"drive_file"`
	Suite     string   `json:"suite"`
	Forward   [2]int   `json:"forward"`  // counted, and true
	Backward  [2]int   `json:"backward"` // the same
	Missed    []string `json:"missed"`
}

// countOff is how many vehicles a count may be off in the demonstration: one
// that is on the line as it ends.
const countOff = 1

// traffic invents a road that posts listen to, and follows what is on it.
func (r *rehearsal) traffic() error {
	s, err := scenes.Traffic(r.Seed)
	if err != nil {
		return err
	}
	r.say("\n%d. %s\n   %s\n", len(r.Scenes)+1, s.Title, wrap(s.Story, 88, "   "))
	out := &heardTraffic{DriveFile: r.path(s.Name + drivefile.Suffix), Suite: r.path(s.SuiteName + ".yaml"), Missed: []string{}}
	if err := writeBytes(out.Suite, s.Suite); err != nil {
		return err
	}
	if err := writeDrive(out.DriveFile, s.Drive); err != nil {
		return err
	}
	text, err := r.command("traffic", out.DriveFile, "--every", "0", "--json")
	if err != nil {
		return err
	}
	var last trafficPicture
	if err := json.Unmarshal(bytes.TrimSpace(text), &last); err != nil {
		return fmt.Errorf("what traffic printed: %w", err)
	}
	l := last.Lines[0]
	out.Forward, out.Backward = [2]int{l.Forward, s.Forward}, [2]int{l.Backward, s.Reverse}
	r.say("   counted   %d forward and %d backward; %d and %d there were\n", l.Forward, l.Backward, s.Forward, s.Reverse)
	r.say("   now       %d vehicles on the road\n", len(last.Vehicles))
	if max(l.Forward-s.Forward, s.Forward-l.Forward) > countOff || max(l.Backward-s.Reverse, s.Reverse-l.Backward) > countOff {
		out.Missed = append(out.Missed, fmt.Sprintf("a count is off by more than %d", countOff))
		r.say("   MISSED    %s\n", out.Missed[0])
	}
	r.Traffic = out
	return nil
}
