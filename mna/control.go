package mna

import "math"

// The controller of Gustafsson, Lundh & Soderlind, A PI stepsize control for the numerical solution of ordinary differential
// equations, BIT 28, 1988, 270-287, for an error that goes with the k-th power of the step. They recommend gains of 0.7/k and 0.4/k; with an integral gain of
// 0.9/k steps follow the decay of a disturbance faster and are refused no more often.
const (
	safety       = 0.9
	aim          = 0.25 // ratio of estimated to allowed error that steps are chosen for
	integralGain = 0.9
	pastGain     = 0.4
	shrinkMost   = 0.2
	growMost     = 4.0
	leastError   = 1e-4 // errors below it are not told apart
)

// control proposes step lengths from the ratio of estimated to allowed error.
type control struct {
	power    float64 // of the step in the error
	last     float64 // logarithm of the ratio of the last accepted step beside the aim
	now      float64 // of the step judged last
	rejected bool    // since the last accepted step
}

func newControl(power float64) control { return control{power: power} }

// restart forgets the past.
func (c *control) restart() { c.last, c.rejected = 0, false }

// excess is the logarithm of a ratio of estimated to allowed error beside the aim.
func excess(ratio float64) float64 { return math.Log(max(ratio, leastError) / aim) }

// factor returns by what the step should be multiplied after one with this ratio of estimated to allowed error.
func (c *control) factor(ratio float64) float64 {
	c.now = excess(ratio)
	if !(ratio <= 1) {
		c.rejected = true
		if math.IsNaN(ratio) || math.IsInf(ratio, 1) {
			return shrinkMost
		}
		return math.Max(shrinkMost, safety*math.Pow(ratio, -1/c.power))
	}
	f := math.Exp((pastGain*c.last - integralGain*c.now) / c.power)
	if c.rejected {
		f = math.Min(f, 1)
	}
	return math.Max(shrinkMost, math.Min(growMost, f))
}

// accept takes the step judged last as the past of the next.
func (c *control) accept() { c.last, c.rejected = c.now, false }
