package analyses

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"flag"
	"fmt"
	"image/color"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"
	"testing/fstest"
	"time"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"

	"poise/mna"
	"poise/netlist"
)

// diagrams is where TestWorkPrecision writes its table and its diagrams.
var diagrams = flag.String("diagrams", "", "write work-precision diagrams of all circuits to this `folder`")

// workload is a run with a reference solution.
type workload struct {
	name  string
	text  string // of the file
	bench string
	node  string
	times []float64 // s
	volts []float64 // V
	swing float64   // V
	cheap bool      // enough to be run by every test
}

// resonance rings at 15.9 kHz with a Q of 500.
const resonance = `design resonance "Coil and capacitor that ring"
y -- L1 10mH start 0A -- x -- R1 2ohm -- gnd
y -- C1 10nF start 1V -- gnd
bench b {
  run 1.5ms cold
  expect volts(y) within -1.1V..1.1V
}
`

// chopped is a lag behind the edges of a chopper.
const chopped = `design chopped "Lag behind a chopper"
s -- V1 0V -- gnd
s -- R1 10kohm -- a -- C1 330pF -- gnd
bench b {
  drive V1 = pulse(0V, 1V, width: 24us, every: 50us, edge: 50ns)
  run 1ms
  expect volts(a) within -0.1V..1.1V
}
`

func workloads(t testing.TB) []*workload {
	pair, err := os.ReadFile("../testdata/reference/pair.poise")
	require.NoError(t, err)
	list := []*workload{
		{name: "hum 1 s", text: string(pair), bench: "hum", node: "out", cheap: true},
		{name: "1 MHz carrier 2 ms", text: string(pair), bench: "carrier", node: "out"},
		{name: "5/50 ns burst", text: string(pair), bench: "burst", node: "out", cheap: true},
	}
	for _, w := range list {
		y := newYardBench(t, w.bench, 1e-3)
		w.times, w.volts, w.swing = y.times, y.volts, y.swing
	}
	ring := &workload{name: "LC of Q 500", text: resonance, bench: "b", node: "y", swing: 2, cheap: true}
	ring.sample(1.5e-3, func(t float64) float64 {
		const l, c, r = 10e-3, 10e-9, 2.0
		decay := r / (2 * l)
		omega := math.Sqrt(1/(l*c) - decay*decay)
		return math.Exp(-decay*t) * (math.Cos(omega*t) + decay/omega*math.Sin(omega*t))
	})
	edges := &workload{name: "chopper edges", text: chopped, bench: "b", node: "a", swing: 1, cheap: true}
	edges.sample(1e-3, chop)
	return append(list, ring, edges, rectifier(t))
}

// chop is the response of a lag of 3.3 us to straight edges of 50 ns from 10 % to 90 %, up every 50 us and down 24 us later.
func chop(t float64) float64 {
	const tau, edge, period, width = 3.3e-6, 50e-9 / 0.8, 50e-6, 24e-6
	ramp := func(t float64) float64 {
		if t <= 0 {
			return 0
		}
		return (t + tau*math.Expm1(-t/tau)) / edge
	}
	v := 0.0
	for k := 0.0; k*period <= t; k++ {
		up := k * period
		down := up + width
		v += ramp(t-up) - ramp(t-up-edge) - ramp(t-down) + ramp(t-down-edge)
	}
	return v
}

func rectifier(t testing.TB) *workload {
	text, err := os.ReadFile("../testdata/reference/rectifier.poise")
	require.NoError(t, err)
	raw, err := os.ReadFile("../testdata/reference/rectifier.json")
	require.NoError(t, err)
	var solution struct {
		Time    []float64
		Benches map[string]struct {
			Swing float64
			Value []float64
		}
	}
	require.NoError(t, json.Unmarshal(raw, &solution))
	b := solution.Benches["biased"]
	return &workload{name: "rectifier with storage", text: string(text), bench: "biased", node: "out", times: solution.Time, volts: b.Value, swing: b.Swing, cheap: true}
}

// sample takes the reference from a closed form, at times that share no period with the signal.
func (w *workload) sample(until float64, exact func(t float64) float64) {
	for k := 1; k < 1000; k++ {
		t := until * (float64(k) - 0.382) / 1000
		w.times, w.volts = append(w.times, t), append(w.volts, exact(t))
	}
}

// measured is what a run took and how far off it was.
type measured struct {
	circuit  string
	method   mna.Method
	accuracy float64
	share    float64 // largest error beside the swing
	stats    *mna.TransientStats
	seconds  float64
}

func (w *workload) run(t testing.TB, method mna.Method, accuracy float64) measured {
	d, err := netlist.Load(fstest.MapFS{"w.poise": {Data: []byte(w.text)}}, "w.poise")
	require.NoError(t, err)
	s, err := d.Bench(w.bench).Setup(nil)
	require.NoError(t, err)
	e, err := newEvaluation(context.Background(), s, nil)
	require.NoError(t, err)
	o := mna.TransientOptions{Until: s.Run.Until, Cold: s.Run.Cold, Accuracy: accuracy, Method: method}
	if !o.Cold {
		o.Start, err = e.quiescent()
		require.NoError(t, err)
	}
	u := e.model.system.Unknown(e.model.node[w.node])
	worst, next, x := 0.0, 0, make([]float64, e.model.system.Size())
	begun := time.Now()
	stats, err := e.model.system.Transient(context.Background(), o, func(step *mna.Step) error {
		for next < len(w.times) && w.times[next] <= step.T1 {
			step.At(w.times[next], x)
			if d := math.Abs(x[u] - w.volts[next]); !(d <= worst) {
				worst = d
			}
			next++
		}
		return nil
	})
	require.NoError(t, err)
	require.Equal(t, len(w.times), next)
	return measured{w.name, method, accuracy, worst / w.swing, stats, time.Since(begun).Seconds()}
}

// TestWorkPrecision justifies the default method: at the same accuracy asked for it takes fewer evaluations than the other on every circuit, and keeps the accuracy.
func TestWorkPrecision(t *testing.T) {
	accuracies := []float64{1e-3, 1e-4}
	if *diagrams != "" {
		accuracies = []float64{1e-2, 3e-3, 1e-3, 3e-4, 1e-4, 3e-5, 1e-5, 1e-6}
	}
	var all []measured
	for _, w := range workloads(t) {
		if *diagrams == "" && !w.cheap {
			continue
		}
		for _, accuracy := range accuracies {
			if !w.cheap && accuracy < 1e-4 {
				break // TR-BDF2 takes minutes
			}
			ndf, tr := w.run(t, mna.NDF, accuracy), w.run(t, mna.TRBDF2, accuracy)
			t.Logf("%-24s %6.0e: NDF %.2e with %6d evaluations, TR-BDF2 %.2e with %6d", w.name, accuracy, ndf.share, ndf.stats.Work.Evaluations, tr.share, tr.stats.Work.Evaluations)
			if accuracy <= 1e-3 {
				require.LessOrEqual(t, ndf.share, accuracy, w.name)
				require.Less(t, ndf.stats.Work.Evaluations, tr.stats.Work.Evaluations, w.name)
			}
			all = append(all, ndf, tr)
		}
	}
	if *diagrams != "" {
		require.NoError(t, writeTable(filepath.Join(*diagrams, "precision.csv"), all))
		require.NoError(t, drawDiagrams(filepath.Join(*diagrams, "precision.svg"), all))
	}
}

func writeTable(path string, all []measured) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer f.Close()
	w := csv.NewWriter(f)
	if err := w.Write([]string{"circuit", "method", "accuracy", "error/swing", "evaluations", "factorisations", "solves", "steps", "refused"}); err != nil {
		return err
	}
	for _, o := range all {
		row := []string{o.circuit, o.method.String(), fmt.Sprintf("%g", o.accuracy), fmt.Sprintf("%.3g", o.share)}
		for _, n := range []int{o.stats.Work.Evaluations, o.stats.Work.Factorisations, o.stats.Work.Solves, o.stats.Steps, o.stats.Rejected} {
			row = append(row, strconv.Itoa(n))
		}
		if err := w.Write(row); err != nil {
			return err
		}
	}
	w.Flush()
	if err := w.Error(); err != nil {
		return err
	}
	return f.Close()
}

// drawDiagrams draws one diagram a circuit: evaluations over the error made, both logarithmic, a line for each method.
func drawDiagrams(path string, all []measured) error {
	var names []string
	runs := map[string]map[mna.Method]plotter.XYs{}
	for _, o := range all {
		if runs[o.circuit] == nil {
			names = append(names, o.circuit)
			runs[o.circuit] = map[mna.Method]plotter.XYs{}
		}
		runs[o.circuit][o.method] = append(runs[o.circuit][o.method], plotter.XY{X: o.share, Y: float64(o.stats.Work.Evaluations)})
	}
	const columns = 3
	rows := (len(names) + columns - 1) / columns
	canvas := vgsvg.New(columns*8*vg.Centimeter, vg.Length(rows)*6.5*vg.Centimeter)
	tiles := draw.Tiles{Rows: rows, Cols: columns, PadX: 12, PadY: 12, PadTop: 6, PadBottom: 6, PadLeft: 6, PadRight: 10}
	for i, name := range names {
		p, err := diagram(name, runs[name])
		if err != nil {
			return err
		}
		p.Draw(tiles.At(draw.New(canvas), i%columns, i/columns))
	}
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer f.Close()
	if _, err := canvas.WriteTo(f); err != nil {
		return err
	}
	return f.Close()
}

func diagram(name string, lines map[mna.Method]plotter.XYs) (*plot.Plot, error) {
	p := plot.New()
	p.Title.Text, p.Title.TextStyle.Font.Variant, p.Title.TextStyle.Font.Size = name, "Sans", 10
	for _, axis := range []*plot.Axis{&p.X, &p.Y} {
		axis.Scale, axis.Tick.Marker = plot.LogScale{}, powersOfTen{}
		axis.Label.TextStyle.Font.Variant, axis.Label.TextStyle.Font.Size = "Sans", 9
		axis.Tick.Label.Font.Variant, axis.Tick.Label.Font.Size = "Sans", 8
		axis.Padding = 0
	}
	p.X.Label.Text, p.Y.Label.Text = "error / swing", "evaluations"
	p.Legend.Top, p.Legend.TextStyle.Font.Variant, p.Legend.TextStyle.Font.Size = true, "Sans", 8
	grid := plotter.NewGrid()
	grid.Horizontal.Color, grid.Vertical.Color = color.Gray{0xD8}, color.Gray{0xD8}
	p.Add(grid)
	colours := map[mna.Method]color.Color{mna.NDF: color.RGBA{0x00, 0x72, 0xB2, 0xFF}, mna.TRBDF2: color.RGBA{0xD5, 0x5E, 0x00, 0xFF}}
	for _, method := range []mna.Method{mna.NDF, mna.TRBDF2} {
		line, points, err := plotter.NewLinePoints(lines[method])
		if err != nil {
			return nil, err
		}
		line.Color, points.Color, line.Width = colours[method], colours[method], 1.2
		points.Shape, points.Radius = draw.CircleGlyph{}, 2
		p.Add(line, points)
		p.Legend.Add(method.String(), line, points)
	}
	for _, axis := range []*plot.Axis{&p.X, &p.Y} {
		axis.Min, axis.Max = math.Pow(10, math.Floor(math.Log10(axis.Min))), math.Pow(10, math.Ceil(math.Log10(axis.Max)))
	}
	return p, nil
}

// powersOfTen marks decades by their value and 2 to 9 between them without a word.
type powersOfTen struct{}

func (powersOfTen) Ticks(low, high float64) []plot.Tick {
	var ticks []plot.Tick
	first, last := int(math.Floor(math.Log10(low))), math.Log10(high)+1e-9
	every := 1
	if last-float64(first) > 5 {
		every = 2
	}
	for e := first; float64(e) <= last; e++ {
		label := ""
		if (e-first)%every == 0 {
			label = fmt.Sprint("1e", e)
		}
		ticks = append(ticks, plot.Tick{Value: math.Pow10(e), Label: label})
		for m := 2.0; m < 10; m++ {
			if v := m * math.Pow10(e); v <= high {
				ticks = append(ticks, plot.Tick{Value: v})
			}
		}
	}
	return ticks
}
