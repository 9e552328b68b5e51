package main

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// TestPagesPrograms runs the programs of docs/programs.md as they stand, but for the server's address.
func TestPagesPrograms(t *testing.T) {
	t.Parallel()
	page := readPage(t, "docs/programs.md")
	srv := serveMaps(t, "--map", quillmere(t))
	good(t, "feed", checkout+"/docs/first.drive.jsonl", "--to", srv.address)

	for language, run := range map[string]func(t *testing.T, code string) *program{
		"go": func(t *testing.T, code string) *program {
			// As where the page says that it should lie: ./... passes over it.
			if err := os.MkdirAll(checkout+"/build", 0o755); err != nil {
				t.Fatal(err)
			}
			dir, err := os.MkdirTemp(checkout+"/build", "_readme-")
			if err != nil {
				t.Fatal(err)
			}
			t.Cleanup(func() { _ = os.RemoveAll(dir) })
			return start(t, "go", "run", writeText(t, filepath.Join(dir, "main.go"), code))
		},
		"python": func(t *testing.T, code string) *program { return start(t, python(t), "-c", code) },
		"sh": func(t *testing.T, code string) *program {
			if _, err := exec.LookPath("curl"); err != nil {
				t.Skip("curl is not installed")
			}
			return start(t, "sh", "-c", code)
		},
		"js": func(t *testing.T, code string) *program {
			code = strings.ReplaceAll(code, "./node.js", absolute(t, webClient+"/node.js"))
			return start(t, node(t), "--input-type=module", "-e", code)
		},
	} {
		t.Run(language, func(t *testing.T) {
			t.Parallel()
			blocks := strings.Split(page, "\n```"+language+"\n")
			if len(blocks) != 2 {
				t.Fatalf("docs/programs.md has %d programs in %s there, want 1", len(blocks)-1, language)
			}
			code, _, _ := strings.Cut(blocks[1], "```")
			if !strings.Contains(code, defaultAddress) {
				t.Fatalf("the program in %s calls no server:\n%s", language, code)
			}
			text := run(t, strings.ReplaceAll(code, defaultAddress, srv.address)).end(t)
			if !strings.Contains(text, "-29.998") { // where the van is, to 80 m
				t.Errorf("the program in %s prints %s", language, text)
			}
		})
	}
}

// TestPagesSighting posts the sighting of the pages as it stands, but for the server's
// address, of a vehicle whose drive goes on: it is entered; on a road that the map does
// not have it is refused with an answer all the same.
func TestPagesSighting(t *testing.T) {
	t.Parallel()
	if _, err := exec.LookPath("curl"); err != nil {
		t.Skip("curl is not installed")
	}
	var code string
	for _, block := range strings.Split(readPages(t), "\n```sh\n") {
		if block, _, _ := strings.Cut(block, "```"); strings.Contains(block, "/AddSighting") {
			code = block
		}
	}
	if code == "" {
		t.Fatal("the pages have no request of AddSighting")
	}
	srv := serveMaps(t, "--map", quillmere(t))
	leaveFirst(t, srv, "van-1")
	post := func(road string) (text string) {
		t.Helper()
		code := strings.ReplaceAll(strings.ReplaceAll(code, defaultAddress, srv.address), "Market Street", road)
		return start(t, "sh", "-c", strings.Replace(code, "curl -s", "curl -s -w ' status %{http_code}'", 1)).end(t)
	}
	if text := post("Market Street"); !strings.Contains(text, " status 200") || !strings.Contains(text, `"after"`) || strings.Contains(text, `"reason"`) {
		t.Errorf("it was not entered: %s", text)
	}
	if text := post("a road that is nowhere"); !strings.Contains(text, " status 200") || !strings.Contains(text, `"refusal"`) || !strings.Contains(text, "a road that is nowhere") || !strings.Contains(text, `"detail"`) {
		t.Errorf("it was not refused: %s", text)
	}
}
