package analyses_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"
)

// kilohertz is the angular frequency at which the circuits below are driven.
const kilohertz = 2 * math.Pi * 1e3 // rad/s

// indexCases are circuits whose equations need the derivative of what is given (index 2): loops of capacitors and voltage sources, cuts of
// inductors and current sources. Nothing is wrong with them: a derivative flows, or drops.
var indexCases = []struct {
	name, circuit string
	drive         string // what is driven, as a bench and a metric call it
	rest, peak    string // of the drive
	peakSI        float64
	quantity      string
	atRest        float64
	gain          complex128 // from the drive at 1 kHz
}{
	{
		"a capacitor across a rail", "rail vp = 5V\nvp -- C1 1uF -- gnd\nvp -- R1 1kohm -- gnd\n",
		"vp", "5V", "2Vpk", 2, "amps(C1)", 0, complex(0, kilohertz*1e-6),
	},
	{
		"a capacitor across a floating source", "a -- V1 5V -- b\na -- C1 1uF -- b\na -- R1 1kohm -- gnd\nb -- R2 1kohm -- gnd\n",
		"V1", "5V", "2Vpk", 2, "amps(C1)", 0, complex(0, kilohertz*1e-6),
	},
	{
		"capacitors and a source in a ring", "a -- V1 5V -- gnd\na -- C1 1uF -- b -- C2 3uF -- gnd\nb -- R1 1Gohm -- gnd\n",
		"V1", "5V", "2Vpk", 2, "volts(b)", 0, 0.25,
	},
	{
		"a floating source between two capacitors", "a -- V1 5V -- b\na -- C1 1uF -- gnd\nb -- C2 1uF -- gnd\na -- R1 1Gohm -- gnd\nb -- R2 1Gohm -- gnd\n",
		"V1", "5V", "2Vpk", 2, "volts(a)", 2.5, 0.5,
	},
	{
		// 10 ohm only, so that what the inductance drops is no small difference of its ends.
		"an inductor behind a current source", "gnd -- I1 5mA -- a -- L1 10mH -- b -- R1 10ohm -- gnd\n",
		"I1", "5mA", "2mApk", 2e-3, "volts(a, b)", 0, complex(0, kilohertz*10e-3),
	},
	{
		// Both have the same time constant, so they share at every frequency alike.
		"two inductors behind a current source", "gnd -- I1 5mA -- x\nx -- L1 10mH -- a -- R1 100mohm -- gnd\nx -- L2 30mH -- b -- R2 300mohm -- gnd\n",
		"I1", "5mA", "2mApk", 2e-3, "amps(L1)", 3.75e-3, 0.75,
	},
	{
		"three inductors that meet", "a -- I1 5mA -- gnd\na -- L1 10mH -- x\nb -- I2 -1mA -- gnd\nb -- L2 10mH -- x -- L3 10mH -- c -- R3 10ohm -- gnd\n",
		"I1", "5mA", "2mApk", 2e-3, "volts(x, c)", 0, complex(0, -kilohertz*10e-3),
	},
}

// TestIndexTwo: bias and response are right to rounding, and a run to its accuracy.
func TestIndexTwo(t *testing.T) {
	for _, c := range indexCases {
		t.Run(c.name, func(t *testing.T) {
			v := bench(t, c.circuit, c.quantity, fmt.Sprintf("gain(%s, %s) at 1kHz", c.drive, c.quantity))
			// What is at rest is 0 in some, beside volts and milliamperes.
			absolute(t, c.atRest, v[0].Float(), rounded, "at rest")
			phasor(t, c.gain, v[1].Number, 1e-7, "response") // a gigaohm beside microfarads counts for 4e-8
			run := fmt.Sprintf("bench b {\n  drive %s = %s + sine(%s, 1kHz)\n  run 3ms\n  plot %s\n}\n", c.drive, c.rest, c.peak, c.quantity)
			follows(t, bench(t, c.circuit+run, c.quantity)[0].Wave, func(at float64) float64 {
				return c.atRest + c.peakSI*imag(c.gain*cmplx.Exp(complex(0, kilohertz*at)))
			}, usual, "run")
		})
	}
}
