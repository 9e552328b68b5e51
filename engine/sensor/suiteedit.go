package sensor

import (
	"fmt"
	"reflect"
	"strconv"
	"strings"

	"github.com/goccy/go-yaml/ast"
)

// EditSuite gives a key of a suite file another value (see Set for keys), and
// leaves every other byte as it is: comments, order, spacing. A key that the
// file leaves to its default is added. What comes out reads as the suite that
// Set returns. name is used in errors only.
func EditSuite(name string, text []byte, key, value string) ([]byte, error) {
	old, err := ParseSuite(name, text)
	if err != nil {
		return nil, err
	}
	want, err := old.Set(key, value)
	if err != nil {
		return nil, err
	}
	y, err := ParseYAML("suite", name, text, &Suite{}, "")
	if err != nil {
		return nil, err
	}
	out, ok := y.edited(string(text), strings.Split(key, "."), plain(value))
	if ok {
		got, err := ParseSuite(name, []byte(out))
		ok = err == nil && reflect.DeepEqual(got, want)
	}
	if !ok {
		return nil, fmt.Errorf("suite %s: %s cannot be written where it stands: set it by hand to %s", name, key, value)
	}
	return []byte(out), nil
}

// plain is a scalar as YAML takes it for what it is.
func plain(value string) string {
	if _, err := strconv.ParseFloat(value, 64); err == nil || value == "true" || value == "false" {
		return value
	}
	return strconv.Quote(value)
}

// edited puts a value at a path.
func (y *YAML) edited(text string, path []string, value string) (string, bool) {
	if len(y.file.Docs) == 0 || y.file.Docs[0].Body == nil {
		return appended(text, path, value), true
	}
	node := y.file.Docs[0].Body
	for i := 0; i <= len(path); i++ {
		switch n := node.(type) {
		case *ast.MappingNode:
			if i == len(path) {
				return "", false
			}
			next := mappingValue(n.Values, path[i])
			if next == nil {
				return added(text, n.Values, n.IsFlowStyle, path[i:], value)
			}
			node = next
		case *ast.MappingValueNode: // a mapping of one key
			return y.editedOne(text, n, path, i, value)
		case *ast.SequenceNode:
			if i == len(path) {
				return "", false
			}
			next := sequenceElement(n.Values, path[i])
			if next == nil {
				return "", false
			}
			node = next
		default:
			if i < len(path) {
				return "", false
			}
			t := n.GetToken()
			at, ok := byteAt(text, t.Position.Line, t.Position.Column)
			was := strings.TrimSpace(t.Origin)
			if !ok || !strings.HasPrefix(text[at:], was) {
				return "", false
			}
			return text[:at] + value + text[at+len(was):], true
		}
	}
	return "", false
}

func (y *YAML) editedOne(text string, n *ast.MappingValueNode, path []string, i int, value string) (string, bool) {
	if i == len(path) {
		return "", false
	}
	if next := mappingValue([]*ast.MappingValueNode{n}, path[i]); next == nil {
		return added(text, []*ast.MappingValueNode{n}, false, path[i:], value)
	}
	sub := *y
	doc := *y.file.Docs[0]
	doc.Body = n.Value
	file := *y.file
	file.Docs = []*ast.DocumentNode{&doc}
	sub.file = &file
	return sub.edited(text, path[i+1:], value)
}

func mappingValue(values []*ast.MappingValueNode, key string) ast.Node {
	for _, v := range values {
		if v.Key.String() == key {
			return v.Value
		}
	}
	return nil
}

// sequenceElement finds an element by name, id or index, as Set does.
func sequenceElement(values []ast.Node, name string) ast.Node {
	for _, e := range values {
		var of []*ast.MappingValueNode
		switch m := e.(type) {
		case *ast.MappingNode:
			of = m.Values
		case *ast.MappingValueNode:
			of = []*ast.MappingValueNode{m}
		}
		for _, key := range []string{"name", "id"} {
			if v := mappingValue(of, key); v != nil && v.GetToken().Value == name {
				return e
			}
		}
	}
	if i, err := strconv.Atoi(name); err == nil && i >= 0 && i < len(values) {
		return values[i]
	}
	return nil
}

// added puts a key in front of the first one of a mapping.
func added(text string, values []*ast.MappingValueNode, flow bool, path []string, value string) (string, bool) {
	if len(values) == 0 {
		return "", false
	}
	first := values[0].Key.GetToken().Position
	at, ok := byteAt(text, first.Line, first.Column)
	if !ok {
		return "", false
	}
	between := "\n" + strings.Repeat(" ", first.Column-1)
	if flow {
		between = ", "
	}
	return text[:at] + nested(path, value) + between + text[at:], true
}

func appended(text string, path []string, value string) string {
	if text != "" && !strings.HasSuffix(text, "\n") {
		text += "\n"
	}
	return text + nested(path, value) + "\n"
}

// nested is a: {b: {c: value}}.
func nested(path []string, value string) string {
	s := path[len(path)-1] + ": " + value
	for i := len(path) - 2; i >= 0; i-- {
		s = path[i] + ": {" + s + "}"
	}
	return s
}

// byteAt is the byte at which a line and column, both from 1, begin.
func byteAt(text string, line, column int) (int, bool) {
	at := 0
	for ; line > 1; line-- {
		n := strings.IndexByte(text[at:], '\n')
		if n < 0 {
			return 0, false
		}
		at += n + 1
	}
	for i := range text[at:] {
		if column == 1 {
			return at + i, true
		}
		column--
	}
	return len(text), column == 1
}
