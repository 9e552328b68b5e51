package journal

import (
	"slices"
	"testing"
)

// Others need not wait until a long record is in: they share its packs. What a pack
// holds is in the order of each line, whole, and within the bound.
func TestLongRecordsLetOthersBy(t *testing.T) {
	j := Rehearse(nil, 1, "test")
	t.Cleanup(j.end)
	p := newPartition(j, 0)
	lines := []*Line{{p: p, id: 1}, {p: p, id: 2}, {p: p, id: 3}}
	var want [3][]byte // kinds, by line
	push := func(line int, kind byte, bytes int) {
		p.append(lines[line], kind, make([]byte, bytes), false, nil)
		for n := bytes; ; n -= maxPart {
			want[line] = append(want[line], kind)
			if n <= maxPart {
				return
			}
		}
	}
	push(0, 1, 5<<20) // 40 parts
	push(0, 2, 10)
	push(1, 3, 100)
	push(2, 4, 3<<20)
	for i := range 20 {
		push(1, byte(10+i), 1000)
		push(0, byte(40+i), 10)
	}
	// A header comes after all that waits with it, and nothing overtakes it.
	waits := [3]int{len(want[0]), len(want[1]), len(want[2])}
	p.queue = append(p.queue, waiting{urgent: true})
	push(1, 99, 10)
	var got [3][]byte
	headers := 0
	for packs := 0; ; packs++ {
		if packs == 1 {
			if short := want[1][:waits[1]]; !slices.Equal(got[1], short) {
				t.Errorf("the first pack has of the line with short records %v, want %v", got[1], short)
			}
			if len(got[0]) < mostLong {
				t.Errorf("and %d parts of the long one", len(got[0]))
			}
		}
		batch, _ := p.take()
		if len(batch) == 0 {
			break
		}
		size := 0
		for _, w := range batch {
			size += partBytes + len(w.part.data)
			if w.line == nil {
				if n := [3]int{len(got[0]), len(got[1]), len(got[2])}; n != waits {
					t.Errorf("the header comes after %v parts of the lines, want %v", n, waits)
				}
				headers++
				continue
			}
			i := slices.Index(lines, w.line)
			got[i] = append(got[i], w.part.kind)
		}
		if size > maxPack {
			t.Fatalf("pack %d has %d bytes", packs+1, size)
		}
		if packs > 64 {
			t.Fatal("there is no end to it")
		}
	}
	for i := range lines {
		if !slices.Equal(got[i], want[i]) {
			t.Errorf("line %d came as %v, want %v", i+1, got[i], want[i])
		}
	}
	if headers != 1 || p.bytes != 0 || p.queue != nil {
		t.Errorf("%d headers; %d bytes and %d parts are left", headers, p.bytes, len(p.queue))
	}
}
