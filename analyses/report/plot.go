package report

import (
	"fmt"
	"image/color"
	"io"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgsvg"

	"poise/analyses"
	"poise/netlist/unit"
)

// palette is that of Okabe & Ito, Color universal design, 2008.
var palette = []color.RGBA{
	{0x00, 0x72, 0xB2, 0xFF}, {0xD5, 0x5E, 0x00, 0xFF}, {0x00, 0x9E, 0x73, 0xFF}, {0xCC, 0x79, 0xA7, 0xFF},
	{0xE6, 0x9F, 0x00, 0xFF}, {0x56, 0xB4, 0xE9, 0xFF}, {0x00, 0x00, 0x00, 0xFF},
}

const (
	plotWidth, plotHeight = 18 * vg.Centimeter, 10 * vg.Centimeter
	plotDPI               = 192
	plotColumns           = 1400 // of points that a trace is thinned to
)

// Plot draws curves or waveforms as "svg" or "png".
func Plot(w io.Writer, r *analyses.PlotResult, format string) error {
	p, err := figure(r)
	if err != nil {
		return err
	}
	var c vg.CanvasWriterTo
	switch format {
	case "svg":
		c = vgsvg.New(plotWidth, plotHeight)
	case "png":
		c = vgimg.PngCanvas{Canvas: vgimg.NewWith(vgimg.UseWH(plotWidth, plotHeight), vgimg.UseDPI(plotDPI))}
	default:
		return fmt.Errorf("a picture is svg or png, not %s", format)
	}
	p.Draw(draw.New(c))
	_, err = c.WriteTo(w)
	return err
}

// figure lays a plot out.
func figure(r *analyses.PlotResult) (*plot.Plot, error) {
	p := plot.New()
	p.Title.Text = r.Title
	p.Title.TextStyle.Font.Variant, p.Title.TextStyle.Font.Size = "Sans", 11
	p.Title.Padding = 6
	xScale, xPrefix := axisScale(r.X.Values, r.X.Unit, r.X.Log)
	p.X.Label.Text = label(r.X.Name, xPrefix, r.X.Unit)
	yUnit, yPrefix, yScale, ratios := traceScale(r.Traces)
	p.Y.Label.Text = label("", yPrefix, yUnit)
	if ratios && r.X.Log {
		p.Y.Label.Text = "dB"
	}
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		a.Padding = 0
		a.Label.TextStyle.Font.Variant, a.Label.TextStyle.Font.Size = "Sans", 9
		a.Tick.Label.Font.Variant, a.Tick.Label.Font.Size = "Sans", 8
		a.Tick.Marker = linearTicks{}
	}
	if r.X.Log {
		p.X.Scale, p.X.Tick.Marker = plot.LogScale{}, decadeTicks{}
	}
	p.Legend.Top, p.Legend.TextStyle.Font.Variant, p.Legend.TextStyle.Font.Size = true, "Sans", 8
	grid := plotter.NewGrid()
	grid.Horizontal.Color, grid.Vertical.Color = color.Gray{0xDD}, color.Gray{0xDD}
	p.Add(grid)
	for i, t := range r.Traces {
		points := tracePoints(r.X.Values, t.Values, xScale, yScale, ratios && r.X.Log)
		if len(points) == 0 {
			continue
		}
		line, err := plotter.NewLine(points)
		if err != nil {
			return nil, err
		}
		line.Color, line.Width = palette[i%len(palette)], vg.Points(1.2)
		if i >= len(palette) {
			line.Dashes = []vg.Length{4, 2}
		}
		p.Add(line)
		p.Legend.Add(t.Name, line)
	}
	if r.X.Log && len(r.X.Values) > 0 {
		p.X.Min, p.X.Max = r.X.Values[0]*xScale, r.X.Values[len(r.X.Values)-1]*xScale
	}
	room := 0.05 * (p.Y.Max - p.Y.Min)
	p.Y.Min, p.Y.Max = p.Y.Min-room, p.Y.Max+3*room
	return p, nil
}

// label writes an axis title.
func label(name, prefix, symbol string) string {
	if symbol == "" {
		return name
	}
	if name == "" {
		return prefix + symbol
	}
	return name + " / " + prefix + symbol
}

// axisScale chooses one prefix for a linear axis.
func axisScale(values []float64, symbol string, log bool) (scale float64, prefix string) {
	largest := 0.0
	for _, v := range values {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			largest = math.Max(largest, math.Abs(v))
		}
	}
	if log || largest == 0 || symbol == "" {
		return 1, ""
	}
	exponent := int(math.Floor(math.Log10(largest)/3+1e-9)) * 3
	names := map[int]string{-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 3: "k", 6: "M", 9: "G"}
	name, ok := names[exponent]
	if !ok {
		return 1, ""
	}
	return math.Pow(10, float64(-exponent)), name
}

// traceScale finds what the traces have in common: a unit, or that they are ratios, which are drawn in dB over frequency.
func traceScale(traces []analyses.Trace) (symbol, prefix string, scale float64, ratios bool) {
	ratios = true
	var all []float64
	for i, t := range traces {
		if t.Unit != "" {
			ratios = false
		}
		if i == 0 {
			symbol = t.Unit
		} else if t.Unit != symbol {
			symbol = ""
		}
		all = append(all, t.Values...)
	}
	scale, prefix = axisScale(all, symbol, false)
	return symbol, prefix, scale, ratios
}

// tracePoints thins a trace to the extremes of each column of the picture and leaves out what cannot be drawn.
func tracePoints(x, y []float64, xs, ys float64, dB bool) plotter.XYs {
	var points plotter.XYs
	for i := range x {
		v := y[i] * ys
		if dB {
			v = 20 * math.Log10(math.Abs(y[i]))
		}
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			points = append(points, plotter.XY{X: x[i] * xs, Y: v})
		}
	}
	if len(points) <= 2*plotColumns {
		return points
	}
	first, last := points[0].X, points[len(points)-1].X
	var thin plotter.XYs
	for i := 0; i < len(points); {
		column := int(float64(plotColumns) * (points[i].X - first) / (last - first))
		low, high := i, i
		k := i
		for ; k < len(points) && int(float64(plotColumns)*(points[k].X-first)/(last-first)) == column; k++ {
			if points[k].Y < points[low].Y {
				low = k
			}
			if points[k].Y > points[high].Y {
				high = k
			}
		}
		thin = append(thin, points[min(low, high)])
		if low != high {
			thin = append(thin, points[max(low, high)])
		}
		i = k
	}
	return thin
}

// linearTicks marks 1, 2 or 5 times a power of ten.
type linearTicks struct{}

// Ticks returns about seven marks.
func (linearTicks) Ticks(low, high float64) []plot.Tick {
	const about = 7
	raw := (high - low) / about
	if !(raw > 0) {
		return []plot.Tick{{Value: low, Label: unit.Trim(low, 4)}}
	}
	power := math.Pow(10, math.Floor(math.Log10(raw)))
	step := power
	for _, m := range []float64{1, 2, 5, 10} {
		if step = m * power; step >= raw {
			break
		}
	}
	var ticks []plot.Tick
	for k := math.Ceil(low/step - 1e-9); k*step <= high+1e-9*step; k++ {
		v := k * step
		if k == 0 {
			v = 0
		}
		ticks = append(ticks, plot.Tick{Value: v, Label: unit.Trim(v, 6)})
	}
	return ticks
}

// decadeTicks marks decades with prefixes and the values 2 to 9 between them without a word.
type decadeTicks struct{}

// Ticks returns the marks of a logarithmic axis.
func (decadeTicks) Ticks(low, high float64) []plot.Tick {
	var ticks []plot.Tick
	for e := math.Floor(math.Log10(low)); e <= math.Ceil(math.Log10(high)); e++ {
		for m := 1.0; m < 10; m++ {
			v := m * math.Pow(10, e)
			if v < low*(1-1e-9) || v > high*(1+1e-9) {
				continue
			}
			t := plot.Tick{Value: v}
			if m == 1 {
				t.Label = unit.Show(v, unit.Frequency)
			}
			ticks = append(ticks, t)
		}
	}
	return ticks
}
