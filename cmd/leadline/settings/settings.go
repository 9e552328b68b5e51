// Package settings reads the file of settings that the program takes: YAML that is
// one mapping from keys to plain values or lists of them.
package settings

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"github.com/goccy/go-yaml"
	"github.com/goccy/go-yaml/ast"
	"github.com/goccy/go-yaml/parser"
)

// MaxBytes bounds a file of settings: hundreds of maps by long paths.
const MaxBytes = 256 << 10

// Value is what a file says of a setting: one text, or a list of them.
type Value struct {
	Texts []string
	Line  int
}

// Parse takes YAML that is one mapping from keys to plain values or
// lists of them, and nothing else: no unknown or doubled key, no anchor, tag or
// second document. The error has the line.
func Parse(name string, text []byte, keys []string) (values map[string]Value, err error) {
	fail := func(line int, format string, args ...any) error {
		return fmt.Errorf("%s:%d: %s", name, line, fmt.Sprintf(format, args...))
	}
	if len(text) > MaxBytes {
		return nil, fmt.Errorf("%s: the file has over %d bytes: settings need less", name, MaxBytes)
	}
	for i, r := range string(text) {
		if r == '\ufffd' || r < ' ' && r != '\n' && r != '\r' || r == 0x7f {
			return nil, fail(1+strings.Count(string(text[:i]), "\n"), "a byte is no text: settings are plain UTF-8, indented by spaces")
		}
	}
	// The library is not ours: a defect of it must not end the program.
	defer func() {
		if r := recover(); r != nil {
			values, err = nil, fmt.Errorf("%s: cannot be read as YAML (%v)", name, r)
		}
	}()
	file, err := parser.ParseBytes(text, 0)
	if err != nil {
		var y yaml.Error
		if errors.As(err, &y) && y.GetToken() != nil {
			return nil, fail(y.GetToken().Position.Line, "%s", y.GetMessage())
		}
		return nil, fmt.Errorf("%s: %s", name, strings.Join(strings.Fields(err.Error()), " "))
	}
	if len(file.Docs) > 1 {
		return nil, fmt.Errorf("%s: a second document begins: settings are one document", name)
	}
	values = map[string]Value{}
	if len(file.Docs) == 0 || file.Docs[0].Body == nil {
		return values, nil
	}
	var pairs []*ast.MappingValueNode
	switch body := file.Docs[0].Body.(type) {
	case *ast.MappingNode:
		pairs = body.Values
	case *ast.MappingValueNode:
		pairs = []*ast.MappingValueNode{body}
	case *ast.CommentGroupNode:
		return values, nil
	default:
		return nil, fail(line(body), "settings are lines of KEY: VALUE")
	}
	for _, p := range pairs {
		key, at := p.Key.GetToken().Value, line(p.Key)
		if !slices.Contains(keys, key) {
			return nil, fail(at, "there is no setting %.80q: known are %s", key, strings.Join(keys, ", "))
		}
		if _, ok := values[key]; ok {
			return nil, fail(at, "%s is there twice", key)
		}
		v := Value{Line: at}
		nodes := []ast.Node{p.Value}
		if l, ok := p.Value.(*ast.SequenceNode); ok {
			nodes = l.Values
		}
		for _, n := range nodes {
			text, ok := plain(n)
			if !ok {
				return nil, fail(line(n), "%s: give a plain value, or a list of plain values", key)
			}
			v.Texts = append(v.Texts, text)
		}
		values[key] = v
	}
	return values, nil
}

// plain is the text of a number, a word or a quoted text.
func plain(n ast.Node) (string, bool) {
	switch n.(type) {
	case *ast.StringNode, *ast.IntegerNode, *ast.FloatNode, *ast.BoolNode:
		return n.GetToken().Value, true
	}
	return "", false
}

func line(n ast.Node) int {
	if n == nil || n.GetToken() == nil {
		return 1
	}
	return n.GetToken().Position.Line
}
