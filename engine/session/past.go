package session

import (
	"encoding/binary"
	"math"
	"slices"
	"sort"

	"leadline/engine/sensor"
)

// past are the events that the log has dropped, as searches may want them: five minutes
// of an odometer and a gyro, which as events would be most of what a session holds. In
// blocks, each of which is read by itself; in one, an increment of distance or heading
// is what it differs by from the one before of its sensor, with value and sigma as
// float32 (see searched): five bytes, if that is its value alone.
type past struct {
	blocks  []pastBlock
	sources []pastSource // of increments, all that there have been
	n       int
}

type pastBlock struct {
	n           int
	first, last sensor.Time
	code        []byte
	others      []sensor.Event // all but increments, which code only counts
}

// pastSource is what tells increments apart, and the last one in a block.
type pastSource struct {
	sensor string
	turn   bool
	lastIncrement
}

type lastIncrement struct {
	time, every sensor.Time
	number      uint64
	sigma       uint32 // bits
}

const (
	pastBlockEvents = 112
	// maxPastSources is how many sources of increments are told apart; increments of
	// others are kept as events.
	maxPastSources = 15
)

// The lower half of an event's first byte is the number of its source, the upper half says
// what is otherwise than expected: in this order that it comes as long after the one
// before as that after its own, has the next number, begins with it, and has its sigma.
const (
	pastSources = 0x0f
	otherTime   = 0x10
)

// searched is an event as searches take it, whether it is in the past or still in the log:
// the value and the sigma of an increment rounded to float32, 6e-8 of themselves, which is
// 0.2 mm in 3 km. What would become 0 or infinite stays as it is.
func searched(ev sensor.Event) sensor.Event {
	switch m := ev.Measurement.(type) {
	case sensor.Travel:
		if m.DistanceM, m.SigmaM = float32Of(m.DistanceM), float32Of(m.SigmaM); m != ev.Measurement {
			ev.Measurement = m
		}
	case sensor.Turn:
		if m.AngleRad, m.SigmaRad = float32Of(m.AngleRad), float32Of(m.SigmaRad); m != ev.Measurement {
			ev.Measurement = m
		}
	}
	return ev
}

func float32Of(v float64) float64 {
	if r := float64(float32(v)); r != 0 && !math.IsInf(r, 0) {
		return r
	}
	return v
}

// add appends events, which are in order.
func (p *past) add(events []sensor.Event) {
	for _, ev := range events {
		b := p.open()
		if b.n == 0 {
			b.first = ev.Time
		}
		p.code(b, ev)
		b.last = ev.Time
		b.n++
		p.n++
	}
}

// open is the block that the next event goes into.
func (p *past) open() *pastBlock {
	if n := len(p.blocks); n > 0 {
		b := &p.blocks[n-1]
		if b.n < pastBlockEvents {
			return b
		}
		b.code, b.others = slices.Clip(slices.Clone(b.code)), slices.Clip(slices.Clone(b.others))
	}
	p.blocks = append(p.blocks, pastBlock{})
	for i := range p.sources {
		p.sources[i].lastIncrement = lastIncrement{}
	}
	return &p.blocks[len(p.blocks)-1]
}

// code appends an event to a block, as searches take it: 0 for one that is among the
// others, else the number of its source, from 1, its value, and what is otherwise than
// expected.
func (p *past) code(b *pastBlock, ev sensor.Event) {
	ev = searched(ev)
	var since sensor.Time
	var value, sigma float64
	var turn bool
	source := -1
	switch m := ev.Measurement.(type) {
	case sensor.Travel:
		since, value, sigma = m.Since, m.DistanceM, m.SigmaM
		source = p.source(ev.Sensor, false)
	case sensor.Turn:
		since, value, sigma, turn = m.Since, m.AngleRad, m.SigmaRad, true
		source = p.source(ev.Sensor, turn)
	}
	if source < 0 || !fits(value) || !fits(sigma) {
		b.code, b.others = append(b.code, 0), append(b.others, ev)
		return
	}
	last := &p.sources[source].lastIncrement
	bits := math.Float32bits(float32(sigma))
	head := len(b.code)
	c := binary.LittleEndian.AppendUint32(append(b.code, byte(source+1)), math.Float32bits(float32(value)))
	for i, other := range [4]uint64{
		fold(int64(ev.Time - last.time - last.every)), fold(int64(ev.Number - last.number - 1)), fold(int64(since - last.time)), uint64(bits ^ last.sigma),
	} {
		if other != 0 {
			c = binary.AppendUvarint(c, other)
			c[head] |= otherTime << i
		}
	}
	b.code = c
	*last = lastIncrement{ev.Time, ev.Time - last.time, ev.Number, bits}
}

// fits reports whether a number is one of float32.
func fits(v float64) bool { return float64(float32(v)) == v }

// fold makes a number near 0 a small one without a sign.
func fold(v int64) uint64 { return uint64(v<<1) ^ uint64(v>>63) }

func unfold(u uint64) int64 { return int64(u>>1) ^ -int64(u&1) }

// source is the number of a source of increments, -1 if it has none.
func (p *past) source(name string, turn bool) int {
	for i := range p.sources {
		if s := &p.sources[i]; s.turn == turn && s.sensor == name {
			return i
		}
	}
	if len(p.sources) == maxPastSources {
		return -1
	}
	p.sources = append(p.sources, pastSource{sensor: name, turn: turn})
	return len(p.sources) - 1
}

// events appends those of a block.
func (p *past) events(dst []sensor.Event, b *pastBlock) []sensor.Event {
	last := make([]lastIncrement, len(p.sources))
	c, others := b.code, b.others
	for range b.n {
		source := int(c[0]&pastSources) - 1
		if source < 0 {
			c = c[1:]
			dst, others = append(dst, others[0]), others[1:]
			continue
		}
		l, s := &last[source], &p.sources[source]
		head, value := c[0], float64(math.Float32frombits(binary.LittleEndian.Uint32(c[1:])))
		c = c[5:]
		var other [4]uint64
		for i := range other {
			if head&(otherTime<<i) != 0 {
				var n int
				other[i], n = binary.Uvarint(c)
				c = c[n:]
			}
		}
		ev := sensor.Event{Time: l.time + l.every + sensor.Time(unfold(other[0])), Sensor: s.sensor, Number: l.number + 1 + uint64(unfold(other[1]))}
		since, bits := l.time+sensor.Time(unfold(other[2])), l.sigma^uint32(other[3])
		sigma := float64(math.Float32frombits(bits))
		if s.turn {
			ev.Measurement = sensor.Turn{Since: since, AngleRad: value, SigmaRad: sigma}
		} else {
			ev.Measurement = sensor.Travel{Since: since, DistanceM: value, SigmaM: sigma}
		}
		*l = lastIncrement{ev.Time, ev.Time - l.time, ev.Number, bits}
		dst = append(dst, ev)
	}
	return dst
}

// between appends the events after from, up to until.
func (p *past) between(dst []sensor.Event, from, until sensor.Time) []sensor.Event {
	for i := range p.blocks {
		b := &p.blocks[i]
		if b.last <= from || b.first > until {
			continue
		}
		n := len(dst)
		dst = p.events(dst, b)
		in := dst[n:]
		lo := sort.Search(len(in), func(i int) bool { return in[i].Time > from })
		hi := sort.Search(len(in), func(i int) bool { return in[i].Time > until })
		dst = append(dst[:n], in[lo:hi]...)
	}
	return dst
}

// all are the events.
func (p *past) all() []sensor.Event {
	var out []sensor.Event
	for i := range p.blocks {
		out = p.events(out, &p.blocks[i])
	}
	return out
}

// forget lets blocks go of which nothing is so late, or among the last most events.
func (p *past) forget(before sensor.Time, most int) {
	i := 0
	for ; i < len(p.blocks)-1 && (p.blocks[i].last < before || p.n-p.blocks[i].n >= most); i++ {
		p.n -= p.blocks[i].n
	}
	if i > 0 {
		p.blocks = slices.Delete(p.blocks, 0, i)
	}
}

// clone shares nothing that changes.
func (p *past) clone() past {
	c := past{slices.Clone(p.blocks), slices.Clone(p.sources), p.n}
	if n := len(c.blocks); n > 0 {
		b := &c.blocks[n-1]
		b.code, b.others = slices.Clone(b.code), slices.Clone(b.others)
	}
	return c
}
