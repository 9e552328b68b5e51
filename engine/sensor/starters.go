package sensor

import (
	"embed"
	"io/fs"
	"strings"
)

//go:embed suites/*.yaml
var starters embed.FS

// StarterNames lists the suites that come with the program, in order of name.
func StarterNames() []string {
	entries, err := fs.ReadDir(starters, "suites")
	if err != nil {
		panic("sensor: no starter suites: " + err.Error())
	}
	names := make([]string, len(entries))
	for i, e := range entries {
		names[i] = strings.TrimSuffix(e.Name(), ".yaml")
	}
	return names
}

// StarterText returns a starter suite as it is written, comments included,
// for a user to copy and change.
func StarterText(name string) ([]byte, bool) {
	text, err := starters.ReadFile("suites/" + name + ".yaml")
	return text, err == nil
}
