package roadfile

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestUnknownValues: a value of oneway that means nothing is counted and said
// with the feature that had it first; those that are known are not.
func TestUnknownValues(t *testing.T) {
	road := func(id, oneway, y string) string {
		return `{"type":"Feature","id":"` + id + `","properties":{"highway":"residential","oneway":"` + oneway + `"},"geometry":{"type":"LineString","coordinates":[[0,` + y + `],[0.01,` + y + `]]}}`
	}
	path := filepath.Join(t.TempDir(), "town.geojson")
	text := `{"type":"FeatureCollection","features":[` + strings.Join([]string{road("a", "yes", "0"), road("b", "maybe", "0.1"), road("c", "maybe", "0.2"), road("d", "no", "0.3")}, ",") + `]}`
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	_, notes, err := Read(path, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if len(notes.Unknown) != 1 || notes.Unknown[0].Count != 2 || notes.Unknown[0].Value != "maybe" || !strings.Contains(notes.Unknown[0].First, "b") {
		t.Errorf("%+v", notes.Unknown)
	}
	if !strings.Contains(notes.String(), `oneway="maybe" means nothing here`) {
		t.Error(notes)
	}
}
