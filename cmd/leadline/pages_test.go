package main

import (
	"os"
	"path/filepath"
	"reflect"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/spf13/cobra"
	"google.golang.org/protobuf/reflect/protoreflect"

	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

const checkout = "../.."

func readPage(t *testing.T, name string) string {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(checkout, name))
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

// readPages is what the README and the pages of docs say to users, one after the
// other.
func readPages(t *testing.T) string {
	t.Helper()
	out := readPage(t, "README.md")
	names, err := filepath.Glob(filepath.Join(checkout, "docs", "*.md"))
	if err != nil || len(names) == 0 {
		t.Fatalf("no pages: %v", err)
	}
	for _, name := range names {
		out += "\n" + readPage(t, filepath.Join("docs", filepath.Base(name)))
	}
	return out
}

// code matches what a page sets as code, in a line or a block.
var code = regexp.MustCompile("(?s)```.*?```|`[^`\n]+`")

// words are the words of a page's code: flags, keys, names.
func codeWords(page string) map[string]bool {
	out := map[string]bool{}
	for _, c := range code.FindAllString(page, -1) {
		for _, w := range regexp.MustCompile(`[A-Za-z0-9_-]+`).FindAllString(c, -1) {
			out[w] = true
		}
	}
	return out
}

// chapter is a page's part under a heading of the second level.
func chapter(t *testing.T, page, heading string) string {
	t.Helper()
	_, rest, ok := strings.Cut(page, "\n## "+heading+"\n")
	if !ok {
		t.Fatalf("there is no chapter %q", heading)
	}
	body, _, _ := strings.Cut(rest, "\n## ")
	return body
}

func wantWords(t *testing.T, page, what string, names []string) {
	t.Helper()
	if len(names) == 0 {
		t.Fatalf("no %s to look for", what)
	}
	words := codeWords(page)
	for _, n := range names {
		if !words[n] {
			t.Errorf("the pages do not name the %s `%s`", what, n)
		}
	}
}

// commands walks the program's commands, the root included.
func commands(c *cobra.Command, f func(*cobra.Command)) {
	f(c)
	for _, sub := range c.Commands() {
		commands(sub, f)
	}
}

// flagNames lists the flags of a command by what its help says.
func flagNames(c *cobra.Command) (names []string) {
	for _, m := range regexp.MustCompile(`(?m)^ +(?:-[a-z], )?--([a-z0-9-]+)`).FindAllStringSubmatch(c.Flags().FlagUsages(), -1) {
		names = append(names, m[1])
	}
	return names
}

// TestPagesCommands: every command and flag is in docs/commands.md under its own
// command's heading, every flag that a page names exists, and the README's table has
// every command.
func TestPagesCommands(t *testing.T) {
	sections := map[string]string{}
	for _, s := range strings.Split(readPage(t, "docs/commands.md"), "\n## ")[1:] {
		heading, body, _ := strings.Cut(s, "\n")
		for _, name := range regexp.MustCompile("`leadline ([^`]*)`").FindAllStringSubmatch(heading, -1) {
			// The name without arguments: lower-case words up to the first other.
			var plain []string
			for _, w := range strings.Fields(name[1]) {
				if !regexp.MustCompile(`^[a-z]+$`).MatchString(w) {
					break
				}
				plain = append(plain, w)
			}
			sections[strings.Join(plain, " ")] = heading + "\n" + body
		}
	}
	table := chapter(t, readPage(t, "README.md"), "Where to read on")
	anyFlag := map[string]bool{"help": true, "version": true, "config": true}
	commands(newRoot(), func(c *cobra.Command) {
		for _, f := range flagNames(c) {
			anyFlag[f] = true
		}
		if c.HasSubCommands() || c.Name() == "help" {
			return
		}
		name := strings.TrimPrefix(c.CommandPath(), "leadline ")
		section, ok := sections[name]
		if !ok {
			t.Errorf("docs/commands.md has no heading for `leadline %s`", name)
			return
		}
		delete(sections, name)
		if !strings.Contains(table, "`"+name+"`") {
			t.Errorf("README.md's table of commands has no `%s`", name)
		}
		for _, f := range flagNames(c) {
			if f != "help" && !strings.Contains(section, "`--"+f+"`") && !strings.Contains(section, "`--"+f+" ") {
				t.Errorf("docs/commands.md does not say under `leadline %s` what --%s does", name, f)
			}
		}
	})
	for name := range sections {
		t.Errorf("docs/commands.md describes `leadline %s`, which does not exist", name)
	}
	for _, c := range code.FindAllString(readPages(t), -1) {
		for _, m := range regexp.MustCompile(`(?:^|[\s\x60])--([a-z][a-z0-9-]*)`).FindAllStringSubmatch(c, -1) {
			if !anyFlag[m[1]] {
				t.Errorf("a page names --%s, which no command has", m[1])
			}
		}
	}
}

// fieldNames lists the fields of a message and of those inside it.
func fieldNames(m protoreflect.MessageDescriptor, seen map[protoreflect.FullName]bool) (names []string) {
	if seen[m.FullName()] || !strings.HasPrefix(string(m.FullName()), "leadline.") {
		return nil
	}
	seen[m.FullName()] = true
	for i := range m.Fields().Len() {
		f := m.Fields().Get(i)
		names = append(names, string(f.Name()))
		if f.Message() != nil {
			names = append(names, fieldNames(f.Message(), seen)...)
		}
	}
	return names
}

// keys lists the names that a tag gives to the fields of a struct, and of
// structs inside it.
func keys(typ reflect.Type, tag string) (names []string) {
	switch typ.Kind() {
	case reflect.Pointer, reflect.Slice:
		return keys(typ.Elem(), tag)
	case reflect.Struct:
	default:
		return nil
	}
	for i := range typ.NumField() {
		f := typ.Field(i)
		if name, _, _ := strings.Cut(f.Tag.Get(tag), ","); name != "" {
			names = append(names, name)
		}
		names = append(names, keys(f.Type, tag)...)
	}
	return names
}

// TestPagesNames: the reference names every kind of measurement with its
// fields, every field of a drive record, a posterior and a score, and every key of
// a suite, each in its chapter, every status, every reason and every starter.
func TestPagesNames(t *testing.T) {
	page := readPages(t)
	seen := map[protoreflect.FullName]bool{}
	wantWords(t, chapter(t, readPage(t, "docs/drives.md"), "Drive files"), "field of a drive file", fieldNames((&leadlinev1.DriveRecord{}).ProtoReflect().Descriptor(), seen))
	clear(seen)
	wantWords(t, chapter(t, readPage(t, "docs/results.md"), "The posterior"), "field of a posterior", fieldNames((&leadlinev1.Posterior{}).ProtoReflect().Descriptor(), seen))
	wantWords(t, page, "kind of measurement", sensor.Kinds())
	wantWords(t, readPage(t, "docs/suites.md"), "key of a suite", keys(reflect.TypeFor[sensor.Suite](), "yaml"))
	wantWords(t, page, "nuisance", sensor.NuisanceNames())
	wantWords(t, page, "starter suite", sensor.StarterNames())
	for _, s := range []summary.Status{summary.Contradicted, summary.OffMap, summary.Located, summary.Ambiguous, summary.Unsure} {
		if !strings.Contains(page, "`"+s.String()+"`:") {
			t.Errorf("the pages do not explain the status `%s`", s)
		}
	}
	for _, r := range []session.Reason{session.Unusable, session.TooLate, session.TooEarly, session.Conflicting, session.WrongSpace, session.Overfull} {
		if !strings.Contains(strings.Join(strings.Fields(page), " "), "`"+string(r)+"`") {
			t.Errorf("the pages do not explain the reason `%s`", r)
		}
	}
	for _, r := range leadlinev1.Reason_name {
		if r != "REASON_UNSPECIFIED" {
			wantWords(t, page, "reason of the API", []string{strings.TrimPrefix(r, "REASON_")})
		}
	}
	var figures []string
	for _, k := range keys(reflect.TypeFor[score.Score](), "json") {
		figures = append(figures, strings.TrimSuffix(k, "_all"))
	}
	wantWords(t, page, "field of score.json", figures)
	wantWords(t, readPage(t, "docs/results.md"), "field of findings.json", keys(reflect.TypeFor[results.Findings](), "json"))
}

// TestPagesDefaults: the defaults that the pages state are those of a suite
// without any figure.
func TestPagesDefaults(t *testing.T) {
	page := readPages(t)
	roads, plane := sensor.Default(1).Vehicle, sensor.Default(2).Vehicle
	number := func(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }
	for _, c := range []struct{ key, says string }{
		{"alert_limit_m", number(roads.AlertLimitM) + " on roads, " + number(plane.AlertLimitM) + " on height maps |"},
		{"false_alarm_h", "| " + number(roads.FalseAlarmH) + " |"},
		{"late_window_s", "| " + number(roads.LateWindowS) + " |"},
		{"hold_s", "| " + number(roads.HoldS) + " |"},
		{"lateral_sigma_m", "| " + number(roads.LateralSigmaM) + "; roads only |"},
		{"stretch_m_per_sqrt_m", "| " + number(roads.StretchMPerSqrtM) + "; roads only |"},
		{"corner_sigma_m", "| " + number(roads.CornerSigmaM) + "; roads only |"},
		{"keeps_right_m", "| " + number(roads.KeepsRightM) + ": nothing is known of it; roads only |"},
		{"max_speed_mps", "| " + number(roads.MaxSpeedMPS) + ", " + number(roads.MaxAccelMPS2) + ", " + number(roads.MaxTurnDPS) + " |"},
		{"integrity_risk", "| 1e-4 on roads, 1e-7 on a plane |"},
	} {
		if !regexp.MustCompile("(?m)^\\| `" + c.key + "`.*" + regexp.QuoteMeta(c.says) + "$").MatchString(page) {
			t.Errorf("the pages do not say of %s: %s", c.key, c.says)
		}
	}
	if roads.IntegrityRisk != 1e-4 || plane.IntegrityRisk != 1e-7 {
		t.Errorf("the integrity risk is %v and %v unless said; the pages say 1e-4 and 1e-7", roads.IntegrityRisk, plane.IntegrityRisk)
	}
}

// TestPagesExamples: the drive in the README, the suite of docs/suites.md, and the drive
// that its commands replay, are valid.
func TestPagesExamples(t *testing.T) {
	block := func(name, language string) string {
		_, rest, ok := strings.Cut(readPage(t, name), "\n```"+language+"\n")
		if !ok {
			t.Fatalf("%s has no %s example", name, language)
		}
		text, _, _ := strings.Cut(rest, "```")
		return text
	}
	d, err := drivefile.ReadAll(strings.NewReader(block("README.md", "json")), "README.md")
	if err != nil {
		t.Fatal(err)
	}
	suite := sensor.Default(1)
	for _, ev := range d.Events {
		if _, err := suite.Prepare(ev); err != nil {
			t.Error(err)
		}
	}
	if _, err := sensor.ParseSuite("docs/suites.md", []byte(block("docs/suites.md", "yaml"))); err != nil {
		t.Error(err)
	}
	whole := readPage(t, "docs/first.drive.jsonl")
	for line := range strings.Lines(block("README.md", "json")) {
		if !strings.Contains(whole, line) {
			t.Errorf("docs/first.drive.jsonl does not hold %s", line)
		}
	}
}

// TestReadmeCommandLines runs the commands of the README's chapter on own data
// that need no server, with their folder /tmp replaced.
func TestReadmeCommandLines(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long: not with -short")
	}
	page := readPage(t, "README.md")
	_, page, _ = strings.Cut(page, "\n## Your own data")
	page, _, _ = strings.Cut(page, "\n## ")
	dir := t.TempDir()
	t.Chdir(checkout)
	ran := 0
	for _, b := range regexp.MustCompile("(?s)```sh\n(.*?)```").FindAllStringSubmatch(page, -1) {
		for line := range strings.Lines(b[1]) {
			line, to, redirected := strings.Cut(strings.ReplaceAll(strings.TrimSpace(line), "/tmp/", dir+"/"), " > ")
			args := strings.Fields(strings.TrimPrefix(line, "go run ./cmd/leadline "))
			if slices.Contains([]string{"serve", "feed", "where"}, args[0]) {
				continue // TestRoadsEndToEnd
			}
			var out, errs strings.Builder
			if status := run(args, &out, &errs); status != exitDone {
				t.Fatalf("%s: status %d: %s", line, status, errs.String())
			}
			if redirected {
				if err := os.WriteFile(to, []byte(out.String()), 0o600); err != nil {
					t.Fatal(err)
				}
			}
			ran++
		}
	}
	if ran < 6 {
		t.Errorf("README.md has only %d commands to run", ran)
	}
}
