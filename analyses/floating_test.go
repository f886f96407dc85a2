package analyses_test

import (
	"context"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/devices"
	"poise/mna"
	"poise/netlist"
)

// windingsFamily is a transformer of a primary p q and a secondary s t u with a tap at t, coupled without a loss.
func windingsFamily() devices.Family {
	return devices.Family{
		Name: "windings", Title: "Primary and tapped secondary",
		Pins: []devices.Pin{{Name: "p"}, {Name: "q"}, {Name: "s"}, {Name: "t"}, {Name: "u"}},
		New: func([]float64, devices.Place) (mna.Device, error) {
			return windings{[3]float64{1, 0.1, 0.1}, 0.99}, nil
		},
	}
}

// TestWhatFloatsBehindATransformer: what the structure of a circuit does not tell, its numbers do, by the user's names and no more of them than float.
func TestWhatFloatsBehindATransformer(t *testing.T) {
	for name, c := range map[string]struct {
		lines    string
		floating []string
	}{
		"the secondary":      {"b -- R3 1kohm -- c -- R4 1kohm -- d\n", []string{"b", "c", "d"}},
		"a longer way":       {"b -- R3 1kohm -- c -- R4 1kohm -- d -- R5 1kohm -- e -- R6 2kohm -- b\n", []string{"b", "c", "d", "e"}},
		"through capacitors": {"b -- R3 1kohm -- c -- R4 1kohm -- d\nb -- C1 1nF -- gnd\n", []string{"b", "c", "d"}},
		"tied at the tap":    {"b -- R3 1kohm -- c -- R4 1kohm -- d\nc -- R5 1kohm -- gnd\n", nil},
		"tied by a gigaohm":  {"b -- R3 1kohm -- c -- R4 1kohm -- d\nd -- R5 1Gohm -- gnd\n", nil},
	} {
		t.Run(name, func(t *testing.T) {
			src := "design d\npart tr = windings {}\nrail vp = 5V\nvp -- R1 100ohm -- a -- R2 1kohm -- gnd\nT1 = tr(p: a, q: gnd, s: b, t: c, u: d)\n" + c.lines
			d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(src)}}, "x.poise", netlist.WithFamilies(windingsFamily()))
			require.NoError(t, err)
			circuit, err := d.Circuit()
			require.NoError(t, err)
			_, err = analyses.Bias(context.Background(), circuit)
			if c.floating == nil {
				require.NoError(t, err)
				return
			}
			var singular *mna.SingularError
			require.ErrorAs(t, err, &singular)
			require.ElementsMatch(t, c.floating, singular.Floating)
			require.Contains(t, singular.Devices, "T1")
		})
	}
}
