package mna

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// rung lets a resonance of the given quality go at 1 V and returns how far it is off at most over some periods, beside its swing.
func rung(t testing.TB, quality, periods, accuracy float64) (float64, *TransientStats) {
	const l, c = 10e-3, 10e-9
	natural := 1 / math.Sqrt(l*c)
	n := newNet(t)
	n.hold("in", level(0))
	n.add("R", resistor(natural*l/quality), "in", "m")
	n.add("L", inductor{l, 0}, "m", "x")
	n.add("C", capacitor{c, 1}, "x", "gnd")
	s := n.build()
	a := natural / 2 / quality
	w := math.Sqrt(natural*natural - a*a)
	o := TransientOptions{Until: periods * 2 * math.Pi / w, Accuracy: accuracy, Cold: true}
	off, stats := worst(t, s, o, n.u("x"), func(t float64) float64 { return math.Exp(-a*t) * (math.Cos(w*t) + a/w*math.Sin(w*t)) })
	return off / 2, stats
}

// TestErrorsOfAResonanceDoNotAddUp holds the error to the accuracy however long a circuit remembers what steps left.
func TestErrorsOfAResonanceDoNotAddUp(t *testing.T) {
	for _, accuracy := range []float64{1e-3, 1e-4, 1e-5} {
		for _, quality := range []float64{5, 50, 500, 5000, 1e6} {
			for _, periods := range []float64{8, 80, 800} {
				off, stats := rung(t, quality, periods, accuracy)
				t.Logf("accuracy %g, quality %g, %g periods: off by %.2f of the accuracy, %.0f evaluations a period", accuracy, quality, periods, off/accuracy,
					float64(stats.Work.Evaluations)/periods)
				require.LessOrEqual(t, off, accuracy, "accuracy %g, quality %g, %g periods", accuracy, quality, periods)
			}
		}
	}
}
