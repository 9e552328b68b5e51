package compare

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"
)

// A gate is an expression over a comparison that is true or false:
//
//	gate    = both { "or" both }
//	both    = not { "and" not }
//	not     = "not" not | compare
//	compare = sum ( "<" | "<=" | ">" | ">=" | "==" | "!=" ) sum | "(" gate ")"
//	sum     = product { ( "+" | "-" ) product }
//	product = factor { ( "*" | "/" ) factor }
//	factor  = NUMBER | NAME | "-" factor | "(" sum ")"
//	NAME    = [ "a." | "b." | "diff." | "low." | "high." | "worst." ] FIGURE | "drives" | "better." FIGURE | "worse." FIGURE
//
// A figure alone, or with b., is its mean over the drives of B; a. that of A;
// diff. the mean difference, low. and high. the ends of its interval; worst. the
// worst of any run in B; better. and worse. in how many drives B is.
//
// Gate is one that was parsed.
type Gate struct {
	Text string
	root *node
}

// maxGate bounds an expression's length, and with it its depth.
const maxGate = 1000

type node struct {
	op          string // of an operator; "number", "name"
	value       float64
	name        string
	left, right *node
	truth       bool // gives true or false, not a number
	at          int
}

// ParseGate reads an expression. Whether its names are known is checked, too.
func ParseGate(text string) (*Gate, error) {
	if len(text) > maxGate {
		return nil, fmt.Errorf("the expression has %d bytes: at most %d are read", len(text), maxGate)
	}
	p := &parser{text: text}
	if err := p.scan(); err != nil {
		return nil, err
	}
	n, err := p.gate()
	if err != nil {
		return nil, err
	}
	if t := p.token(); t.text != "" {
		return nil, p.bad(t, "nothing more was expected")
	}
	if !n.truth {
		return nil, p.bad(word{at: 1}, "it is a number: compare it, as in p95_m > 8")
	}
	return &Gate{text, n}, nil
}

type word struct {
	text string
	at   int // byte, from 1
}

type parser struct {
	text  string
	words []word
	next  int
}

func (p *parser) bad(w word, format string, args ...any) error {
	return fmt.Errorf("%q, byte %d: %s", p.text, w.at, fmt.Sprintf(format, args...))
}

func (p *parser) scan() error {
	for i := 0; i < len(p.text); {
		c := p.text[i]
		start := i
		switch {
		case c == ' ' || c == '\t':
			i++
			continue
		case letter(c):
			for i < len(p.text) && (letter(p.text[i]) || digit(p.text[i]) || p.text[i] == '.') {
				i++
			}
		case digit(c) || c == '.':
			for i < len(p.text) && (digit(p.text[i]) || p.text[i] == '.' || (p.text[i]|0x20) == 'e' ||
				(p.text[i] == '-' || p.text[i] == '+') && (p.text[i-1]|0x20) == 'e') {
				i++
			}
		case strings.HasPrefix(p.text[i:], "<=") || strings.HasPrefix(p.text[i:], ">=") || strings.HasPrefix(p.text[i:], "==") || strings.HasPrefix(p.text[i:], "!="):
			i += 2
		case strings.IndexByte("<>+-*/()", c) >= 0:
			i++
		default:
			r, _ := utf8.DecodeRuneInString(p.text[i:])
			return p.bad(word{at: i + 1}, "%q has no meaning here", r)
		}
		p.words = append(p.words, word{p.text[start:i], start + 1})
	}
	return nil
}

func letter(c byte) bool { return c|0x20 >= 'a' && c|0x20 <= 'z' || c == '_' }
func digit(c byte) bool  { return c >= '0' && c <= '9' }

// token is the next word, an empty one at the end.
func (p *parser) token() word {
	if p.next < len(p.words) {
		return p.words[p.next]
	}
	return word{at: len(p.text) + 1}
}

func (p *parser) take(texts ...string) (word, bool) {
	w := p.token()
	if w.text == "" || !slices.Contains(texts, w.text) {
		return w, false
	}
	p.next++
	return w, true
}

// chain parses operands with operators of one rank between them, from the left.
func (p *parser) chain(operand func() (*node, error), truth bool, ops ...string) (*node, error) {
	left, err := operand()
	if err != nil {
		return nil, err
	}
	for {
		w, ok := p.take(ops...)
		if !ok {
			return left, nil
		}
		right, err := operand()
		if err != nil {
			return nil, err
		}
		for _, side := range []*node{left, right} {
			if side.truth != truth {
				return nil, p.bad(word{at: side.at}, "%s", needs(w.text, truth))
			}
		}
		left = &node{op: w.text, left: left, right: right, truth: truth, at: left.at}
	}
}

func needs(op string, truth bool) string {
	if truth {
		return fmt.Sprintf("%s joins comparisons, and this is a number", op)
	}
	return fmt.Sprintf("%s joins numbers, and this is a comparison", op)
}

func (p *parser) gate() (*node, error) { return p.chain(p.both, true, "or") }
func (p *parser) both() (*node, error) { return p.chain(p.not, true, "and") }

func (p *parser) not() (*node, error) {
	if w, ok := p.take("not"); ok {
		of, err := p.not()
		if err != nil {
			return nil, err
		}
		if !of.truth {
			return nil, p.bad(word{at: of.at}, "not is of a comparison, and this is a number")
		}
		return &node{op: "not", left: of, truth: true, at: w.at}, nil
	}
	left, err := p.sum()
	if err != nil {
		return nil, err
	}
	w, ok := p.take("<", "<=", ">", ">=", "==", "!=")
	if !ok {
		return left, nil
	}
	right, err := p.sum()
	if err != nil {
		return nil, err
	}
	for _, side := range []*node{left, right} {
		if side.truth {
			return nil, p.bad(word{at: side.at}, "%s compares numbers, and this is a comparison", w.text)
		}
	}
	return &node{op: w.text, left: left, right: right, truth: true, at: left.at}, nil
}

func (p *parser) sum() (*node, error)     { return p.chain(p.product, false, "+", "-") }
func (p *parser) product() (*node, error) { return p.chain(p.factor, false, "*", "/") }

func (p *parser) factor() (*node, error) {
	w := p.token()
	p.next++
	switch {
	case w.text == "":
		return nil, p.bad(w, "it ends where a figure or a number was expected")
	case w.text == "-":
		of, err := p.factor()
		if err != nil {
			return nil, err
		}
		if of.truth {
			return nil, p.bad(word{at: of.at}, "- is of a number, and this is a comparison")
		}
		return &node{op: "negative", left: of, at: w.at}, nil
	case w.text == "(":
		of, err := p.gate()
		if err != nil {
			return nil, err
		}
		if end, ok := p.take(")"); !ok {
			return nil, p.bad(end, "a ) is missing")
		}
		return of, nil
	case digit(w.text[0]) || w.text[0] == '.':
		v, err := strconv.ParseFloat(w.text, 64)
		if err != nil {
			return nil, p.bad(w, "%s is no number", w.text)
		}
		return &node{op: "number", value: v, at: w.at}, nil
	case letter(w.text[0]):
		if _, figure := split(w.text); w.text != drives && !known(figure) {
			return nil, p.bad(w, "there is no figure %s: known are %s and %s, with a., b., diff., low., high., worst., better. or worse. before it", w.text, strings.Join(names(), ", "), drives)
		}
		return &node{op: "name", name: w.text, at: w.at}, nil
	}
	return nil, p.bad(w, "%s where a figure or a number was expected", w.text)
}

// drives is the name of how many are compared.
const drives = "drives"

// split parts a name's prefix from its figure.
func split(name string) (prefix, figure string) {
	if before, after, ok := strings.Cut(name, "."); ok && slices.Contains(prefixes, before) {
		return before, after
	}
	return "b", name
}

var prefixes = []string{"a", "b", "diff", "low", "high", "worst", "better", "worse"}

func names() (out []string) {
	for _, f := range Figures {
		out = append(out, f.Name)
	}
	return out
}

func known(figure string) bool { return slices.Contains(names(), figure) }

// Holds reports whether a comparison is what the gate says. An error says what
// figure is not known in it.
func (g *Gate) Holds(c *Comparison) (bool, error) {
	v, err := g.root.evaluate(c)
	if err != nil {
		return false, fmt.Errorf("%q cannot be decided: %w", g.Text, err)
	}
	return v != 0, nil
}

// evaluate is a node's value; of a comparison 1 or 0. Both sides of and and or are
// looked at, so that what is not known is said in any case.
func (n *node) evaluate(c *Comparison) (float64, error) {
	switch n.op {
	case "number":
		return n.value, nil
	case "name":
		return c.named(n.name)
	}
	a, err := n.left.evaluate(c)
	if err != nil {
		return 0, err
	}
	b := 0.0
	if n.right != nil {
		if b, err = n.right.evaluate(c); err != nil {
			return 0, err
		}
	}
	is := func(v bool) (float64, error) {
		if v {
			return 1, nil
		}
		return 0, nil
	}
	switch n.op {
	case "negative":
		return -a, nil
	case "+":
		return a + b, nil
	case "-":
		return a - b, nil
	case "*":
		return a * b, nil
	case "/":
		return a / b, nil
	case "<":
		return is(a < b)
	case "<=":
		return is(a <= b)
	case ">":
		return is(a > b)
	case ">=":
		return is(a >= b)
	case "==":
		return is(a == b)
	case "!=":
		return is(a != b)
	case "and":
		return is(a != 0 && b != 0)
	case "or":
		return is(a != 0 || b != 0)
	}
	return is(a == 0) // not
}

func (c *Comparison) named(name string) (float64, error) {
	if name == drives {
		return float64(c.Drives), nil
	}
	prefix, figure := split(name)
	f, ok := c.figure(figure)
	if !ok {
		return 0, fmt.Errorf("no drive has %s on both sides", figure)
	}
	switch prefix {
	case "a":
		return f.A, nil
	case "diff":
		return f.Difference, nil
	case "worst":
		return f.WorstB, nil
	case "better":
		return float64(f.Better), nil
	case "worse":
		return float64(f.Worse), nil
	case "low", "high":
		if f.Low == nil {
			return 0, fmt.Errorf("%s: an interval takes three drives or more, and %s is known of %d", name, figure, f.Drives)
		}
		if prefix == "low" {
			return *f.Low, nil
		}
		return *f.High, nil
	}
	return f.B, nil
}
