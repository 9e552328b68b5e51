package exact

import (
	"math"
	"reflect"
	"testing"
)

type (
	shape  interface{ area() float64 }
	square struct{ Side float64 }
	blob   struct {
		Parts []shape
		Name  string
	}
)

func (square) area() float64 { return 0 }
func (blob) area() float64   { return 0 }

// hidden describes itself.
type hidden struct{ n int64 }

func (h *hidden) Code(c *Coder) { c.Int(&h.n) }

type everything struct {
	B       bool
	I       int
	I8      int8
	U       uint64
	U16     uint16
	F       float64
	S       string
	Fs      []float64
	Nil     []float64
	Empty   []string
	Array   [3]float64
	Strings []string
	P, Q    *square
	Shape   shape
	None    shape
	Hidden  hidden
	Hiddens []hidden
}

func sample() everything {
	return everything{
		true, math.MinInt64, -128, math.MaxUint64, 65535, math.Copysign(0, -1), "a\x00ü",
		[]float64{1, math.Inf(-1), 5e-324},
		nil,
		[]string{},
		[3]float64{1, 2, 3},
		[]string{"x", "", "x"},
		&square{2}, nil,
		blob{[]shape{square{1}, nil, blob{}}, "b"},
		nil,
		hidden{-7},
		[]hidden{{1}, {2}},
	}
}

func coder(c *Coder) *Coder {
	Kinds(c, []shape{square{}, blob{}})
	return c
}

func TestRoundTrip(t *testing.T) {
	want := sample()
	w := coder(Writer())
	w.Value(&want)
	var got everything
	r := coder(Reader(w.Bytes()))
	r.Value(&got)
	if err := r.Done(); err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(got, want) || math.Signbit(got.F) != true {
		t.Errorf("%+v\nis read as\n%+v", want, got)
	}
	// Every beginning of it is an error, and none panics.
	for n := range w.Bytes() {
		r := coder(Reader(w.Bytes()[:n]))
		r.Value(&got)
		if r.Done() == nil {
			t.Errorf("the first %d bytes of %d are read", n, len(w.Bytes()))
		}
	}
	nan := math.Float64frombits(0x7ff8000000abcdef)
	w = Writer()
	w.Float(&nan)
	var f float64
	Reader(w.Bytes()).Float(&f)
	if math.Float64bits(f) != math.Float64bits(nan) {
		t.Errorf("a NaN comes back as %x", math.Float64bits(f))
	}
}

// A type that nobody has described is a mistake of the program.
func TestUnexported(t *testing.T) {
	defer func() {
		if recover() == nil {
			t.Error("an unexported field was passed over")
		}
	}()
	Writer().Value(&struct{ hidden int }{1})
}

func TestLayout(t *testing.T) {
	type a struct{ X, Y float64 }
	type b struct{ X, Z float64 }
	type c struct {
		X float64
		Y int
	}
	seen := map[uint64]string{}
	for _, v := range []any{a{}, b{}, c{}, struct{ A a }{}, struct{ A []a }{}, struct{ A [2]a }{}, struct{ A *a }{}} {
		l := Layout([]any{v})
		if other, found := seen[l]; found {
			t.Errorf("%T has the layout of %s", v, other)
		}
		if Layout([]any{v}) != l {
			t.Errorf("%T has two layouts", v)
		}
		seen[l] = reflect.TypeOf(v).String()
	}
}

func FuzzValue(f *testing.F) {
	v := sample()
	w := coder(Writer())
	w.Value(&v)
	f.Add(w.Bytes())
	f.Add([]byte{})
	f.Fuzz(func(t *testing.T, b []byte) {
		var v everything
		r := coder(Reader(b))
		r.Value(&v)
		if r.Done() != nil {
			return
		}
		w := coder(Writer())
		w.Value(&v)
		var again everything
		r = coder(Reader(w.Bytes()))
		r.Value(&again)
		if err := r.Done(); err != nil {
			t.Errorf("what was read and written cannot be read: %v", err)
		}
	})
}
