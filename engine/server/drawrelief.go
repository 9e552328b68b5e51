package server

import (
	"context"
	"math"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/geo"
	leadlinev1 "leadline/proto/leadline/v1"
)

// maxReliefSamples bounds the samples of a relief: two bytes each.
const maxReliefSamples = 1 << 18

// drawRelief adds the heights of a plane within a box, nil for all; nothing
// where none is known. It fails with ctx alone.
func drawRelief(ctx context.Context, out *leadlinev1.DrawMapResponse, p filter.PlaneSpace, box *geo.Box) error {
	b := p.Bounds()
	if box != nil {
		if !touches(b, *box) {
			return nil
		}
		b.Min = geo.Point{E: math.Max(b.Min.E, box.Min.E), N: math.Max(b.Min.N, box.Min.N)}
		b.Max = geo.Point{E: math.Min(b.Max.E, box.Max.E), N: math.Min(b.Max.N, box.Max.N)}
	}
	width, height := b.Max.E-b.Min.E, b.Max.N-b.Min.N
	step := math.Max(out.DetailM, p.DetailM()/8) // between samples of the map nothing is seen
	var columns, rows int
	for ; ; step *= 1.1 {
		// An area of no width is a line of samples.
		columns, rows = int(math.Min(width/step, maxReliefSamples))+1, int(math.Min(height/step, maxReliefSamples))+1
		if columns*rows <= maxReliefSamples {
			break
		}
	}
	heights, err := meanHeights(ctx, p, b.Min, step, columns, rows)
	if err != nil {
		return err
	}
	out.DetailM = step
	out.Relief = relief(heights, b.Min, step, columns, rows)
	return nil
}

// meanHeights samples a plane row by row. Where samples are farther apart than
// the map's own, each is the mean of up to 3 × 3, so that the picture is calm.
func meanHeights(ctx context.Context, p filter.PlaneSpace, at geo.Point, step float64, columns, rows int) ([]float64, error) {
	n := min(max(int(math.Round(step/p.DetailM())), 1), 3)
	var c filter.Columns
	c.Resize(filter.WantHeight, 2, columns*n)
	sum, known := make([]float64, columns*rows), make([]int, columns*rows)
	off := func(i int) float64 { return float64((float64(i)-float64(n-1)/2)*step) / float64(n) }
	for row := range rows {
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		for j := range n {
			for col := range columns {
				for i := range n {
					c.East[col*n+i] = at.E + float64(float64(col)*step) + off(i)
					c.North[col*n+i] = at.N + float64(float64(row)*step) + off(j)
				}
			}
			p.Sample(&c)
			for k, h := range c.Height {
				if h == h { // known
					sum[row*columns+k/n] += h
					known[row*columns+k/n]++
				}
			}
		}
	}
	for i := range sum {
		sum[i] /= float64(known[i]) // 0/0 is unknown
	}
	return sum, nil
}

// relief makes bytes of heights; nil if none is known.
func relief(heights []float64, at geo.Point, step float64, columns, rows int) *leadlinev1.Relief {
	low, high := math.Inf(1), math.Inf(-1)
	for _, h := range heights {
		if h == h {
			low, high = math.Min(low, h), math.Max(high, h)
		}
	}
	if low > high {
		return nil
	}
	out := &leadlinev1.Relief{
		Columns: uint32(columns), Rows: uint32(rows), WestM: at.E, SouthM: at.N, StepM: step,
		LowestM: low, HighestM: high, Height: make([]byte, len(heights)), Shade: make([]byte, len(heights)),
	}
	for i, h := range heights {
		if h != h {
			continue
		}
		out.Height[i] = 1
		if high > low {
			out.Height[i] += byte(math.Round(254 * (h - low) / (high - low)))
		}
	}
	shade(out.Shade, heights, step, columns, rows)
	return out
}

// shade is Lambert's law for light from the north-west, 45° high.
func shade(dst []byte, heights []float64, step float64, columns, rows int) {
	// The slope between the neighbours of a sample, over one that is unknown or
	// missing to the sample itself.
	slope := func(i, before, after int) float64 {
		a, b := heights[before], heights[after]
		n := 2.0
		if before == i || a != a {
			a, n = heights[i], n-1
		}
		if after == i || b != b {
			b, n = heights[i], n-1
		}
		return (b - a) / (math.Max(n, 1) * step)
	}
	slopes := make([]geo.Point, len(heights))
	var steep []float64
	for row := range rows {
		for col := range columns {
			i := row*columns + col
			if heights[i] != heights[i] {
				continue
			}
			s := geo.Point{
				E: slope(i, row*columns+max(col-1, 0), row*columns+min(col+1, columns-1)),
				N: slope(i, max(row-1, 0)*columns+col, min(row+1, rows-1)*columns+col),
			}
			slopes[i] = s
			if v := s.Norm(); v > 0 {
				steep = append(steep, v)
			}
		}
	}
	exaggerate := 1.0
	if len(steep) > 0 {
		slices.Sort(steep)
		exaggerate = middlingSlope / steep[len(steep)/2]
	}
	for i, h := range heights {
		if h != h {
			continue
		}
		e, n := exaggerate*slopes[i].E, exaggerate*slopes[i].N
		light := (float64(0.5*e) - float64(0.5*n) + math.Sqrt2/2) / math.Sqrt(float64(e*e)+float64(n*n)+1)
		dst[i] = byte(math.Round(255 * math.Max(0, light)))
	}
}

// middlingSlope is what half of the slopes of a relief are drawn as less than.
const middlingSlope = 0.5
