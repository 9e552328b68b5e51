package exact

import (
	"encoding/binary"
	"fmt"
	"hash/fnv"
	"math"
	"reflect"
)

// Kinds says which types an interface's values have, by examples, the interface
// given as a nil pointer to it: new values are added at the end.
func Kinds[I any](c *Coder, examples []I) {
	if c.kinds == nil {
		c.kinds = map[reflect.Type][]reflect.Type{}
	}
	var types []reflect.Type
	for _, x := range examples {
		types = append(types, reflect.TypeOf(x))
	}
	c.kinds[reflect.TypeFor[I]()] = types
}

// Value codes what p points to. A kind that has no bytes (a function, a map, an
// unexported field of a type that is not Coded) panics.
func (c *Coder) Value(p any) { c.value(reflect.ValueOf(p).Elem()) }

var coded = reflect.TypeFor[Coded]()

// describes reports whether a struct describes itself: it is asked of every one.
func (c *Coder) describes(t reflect.Type) bool {
	does, known := c.coded[t]
	if !known {
		does = reflect.PointerTo(t).Implements(coded)
		if c.coded == nil {
			c.coded = map[reflect.Type]bool{}
		}
		c.coded[t] = does
	}
	return does
}

func (c *Coder) value(v reflect.Value) {
	if c.err != nil {
		return
	}
	t := v.Type()
	if t.Kind() == reflect.Struct && c.describes(t) {
		v.Addr().Interface().(Coded).Code(c)
		return
	}
	switch t.Kind() {
	case reflect.Float64:
		if c.reading {
			var f float64
			c.Float(&f)
			v.SetFloat(f)
		} else {
			c.b = binary.LittleEndian.AppendUint64(c.b, math.Float64bits(v.Float()))
		}
	case reflect.Bool:
		b := v.Bool()
		c.Bool(&b)
		c.set(func() { v.SetBool(b) })
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64:
		i := v.Int()
		c.Int(&i)
		c.set(func() {
			if v.OverflowInt(i) {
				c.Fail(fmt.Errorf("%d is too large for %v", i, t))
				return
			}
			v.SetInt(i)
		})
	case reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64:
		u := v.Uint()
		c.Uint(&u)
		c.set(func() {
			if v.OverflowUint(u) {
				c.Fail(fmt.Errorf("%d is too large for %v", u, t))
				return
			}
			v.SetUint(u)
		})
	case reflect.String:
		s := v.String()
		c.Text(&s)
		c.set(func() { v.SetString(s) })
	case reflect.Struct:
		for i := range v.NumField() {
			if !v.Field(i).CanInterface() {
				panic(fmt.Sprintf("exact: %v has the unexported field %s, and does not describe itself", t, t.Field(i).Name))
			}
			c.value(v.Field(i))
		}
	case reflect.Array:
		for i := range t.Len() {
			c.value(v.Index(i))
		}
	case reflect.Slice:
		c.slice(v)
	case reflect.Pointer:
		some := !v.IsNil()
		c.Bool(&some)
		if !some {
			c.set(v.SetZero)
			return
		}
		if c.reading {
			v.Set(reflect.New(t.Elem()))
		}
		c.value(v.Elem())
	case reflect.Interface:
		c.kind(v)
	default:
		panic(fmt.Sprintf("exact: %v has no bytes", t))
	}
}

func (c *Coder) set(f func()) {
	if c.reading && c.err == nil {
		f()
	}
}

func (c *Coder) slice(v reflect.Value) {
	if floats, ok := v.Addr().Interface().(*[]float64); ok {
		c.floats(floats)
		return
	}
	some := !v.IsNil()
	c.Bool(&some)
	if !some {
		c.set(v.SetZero)
		return
	}
	n := c.Len(v.Len(), least(v.Type().Elem()))
	if c.reading {
		v.Set(reflect.MakeSlice(v.Type(), n, n))
	}
	for i := range n {
		c.value(v.Index(i))
	}
}

// floats codes the long slices of a belief in one go.
func (c *Coder) floats(s *[]float64) {
	some := *s != nil
	c.Bool(&some)
	if !some {
		c.set(func() { *s = nil })
		return
	}
	n := c.Len(len(*s), 8)
	if !c.reading {
		for _, f := range *s {
			c.b = binary.LittleEndian.AppendUint64(c.b, math.Float64bits(f))
		}
		return
	}
	b := c.take(8 * n)
	if c.err != nil {
		return
	}
	*s = make([]float64, n)
	for i := range *s {
		(*s)[i] = math.Float64frombits(binary.LittleEndian.Uint64(b[8*i:]))
	}
}

// kind codes an interface by the number of its type; 0 is nil.
func (c *Coder) kind(v reflect.Value) {
	types, ok := c.kinds[v.Type()]
	if !ok {
		panic(fmt.Sprintf("exact: nobody has said which kinds %v has", v.Type()))
	}
	var n uint64
	if !c.reading && !v.IsNil() {
		for i, t := range types {
			if v.Elem().Type() == t {
				n = uint64(i + 1)
			}
		}
		if n == 0 {
			panic(fmt.Sprintf("exact: %v is none of the kinds of %v", v.Elem().Type(), v.Type()))
		}
	}
	c.Uint(&n)
	switch {
	case c.err != nil:
		return
	case n > uint64(len(types)):
		c.Fail(fmt.Errorf("%d is no kind of %v", n, v.Type()))
		return
	case n == 0:
		c.set(v.SetZero)
		return
	}
	x := reflect.New(types[n-1]).Elem()
	if !c.reading {
		x.Set(v.Elem())
	}
	c.value(x)
	c.set(func() { v.Set(x) })
}

// least is the fewest bytes that a value of a type takes.
func least(t reflect.Type) int {
	if reflect.PointerTo(t).Implements(coded) {
		return 1
	}
	switch t.Kind() {
	case reflect.Float64:
		return 8
	case reflect.Struct:
		n := 0
		for i := range t.NumField() {
			n += least(t.Field(i).Type)
		}
		return n
	case reflect.Array:
		return t.Len() * least(t.Elem())
	}
	return 1
}

// Layout sums up what values of some types are made of, their unexported fields
// included: it is another one when a field is added, renamed, moved or changes
// its type. Types that are in passed stand for themselves, by name.
func Layout(values []any, passed ...any) uint64 {
	seen := map[reflect.Type]bool{}
	for _, v := range passed {
		seen[reflect.TypeOf(v)] = true
	}
	h := fnv.New64a()
	var walk func(t reflect.Type)
	walk = func(t reflect.Type) {
		fmt.Fprintf(h, "%v %v;", t, t.Kind())
		switch t.Kind() {
		case reflect.Slice, reflect.Pointer:
			walk(t.Elem())
		case reflect.Array:
			fmt.Fprint(h, t.Len())
			walk(t.Elem())
		case reflect.Struct:
			if seen[t] {
				return
			}
			seen[t] = true
			for i := range t.NumField() {
				fmt.Fprintf(h, "%s:", t.Field(i).Name)
				walk(t.Field(i).Type)
			}
		}
	}
	for _, v := range values {
		walk(reflect.TypeOf(v))
	}
	return h.Sum64()
}
