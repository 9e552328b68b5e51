package report

import (
	"strconv"
	"strings"
	"testing"

	"gonum.org/v1/plot/vg"
)

// TestKeyFits: whatever the longest entry of a key beside a chart is, the picture has
// room for it in a font that is a seventh wider than the one it is measured in; what is
// outside of a picture is cut off.
func TestKeyFits(t *testing.T) {
	for _, n := range []int{3, 45, 70} {
		p := newPlot("x", "y")
		name := strings.Repeat("m", n)
		p.name("short", lines{})
		p.name(name, lines{})
		pic := &picture{file: "f", alt: "a", chart: p, w: pageW, h: rowH, wide: true}
		text, err := pic.inline()
		if err != nil {
			t.Fatal(err)
		}
		before, _, found := strings.Cut(text, ">"+name+"<")
		if !found {
			t.Fatalf("the key has no entry of %d letters", n)
		}
		_, x, _ := strings.Cut(before[strings.LastIndex(before, "<text"):], ` x="`)
		x, _, _ = strings.Cut(x, `"`)
		at, err := strconv.ParseFloat(x, 64)
		if err != nil {
			t.Fatal(err)
		}
		if width := p.key.TextStyle.Width(name); vg.Length(at)+width*8/7 > pageW {
			t.Errorf("an entry of %d letters, %v wide, begins at %v of %v", n, width, at, pageW)
		}
	}
}
