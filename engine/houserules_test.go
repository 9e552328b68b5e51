// Package engine_test holds the rules of the house that the compiler does not
// know: which package may import which, where protobuf and test fixtures may be
// seen, and what the filtering packages must not touch.
package engine_test

import (
	"maps"
	"slices"
	"strings"
	"testing"
)

// kernel may be imported by every package that has a row.
const kernel = "engine/kernel"

// api is the generated protobuf code.
const api = "proto/leadline/v1"

// everything in a row permits any package of ours.
const everything = "*"

// mayImport is the table of packages: for each, the packages of ours that its
// non-test files may import beside kernel. A package without a row fails, so a
// new one is a decision, not an accident. A row ending in /... speaks for all
// packages below it, which may also import one another.
var mayImport = map[string][]string{
	api:                        {},
	"engine/geo":               {},
	kernel:                     {},
	"engine/filter":            {"engine/geo"},
	"engine/filter/filtertest": {"engine/filter", "engine/geo"},
	"engine/sensor":            {"engine/filter", "engine/geo"},
	"engine/plane":             {"engine/filter", "engine/geo"},
	"network":                  {"engine/filter", "engine/geo"},
	"network/roadfile":         {"network", "engine/filter", "engine/geo"},
	"terrain":                  {"engine/geo"},
	"terrain/heightfile":       {"terrain", "engine/geo"},
	"engine/exact":             {},
	"engine/monitor":           {"engine/exact"},
	"engine/summary":           {"engine/exact", "engine/filter", "engine/monitor", "engine/geo"},
	"engine/session":           {"engine/exact", "engine/filter", "engine/monitor", "engine/sensor", "engine/summary", "engine/geo"},
	"engine/traffic":           {"engine/exact", "engine/sensor", "engine/geo"},
	"engine/wire":              {api, "engine/sensor", "engine/geo"},
	"engine/drivefile":         {api, "engine/wire", "engine/sensor", "engine/geo"},
	"engine/journal":           {},
	"engine/server": {
		"engine/session", "engine/traffic", "engine/sensor", "engine/summary", "engine/monitor",
		"engine/filter", "engine/geo", "engine/journal", "engine/wire", "engine/server/web", "engine/server/identity", "engine/server/operate",
		"engine/server/share", "engine/study/forecast", "engine/study/results", "engine/study/score", "engine/study/track", api,
	},
	"engine/server/web":      {api},
	"engine/server/identity": {},
	"engine/server/operate":  {},
	"engine/server/share":    {},
	"engine/client":          {api},
	"engine/client/outbox":   {api, "engine/client"},
	"engine/logfile":         {"engine/sensor", "engine/geo"},
	"engine/livelog":         {"engine/logfile"},
	"engine/study/...": {
		"engine/session", "engine/traffic", "engine/summary", "engine/monitor", "engine/filter", "engine/sensor",
		"engine/geo", "engine/drivefile", "engine/logfile", "engine/journal",
	},
	"engine/study/afar":     {"engine/study/sweep", "engine/journal", "engine/server/share"},
	"engine/page":           {api},
	"cmd/leadline":          {everything},
	"cmd/leadline/settings": {},
	"fixtures":              {},
	"fixtures/sim":          {"engine/geo", "network", "terrain"},
	"fixtures/outside":      {},
	"fixtures/heights":      {},
	"fixtures/reference":    {"engine/geo"},
	"fixtures/drives":       {"engine/drivefile", "engine/geo", "engine/sensor", "fixtures/sim"},
	"fixtures/roads":        {},
	"fixtures/credentials":  {},
	"fixtures/scenes":       {"engine/drivefile", "engine/geo", "engine/sensor", "engine/study/score", "network", "terrain", "fixtures/drives", "fixtures/outside", "fixtures/roads", "fixtures/sim"},
	"fixtures/accept": {
		"engine/drivefile", "engine/geo", "engine/plane", "engine/sensor", "engine/session", "engine/study/replay", "engine/study/score", "engine/summary",
		"network", "network/roadfile", "terrain", "fixtures/drives", "fixtures/outside", "fixtures/reference", "fixtures/sim",
	},
	"fixtures/outside/fetch": {"fixtures/outside"},
	"fixtures/credibility": {
		"engine/filter", "engine/filter/filtertest", "engine/geo", "engine/plane", "engine/sensor", "engine/session", "engine/summary",
		"engine/traffic", "engine/study/score", "network", "network/roadfile", "terrain", "terrain/heightfile", "fixtures/accept", "fixtures/drives", "fixtures/outside", "fixtures/reference", "fixtures/roads", "fixtures/sim",
	},
	"fixtures/credibility/run": {"fixtures/credibility", "fixtures/study"},
	"fixtures/study": {
		"engine/drivefile", "engine/filter", "engine/geo", "engine/logfile", "engine/plane", "engine/sensor", "engine/session", "engine/summary",
		"engine/study/forecast", "engine/study/replay", "engine/study/report", "engine/study/score", "engine/study/sweep", "engine/study/tune",
		"network", "network/roadfile", "terrain", "terrain/heightfile", "fixtures/credibility", "fixtures/drives", "fixtures/outside", "fixtures/roads", "fixtures/sim",
	},
	"fixtures/study/local": {"engine/logfile", "fixtures/study", "terrain/heightfile"},
	"fixtures/bench":       {"engine/client", "engine/filter", "engine/geo", "engine/plane", "engine/sensor", "engine/server", "engine/session", "engine/summary", "engine/wire", "network", "network/roadfile", "proto/leadline/v1", "terrain", "terrain/heightfile", "fixtures/accept", "fixtures/drives", "fixtures/outside", "fixtures/reference", "fixtures/sim"},
	"fixtures/bench/run":   {"fixtures/bench"},
	"fixtures/survive": {
		api, "engine/client", "engine/filter", "engine/journal", "engine/sensor", "engine/server", "engine/server/operate", "engine/session", "engine/summary", "engine/wire", "network/roadfile",
		"fixtures/drives", "fixtures/roads", "fixtures/sim",
	},
	"tools/...": {},
}

// notKernel may not even import kernel: the simulator shares nothing with the
// filter's models beyond geodesy, and tools belong to no package of ours.
var notKernel = []string{"fixtures/sim", "fixtures/heights", "fixtures/reference", "fixtures/outside", "fixtures/outside/fetch", "tools/..."}

// knowProtobuf may import the API and the protobuf and gRPC libraries.
var knowProtobuf = []string{api, "engine/server", "engine/server/web", "engine/server/operate", "engine/client", "engine/client/outbox", "engine/page", "engine/wire", "engine/drivefile", "cmd/leadline", "fixtures/bench", "fixtures/survive"}

// wireFormat is not our API: OpenStreetMap's PBF files are coded in protobuf's
// wire format, and its reader takes them apart itself.
var wireFormat = map[string]string{"network/roadfile": "google.golang.org/protobuf/encoding/protowire"}

var protobufLibraries = []string{
	"google.golang.org/protobuf", "google.golang.org/grpc", "github.com/golang/protobuf",
	"connectrpc.com/connect", "github.com/planetscale/vtprotobuf",
}

// importsFixtures is the one file outside fixtures that may import them.
const importsFixtures = "cmd/leadline/demo.go"

// row returns the pattern and the permitted imports of a package: its own row's, if
// it has one.
func row(pkg string) (pattern string, allowed []string, ok bool) {
	if allowed, ok = mayImport[pkg]; ok {
		return pkg, allowed, true
	}
	for _, pattern := range slices.Sorted(maps.Keys(mayImport)) {
		if matches(pattern, pkg) {
			return pattern, mayImport[pattern], true
		}
	}
	return "", nil, false
}

// breaksTable says whether the table forbids the import, and why.
func breaksTable(pkg, imported string) string {
	pattern, allowed, ok := row(pkg)
	switch {
	case !ok:
		return "it has no row in mayImport (engine/houserules_test.go)"
	case slices.Contains(allowed, everything), slices.Contains(allowed, imported):
		return ""
	case imported == kernel && !anyMatches(notKernel, pkg):
		return ""
	case strings.HasSuffix(pattern, "/...") && matches(pattern, imported):
		return ""
	}
	return "its row allows only " + strings.Join(append([]string{kernel}, allowed...), ", ")
}

func TestImportTable(t *testing.T) {
	files, _ := load(t)
	unlisted := map[string]bool{}
	for _, f := range files {
		if _, _, ok := row(f.pkg); !ok {
			if !unlisted[f.pkg] {
				t.Errorf("package %s has no row in mayImport (engine/houserules_test.go): decide what it may import", f.pkg)
			}
			unlisted[f.pkg] = true
			continue
		}
		for _, path := range imports(f) {
			imported, our := ours(path)
			if !our {
				continue
			}
			if why := breaksTable(f.pkg, imported); why != "" {
				t.Errorf("%s imports %s: %s", f.path, imported, why)
			}
		}
	}
}

// Two rules that the rows imply are also checked as they stand, so that a
// hurried edit of the table cannot undo them.
func TestMapsAndEngineStayApart(t *testing.T) {
	files, _ := load(t)
	for _, f := range files {
		for _, path := range imports(f) {
			imported, _ := ours(path)
			switch {
			case matches("network/...", f.pkg) && matches("terrain/...", imported),
				matches("terrain/...", f.pkg) && matches("network/...", imported):
				t.Errorf("%s imports %s: network and terrain never import each other", f.path, imported)
			case matches("engine/...", f.pkg) && (matches("network/...", imported) || matches("terrain/...", imported)):
				t.Errorf("%s imports %s: the engine is handed a Space or a Field and knows no map", f.path, imported)
			}
		}
	}
}

func TestWhoKnowsProtobuf(t *testing.T) {
	files, _ := load(t)
	for _, f := range files {
		if slices.Contains(knowProtobuf, f.pkg) {
			continue
		}
		for _, path := range imports(f) {
			imported, _ := ours(path)
			if path == wireFormat[f.pkg] {
				continue
			}
			for _, library := range protobufLibraries {
				if imported == api || matches(library+"/...", path) {
					t.Errorf("%s imports %s: only %s know protobuf", f.path, path, strings.Join(knowProtobuf, ", "))
					break
				}
			}
		}
	}
}

func TestOnlyTheDemoImportsFixtures(t *testing.T) {
	files, _ := load(t)
	for _, f := range files {
		if matches("fixtures/...", f.pkg) || f.path == importsFixtures {
			continue
		}
		for _, path := range imports(f) {
			if imported, our := ours(path); our && matches("fixtures/...", imported) {
				t.Errorf("%s imports %s: only %s and tests may", f.path, imported, importsFixtures)
			}
		}
	}
}

// The checks above must be able to fail.
func TestTableForbids(t *testing.T) {
	for _, c := range []struct {
		pkg, imported string
		allowed       bool
	}{
		{"engine/filter", "engine/geo", true},
		{"engine/filter", kernel, true},
		{"engine/filter", "engine/sensor", false},
		{"engine/geo", "engine/filter", false},
		{"engine/session", "engine/plane", false},
		{"engine/session", api, false},
		{"engine/study/replay", "engine/study/score", true},
		{"engine/study/replay", "engine/drivefile", true},
		{"engine/study/replay", "engine/server", false},
		{"engine/study/replay", "network", false},
		{"network", "terrain", false},
		{"terrain/heightfile", "terrain", true},
		{"fixtures/sim", "network", true},
		{"fixtures/sim", kernel, false},
		{"fixtures/sim", "engine/filter", false},
		{"cmd/leadline", "engine/server", true},
		{"engine/unheard", "engine/geo", false},
		{"engine/geographic", "engine/geo", false},
	} {
		if why := breaksTable(c.pkg, c.imported); (why == "") != c.allowed {
			t.Errorf("%s imports %s: allowed %v, want %v (%s)", c.pkg, c.imported, why == "", c.allowed, why)
		}
	}
}
