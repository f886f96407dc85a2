package analyses_test

import (
	"fmt"
	"math"
	"testing"
)

// Gray, Hurst, Lewis & Meyer, section 4.2: what mirrors deliver of their input current, for transistors of equal v_ce or without Early effect.
func TestMirrorErrors(t *testing.T) {
	for _, c := range []struct {
		name, circuit string
		share         func(beta float64) float64
	}{
		{"simple", `
Q1 = p(b: in, c: in, e: gnd)
Q2 = p(b: in, c: out, e: gnd)
`, func(b float64) float64 { return 1 / (1 + 2/b) }},
		{"with three outputs of one area in one collector", `
Q1 = p(b: in, c: in, e: gnd)
Q2 = p(b: in, c: out, e: gnd) with area = 3
`, func(b float64) float64 { return 3 / (1 + 4/b) }},
		{"with buffered bases", `
Q1 = p(b: x, c: in, e: gnd)
Q2 = p(b: x, c: out, e: gnd)
Q3 = p(b: in, c: vp, e: x)
`, func(b float64) float64 { return 1 / (1 + 2/(b*(b+1))) }},
		{"Wilson", `
Q1 = p(b: x, c: in, e: gnd)
Q2 = p(b: x, c: x, e: gnd)
Q3 = p(b: in, c: out, e: x)
`, func(b float64) float64 { return 1 - 2/(b*b+2*b+2) }},
		{"cascode", `
Q1 = p(b: x, c: x, e: gnd)
Q2 = p(b: x, c: y, e: gnd)
Q3 = p(b: in, c: in, e: x)
Q4 = p(b: in, c: out, e: y)
`, func(b float64) float64 { return 1 - (4*b+2)/(b*b+4*b+2) }},
	} {
		for _, beta := range []float64{20, 83, 400} {
			src := fmt.Sprintf("part p = npn { Is = 1fA, betaF = %g }\nrail vp = 6V\nvp -- I1 1mA -- in\nvp -- R1 1kohm -- out\n", beta) + c.circuit
			v := scalars(t, src, "amps(R1)")
			relative(t, 1e-3*c.share(beta), v[0], closed, "%s mirror, beta %g", c.name, beta)
		}
	}
}

// Gray, Hurst, Lewis & Meyer, sections 1.3.4 and 4.2.2: the Early effect makes a mirror's output resistance V_A/I_C and its current larger by the
// ratio of collector voltages over V_A; in the form of Gummel & Poon the voltage that counts is v_cb: I_C = I_F (1 + v_cb/V_A).
func TestEarlyEffectOfAMirror(t *testing.T) {
	const va, beta = 60.0, 1e5
	for _, volts := range []float64{1.1, 5, 30} {
		v := scalars(t, fmt.Sprintf(`
part p = npn { Is = 1fA, betaF = 1e5, earlyF = 60V }
rail vp = %gV
rail vs = 5V
vs -- I1 1mA -- in
Q1 = p(b: in, c: in, e: gnd)
Q2 = p(b: in, c: vp, e: gnd)
`, volts), "amps(Q2.c)", "Q2.ro", "volts(in)", "real(gain(vp, amps(Q2.c)) at 10Hz)")
		i := 1e-3 / (1 + 2/beta)
		relative(t, i*(1+(volts-v[2])/va), v[0], 1e-8, "mirrored current at %g V", volts)
		relative(t, va/i, v[1], 1e-8, "output resistance")
		relative(t, i/va, v[3], 1e-8, "output conductance as the response has it")
	}
}

// Corless et al., 1996 (see lambertW): the source of Widlar (1965), V_T ln(I_1/I_2) = I_2 R, has I_2 = (V_T/R) W(I_1 R/V_T); and a
// resistor R_1 in the first emitter, too, makes it V_T ln(I_1/I_2) = I_2 R - I_1 R_1.
func TestWidlarSource(t *testing.T) {
	for _, c := range []struct{ amps, r, r1 float64 }{{1e-3, 10e3, 0}, {1e-3, 47, 0}, {0.1e-3, 220e3, 0}, {5e-3, 1.2e3, 30}} {
		first := "gnd"
		if c.r1 > 0 {
			first = "e1"
		}
		src := fmt.Sprintf(`
part p = npn { Is = 1fA, betaF = 1e12 }
rail vp = 5V
vp -- I1 %gA -- in
Q1 = p(b: in, c: in, e: %s)
Q2 = p(b: in, c: vp, e: e2)
e2 -- R1 %gohm -- gnd
`, c.amps, first, c.r)
		if c.r1 > 0 {
			src += fmt.Sprintf("e1 -- R2 %gohm -- gnd\n", c.r1)
		}
		v := scalars(t, src, "amps(R1)")
		want := thermal / c.r * lambertW(math.Log(c.amps*c.r/thermal)+c.amps*c.r1/thermal)
		// The -1 of the exponential law is 1 fA in a microampere and more, times 1 or less.
		relative(t, want, v[0], 2e-9, "%g A, %g ohm, %g ohm", c.amps, c.r, c.r1)
	}
}
