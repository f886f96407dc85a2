package analyses_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// Properties that any circuit has, on random networks written in the language.

// branch is a part between two nodes; an inductor has a resistor in series, so that it closes no loop with a source.
type branch struct {
	kind  string // R, C or L
	value float64
	a, b  int // 0 is gnd
}

// network is a random network of n nodes besides gnd.
type network struct {
	n        int
	branches []branch
}

// nodeName returns the name of a node.
func nodeName(i int) string {
	if i == 0 {
		return "gnd"
	}
	return fmt.Sprintf("n%d", i)
}

// drawNetwork draws a network in which every node has a resistive way to gnd.
func drawNetwork(t *rapid.T, kinds string) network {
	w := network{n: rapid.IntRange(2, 7).Draw(t, "nodes")}
	value := func(kind string) float64 {
		middle := map[string]float64{"R": 3.5, "C": -8, "L": -3}[kind]
		return math.Pow(10, middle+rapid.Float64Range(-1, 1).Draw(t, "decades"))
	}
	for i := 1; i <= w.n; i++ {
		w.branches = append(w.branches, branch{"R", value("R"), i, rapid.IntRange(0, i-1).Draw(t, "parent")}, branch{"R", value("R"), i, 0})
	}
	for range rapid.IntRange(2, 9).Draw(t, "more") {
		kind := string(rapid.SampledFrom([]byte(kinds)).Draw(t, "kind"))
		a := rapid.IntRange(1, w.n).Draw(t, "a")
		b := rapid.IntRange(0, w.n).Filter(func(b int) bool { return b != a }).Draw(t, "b")
		w.branches = append(w.branches, branch{kind, value(kind), a, b})
	}
	return w
}

// text writes the network with its impedances scaled.
func (w network) text(scale float64) string {
	var s strings.Builder
	for k, b := range w.branches {
		left, right := nodeName(b.a), nodeName(b.b)
		switch b.kind {
		case "R":
			fmt.Fprintf(&s, "%s -- R%d %.17gohm -- %s\n", left, k, b.value*scale, right)
		case "C":
			fmt.Fprintf(&s, "%s -- C%d %.17gF -- %s\n", left, k, b.value/scale, right)
		default:
			fmt.Fprintf(&s, "%s -- L%d %.17gH -- _ -- R%d %.17gohm -- %s\n", left, k, b.value*scale, k, 100*scale, right)
		}
	}
	return s.String()
}

// names returns the names of all parts.
func (w network) names() (out []string) {
	for k, b := range w.branches {
		out = append(out, fmt.Sprintf("%s%d", b.kind, k))
		if b.kind == "L" {
			out = append(out, fmt.Sprintf("R%d", k))
		}
	}
	return out
}

// frequency draws one in Hz at which the networks have some phase.
func frequency(t *rapid.T) float64 {
	return math.Pow(10, rapid.Float64Range(1, 6).Draw(t, "frequency"))
}

// propertyDigits: a network of parts over some decades loses some digits of 16.
const propertyDigits = 1e-11

// Superposition: the response of a linear network to two sources is the sum of those to each, at rest and in a run.
func TestSuperposition(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawNetwork(t, "RCL")
		net := w.text(1) + "n1 -- I1 0A -- gnd\nn2 -- Rs 777ohm -- s -- V1 0V -- gnd\n"
		at := fmt.Sprintf("volts(n%d)", rapid.IntRange(1, w.n).Draw(t, "at"))
		amps, volts := rapid.Float64Range(-5e-3, 5e-3).Draw(t, "amps"), rapid.Float64Range(-9, 9).Draw(t, "volts")
		run := func(amps, volts float64, ask string) float64 {
			return scalars(t, net+fmt.Sprintf(`
set accuracy = 1e-5
bench b {
  drive I1 = step(%gA, %gA, at: 10us, edge: 20us)
  drive V1 = sine(%gV, 20kHz) + %gV
  run 150us
  expect volts(n1) <= 1MV
}
`, amps, -0.4*amps, volts, 0.3*volts), ask)[0]
		}
		for _, ask := range []string{"quiescent(" + at + ")", "value(" + at + ", at: 143us)"} {
			both, first, second := run(amps, volts, ask), run(amps, 0, ask), run(0, volts, ask)
			scale := 5e-3*1e4 + 9.0 // V, what such sources can make at most
			// Three runs, each good to its accuracy.
			absolute(t, both, first+second, 3e-5*scale, "superposition of %s", ask)
			if strings.HasPrefix(ask, "quiescent") {
				absolute(t, both, first+second, propertyDigits*scale, "superposition at rest")
			}
		}
	})
}

// Scaling all impedances leaves voltage transfer alone, and scales driving impedances.
func TestImpedanceScaling(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawNetwork(t, "RCL")
		f := frequency(t)
		scale := math.Pow(10, rapid.Float64Range(-2, 2).Draw(t, "scale"))
		gain := func(scale float64) (g, z complex128) {
			v := bench(t, w.text(scale)+fmt.Sprintf("input i = (n1)\noutput o = (n%d)\n", w.n),
				fmt.Sprintf("dm_gain at %.17gHz", f), fmt.Sprintf("out_impedance at %.17gHz", f))
			return v[0].Number, v[1].Number
		}
		g, z := gain(1)
		gs, zs := gain(scale)
		absolute(t, 0, cmplx.Abs(gs-g), propertyDigits, "transfer")
		phasor(t, z*complex(scale, 0), zs, propertyDigits, "output impedance")
	})
}

// Reciprocity (Rayleigh): what a current into one node makes of voltage at another, it makes there.
func TestReciprocity(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawNetwork(t, "RCL")
		f := frequency(t)
		v := bench(t, w.text(1)+fmt.Sprintf("input p = (n1) current\ninput q = (n%d) current\n", w.n),
			fmt.Sprintf("gain(p.signal, volts(n%d)) at %.17gHz", w.n, f), fmt.Sprintf("gain(q.signal, volts(n1)) at %.17gHz", f),
			fmt.Sprintf("gain(p.signal, volts(n1)) at %.17gHz", f))
		absolute(t, 0, cmplx.Abs(v[0].Number-v[1].Number)/cmplx.Abs(v[2].Number), propertyDigits, "transfer impedances")
	})
}

// Foster, The average impedance of an electrical network, 1949: over the branches of a resistive network the conductance times the resistance between
// its ends sums to the number of nodes less one.
func TestFoster(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawNetwork(t, "R")
		src, sum := w.text(1), 0.0
		for _, b := range w.branches {
			v := scalars(t, src+fmt.Sprintf("%s -- I1 -1A -- %s\n", nodeName(b.a), nodeName(b.b)), fmt.Sprintf("volts(%s, %s)", nodeName(b.a), nodeName(b.b)))
			sum += v[0] / b.value
		}
		relative(t, float64(w.n), sum, propertyDigits, "Foster's sum")
	})
}

// Tellegen, A general network theorem, Philips Res. Rep. 7, 1952: the powers of all parts and sources sum to zero, at rest and at any time of a run.
func TestTellegen(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawNetwork(t, "RCL")
		parts := append(w.names(), "V1", "I1", "Rs", "D1", "Q1")
		watts := "watts(" + strings.Join(parts, ") + watts(") + ")"
		v := bench(t, w.text(1)+fmt.Sprintf(`
part p = npn { Is = 3fA, betaF = 100, earlyF = 50V, rB = 40ohm, rC = 10ohm, capE = 20pF, capC = 8pF, tauF = 1ns }
part j = diode { Is = 2fA, rS = 3ohm, cap = 15pF, tau = 5ns }
n1 -- I1 1mA -- gnd
s -- V1 (4V + sine(3V, 20kHz)) -- gnd
s -- Rs 777ohm -- n2
Q1 = p(b: n1, c: n%d, e: gnd)
n2 -- D1 j -- gnd
bench b {
  run 100us
  expect volts(n1) <= 1MV
}
`, w.n), "quiescent("+watts+")", watts, "watts(V1)", "watts(Rs)")
		high, at := v[2].Wave.Peak()
		low, _ := v[2].Wave.Trough()
		scale := math.Max(high, -low) + v[3].Wave.RMS()
		absolute(t, 0, real(v[0].Number), closed*scale, "powers at rest")
		// Steps are solved far below the accuracy; between them the waveforms' interpolation counts.
		for _, end := range v[1].Wave.Times() {
			sum, err := v[1].Wave.At(end)
			require.NoError(t, err)
			if !(math.Abs(sum) <= usual*scale) {
				t.Fatalf("powers sum to %g W at %g s, where the source gives %g W at %g s", sum, end, scale, at)
			}
		}
	})
}
