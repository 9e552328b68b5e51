package main

import (
	"bytes"
	"context"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"leadline/engine/study/replay"
)

// TestDemo runs the README's first command, and then the commands that it ends
// with, as they are printed.
func TestDemo(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "the demo's") // a name that a shell must have quoted
	var got struct {
		Note, Caution, Version, Dir string
		Seed                        uint64
		Passed                      bool
		Next                        []string
		Traffic                     struct {
			DriveFile         string `json:"drive_file"`
			Forward, Backward [2]int
		}
		Scenes []struct {
			Drive, Map, Results string
			MapPNG              string `json:"map_png"`
			TrackPNG            string `json:"track_png"`
			DriveFile           string `json:"drive_file"`
			Missed              []string
			Score               struct {
				Hash    string `json:"posterior_sha256"`
				Version string
			}
			Served struct {
				Hash string `json:"posterior_sha256"`
				Same bool   `json:"same_as_replay"`
			}
		}
	}
	readJSON(t, good(t, "demo", "--out", dir, "--json"), &got)
	if !got.Passed || got.Seed != 1 || got.Dir != dir || len(got.Scenes) != 4 ||
		!strings.Contains(got.Note, "INVENTED") || !strings.Contains(got.Caution, "not certified") {
		t.Errorf("the demo prints %+v", got)
	}
	if w := got.Traffic; w.Forward[1]+w.Backward[1] < 5 || w.DriveFile == "" {
		t.Errorf("traffic: %+v", w)
	}
	for _, s := range got.Scenes {
		if !strings.HasPrefix(s.Drive, "invented-") || len(s.Missed) > 0 {
			t.Errorf("%s missed %q", s.Drive, s.Missed)
		}
		if !s.Served.Same || s.Served.Hash != s.Score.Hash || len(s.Score.Hash) != 64 || s.Score.Version != got.Version {
			t.Errorf("%s: score %+v, served %+v", s.Drive, s.Score, s.Served)
		}
		needPNG(t, s.MapPNG, 4)
		needPNG(t, s.TrackPNG, 4)
		if d, err := readDrive(s.DriveFile); err != nil || len(replay.Truth(d)) == 0 {
			t.Errorf("the drive file: %v", err)
		}
	}
	if t.Failed() {
		return
	}
	address := freeAddress(t)
	t.Setenv("LEADLINE_LISTEN", address)
	t.Setenv("LEADLINE_SERVER", address)
	ctx, cancel := context.WithTimeout(t.Context(), patience)
	defer cancel()
	shell := func(line string) *exec.Cmd { return exec.CommandContext(ctx, "sh", "-c", "exec "+line) }
	var serveCmd, feedCmd *exec.Cmd
	for _, line := range got.Next {
		switch {
		case strings.Contains(line, " serve "):
			serveCmd = shell(line)
			log := &lockedBuffer{}
			serveCmd.Stdout = log
			inBackground(t, serveCmd)
			eventually(t, "the server listens", func() bool { return strings.Contains(log.String(), "listening on "+address) })
		case strings.Contains(line, " feed "):
			feedCmd = shell(line)
			inBackground(t, feedCmd)
		case strings.Contains(line, " where "): // while it is fed
			eventually(t, "the vehicle is somewhere", func() bool {
				out, err := shell(line).Output()
				return err == nil && bytes.Contains(out, []byte(got.Scenes[0].Drive+" is "))
			})
		default:
			if out, err := shell(line).CombinedOutput(); err != nil || len(out) == 0 {
				t.Errorf("%s: %v\n%s", line, err, out)
			}
		}
	}
	if serveCmd == nil || feedCmd == nil {
		t.Errorf("the demo ends with %q", got.Next)
	}
}

// inBackground starts a command, and kills it when the test ends.
func inBackground(t *testing.T, c *exec.Cmd) {
	t.Helper()
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = c.Process.Kill()
		_ = c.Wait()
	})
}

// TestDemoOverRoads drives over roads of one's own. One turn is too little to
// be located in a town, so that the demonstration fails, and says so.
func TestDemoOverRoads(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	harbour := townJSON(t, filepath.Join(dir, "harbour.json"), 5, 4)
	out, errs, status := leadline(t, "demo", "--out", dir, "--turns", "1", "--seed", "3", "--roads", harbour)
	if status != exitFailure || strings.Count(errs, "\n") != 1 || !strings.Contains(errs, "seed 3: invented-van: ") {
		t.Errorf("a drive of one turn: status %d, %q\n%s", status, errs, out)
	}
	for _, want := range []string{"INVENTED", "Seed 3", "located   never", "MISSED", "bit for bit", "not certified", "invented-van is ", "serve --map " + filepath.Join(dir, "harbour.roads.arrow")} {
		if !strings.Contains(out, want) {
			t.Errorf("the demo does not say %q:\n%s", want, out)
		}
	}
	needPNG(t, filepath.Join(dir, "harbour.png"), 4)
	needPNG(t, filepath.Join(dir, "given", "invented-van", "track.png"), 4)
}

// TestDemoAndorra runs the README's second command, some minutes of one core:
// with LEADLINE_LONG alone.
func TestDemoAndorra(t *testing.T) {
	if !long {
		return
	}
	dir := t.TempDir()
	var got struct {
		Passed bool
		Scenes []struct {
			TrackPNG string `json:"track_png"`
			Missed   []string
			Served   struct {
				Same bool `json:"same_as_replay"`
			}
		}
	}
	readJSON(t, good(t, "demo", "--andorra", "--out", dir, "--json"), &got)
	if !got.Passed || len(got.Scenes) != 1 || !got.Scenes[0].Served.Same {
		t.Fatalf("the demo prints %+v", got)
	}
	needPNG(t, got.Scenes[0].TrackPNG, 4)
}

func TestShellWord(t *testing.T) {
	for word, want := range map[string]string{"/tmp/a-b.png": "/tmp/a-b.png", "": "''", "a b": "'a b'", "it's": `'it'\''s'`, "$HOME": "'$HOME'", "*": "'*'", "ä": "'ä'"} {
		if got := shellWord(word); got != want {
			t.Errorf("%q becomes %s, want %s", word, got, want)
		}
	}
}

func TestWrap(t *testing.T) {
	if got := wrap("one two  three\nfour", 9, "  "); got != "one two\n  three\n  four" {
		t.Errorf("%q", got)
	}
}
