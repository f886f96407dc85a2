package analyses_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"
)

// electrode is the imbalance of the test network, 51 kohm in parallel with 47 nF.
func electrode(s complex128) complex128 { return 1 / (1/51e3 + s*47e-9) }

// leads writes the common-mode test network of IEC 60601-2-25 and IEC 60601-2-27 (values from memory): a mains source through 100 pF to the joined leads, which a
// shield holds to earth by as much, so that 10 V of 20 V stand there while no amplifier is connected; the imbalance in lead p; the inputs of a balanced amplifier.
func leads(inputs string) string {
	return `
src -- Cmains 100pF -- joined
joined -- Cearth 100pF -- gnd
joined -- Rskin 51kohm -- p
joined -- Cskin 47nF -- p
` + inputs + `
input mains = (src)
output lead = (p, joined)
`
}

// Hand formula: the dividers of an amplifier of R and C to earth at either lead.
func TestElectrocardiographNetwork(t *testing.T) {
	for _, amp := range []struct{ r, c float64 }{{10e6, 47e-12}, {1e9, 3e-12}, {2.2e6, 1e-9}} {
		src := leads(fmt.Sprintf("p -- Rp %gohm -- gnd\np -- Cp %gF -- gnd\njoined -- Rn %gohm -- gnd\njoined -- Cn %gF -- gnd", amp.r, amp.c, amp.r, amp.c))
		for _, f := range []float64{0.05, 50, 60, 1e3, 40e3} {
			s := complex(0, 2*math.Pi*f)
			y := complex(1/amp.r, 0) + s*complex(amp.c, 0)
			divided := 1 / (1 + electrode(s)*y) // of the joined leads' voltage, on p
			joined := s * 100e-12 / (s*200e-12 + y + y*divided)
			v := bench(t, src, fmt.Sprintf("gain(mains.signal, volts(joined)) at %gHz", f), fmt.Sprintf("dm_gain at %gHz", f))
			// The network floats on y: rounding of the electrode's conductance counts against it.
			floating := 4e-16 / cmplx.Abs(electrode(s)*(y+s*100e-12))
			phasor(t, joined, v[0].Number, rounded+floating, "joined leads at %g Hz", f)
			// The difference is what two nearly equal voltages leave.
			want := joined * (divided - 1)
			phasor(t, want, v[1].Number, 10*rounded+floating+1e-15*cmplx.Abs(joined)/cmplx.Abs(want), "between the leads at %g Hz", f)
		}
	}
}

// With nothing connected the joined leads stand at half the source (the standards' adjustment: 10 V on the open node), and the imbalance makes no difference; an amplifier of 1 Gohm beside
// nothing turns 10 V into 10 V times Z_skin/Z_in, to a thousandth (common practice, no source: conversion is imbalance over input impedance).
func TestOpenElectrocardiographNetwork(t *testing.T) {
	v := bench(t, leads("joined -- Rleak 1000Gohm -- gnd\np -- Rprobe 1000Gohm -- gnd"), "gain(mains.signal, volts(joined)) at 50Hz")
	absolute(t, 0.5, cmplx.Abs(v[0].Number), 1e-6, "half: 1 Tohm twice beside 16 Mohm, in quadrature")
	v = bench(t, leads("p -- Rp 1Gohm -- gnd\njoined -- Rn 1Gohm -- gnd"), "dm_gain at 50Hz")
	s := complex(0, 2*math.Pi*50)
	relative(t, 0.5*cmplx.Abs(electrode(s))/1e9, cmplx.Abs(v[0].Number), 1e-3, "conversion by hand")
}

// The network in time: 20 V r.m.s. of mains, 50 Hz, against the same hand formula; the leads' difference of some millivolts rides on 14 V.
func TestElectrocardiographNetworkInTime(t *testing.T) {
	const r, c = 10e6, 47e-12
	v := scalars(t, leads("p -- Rp 10Mohm -- gnd\np -- Cp 47pF -- gnd\njoined -- Rn 10Mohm -- gnd\njoined -- Cn 47pF -- gnd")+`
bench b {
  drive mains signal = sine(20Vrms, 50Hz)
  run 400ms from 200ms
  expect volts(joined) <= 30V
}
`, "tone(volts(joined), 50Hz)", "tone(volts(p, joined), 50Hz)", "tone_phase(volts(joined), 50Hz)")
	s := complex(0, 2*math.Pi*50)
	y := complex(1/r, 0) + s*c
	divided := 1 / (1 + electrode(s)*y)
	joined := 20 * math.Sqrt2 * s * 100e-12 / (s*200e-12 + y + y*divided)
	relative(t, cmplx.Abs(joined), v[0], usual, "joined leads")
	absolute(t, cmplx.Phase(joined), v[2], usual, "their phase")
	// Each node is good to 1e-4 of its own swing, the difference of two nodes not better than that.
	absolute(t, cmplx.Abs(joined*(divided-1)), v[1], 2*usual*cmplx.Abs(joined), "between the leads")
}
