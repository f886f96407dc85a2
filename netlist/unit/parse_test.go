package unit

import (
	"errors"
	"math"
	"strconv"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// rounding is the relative error of a value that went through one power or product in float64.
const rounding = 4e-16

func TestParse(t *testing.T) {
	for _, c := range []struct {
		text string
		want Value
	}{
		{"47", Value{SI: 47}},
		{"-3", Value{SI: -3}},
		{"+3", Value{SI: 3}},
		{"1e-4", Value{SI: 1e-4}},
		{"2E3", Value{SI: 2e3}},
		{"39kohm", Value{SI: 39e3, Dimension: Resistance}},
		{"10Ω", Value{SI: 10, Dimension: Resistance}},
		{"2.2M\u2126", Value{SI: 2.2e6, Dimension: Resistance}},
		{"4.7nF", Value{SI: 4.7e-9, Dimension: Capacitance}},
		{"1\u00B5F", Value{SI: 1e-6, Dimension: Capacitance}},
		{"1\u03BCF", Value{SI: 1e-6, Dimension: Capacitance}},
		{"250uA", Value{SI: 250e-6, Dimension: Current}},
		{"-9V", Value{SI: -9, Dimension: Voltage}},
		{"1.5e-3A", Value{SI: 1.5e-3, Dimension: Current}},
		{"1.5e3mA", Value{SI: 1.5, Dimension: Current}},
		{"6.7fA", Value{SI: 6.7e-15, Dimension: Current}},
		{"370ps", Value{SI: 370e-12, Dimension: Time}},
		{"1.2GHz", Value{SI: 1.2e9, Dimension: Frequency}},
		{"3TW", Value{SI: 3e12, Dimension: Power}},
		{"2mS", Value{SI: 2e-3, Dimension: Conductance}},
		{"2ms", Value{SI: 2e-3, Dimension: Time}},
		{"95mH", Value{SI: 95e-3, Dimension: Inductance}},
		{"5pC", Value{SI: 5e-12, Dimension: Charge}},
		{"5J", Value{SI: 5, Dimension: Energy}},
		{"300K", Value{SI: 300, Dimension: Temperature}},
		{"50%", Value{SI: 0.5}},
		{"0.1%", Value{SI: 0.001}},
		{"30ppm", Value{SI: 30e-6}},
		{"25ppm/K", Value{SI: 25e-6, Dimension: Number.Div(Temperature)}},
		{"0.1ppm/K^2", Value{SI: 0.1e-6, Dimension: Number.Div(Temperature).Div(Temperature)}},
		{"2%/K", Value{SI: 0.02, Dimension: Number.Div(Temperature)}},
		{"-2mV/K", Value{SI: -2e-3, Dimension: Voltage.Div(Temperature)}},
		{"3.2nV/rtHz", Value{SI: 3.2e-9, Dimension: VoltageNoise}},
		{"0.4pA/rtHz", Value{SI: 0.4e-12, Dimension: CurrentNoise}},
		{"1.2V/us", Value{SI: 1.2e6, Dimension: Slew}},
		{"3mV/V", Value{SI: 3e-3}},
		{"120K/W", Value{SI: 120, Dimension: Temperature.Div(Power)}},
		{"20mVpp", Value{SI: 20e-3, Dimension: Voltage, Crest: PeakToPeak}},
		{"3Vpk", Value{SI: 3, Dimension: Voltage, Crest: Peak}},
		{"230Vrms", Value{SI: 230, Dimension: Voltage, Crest: RMS}},
		{"1uApp", Value{SI: 1e-6, Dimension: Current, Crest: PeakToPeak}},
		{"27degC", Value{SI: 300.15, Dimension: Temperature}},
		{"-40degC", Value{SI: 273.15 - 40, Dimension: Temperature}},
		{"90deg", Value{SI: math.Pi / 2}},
		{"2rad", Value{SI: 2}},
		{"20dB", Value{SI: 10, Ratio: true}},
		{"-6dB", Value{SI: 0.5011872336272722, Ratio: true}},
		// IEC 60062:2016, clause 4 (examples from memory): the letter marks the point.
		{"4k7ohm", Value{SI: 4700, Dimension: Resistance}},
		{"2n2F", Value{SI: 2.2e-9, Dimension: Capacitance}},
		{"0R5", Value{SI: 0.5, Dimension: Resistance}},
		{"-0R5", Value{SI: -0.5, Dimension: Resistance}},
		{"59R", Value{SI: 59, Dimension: Resistance}},
		{"5R9", Value{SI: 5.9, Dimension: Resistance}},
		{"0R59", Value{SI: 0.59, Dimension: Resistance}},
		{"5R9ohm", Value{SI: 5.9, Dimension: Resistance}},
		{"1M0Ω", Value{SI: 1e6, Dimension: Resistance}},
		{"3p32F", Value{SI: 3.32e-12, Dimension: Capacitance}},
		{"5u9F", Value{SI: 5.9e-6, Dimension: Capacitance}},
		{"1m5V", Value{SI: 1.5e-3, Dimension: Voltage}},
	} {
		got, err := Parse(c.text)
		require.NoError(t, err, c.text)
		assert.InEpsilon(t, c.want.SI, got.SI, rounding, c.text)
		got.SI, c.want.SI = 0, 0
		assert.Equal(t, c.want, got, c.text)
	}
}

// TestParseRoundsOnce compares with the literal that Go's compiler or strconv rounds.
func TestParseRoundsOnce(t *testing.T) {
	for text, want := range map[string]float64{
		"4.7nF": 4.7e-9, "6.7fA": 6.7e-15, "0.1%": 0.001, "29ppm": 29e-6, "2n2F": 2.2e-9, "1.1e-3mA": 1.1e-6, "8.2GHz": 8.2e9, "3.3V/us": 3.3e6,
	} {
		got, err := Parse(text)
		require.NoError(t, err, text)
		assert.Equal(t, want, got.SI, text)
	}
	rapid.Check(t, func(t *rapid.T) {
		mantissa := rapid.StringMatching(`[0-9]{1,6}(\.[0-9]{1,9})?`).Draw(t, "mantissa")
		k := rapid.IntRange(0, 9).Draw(t, "prefix")
		want, err := strconv.ParseFloat(mantissa+"e"+strconv.Itoa([]int{-15, -12, -9, -6, -3, 0, 3, 6, 9, 12}[k]), 64)
		require.NoError(t, err)
		got, err := Parse(mantissa + []string{"f", "p", "n", "u", "m", "", "k", "M", "G", "T"}[k] + "F")
		require.NoError(t, err)
		assert.Equal(t, want, got.SI)
	})
}

func TestParseErrors(t *testing.T) {
	for _, c := range []struct{ text, part, want, hint string }{
		{"", "", notNumber, ""},
		{"V", "V", notNumber, ""},
		{"-", "-", notNumber, ""},
		{".5V", ".5V", notNumber, ""},
		{"1Kohm", "Kohm", "is not a unit", "did you mean kohm?"},
		{"10KHz", "KHz", "is not a unit", "did you mean kHz?"},
		{"10khz", "khz", "is not a unit", "did you mean kHz?"},
		{"3volts", "volts", "is not a unit", "did you mean V?"},
		{"3v", "v", "is not a unit", "did you mean V?"},
		{"3mv", "mv", "is not a unit", "did you mean mV?"},
		{"3ma", "ma", "is not a unit", "did you mean mA?"},
		{"2Ohms", "Ohms", "is not a unit", "did you mean ohm?"},
		{"2kOhm", "kOhm", "is not a unit", "did you mean kohm?"},
		{"2Megohm", "Megohm", "is not a unit", "did you mean Mohm?"},
		{"2.2microfarads", "microfarads", "is not a unit", "did you mean uF?"},
		{"10uf", "uf", "is not a unit", "did you mean uF?"},
		{"10UF", "UF", "is not a unit", "did you mean uF?"},
		{"3db", "db", "is not a unit", "did you mean dB?"},
		{"20mvpp", "mvpp", "is not a unit", "did you mean mVpp?"},
		{"20celsius", "celsius", "is not a unit", "did you mean degC?"},
		{"3furlong", "furlong", "is not a unit", ""},
		{"3mdegC", "mdegC", "is not a unit", ""},
		{"3m%", "m%", "is not a unit", ""},
		{"4k7", "4k7", needsUnit, "write the unit too, as in 4k7ohm or 4k7F"},
		{"4.7k", "4.7k", needsUnit, "write the unit too, as in 4.7kohm or 4.7kF"},
		{"4.7k7ohm", "4.7k7ohm", "has a point and the letter k, which stands for one", ""},
		{"1e3k7ohm", "1e3k7ohm", "has a point and the letter k, which stands for one", ""},
		{"4.7R", "4.7R", "has a point and the letter R, which stands for one", ""},
		{"4R7F", "4R7F", "has R for the point of a value in ohms; no other unit may follow", ""},
		{"1 V", " V", "is not a unit", "a unit follows its number without a blank"},
		{"25ppm/degC", "degC", standsAlone, "did you mean K?"},
		{"2dB/K", "dB", standsAlone, ""},
		{"2Vpp/us", "Vpp", standsAlone, ""},
		{"2V/Vpp", "Vpp", standsAlone, ""},
		{"2Vpp^2", "Vpp", standsAlone, ""},
		{"2V^x", "V^x", "wants a number as the power of a unit", ""},
		{"2V^0.3", "V^0.3", "has a power that is no multiple of 1/2", ""},
		{"2mV^1e9", "mV^1e9", "has a power that is no multiple of 1/2", ""},
		{"2m%^1e9", "m%", "is not a unit", ""},
		{"2%^1e9", "%^1e9", outOfRange, ""},
		{"1e400V", "1e400V", outOfRange, ""},
		{"1e-400V", "1e-400V", outOfRange, ""},
		{"1e99999999999999999999V", "1e99999999999999999999V", outOfRange, ""},
		{"1e307TV", "1e307TV", outOfRange, ""},
		{"9999999dB", "9999999dB", outOfRange, ""},
	} {
		_, err := Parse(c.text)
		var l *LiteralError
		require.True(t, errors.As(err, &l), c.text)
		assert.Equal(t, LiteralError{c.part, c.want, c.hint}, *l, c.text)
		assert.Contains(t, err.Error(), "`"+c.part+"` "+c.want)
	}
}

func TestParseUnit(t *testing.T) {
	for text, want := range map[string]Value{
		"":          {SI: 1},
		"A":         {SI: 1, Dimension: Current},
		"degC":      {SI: 1, Dimension: Temperature},
		"1/V":       {SI: 1, Dimension: Number.Div(Voltage)},
		"/V":        {SI: 1, Dimension: Number.Div(Voltage)},
		"A/V^2":     {SI: 1, Dimension: Conductance.Div(Voltage)},
		"mA/V^2":    {SI: 1e-3, Dimension: Conductance.Div(Voltage)},
		"V^0.5":     {SI: 1, Dimension: Voltage.root()},
		"mV^2":      {SI: 1e-6, Dimension: Voltage.Mul(Voltage)},
		"mV^0.5":    {SI: math.Sqrt(1e-3), Dimension: Voltage.root()},
		"%":         {SI: 1e-2},
		"ms":        {SI: 1e-3, Dimension: Time},
		"V/ms":      {SI: 1e3, Dimension: Slew},
		"V/\u00B5s": {SI: 1e6, Dimension: Slew},
		"nV/rtHz":   {SI: 1e-9, Dimension: VoltageNoise},
		"V^2/Hz":    {SI: 1, Dimension: VoltageNoise.Mul(VoltageNoise)},
	} {
		got, err := ParseUnit(text)
		require.NoError(t, err, text)
		assert.InEpsilon(t, want.SI, got.SI, rounding, text)
		assert.Equal(t, want.Dimension, got.Dimension, text)
	}
	for _, text := range []string{"volt", "V/Q", "V/kohm", "V/", "^2", "V^", "rtHz", "V V"} {
		_, err := ParseUnit(text)
		var l *LiteralError
		assert.True(t, errors.As(err, &l), text)
	}
}

func TestIsUnitName(t *testing.T) {
	for _, name := range []string{"V", "ms", "kohm", "K", "dB", "degC", "Vpp", "Ω", "µA"} {
		assert.True(t, IsUnitName(name), name)
	}
	for _, name := range []string{"", "Iq", "Rd", "x", "m", "k", "Vout", "mdB", "V2", "rtHz"} {
		assert.False(t, IsUnitName(name), name)
	}
}

func TestIsQuotient(t *testing.T) {
	for _, q := range [][2]string{{"V", "us"}, {"nV", "rtHz"}, {"ppm", "K"}, {"ppm", "K^2"}, {"mV", "V"}, {"", "V"}, {"%", "K"}} {
		assert.True(t, IsQuotient(q[0], q[1]), "%s/%s", q[0], q[1])
	}
	for _, q := range [][2]string{{"V", "Iq"}, {"V", "ohm"}, {"m%", "K"}, {"m1", "V"}, {"k", "V"}, {"V", ""}} {
		assert.False(t, IsQuotient(q[0], q[1]), "%s/%s", q[0], q[1])
	}
}

func FuzzParse(f *testing.F) {
	for _, s := range []string{"39kohm", "4k7ohm", "0R5", "-40degC", "3.2nV/rtHz", "1e-3", "25ppm/K^2", "1\u03BCF", "1e999V", "2V^0.5", "k", "4R7ohm", "5e"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		v, err := Parse(text)
		if err != nil {
			var l *LiteralError
			require.True(t, errors.As(err, &l))
			if utf8.ValidString(text) {
				assert.True(t, strings.Contains(normal(text), l.Text) || strings.Contains(text, l.Text), "%q is no part of %q", l.Text, text)
			}
			return
		}
		assert.False(t, math.IsNaN(v.SI) || math.IsInf(v.SI, 0), text)
		signed, err := Parse("-" + text)
		if text[0] != '-' && text[0] != '+' && v.Crest == Plain && !v.Ratio && !strings.HasSuffix(text, "degC") {
			require.NoError(t, err)
			assert.Equal(t, -v.SI, signed.SI)
		}
	})
}
