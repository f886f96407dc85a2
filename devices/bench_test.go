package devices

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"poise/mna"
)

// forwardBias is a point at which a transistor amplifies: c b e s, then what is inside, in the order in which it is asked for.
func forwardBias() []float64 { return []float64{0, 5, 0.652, 0.003, 0, 4.999, 0.651, 0.0035} }

// benchmarkEval measures the evaluation of one device at x, alone, with and without its charges.
func benchmarkEval(b *testing.B, d mna.Device, pins int, x []float64) {
	for _, dynamic := range []bool{false, true} {
		name := "static"
		if dynamic {
			name = "dynamic"
		}
		b.Run(name, func(b *testing.B) {
			t := bind(d, pins)
			e := t.newEval(x[:t.n])
			e.Dynamic, e.Limit = dynamic, true
			t.stamp.Eval(e) // the junctions' last voltages
			b.ReportAllocs()
			for b.Loop() {
				t.stamp.Eval(e)
			}
		})
	}
}

// room is where and how an ordinary device stands.
var room = Place{Temperature: ReferenceTemperature, Area: 1}

// yardstickNPN is the transistor of testdata/reference/pair.poise.
func yardstickNPN() map[string]float64 {
	return map[string]float64{
		"Is": 6.7e-15, "betaF": 410, "betaR": 4, "earlyF": 72, "earlyR": 14, "kneeF": 55e-3, "kneeR": 20e-3,
		"leakE": 8e-15, "emE": 1.7, "leakC": 4e-15, "emC": 1.9, "rB": 38, "rE": 0.4, "rC": 1.5,
		"capE": 11e-12, "phiE": 0.72, "gradE": 0.36, "capC": 4e-12, "phiC": 0.6, "gradC": 0.34, "fcap": 0.5,
		"tauF": 370e-12, "tauR": 25e-9,
	}
}

// fullNPN is that transistor with all that it leaves out.
func fullNPN() map[string]float64 {
	v := yardstickNPN()
	for name, x := range map[string]float64{
		"rBmin": 7, "rBknee": 2e-4, "splitC": 0.6, "capS": 3e-12, "phiS": 0.65, "gradS": 0.4, "tauFbias": 6, "tauFvolt": 4, "tauFcurr": 0.03,
	} {
		v[name] = x
	}
	return v
}

// sample is a device with a point to evaluate it at: its pins, then what is inside.
type sample struct {
	name string
	d    mna.Device
	pins int
	x    []float64
}

// samples holds a device of every kind, at its ordinary work.
func samples(t require.TestingT) []sample {
	tone, err := Sine{Peak: 1, Frequency: 1e3}.New()
	require.NoError(t, err)
	two := []float64{0, 1.3, 0.2, 1e-3}
	junction := []float64{0, 0.62, 0, 0.615}
	return []sample{
		{"resistor", NewResistor(270), 2, two},
		{"capacitor", NewCapacitor(220e-12, nan), 2, two},
		{"inductor", NewInductor(1e-3, nan), 2, two},
		{"voltage source", NewVoltageSource(Constant(2)), 2, two},
		{"sine source", NewVoltageSource(tone), 2, two},
		{"current source", NewCurrentSource(Constant(1e-3)), 2, two},
		{"diode", made(t, "diode", map[string]float64{"rS": 4, "cap": 7e-12, "grad": 0.41, "tau": 3e-9, "breakdown": 50}, room), 2, junction},
		{"npn of the yardstick", made(t, "npn", yardstickNPN(), room), 4, forwardBias()},
		{"npn with everything", made(t, "npn", fullNPN(), room), 4, forwardBias()},
		{"npn with little", made(t, "npn", map[string]float64{"Is": 1e-14, "betaF": 200, "earlyF": 60}, room), 4, forwardBias()},
	}
}

func BenchmarkEval(b *testing.B) {
	for _, c := range samples(b) {
		b.Run(c.name, func(b *testing.B) { benchmarkEval(b, c.d, c.pins, c.x) })
	}
}

func TestEvaluationAllocatesNothing(t *testing.T) {
	for _, c := range samples(t) {
		b := bind(c.d, c.pins)
		e := b.newEval(c.x[:b.n])
		e.Limit = true
		require.Zero(t, testing.AllocsPerRun(20, func() { b.stamp.Eval(e) }), c.name)
	}
}

// yardstick builds testdata/reference/pair.poise with its two leads driven by a common signal.
func yardstick(t require.TestingT, common mna.Signal) *mna.System {
	n := mna.NewBuilder()
	nodes := map[string]int{"gnd": 0}
	node := func(name string) int {
		if _, ok := nodes[name]; !ok {
			nodes[name] = n.Node(name)
		}
		return nodes[name]
	}
	add := func(name string, d mna.Device, at ...string) {
		var pins []int
		for _, a := range at {
			pins = append(pins, node(a))
		}
		n.Add(name, d, pins...)
	}
	hold := func(name string, signal mna.Signal) { require.NoError(t, n.Hold(node(name), signal)) }
	hold("vp", Constant(9))
	hold("vn", Constant(-9))
	hold("sp", common)
	hold("sn", common)
	right := yardstickNPN()
	right["Is"], right["betaF"] = 6.8005e-15, 393.6
	add("Rlead1", NewResistor(175), "sp", "bp")
	add("Rlead2", NewResistor(185), "sn", "bn")
	add("Ccab1", NewCapacitor(220e-12, nan), "bp", "gnd")
	add("Ccab2", NewCapacitor(260e-12, nan), "bn", "gnd")
	add("Q1", made(t, "npn", yardstickNPN(), room), "vp", "bp", "e1", "gnd")
	add("Q2", made(t, "npn", right, room), "out", "bn", "e2", "gnd")
	add("Re1", NewResistor(270), "e1", "tail")
	add("Re2", NewResistor(270.54), "tail", "e2")
	add("Rload", NewResistor(39e3), "vp", "out")
	add("Rtail", NewResistor(36e3), "tail", "vn")
	s, err := n.Build()
	require.NoError(t, err)
	return s
}

// BenchmarkYardstick runs the yardstick on a modulated carrier; ns/evaluation is what one Newton iteration costs on the whole path, with its
// share of the step's other work.
func BenchmarkYardstick(b *testing.B) {
	carrier, err := Modulated{Peak: 0.2, Carrier: 1e6, Tone: 1e3, Depth: 0.8}.New()
	require.NoError(b, err)
	s := yardstick(b, carrier)
	evaluations := 0
	for b.Loop() {
		stats, err := s.Transient(context.Background(), mna.TransientOptions{Until: 100e-6}, func(*mna.Step) error { return nil })
		require.NoError(b, err)
		evaluations += stats.Work.Evaluations
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(evaluations), "ns/evaluation")
}
