package drivefile

import (
	"bytes"
	"strconv"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/reflect/protoreflect"
	"google.golang.org/protobuf/types/known/timestamppb"
)

// quick reads the plain lines of which nearly all of a drive file consists: JSON
// objects of objects, numbers, true and false, times in UTC, and strings without
// an escape or a letter beyond ASCII. It is more than twice as fast as protojson,
// whose subset it is: what quick takes, protojson takes, too, as the same message,
// and what is otherwise, right or wrong, quick leaves to that
// (FuzzQuick). The zero value is ready.
type quick struct {
	b     []byte
	at    int
	known map[protoreflect.FullName]map[string]quickField
}

// quickField is a field by one of its names; kinds that quick does not read are
// left out.
type quickField struct {
	desc  protoreflect.FieldDescriptor
	kind  protoreflect.Kind
	oneof protoreflect.OneofDescriptor // nil unless it is one of several
	time  bool
	bit   uint64 // in the set of those that were seen
}

// quickDepth is how deep objects may lie.
const quickDepth = 8

var timestamp = (&timestamppb.Timestamp{}).ProtoReflect().Descriptor().FullName()

// read fills an empty message from a line. If it returns false, the message may be
// filled in part.
func (q *quick) read(line []byte, m proto.Message) bool {
	q.b, q.at = line, 0
	ok := q.object(m.ProtoReflect(), 0)
	q.space()
	return ok && q.at == len(q.b)
}

func (q *quick) space() {
	for q.at < len(q.b) {
		switch q.b[q.at] {
		case ' ', '\t', '\r', '\n':
			q.at++
		default:
			return
		}
	}
}

// next passes over space and a character that must come.
func (q *quick) next(c byte) bool {
	q.space()
	if q.at < len(q.b) && q.b[q.at] == c {
		q.at++
		return true
	}
	return false
}

func (q *quick) object(m protoreflect.Message, depth int) bool {
	if depth == quickDepth || !q.next('{') {
		return false
	}
	if q.next('}') {
		return true
	}
	fields := q.fields(m.Descriptor())
	var seen uint64
	for {
		name, ok := q.text()
		if !ok || !q.next(':') {
			return false
		}
		f, ok := fields[string(name)]
		if !ok || seen&f.bit != 0 || f.oneof != nil && m.WhichOneof(f.oneof) != nil {
			return false
		}
		seen |= f.bit
		if !q.value(m, &f, depth) {
			return false
		}
		if !q.next(',') {
			return q.next('}')
		}
	}
}

func (q *quick) value(m protoreflect.Message, f *quickField, depth int) bool {
	q.space()
	if q.at == len(q.b) {
		return false
	}
	switch f.kind {
	case protoreflect.MessageKind:
		if !f.time {
			return q.object(m.Mutable(f.desc).Message(), depth+1)
		}
		text, ok := q.text()
		if !ok {
			return false
		}
		t, ok := quickTime(text)
		if ok {
			m.Set(f.desc, protoreflect.ValueOfMessage(t.ProtoReflect()))
		}
		return ok
	case protoreflect.StringKind:
		text, ok := q.text()
		if ok {
			m.Set(f.desc, protoreflect.ValueOfString(string(text)))
		}
		return ok
	case protoreflect.BoolKind:
		for _, v := range []bool{true, false} {
			if word := strconv.FormatBool(v); bytes.HasPrefix(q.b[q.at:], []byte(word)) {
				q.at += len(word)
				m.Set(f.desc, protoreflect.ValueOfBool(v))
				return q.ended()
			}
		}
		return false
	case protoreflect.DoubleKind:
		number, _ := q.number()
		x, err := strconv.ParseFloat(string(number), 64)
		if err == nil {
			m.Set(f.desc, protoreflect.ValueOfFloat64(x))
		}
		return err == nil
	case protoreflect.Uint64Kind:
		number, whole := q.number()
		x, err := strconv.ParseUint(string(number), 10, 64)
		if err == nil && whole {
			m.Set(f.desc, protoreflect.ValueOfUint64(x))
		}
		return err == nil && whole
	}
	return false
}

// text is what is between quotation marks.
func (q *quick) text() ([]byte, bool) {
	if !q.next('"') {
		return nil, false
	}
	from := q.at
	for ; q.at < len(q.b); q.at++ {
		switch c := q.b[q.at]; {
		case c == '"':
			q.at++
			return q.b[from : q.at-1], true
		case c < ' ' || c == '\\' || c >= 0x7f:
			return nil, false
		}
	}
	return nil, false
}

// number is a number as JSON has it, nothing if there is none; whole if it has
// digits alone.
func (q *quick) number() (text []byte, whole bool) {
	from := q.at
	digits := func() bool {
		from := q.at
		for q.at < len(q.b) && q.b[q.at]-'0' <= 9 {
			q.at++
		}
		return q.at > from
	}
	is := func(set string) bool {
		if q.at < len(q.b) && bytes.IndexByte([]byte(set), q.b[q.at]) >= 0 {
			q.at++
			return true
		}
		return false
	}
	whole = !is("-")
	if !is("0") && !digits() {
		return nil, false
	}
	if is(".") {
		if whole = false; !digits() {
			return nil, false
		}
	}
	if is("eE") {
		whole = false
		is("+-")
		if !digits() {
			return nil, false
		}
	}
	if !q.ended() {
		return nil, false
	}
	return q.b[from:q.at], whole
}

// ended reports whether a word or a number is over.
func (q *quick) ended() bool {
	return q.at < len(q.b) && bytes.IndexByte([]byte(",} \t\r\n"), q.b[q.at]) >= 0
}

// fields are those of a kind of message by their names.
func (q *quick) fields(d protoreflect.MessageDescriptor) map[string]quickField {
	if out, ok := q.known[d.FullName()]; ok {
		return out
	}
	out := map[string]quickField{}
	all := d.Fields()
	for i := range min(all.Len(), 64) {
		desc := all.Get(i)
		f := quickField{desc: desc, kind: desc.Kind(), bit: 1 << i}
		if desc.IsList() || desc.IsMap() {
			continue
		}
		if o := desc.ContainingOneof(); o != nil && !o.IsSynthetic() {
			f.oneof = o
		}
		if desc.Kind() == protoreflect.MessageKind {
			name := desc.Message().FullName()
			if f.time = name == timestamp; !f.time && name.Parent() == timestamp.Parent() {
				continue // has a form of its own
			}
		}
		out[desc.TextName()], out[desc.JSONName()] = f, f
	}
	if q.known == nil {
		q.known = map[protoreflect.FullName]map[string]quickField{}
	}
	q.known[d.FullName()] = out
	return out
}

// quickTime reads a time of RFC 3339 in UTC, from year 1 to 9999.
func quickTime(b []byte) (*timestamppb.Timestamp, bool) {
	const form = "0000-00-00T00:00:00"
	if len(b) < len(form)+1 || b[len(b)-1] != 'Z' {
		return nil, false
	}
	for i := range len(form) {
		if form[i] == '0' && b[i]-'0' > 9 || form[i] != '0' && b[i] != form[i] {
			return nil, false
		}
	}
	two := func(i int) int { return int(b[i]-'0')*10 + int(b[i+1]-'0') }
	year, month, day := two(0)*100+two(2), time.Month(two(5)), two(8)
	hour, minute, second := two(11), two(14), two(17)
	if year < 1 || hour > 23 || minute > 59 || second > 59 {
		return nil, false
	}
	at := time.Date(year, month, day, hour, minute, second, 0, time.UTC)
	if at.Month() != month || at.Day() != day {
		return nil, false // no such day
	}
	nanos := int32(0)
	if rest := b[len(form) : len(b)-1]; len(rest) > 0 {
		if rest[0] != '.' || len(rest) < 2 || len(rest) > 10 {
			return nil, false
		}
		for i := 1; i < 10; i++ {
			nanos *= 10
			if i < len(rest) {
				if rest[i]-'0' > 9 {
					return nil, false
				}
				nanos += int32(rest[i] - '0')
			}
		}
	}
	return &timestamppb.Timestamp{Seconds: at.Unix(), Nanos: nanos}, true
}
