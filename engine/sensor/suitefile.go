package sensor

import (
	"errors"
	"fmt"
	"sort"
	"strings"

	"github.com/goccy/go-yaml"
	"github.com/goccy/go-yaml/ast"
	"github.com/goccy/go-yaml/lexer"
	"github.com/goccy/go-yaml/parser"
	"github.com/goccy/go-yaml/token"
)

// Bounds of a suite file.
const (
	maxSuiteBytes = 256 << 10
	maxSuiteLine  = 500 // bytes; also bounds nesting within a line
	maxSuiteDepth = 8   // nesting of [ and {; of indentation: 8·8 columns
	maxSensors    = 256
	maxPlaces     = 4096
	maxFindings   = 20 // listed in one error
)

// ParseSuite reads a suite from YAML. name is used in errors only. An unknown
// or doubled key, a value of the wrong type and everything that Validate
// finds is an error with its line. Anchors, aliases, tags and several
// documents in one file are not used by suites and refused; so are files over
// 256 KiB and lines over 500 bytes.
func ParseSuite(name string, text []byte) (s *Suite, err error) {
	fail := func(line int, format string, args ...any) error {
		where := name
		if line > 0 {
			where = fmt.Sprintf("%s:%d", name, line)
		}
		return fmt.Errorf("suite %s: %s", where, fmt.Sprintf(format, args...))
	}
	if len(text) > maxSuiteBytes {
		return nil, fail(0, "the file has %d bytes: at most %d are allowed", len(text), maxSuiteBytes)
	}
	n := 0
	for line := range strings.Lines(string(text)) {
		n++
		if len(line) > maxSuiteLine {
			return nil, fail(n, "the line has %d bytes: at most %d are allowed", len(line), maxSuiteLine)
		}
		for i, r := range line {
			if r == '\ufffd' || r < ' ' && r != '\n' && r != '\r' || r == 0x7f {
				return nil, fail(n, "byte %d is no text: a suite is plain UTF-8, indented by spaces", i+1)
			}
		}
	}
	// The library is not ours: a defect of it must not end a server.
	defer func() {
		if r := recover(); r != nil {
			s, err = nil, fail(0, "cannot be read as YAML (%v)", r)
		}
	}()
	tokens := lexer.Tokenize(string(text))
	if line, why := refusedYAML(tokens); why != "" {
		return nil, fail(line, "%s", why)
	}
	file, err := parser.Parse(tokens, 0)
	if err != nil {
		line, message := yamlError(err)
		return nil, fail(line, "%s", message)
	}
	s = &Suite{}
	if len(file.Docs) == 0 || file.Docs[0].Body == nil {
		return s, nil // an empty suite: all defaults
	}
	if err := yaml.NodeToValue(file.Docs[0].Body, s, yaml.Strict()); err != nil {
		line, message := yamlError(err)
		return nil, fail(line, "%s", message)
	}
	if found := s.problems(); len(found) > 0 {
		var all []string
		more := ""
		if len(found) > maxFindings {
			more = fmt.Sprintf("; and %d more", len(found)-maxFindings)
			found = found[:maxFindings]
		}
		for i := range found {
			found[i].line = lineOf(file, found[i].path)
		}
		sort.SliceStable(found, func(i, j int) bool { return found[i].line < found[j].line })
		for _, f := range found {
			all = append(all, fail(f.line, "%s", f).Error())
		}
		return nil, errors.New(strings.Join(all, "; ") + more)
	}
	return s, nil
}

// refusedYAML finds what suites do not need of YAML.
func refusedYAML(tokens token.Tokens) (line int, why string) {
	depth, documents := 0, 0
	for _, t := range tokens {
		switch t.Type {
		case token.AnchorType, token.AliasType, token.MergeKeyType:
			return t.Position.Line, "anchors and aliases are not used in suites: write the value out"
		case token.TagType, token.DirectiveType:
			return t.Position.Line, "tags and directives are not used in suites: remove it"
		case token.DocumentHeaderType:
			if documents++; documents > 1 {
				return t.Position.Line, "a second document begins: a suite is one document"
			}
		case token.SequenceStartType, token.MappingStartType:
			depth++
		case token.SequenceEndType, token.MappingEndType:
			depth--
		case token.SequenceEntryType, token.MappingValueType, token.MappingKeyType:
			if t.Position.Column > 8*maxSuiteDepth && depth == 0 {
				return t.Position.Line, "nested or indented too deeply for a suite"
			}
		}
		if depth > maxSuiteDepth {
			return t.Position.Line, "nested too deeply for a suite"
		}
	}
	return 0, ""
}

// yamlError turns the library's error into a line and a message in one line.
func yamlError(err error) (line int, message string) {
	var e yaml.Error
	if !errors.As(err, &e) {
		return 0, oneLine(err.Error())
	}
	if t := e.GetToken(); t != nil && t.Position != nil {
		line = t.Position.Line
	}
	message = oneLine(e.GetMessage())
	var unknown *yaml.UnknownFieldError
	if errors.As(err, &unknown) {
		message += ": no such key in a suite; see the four that come with the program"
	}
	return line, message
}

func oneLine(s string) string { return strings.Join(strings.Fields(s), " ") }

// lineOf returns the line of the node at a path such as sensors[2].noise, or
// of the nearest one above it that exists; 0 if there is none.
func lineOf(file *ast.File, path string) int {
	for path != "" {
		if p, err := yaml.PathString("$." + path); err == nil {
			if node, err := p.FilterFile(file); err == nil && node != nil && node.GetToken() != nil {
				return node.GetToken().Position.Line
			}
		}
		cut := strings.LastIndexAny(path, ".[")
		if cut < 0 {
			break
		}
		path = path[:cut]
	}
	return 0
}
