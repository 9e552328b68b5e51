package exact

import (
	"bytes"
	"errors"
	"strings"
	"testing"
)

// TestSeal holds that an envelope gives back what is in it, and that nothing else
// passes: another kind, another layout, an earlier version, fewer bytes, a bit that
// flipped anywhere.
func TestSeal(t *testing.T) {
	value := []byte("five moorings")
	sealed := Seal("ABC2", 7, value)
	if got, err := Open("ABC2", 7, sealed, "ABC1"); err != nil || !bytes.Equal(got, value) {
		t.Fatalf("%q, %v", got, err)
	}
	if got, err := Open("ABC2", 7, Seal("ABC2", 7, nil)); err != nil || len(got) != 0 {
		t.Errorf("nothing: %q, %v", got, err)
	}
	for _, c := range []struct {
		name   string
		sealed []byte
		want   string
	}{
		{"another kind", Seal("ABD2", 7, value), "no checkpoint"},
		{"another layout", Seal("ABC2", 8, value), "another version"},
		{"an earlier version", Seal("ABC1", 7, value), "another version"},
		{"none", nil, "no checkpoint"},
		{"the head alone", sealed[:12], "no checkpoint"},
	} {
		_, err := Open("ABC2", 7, c.sealed, "ABC1")
		if err == nil || !strings.Contains(err.Error(), c.want) || errors.Is(err, ErrLayout) != strings.Contains(c.want, "version") {
			t.Errorf("%s: %v", c.name, err)
		}
	}
	for n := range sealed {
		if _, err := Open("ABC2", 7, sealed[:n]); err == nil || errors.Is(err, ErrLayout) {
			t.Errorf("%d bytes of %d: %v", n, len(sealed), err)
		}
	}
	for i := range 8 * len(sealed) {
		flipped := bytes.Clone(sealed)
		flipped[i/8] ^= 1 << (i % 8)
		if _, err := Open("ABC2", 7, flipped); err == nil || errors.Is(err, ErrLayout) {
			t.Errorf("bit %d: %v", i, err)
		}
	}
}
