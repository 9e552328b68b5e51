package leadlinev1_test

import (
	"os"
	"regexp"
	"strings"
	"testing"
)

// TestFieldsAreExplained: each field of what goes in and of what comes out has a
// comment of its own, which says unit and frame where the convention of
// place.proto does not. The kinds, whose messages have theirs, go without.
func TestFieldsAreExplained(t *testing.T) {
	field := regexp.MustCompile(`^ +(optional |repeated )?[\w.]+ (\w+) = \d+;`)
	for file, least := range map[string]int{"posterior.proto": 90, "measurement.proto": 50, "place.proto": 7} {
		text, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		lines, explained := strings.Split(string(text), "\n"), 0
		kinds := false
		for i, line := range lines {
			kinds = strings.HasPrefix(line, "  oneof kind {") || kinds && line != "  }"
			m := field.FindStringSubmatch(line)
			switch {
			case m == nil || kinds:
			case strings.HasPrefix(strings.TrimSpace(lines[i-1]), "//"):
				explained++
			default:
				t.Errorf("%s:%d: %s has no comment", file, i+1, m[2])
			}
		}
		if explained < least {
			t.Errorf("%s: only %d fields were seen", file, explained)
		}
	}
}
