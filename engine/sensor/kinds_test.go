package sensor

import (
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// TestKindsSayTheirSource: each kind has a file of its own, whose comments say
// by which formula it moves or weighs a belief, and where that is from.
func TestKindsSayTheirSource(t *testing.T) {
	files, err := filepath.Glob("*.go")
	if err != nil {
		t.Fatal(err)
	}
	of := regexp.MustCompile(`(?m)^func \(\w+\) Kind\(\) string \{ return Kind`)
	var kinds []string
	for _, f := range files {
		text, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		n := len(of.FindAll(text, -1))
		if n == 0 {
			continue
		}
		kinds = append(kinds, f)
		comments := ""
		for line := range strings.Lines(string(text)) {
			if strings.HasPrefix(line, "//") {
				comments += line
			}
		}
		if n > 1 || !strings.Contains(comments, "Source: ") || !strings.Contains(comments, " = ") {
			t.Errorf("%s: %d kinds; source said: %v, formula: %v", f, n, strings.Contains(comments, "Source: "), strings.Contains(comments, " = "))
		}
	}
	if len(kinds) != len(Kinds()) {
		t.Errorf("%d files for %d kinds: %v", len(kinds), len(Kinds()), kinds)
	}
}
