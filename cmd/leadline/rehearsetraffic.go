package main

import (
	"bytes"
	"encoding/json"
	"fmt"

	"leadline/engine/drivefile"
	"leadline/fixtures/scenes"
)

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
