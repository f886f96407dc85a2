package analyses

import (
	"math"

	"poise/netlist"
)

// bent is an expression that may be no cubic where its columns are: a magnitude, a product, the smaller of two.
type bent struct {
	expression         *expression
	low, high          float64 // extremes so far
	whole, left, right samples
}

// bend makes the recording halve steps until a cubic fits the expression, too.
func (r *recording) bend(x *expression) {
	if x.straight || r.bent[x.key] != nil {
		return
	}
	r.bent[x.key] = &bent{expression: x, low: math.Inf(1), high: math.Inf(-1)}
}

// bendWithin does so for a quantity that is kept. What depends on the result of a reducer is not known yet.
func (e *evaluation) bendWithin(r *recording, q netlist.Quantity) {
	if q.Describe().Shape != netlist.Waveform || hasReducer(q) {
		return
	}
	if x, err := e.compile(r, q); err == nil {
		r.bend(x)
	}
}

// good reports whether the cubic of the expression in a piece agrees with its samples in the halves.
func (b *bent) good(r *recording, values, left, right []samples) bool {
	b.expression.read(values, &b.whole)
	b.expression.read(left, &b.left)
	b.expression.read(right, &b.right)
	for k := range samplesPerStep {
		b.low, b.high = min(b.low, b.left[k], b.right[k]), max(b.high, b.left[k], b.right[k])
	}
	allowed := allowance(r.accuracy, b.low, b.high)
	return agree(&b.whole, &b.left, &b.right, allowed) || agree(&b.whole, &b.left, &b.right, allowed+b.noise(r, values))
}

// noise is how far the rounding of the columns may put the expression off.
func (b *bent) noise(r *recording, values []samples) float64 {
	sum := 0.0
	for i, c := range r.list {
		exact := values[i]
		for k := range values[i] {
			values[i][k] += c.noise
		}
		var shifted samples
		b.expression.read(values, &shifted)
		values[i] = exact
		sum += max(math.Abs(shifted[0]-b.whole[0]), math.Abs(shifted[1]-b.whole[1]), math.Abs(shifted[2]-b.whole[2]), math.Abs(shifted[3]-b.whole[3]))
	}
	return sum
}
