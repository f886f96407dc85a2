package unit

import (
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	gonum "gonum.org/v1/gonum/unit"
	"pgregory.net/rapid"
)

// oracle returns the dimensions of gonum's unit for a dimension of whole powers.
func oracle(d Dimension) gonum.Dimensions {
	return gonum.Dimensions{
		gonum.MassDim: int(d.Mass / 2), gonum.LengthDim: int(d.Length / 2), gonum.TimeDim: int(d.Time / 2),
		gonum.CurrentDim: int(d.Current / 2), gonum.TemperatureDim: int(d.Temperature / 2),
	}
}

func same(t require.TestingT, want *gonum.Unit, got Dimension) {
	assert.True(t, gonum.DimensionsMatch(want, gonum.New(1, oracle(got))), "want %v, got %v", want, got)
}

// TestNamedDimensions compares the table with the quantities of gonum/unit.
func TestNamedDimensions(t *testing.T) {
	for _, c := range []struct {
		want gonum.Uniter
		got  Dimension
	}{
		{gonum.Voltage(1), Voltage}, {gonum.Current(1), Current}, {gonum.Resistance(1), Resistance}, {gonum.Conductance(1), Conductance},
		{gonum.Capacitance(1), Capacitance}, {gonum.Inductance(1), Inductance}, {gonum.Time(1), Time}, {gonum.Frequency(1), Frequency},
		{gonum.Power(1), Power}, {gonum.Energy(1), Energy}, {gonum.Charge(1), Charge}, {gonum.MagneticFlux(1), Flux}, {gonum.Temperature(1), Temperature},
	} {
		same(t, c.want.Unit(), c.got)
	}
	same(t, gonum.Voltage(1).Unit().Div(gonum.Time(1)), Slew)
	same(t, gonum.Voltage(1).Unit().Mul(gonum.Voltage(1)).Div(gonum.Frequency(1)), VoltageNoise.Mul(VoltageNoise))
	same(t, gonum.Current(1).Unit().Mul(gonum.Current(1)).Div(gonum.Frequency(1)), CurrentNoise.Mul(CurrentNoise))
}

func wholeDimension(t *rapid.T, label string) Dimension {
	e := rapid.SliceOfN(rapid.Int8Range(-6, 6), 5, 5).Draw(t, label)
	return dim(e[0], e[1], e[2], e[3], e[4])
}

// TestAlgebra compares products, quotients and powers with gonum/unit.
func TestAlgebra(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		d, e := wholeDimension(t, "d"), wholeDimension(t, "e")
		u, v := gonum.New(1, oracle(d)), gonum.New(1, oracle(e))
		same(t, gonum.New(1, oracle(d)).Mul(v), d.Mul(e))
		same(t, u.Div(v), d.Div(e))
		square, ok := d.Pow(2)
		require.True(t, ok)
		assert.Equal(t, d.Mul(d), square)
		root, ok := square.Sqrt()
		require.True(t, ok)
		assert.Equal(t, d, root)
		inverse, ok := d.Pow(-1)
		require.True(t, ok)
		assert.Equal(t, Number, d.Mul(inverse))
	})
}

func TestPowersOutsideHalves(t *testing.T) {
	for _, p := range []float64{0.25, 1.0 / 3, math.NaN(), math.Inf(1), 100} {
		_, ok := Voltage.Pow(p)
		assert.False(t, ok, "%g", p)
	}
	_, ok := Voltage.root().Sqrt()
	assert.False(t, ok)
	p, ok := Number.Pow(0.3)
	assert.True(t, ok)
	assert.Equal(t, Number, p)
}

// TestSaturation: a product never wraps round to the dimension of something else.
func TestSaturation(t *testing.T) {
	d := Current
	for range 300 {
		d = d.Mul(Current)
	}
	assert.Equal(t, int8(math.MaxInt8), d.Current)
	for range 600 {
		d = d.Div(Current)
	}
	assert.Equal(t, int8(math.MinInt8), d.Current)
}

func TestSymbols(t *testing.T) {
	for _, c := range []struct {
		d            Dimension
		text, phrase string
	}{
		{Number, "1", "a plain number"},
		{Voltage, "V", "a voltage (V)"},
		{Current, "A", "a current (A)"},
		{Resistance, "ohm", "a resistance (ohm)"},
		{Energy, "J", "an energy (J)"},
		{VoltageNoise, "V/rtHz", "a voltage noise density (V/rtHz)"},
		{Flux, "V s", "a flux (V s)"},
		{Slew, "V/s", "a slew rate (V/s)"},
		{Time.Mul(Temperature), "s K", "a value in s K"},
		{dim(1, 0, -2, 0, 0), "kg s^-2", "a value in kg s^-2"},
		{Time.root(), "s^0.5", "a value in s^0.5"},
	} {
		assert.Equal(t, c.text, c.d.String())
		assert.Equal(t, c.phrase, c.d.Noun())
	}
}

// TestSymbolsParse: every named symbol is a unit of the dimension that it stands for, and no two dimensions share one.
func TestSymbolsParse(t *testing.T) {
	seen := map[string]Dimension{}
	for d, n := range names() {
		assert.NotContains(t, seen, n.symbol)
		seen[n.symbol] = d
		assert.Regexp(t, `^an? `, n.noun)
		if strings.Contains(n.symbol, " ") {
			continue // a product, which no file writes as a unit
		}
		v, err := ParseUnit(n.symbol)
		require.NoError(t, err, n.symbol)
		assert.Equal(t, d, v.Dimension, n.symbol)
		assert.Equal(t, 1.0, v.SI, n.symbol)
	}
}
