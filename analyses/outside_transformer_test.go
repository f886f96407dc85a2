package analyses_test

import (
	"context"
	"math"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/devices"
	"poise/mna"
	"poise/netlist"
)

// windings is a family of the test's own: three coupled windings, the second and third in series with a centre tap. It also shows that a
// program's own family works in every analysis.
type windings struct {
	inductance [3]float64 // H
	coupling   float64
}

type boundWindings struct {
	w       windings
	ends    [3][2]mna.Unknown
	current [3]mna.Unknown
	node    [3][2]mna.Slot // row of an end, column of the current
	volts   [3][2]mna.Slot // row of the current's equation, column of an end
	flux    [3][3]mna.Slot
}

// Bind connects the windings p q, s t and t u.
func (w windings) Bind(b mna.Binder) mna.Stamp {
	s := &boundWindings{w: w}
	for k, ends := range [3][2]int{{0, 1}, {2, 3}, {3, 4}} {
		s.current[k] = b.Branch([]string{"first", "second", "third"}[k])
		for e, pin := range ends {
			s.ends[k][e] = b.Pin(pin)
			s.node[k][e] = b.Slot(s.ends[k][e], s.current[k])
			s.volts[k][e] = b.Slot(s.current[k], s.ends[k][e])
		}
	}
	for k := range 3 {
		for j := range 3 {
			s.flux[k][j] = b.Slot(s.current[k], s.current[j])
		}
	}
	return s
}

// Eval adds v - d/dt sum(M i) = 0 for each winding.
func (s *boundWindings) Eval(e *mna.Eval) {
	for k := range 3 {
		for end, sign := range []float64{1, -1} {
			e.F[s.ends[k][end]] += sign * e.X[s.current[k]]
			e.G[s.node[k][end]] += sign
			e.F[s.current[k]] += sign * e.X[s.ends[k][end]]
			e.G[s.volts[k][end]] += sign
		}
		for j := range 3 {
			m := math.Sqrt(s.w.inductance[k] * s.w.inductance[j])
			if j != k {
				m *= s.w.coupling
			}
			if e.Dynamic {
				e.Q[s.current[k]] -= m * e.X[s.current[j]]
				e.C[s.flux[k][j]] -= m
			}
		}
	}
}

// A small mains transformer used backwards as a combiner: the differential signal into the primary is divided by the turns ratio, a
// common signal into the secondary's centre tap lifts both ends equally (common practice, no source; the ratios of an ideal transformer are a
// closed form).
func TestTransformerAsACombiner(t *testing.T) {
	const ratio = 18.0 // primary to whole secondary
	family := devices.Family{
		Name: "windings", Title: "Primary and centre-tapped secondary",
		Pins:   []devices.Pin{{Name: "p"}, {Name: "q"}, {Name: "s"}, {Name: "t"}, {Name: "u"}},
		Params: []devices.Param{{Name: "L", Meaning: "primary inductance", Unit: "H", Default: 1, MinOpen: true, Max: 1e6}, {Name: "coupling", Meaning: "of every pair", Default: 1, Max: 1}},
		New: func(v []float64, _ devices.Place) (mna.Device, error) {
			half := v[0] / (4 * ratio * ratio)
			return windings{[3]float64{v[0], half, half}, v[1]}, nil
		},
	}
	const src = `design combiner
part mains_part = windings { L = 40H, coupling = 0.999999 }
d -- Rd 10ohm -- p
T1 = mains_part(p: p, q: gnd, s: a, t: c, u: b)
a -- Ra 1Mohm -- gnd
b -- Rb 1Mohm -- gnd
input wanted = (d)
input both = (c)
output lead = (a, b)
`
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(src)}}, "x.poise", netlist.WithFamilies(family))
	require.NoError(t, err)
	setup, err := d.Setup()
	require.NoError(t, err)
	v, err := analyses.Measure(context.Background(), setup,
		"dm_gain(wanted, lead) at 50Hz", "gain(both.signal, volts(a)) at 50Hz", "gain(both.signal, volts(b)) at 50Hz", "gain(both.signal, volts(a, b)) at 50Hz")
	require.NoError(t, err)
	// 1 - coupling is lost, 10 ohm on 40 H at 50 Hz turns the phase by 8e-4, and 2 Mohm on the secondary look like 650 Mohm.
	const near = 5e-6
	phasor(t, 1/ratio, v[0].Number, 1e-3, "differential")
	relative(t, 1/ratio, v[0].Float(), near, "magnitude of the differential")
	relative(t, 1, v[1].Float(), near, "one end")
	relative(t, 1, v[2].Float(), near, "the other end")
	absolute(t, 0, v[3].Float(), 1e-9, "between the ends")
}
