package sweep

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"path"
	"slices"
	"strconv"
	"strings"

	"leadline/engine/sensor"
	"leadline/engine/study/results"
)

// Change sets one key: of the suite, or of the session (sessionKeys).
type Change struct{ Key, Value string }

func (c Change) String() string { return c.Key + "=" + c.Value }

// Setting is what is changed in a run.
type Setting struct {
	Name    string
	Changes []Change
}

// given is the setting in which nothing is.
var given = Setting{Name: results.Given}

// keyMaxCells is the one key of a session; all others are the suite's.
const keyMaxCells = "session.max_cells"

// Bounds of a sweep.
const (
	maxSettings = 10_000
	maxName     = 120 // bytes of a folder's name
)

// ParseChange reads KEY=VALUE.
func ParseChange(text string) (Change, error) {
	key, value, ok := strings.Cut(text, "=")
	key, value = strings.TrimSpace(key), strings.TrimSpace(value)
	if !ok || key == "" || value == "" {
		return Change{}, fmt.Errorf("%.80q is no KEY=VALUE: give one such as vehicle.corner_sigma_m=3", text)
	}
	return Change{key, value}, nil
}

// Combine makes settings of changes: one that has them all; where a key is there
// several times, one for each combination of values, in the order given.
func Combine(changes []Change) ([]Setting, error) {
	var keys []string
	values := map[string][]string{}
	for _, c := range changes {
		if len(values[c.Key]) == 0 {
			keys = append(keys, c.Key)
		}
		if slices.Contains(values[c.Key], c.Value) {
			return nil, fmt.Errorf("%s is there twice", c)
		}
		values[c.Key] = append(values[c.Key], c.Value)
	}
	out := []Setting{{}}
	for _, k := range keys {
		if len(out)*len(values[k]) > maxSettings {
			return nil, fmt.Errorf("these are more than %d settings: vary less at once", maxSettings)
		}
		var next []Setting
		for _, s := range out {
			for _, v := range values[k] {
				next = append(next, Setting{Changes: append(slices.Clip(s.Changes), Change{k, v})})
			}
		}
		out = next
	}
	for i := range out {
		out[i].Name = nameOf(out[i].Changes)
	}
	return out, nil
}

// nameOf is a setting's folder: its changes as they are, as far as folders may be
// called that; a long one ends in a hash of the whole.
func nameOf(changes []Change) string {
	if len(changes) == 0 {
		return results.Given
	}
	var texts []string
	for _, c := range changes {
		texts = append(texts, c.String())
	}
	whole := strings.Join(texts, ",")
	name := plain(whole)
	if name == whole && len(name) <= maxName && name[0] != '.' {
		return name
	}
	sum := sha256.Sum256([]byte(whole))
	return strings.TrimLeft(name[:min(len(name), maxName-9)], ".") + "-" + hex.EncodeToString(sum[:4])
}

// plain puts _ for what a folder may not be called everywhere.
func plain(name string) string {
	return strings.Map(func(r rune) rune {
		if r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || strings.ContainsRune("._=-+,", r) {
			return r
		}
		return '_'
	}, name)
}

// apply changes a suite, which may be nil, and the session's options. Neither is
// touched.
func (s *Setting) apply(suite *sensor.Suite, maxCells int) (*sensor.Suite, int, error) {
	for _, c := range s.Changes {
		if c.Key == keyMaxCells {
			n, err := strconv.Atoi(c.Value)
			if err != nil || n < 1 {
				return nil, 0, fmt.Errorf("%s: give a whole number, 1 or more", c)
			}
			maxCells = n
			continue
		}
		var err error
		if suite, err = suite.Set(c.Key, c.Value); err != nil {
			return nil, 0, err
		}
	}
	return suite, maxCells, nil
}

// Plan is what a settings file says.
type Plan struct {
	Settings []Setting
	HoldOut  []string // patterns of drives' names
}

// planFile is a settings file as it is written.
type planFile struct {
	// Vary has every combination of its values run.
	Vary map[string][]any `yaml:"vary"`
	// Settings are run as they are.
	Settings []struct {
		Name string         `yaml:"name"`
		Set  map[string]any `yaml:"set"`
	} `yaml:"settings"`
	HoldOut []string `yaml:"hold_out"`
}

// ParsePlan reads a settings file; name is used in errors only. Keys go by their
// names, since a YAML mapping has no order.
func ParsePlan(name string, text []byte) (*Plan, error) {
	var f planFile
	y, err := sensor.ParseYAML("settings", name, text, &f, "the keys are vary, settings and hold_out")
	if err != nil {
		return nil, err
	}
	var found []sensor.Finding
	bad := func(at, format string, args ...any) {
		found = append(found, sensor.Finding{Path: at, Text: fmt.Sprintf(format, args...)})
	}
	plan := &Plan{HoldOut: f.HoldOut}
	var changes []Change
	for _, key := range sortedKeys(f.Vary) {
		if len(f.Vary[key]) == 0 {
			bad("vary", "%s has no values: give a list", key)
		}
		for _, v := range f.Vary[key] {
			value, ok := scalar(v)
			if !ok {
				bad("vary", "%s: give numbers or texts", key)
			}
			changes = append(changes, Change{key, value})
		}
	}
	if len(changes) > 0 && len(found) == 0 {
		if plan.Settings, err = Combine(changes); err != nil {
			bad("vary", "%v", err)
		}
	}
	for i, s := range f.Settings {
		at := fmt.Sprintf("settings[%d]", i)
		var out Setting
		for _, key := range sortedKeys(s.Set) {
			value, ok := scalar(s.Set[key])
			if !ok {
				bad(at+".set", "%s: give a number or a text", key)
			}
			out.Changes = append(out.Changes, Change{key, value})
		}
		out.Name = s.Name
		switch {
		case s.Name == "":
			out.Name = nameOf(out.Changes)
		case plain(s.Name) != s.Name || len(s.Name) > maxName || s.Name[0] == '.':
			bad(at+".name", "%.80q cannot name a folder: use letters, digits, - and _, and at most %d of them", s.Name, maxName)
		case s.Name == results.Given && len(out.Changes) > 0:
			bad(at+".name", "%q is the one in which nothing is set", s.Name)
		}
		plan.Settings = append(plan.Settings, out)
	}
	seen := map[string]bool{}
	for _, s := range plan.Settings {
		if seen[s.Name] {
			bad("settings", "the setting %s is there twice", s.Name)
		}
		seen[s.Name] = true
	}
	if len(plan.Settings) > maxSettings {
		bad("settings", "these are more than %d settings: vary less at once", maxSettings)
	}
	for i, p := range f.HoldOut {
		if err := CheckPattern(p); err != nil {
			bad(fmt.Sprintf("hold_out[%d]", i), "%v", err)
		}
	}
	if err := y.Error(found); err != nil {
		return nil, err
	}
	return plan, nil
}

// CheckPattern reports a pattern that no drive's name could match.
func CheckPattern(pattern string) error {
	if _, err := path.Match(pattern, ""); err != nil || pattern == "" {
		return fmt.Errorf("%.80q is no pattern of drives: give a name, with * for any part of it", pattern)
	}
	return nil
}

// matches reports whether a drive's name is one of the patterns.
func matches(patterns []string, name string) bool {
	return slices.ContainsFunc(patterns, func(p string) bool {
		ok, err := path.Match(p, name)
		return err == nil && ok
	})
}

func sortedKeys[V any](m map[string]V) []string {
	out := make([]string, 0, len(m))
	for k := range m {
		out = append(out, k)
	}
	slices.Sort(out)
	return out
}

// scalar is a value as it would be on a command line.
func scalar(v any) (string, bool) {
	switch v := v.(type) {
	case string:
		return v, v != ""
	case bool:
		return strconv.FormatBool(v), true
	case int, int64, uint64:
		return fmt.Sprint(v), true
	case float64:
		return strconv.FormatFloat(v, 'g', -1, 64), true
	}
	return "", false
}
