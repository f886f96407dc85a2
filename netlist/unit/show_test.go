package unit

import (
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

func TestShow(t *testing.T) {
	for _, c := range []struct {
		x    float64
		d    Dimension
		want string
	}{
		{4.49, Voltage, "4.49 V"},
		{38700, Resistance, "38.7 kohm"},
		{-12.3e-6, Current, "-12.3 uA"},
		{999.96, Voltage, "1 kV"},
		{999.94, Voltage, "999.9 V"},
		{1000, Frequency, "1 kHz"},
		{1e-15, Capacitance, "1 fF"},
		{1e-18, Capacitance, "0.001 fF"},
		{1e15, Resistance, "1000 Tohm"},
		{3.2e-9, VoltageNoise, "3.2 nV/rtHz"},
		{1.2e6, Slew, "1.2 MV/s"},
		{300.15, Temperature, "300.1 K"},
		{0.01, Temperature, "0.01 K"},
		{0, Voltage, "0 V"},
		{math.Copysign(0, -1), Voltage, "0 V"},
		{0.9973, Number, "0.9973"},
		{1234567, Number, "1.235e+06"},
		{0.05, Number.Div(Voltage), "0.05 1/V"},
		{math.NaN(), Voltage, "not a number V"},
		{math.Inf(1), Resistance, "infinite ohm"},
		{math.Inf(-1), Number, "-infinite"},
		{math.SmallestNonzeroFloat64, Voltage, "4.941e-309 fV"},
	} {
		assert.Equal(t, c.want, Show(c.x, c.d))
	}
	assert.Equal(t, "4.4872 V", ShowDigits(4.48719, Voltage, 5))
	assert.Equal(t, "4 V", ShowDigits(4.48719, Voltage, 1))
}

func TestShowRatio(t *testing.T) {
	assert.Equal(t, "20.00 dB", ShowRatio(10))
	assert.Equal(t, "-6.02 dB", ShowRatio(-0.5))
	assert.Equal(t, "-infinite dB", ShowRatio(0))
	assert.Equal(t, "infinite dB", ShowRatio(math.Inf(1)))
	assert.Equal(t, "not a number dB", ShowRatio(math.NaN()))
}

// TestShownParses: what is shown reads back to half a unit of its last digit.
func TestShownParses(t *testing.T) {
	const half = 0.5e-3 * (1 + 1e-9) // of a number with four digits, relative
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.Float64Range(1e-14, 1e14).Draw(t, "x")
		for _, d := range []Dimension{Voltage, Capacitance, VoltageNoise} {
			v, err := Parse(strings.Replace(Show(x, d), " ", "", 1))
			require.NoError(t, err)
			require.Equal(t, d, v.Dimension)
			assert.True(t, math.Abs(v.SI-x) <= half*x, "%g shown as %s", x, Show(x, d))
		}
	})
}
