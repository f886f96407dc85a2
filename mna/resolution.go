package mna

import "math"

const (
	// The allowed error of one step is a share of the accuracy a user asks for, at an accuracy of 1e-3 or worse: errors of many steps add
	// up. From there it falls faster than the accuracy. A local error e costs e^(1/(k+1)) fewer steps with a method of order
	// k, so that the sum goes with e^(k/(k+1)); for the sum to go with the accuracy, e must go with its power (k+1)/k.
	localAccuracy = 1e-3
	// denseShare is the share for the interpolation within a step, whose errors do not add up.
	denseShare = 0.15

	// An unknown that hardly moves is not resolved below these shares: of its size, of the largest size of its kind, and of the
	// largest swing of a stimulus (a signal 100 dB below the stimulus still counts with its own swing at the default accuracy).
	sizeShare     = 1e-5
	largestShare  = 1e-8
	stimulusShare = 1e-4
	leastVoltage  = 1e-9  // V
	leastCurrent  = 1e-13 // A
	// stimulusSiemens turns the stimulus and the voltages into floors for branch currents.
	stimulusSiemens = 1e-8 // S
	// stimulusSamples is the number of points at which a stimulus is looked at over its time scale.
	stimulusSamples = 16
)

// resolution knows how far every unknown has swung, and so what error is allowed.
type resolution struct {
	tolerance float64 // allowed error of a step beside the swing
	dense     float64 // allowed error of the interpolation, beside tolerance
	branch    []bool
	low, high []float64 // of each unknown so far
	stimulus  float64   // V or A, the largest swing of a signal seen or ahead
	swing     []float64 // of each unknown, floors included
	largest   float64   // V, the largest voltage so far
	common    float64   // V, the floor of all swings
	perError  []float64 // of each unknown: 1/allowed error of a step over which it moves by no more than its swing
	worst     int       // the unknown with the largest error in the last step
}

// newResolution returns the resolution for a method of the given order, which may make the given share of the accuracy as the error of a step.
func newResolution(s *System, accuracy, localShare, order float64) *resolution {
	n := len(s.names)
	tolerance := localShare * accuracy * math.Pow(math.Min(1, accuracy/localAccuracy), 1/order)
	return &resolution{
		tolerance: tolerance, dense: denseShare * accuracy / tolerance, branch: s.branch,
		low: make([]float64, n), high: make([]float64, n), swing: make([]float64, n), perError: make([]float64, n),
	}
}

// lookAhead raises the stimulus to the largest swing of a signal over its time scale from t on, both in s.
func (z *resolution) lookAhead(signals []Signal, t, until float64) {
	for _, signal := range signals {
		scale := math.Min(signal.Scale(t), until)
		low, high := math.Inf(1), math.Inf(-1)
		for k := range stimulusSamples + 1 {
			v := signal.At(t + scale*float64(k)/stimulusSamples)
			low, high = math.Min(low, v), math.Max(high, v)
		}
		z.stimulus = math.Max(z.stimulus, high-low)
	}
}

// anchor starts all swings at x.
func (z *resolution) anchor(x []float64) {
	copy(z.low, x)
	copy(z.high, x)
	z.common, z.largest = -1, 0 // below any floor
	for i, v := range x {
		if !z.branch[i] {
			z.largest = max(z.largest, math.Abs(v))
		}
	}
	z.raise(z.largest)
}

// widen takes x into the swings.
func (z *resolution) widen(x []float64) {
	largest := z.largest
	for i, v := range x {
		if v >= z.low[i] && v <= z.high[i] {
			continue
		}
		z.low[i], z.high[i] = min(z.low[i], v), max(z.high[i], v)
		if !z.branch[i] {
			largest = max(largest, math.Abs(v))
		}
		z.allow(i)
	}
	z.raise(largest)
}

// raise takes the largest voltage so far, and all allowed errors anew if their common floor has risen.
func (z *resolution) raise(largest float64) {
	z.largest = largest
	if common := max(stimulusShare*z.stimulus, largestShare*largest); common > z.common {
		z.common = common
		for i := range z.swing {
			z.allow(i)
		}
	}
}

// allow takes the allowed error of an unknown from its swing.
func (z *resolution) allow(i int) {
	floor := max(leastVoltage, z.common)
	if z.branch[i] {
		floor = max(leastCurrent, stimulusSiemens*z.common)
	}
	size := max(math.Abs(z.low[i]), math.Abs(z.high[i]))
	z.swing[i] = max(z.high[i]-z.low[i], sizeShare*size, floor)
	z.perError[i] = 1 / (z.tolerance * z.swing[i])
}

// weight returns 1/allowed error of an unknown in a step over which it moves by the given amount.
func (z *resolution) weight(i int, move float64) float64 {
	w := z.perError[i]
	if move = math.Abs(move); move > z.swing[i] {
		w *= z.swing[i] / move
	}
	return w
}

// local returns the allowed error of an unknown in a step over which it moves by the given amount.
func (z *resolution) local(i int, move float64) float64 {
	return z.tolerance * max(z.swing[i], math.Abs(move))
}
