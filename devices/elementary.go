package devices

import "math"

// The exponential and the logarithm take most of the time of a junction. Those here are table-driven: a value from a table of 128 leaves so
// little that a short polynomial does the rest, without the long chain of dependent operations of the usual forms. After Tang,
// Table-driven implementation of the exponential function in IEEE floating-point arithmetic, ACM Trans. Math. Software 15, 1989, 144-157,
// and of the logarithm function, ibid. 16, 1990, 378-400; here with larger tables and Taylor polynomials, whose truncation is below 2^-58.

const (
	tableBits = 7
	tableSize = 1 << tableBits

	// stepsPerUnit is 128/ln 2; ln2StepHigh and ln2StepLow are ln 2/128 in two parts, of which the first has so few bits that its
	// product with a number of steps is exact.
	stepsPerUnit = tableSize / math.Ln2
	ln2StepHigh  = 0x1.62e42fefp-8
	ln2StepLow   = 0x1.473de6af278edp-41

	// roundToInteger moves the binary point of a number of magnitude below 2^51 to its last bit.
	roundToInteger = 0x1.8p52

	// leastExponent is where the exponential leaves the normal numbers.
	leastExponent = -708

	fractionBits = 52
	fractionMask = 1<<fractionBits - 1
	exponentBias = 1023
	oneBits      = exponentBias << fractionBits
)

// exp returns e^x within 0.6 of the last bit for leastExponent <= x <= 708, and 0 for a smaller x. NaN gives NaN.
func exp(x float64) float64 {
	if x < leastExponent {
		return 0
	}
	// x = steps ln 2/128 + r. The conversion keeps the product from being fused into the sum.
	steps := float64(x*stepsPerUnit) + roundToInteger
	n := int64(math.Float64bits(steps))
	steps -= roundToInteger
	r := (x - steps*ln2StepHigh) - steps*ln2StepLow
	r2 := r * r
	p := r + r2*(1./2+r*(1./6)+r2*(1./24+r*(1./120)))
	t := &powerTable[n&(tableSize-1)]
	scale := math.Float64frombits(uint64(n>>tableBits+exponentBias) << fractionBits)
	return scale * (t[0] + (t[1] + t[0]*p))
}

// logOf returns ln x for a normal x > 0, with an error below 2^-52 max(1, |ln x|): small in itself, if not beside a logarithm near 0.
func logOf(x float64) float64 {
	b := math.Float64bits(x)
	exponent := float64(int64(b>>fractionBits) - exponentBias)
	fraction := b & fractionMask
	const pieceBits = fractionBits - tableBits
	middle := math.Float64frombits(fraction&^(1<<pieceBits-1) | 1<<(pieceBits-1) | oneBits)
	t := &logTable[fraction>>pieceBits]
	r := (math.Float64frombits(fraction|oneBits) - middle) * t[0]
	r2 := r * r
	p := r - r2*(1./2-r*(1./3)+r2*(1./4-r*(1./5)+r2*(1./6)))
	return exponent*(tableSize*ln2StepHigh) + (t[1] + (p + exponent*(tableSize*ln2StepLow)))
}
