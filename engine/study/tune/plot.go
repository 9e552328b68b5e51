package tune

import (
	"bytes"
	"fmt"
	"image/color"
	"io"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// Colours that people with any of the common colour deficiencies tell apart
// (Okabe and Ito, "Color Universal Design", 2008).
var (
	profileColour  = color.RGBA{0x00, 0x72, 0xb2, 0xff}
	parabolaColour = color.RGBA{0xe6, 0x9f, 0x00, 0xff}
	limitColour    = color.RGBA{0x55, 0x55, 0x55, 0xff}
	beforeColour   = color.RGBA{0xd5, 0x5e, 0x00, 0xff}
)

// Plot draws a figure's profile as svg or png: the log evidence against the figure,
// with the parabola of the standard error, the level of 95 % and the figure that the
// suite had.
func (t *Tuned) Plot(w io.Writer, format string) error {
	if len(t.Profile) < 2 {
		return fmt.Errorf("%s has no profile to draw", t.Key)
	}
	p := plot.New()
	for _, s := range []*text.Style{&p.Title.TextStyle, &p.X.Label.TextStyle, &p.Y.Label.TextStyle, &p.X.Tick.Label, &p.Y.Tick.Label, &p.Legend.TextStyle} {
		s.Font.Variant, s.Font.Size = "Sans", vg.Points(9)
	}
	p.Title.Text = t.Key + ": " + t.Known
	if t.Known != Silent && t.Value != nil {
		p.Title.Text += " " + Text(*t.Value)
	}
	p.X.Label.Text, p.Y.Label.Text = "the suite's figure, in its unit (logarithmic)", "log evidence below its maximum, nats"
	p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, plot.TickerFunc(logTicks)
	add := func(name string, xys plotter.XYs, c color.Color, dashes ...vg.Length) error {
		l, err := plotter.NewLine(xys)
		if err != nil {
			return err
		}
		l.LineStyle = draw.LineStyle{Color: c, Width: vg.Points(1.6), Dashes: dashes}
		p.Add(l)
		p.Legend.Add(name, l)
		return nil
	}
	profile := make(plotter.XYs, len(t.Profile))
	least := -2 * limitNats
	for i, q := range t.Profile {
		profile[i] = plotter.XY{X: q.Value, Y: q.Nats}
		least = math.Min(least, q.Nats)
	}
	least = math.Max(least*1.05, -50) // what is farther down says no more
	first, last := t.Profile[0].Value, t.Profile[len(t.Profile)-1].Value
	if err := add("profile, the other figures at their best", clipped(profile, least), profileColour); err != nil {
		return err
	}
	if t.LogSigma != nil {
		const n = 60
		var xys plotter.XYs
		for i := range n + 1 {
			x := math.Log(first) + (math.Log(last)-math.Log(first))*float64(i)/n
			z := (x - math.Log(*t.Value)) / *t.LogSigma
			xys = append(xys, plotter.XY{X: math.Exp(x), Y: -z * z / 2})
		}
		if err := add(fmt.Sprintf("standard error %.2g of its logarithm", *t.LogSigma), clipped(xys, least), parabolaColour, vg.Points(5), vg.Points(3)); err != nil {
			return err
		}
	}
	if err := add("95 %", plotter.XYs{{X: first, Y: -limitNats}, {X: last, Y: -limitNats}}, limitColour, vg.Points(2), vg.Points(2)); err != nil {
		return err
	}
	if t.Before >= first && t.Before <= last {
		if err := add("before: "+Text(t.Before), plotter.XYs{{X: t.Before, Y: least}, {X: t.Before, Y: 0}}, beforeColour, vg.Points(8), vg.Points(3)); err != nil {
			return err
		}
	}
	p.X.Min, p.X.Max, p.Y.Min, p.Y.Max = first, last, least, math.Max(0.5, -0.35*least) // room for the legend
	p.Legend.Top, p.Legend.Left = true, true
	c, err := p.WriterTo(7*vg.Inch, 4.5*vg.Inch, format)
	if err != nil {
		return fmt.Errorf("drawing the profile of %s: %w", t.Key, err)
	}
	var b bytes.Buffer
	if _, err := c.WriteTo(&b); err != nil {
		return err
	}
	_, err = w.Write(b.Bytes())
	return err
}

// clipped keeps a line above a level.
func clipped(xys plotter.XYs, least float64) plotter.XYs {
	out := make(plotter.XYs, len(xys))
	for i, q := range xys {
		out[i] = plotter.XY{X: q.X, Y: math.Max(q.Y, least)}
	}
	return out
}

// logTicks marks 1, 2 and 5 times each power of ten; where that is one mark or none,
// five places evenly.
func logTicks(lo, hi float64) (out []plot.Tick) {
	for d := math.Pow(10, math.Floor(math.Log10(lo))); d <= hi; d *= 10 {
		for _, m := range []float64{1, 2, 5} {
			if v := m * d; v >= lo && v <= hi {
				out = append(out, plot.Tick{Value: v, Label: Text(v)})
			}
		}
	}
	if len(out) > 1 {
		return out
	}
	out = out[:0]
	for i := range 5 {
		v := lo * math.Pow(hi/lo, float64(i)/4)
		out = append(out, plot.Tick{Value: v, Label: Text(v)})
	}
	return out
}
