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

// Bounds of a YAML file.
const (
	maxYAMLBytes = 256 << 10
	maxYAMLLine  = 500 // bytes; also bounds nesting within a line
	maxYAMLDepth = 8   // nesting of [ and {; of indentation: 8·8 columns
	maxFindings  = 20  // listed in one error
)

// YAML is a settings file: a suite, or what says how to read a log.
type YAML struct {
	what, name string
	file       *ast.File
}

// Finding is one thing wrong with a settings file: where, as in
// sensors[2].noise, and what.
type Finding struct{ Path, Text string }

func (f Finding) String() string {
	if f.Path == "" {
		return f.Text
	}
	return f.Path + ": " + f.Text
}

// ParseYAML reads a settings file into a struct with yaml tags; an empty text
// leaves it as it is. what ("suite") and name (the file's) are used in errors
// only. An unknown or doubled key and a value of the wrong type is an error
// with its line; see is where to look for the keys. Anchors, aliases, tags
// and several documents in one file are refused; so are files over 256 KiB
// and lines over 500 bytes.
func ParseYAML(what, name string, text []byte, into any, see string) (y *YAML, err error) {
	y = &YAML{what: what, name: name}
	if len(text) > maxYAMLBytes {
		return nil, y.errorf(0, "the file has %d bytes: at most %d are allowed", len(text), maxYAMLBytes)
	}
	n := 0
	for line := range strings.Lines(string(text)) {
		n++
		if len(line) > maxYAMLLine {
			return nil, y.errorf(n, "the line has %d bytes: at most %d are allowed", len(line), maxYAMLLine)
		}
		for i, r := range line {
			if r == '\ufffd' || r < ' ' && r != '\n' && r != '\r' || r == 0x7f {
				return nil, y.errorf(n, "byte %d is no text: a %s is plain UTF-8, indented by spaces", i+1, what)
			}
		}
	}
	// The library is not ours: a defect of it must not end a server.
	defer func() {
		if r := recover(); r != nil {
			y, err = nil, y.errorf(0, "cannot be read as YAML (%v)", r)
		}
	}()
	tokens := lexer.Tokenize(string(text))
	if line, why := refusedYAML(tokens); why != "" {
		return nil, y.errorf(line, "%s", why)
	}
	if y.file, err = parser.Parse(tokens, 0); err != nil {
		line, message := yamlError(err, see)
		return nil, y.errorf(line, "%s", message)
	}
	if len(y.file.Docs) == 0 || y.file.Docs[0].Body == nil {
		return y, nil
	}
	if err := yaml.NodeToValue(y.file.Docs[0].Body, into, yaml.Strict()); err != nil {
		line, message := yamlError(err, see)
		return nil, y.errorf(line, "%s", message)
	}
	return y, nil
}

// Error makes one error, of one line, of what is wrong with the file's
// content, in the order of its lines; nil if nothing is.
func (y *YAML) Error(found []Finding) error {
	if len(found) == 0 {
		return nil
	}
	more := ""
	if len(found) > maxFindings {
		more = fmt.Sprintf("; and %d more", len(found)-maxFindings)
		found = found[:maxFindings]
	}
	type located struct {
		line int
		text string
	}
	all := make([]located, len(found))
	for i, f := range found {
		all[i] = located{y.lineOf(f.Path), f.String()}
	}
	sort.SliceStable(all, func(i, j int) bool { return all[i].line < all[j].line })
	var said []string
	for _, l := range all {
		said = append(said, y.errorf(l.line, "%s", l.text).Error())
	}
	return errors.New(strings.Join(said, "; ") + more)
}

func (y *YAML) errorf(line int, format string, args ...any) error {
	where := y.name
	if line > 0 {
		where = fmt.Sprintf("%s:%d", y.name, line)
	}
	return fmt.Errorf("%s %s: %s", y.what, where, fmt.Sprintf(format, args...))
}

// refusedYAML finds what settings do not need of YAML.
func refusedYAML(tokens token.Tokens) (line int, why string) {
	depth, documents := 0, 0
	for _, t := range tokens {
		switch t.Type {
		case token.AnchorType, token.AliasType, token.MergeKeyType:
			return t.Position.Line, "anchors and aliases are not used here: write the value out"
		case token.TagType, token.DirectiveType:
			return t.Position.Line, "tags and directives are not used here: remove it"
		case token.DocumentHeaderType:
			if documents++; documents > 1 {
				return t.Position.Line, "a second document begins: the file is one document"
			}
		case token.SequenceStartType, token.MappingStartType:
			depth++
		case token.SequenceEndType, token.MappingEndType:
			depth--
		case token.SequenceEntryType, token.MappingValueType, token.MappingKeyType:
			if t.Position.Column > 8*maxYAMLDepth && depth == 0 {
				return t.Position.Line, "nested or indented too deeply"
			}
		}
		if depth > maxYAMLDepth {
			return t.Position.Line, "nested too deeply"
		}
	}
	return 0, ""
}

// yamlError turns the library's error into a line and a message in one line.
func yamlError(err error, see string) (line int, message string) {
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
		message += ": there is no such key; see " + see
	}
	return line, message
}

func oneLine(s string) string { return strings.Join(strings.Fields(s), " ") }

// lineOf returns the line of the node at a path such as sensors[2].noise, or
// of the nearest one above it that exists; 0 if there is none.
func (y *YAML) lineOf(path string) int {
	for path != "" && y.file != nil {
		if p, err := yaml.PathString("$." + path); err == nil {
			if node, err := p.FilterFile(y.file); err == nil && node != nil && node.GetToken() != nil {
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
