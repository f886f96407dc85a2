package devices

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// digits is the precision of the reference values, in bits: rounding after a hundred operations leaves far more than a float64 has.
const digits = 250

func exactly(x float64) *big.Float { return new(big.Float).SetPrec(digits).SetFloat64(x) }

func fresh() *big.Float { return new(big.Float).SetPrec(digits) }

// bigExp returns e^x by its power series for x/2^20, squared 20 times.
func bigExp(x *big.Float) *big.Float {
	const halvings, terms = 20, 14
	r := fresh().SetMantExp(x, -halvings)
	sum := exactly(1)
	for k := terms; k > 0; k-- {
		sum.Mul(sum, r).Quo(sum, exactly(float64(k))).Add(sum, exactly(1))
	}
	for range halvings {
		sum.Mul(sum, sum)
	}
	return sum
}

// bigLog returns ln x by three corrections of a first value, y + (x e^-y - 1), each of which squares the error.
func bigLog(x *big.Float) *big.Float {
	first, _ := x.Float64()
	y := exactly(math.Log(first))
	for range 3 {
		d := bigExp(fresh().Neg(y))
		d.Mul(d, x).Sub(d, exactly(1))
		y.Add(y, d)
	}
	return y
}

// bitsOff returns how far got is from want, in last bits of got.
func bitsOff(got float64, want *big.Float) float64 {
	d := fresh().Sub(exactly(got), want)
	off, _ := d.Float64()
	return math.Abs(off) / (math.Nextafter(math.Abs(got), inf) - math.Abs(got))
}

func TestTables(t *testing.T) {
	ln2 := bigLog(exactly(2))
	for j, row := range powerTable {
		exact := bigExp(fresh().Quo(fresh().Mul(ln2, exactly(float64(j))), exactly(tableSize)))
		value, _ := exact.Float64()
		rest, _ := fresh().Sub(exact, exactly(value)).Float64()
		require.Equal(t, value, row[0], j)
		require.InDelta(t, rest, row[1], 1e-30, j)
	}
	for j, row := range logTable {
		require.Equal(t, 1/(1+(float64(j)+0.5)/tableSize), row[0], j)
		value, _ := fresh().Neg(bigLog(exactly(row[0]))).Float64()
		require.Equal(t, value, row[1], j)
	}
	high, low := exactly(ln2StepHigh), exactly(ln2StepLow)
	whole, _ := fresh().Quo(high.Add(high, low), fresh().Quo(ln2, exactly(tableSize))).Float64()
	require.Equal(t, 1.0, whole)
	require.Equal(t, 0.0, math.Mod(ln2StepHigh, 0x1p-40), "its product with 2^18 steps must be exact")
}

// The result is rounded once, half a last bit; what is added to the large part is 2^-8 of it and rounded thrice.
const expBits = 0.52

func TestExpIsRight(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	check := func(x float64) {
		got := exp(x)
		if off := bitsOff(got, bigExp(exactly(x))); !(off <= expBits) {
			t.Fatalf("e^%v: got %v, %.3f last bits off", x, got, off)
		}
	}
	for range 20000 {
		check(leastExponent + random.Float64()*(exponentLimit-leastExponent))
		check(random.NormFloat64())
		check(random.NormFloat64() * 1e-5)
	}
	for n := -1000; n <= 1000; n++ { // where the piece of the table changes
		seam := (float64(n) + 0.5) / stepsPerUnit
		check(math.Nextafter(seam, -inf))
		check(math.Nextafter(seam, inf))
	}
	for _, x := range []float64{0, -0x1p-1000, 5e-324, leastExponent, exponentLimit, 1, -1} {
		check(x)
	}
	assert.Equal(t, 1.0, exp(0))
	assert.Zero(t, exp(math.Nextafter(leastExponent, -inf)))
	assert.Zero(t, exp(-inf))
	assert.True(t, math.IsNaN(exp(math.NaN())))
}

// logError is the error allowed beside max(1, |ln x|): the products and the sum round by half of a last bit each.
const logError = 0x1p-52

func TestLogIsRight(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 4))
	check := func(x float64) {
		want := bigLog(exactly(x))
		size, _ := want.Float64()
		off, _ := fresh().Sub(exactly(logOf(x)), want).Float64()
		if !(math.Abs(off) <= logError*max(1, math.Abs(size))) {
			t.Fatalf("ln %v: got %v, %g off", x, logOf(x), off)
		}
	}
	for range 10000 {
		check(math.Exp(1400 * (random.Float64() - 0.5)))
		check(1 + random.Float64()*1e4)
		check(random.Float64() + 1e-9)
	}
	for j := range 4 * tableSize {
		seam := 0.5 + float64(j)/(2*tableSize)
		check(math.Nextafter(seam, -inf))
		check(seam)
	}
	for _, x := range []float64{1, 2, 0x1p-1022, math.MaxFloat64} {
		check(x)
	}
}
