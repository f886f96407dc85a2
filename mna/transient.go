package mna

import (
	"context"
	"fmt"
	"log/slog"
	"math"
)

// TransientOptions say how to integrate. Only Until is required.
type TransientOptions struct {
	Until    float64      // s, the end; it starts at 0
	MaxStep  float64      // s, the longest step; 0: the signals decide
	Accuracy float64      // relative error of a waveform, 0..1; 0: 1e-4
	Start    []float64    // all unknowns at time 0 (a bias point); nil with Cold
	Cold     bool         // start from the devices' own start values, uncharged without
	Logger   *slog.Logger // nil: silent
}

// TransientStats count what an integration took.
type TransientStats struct {
	Steps, Rejected int
	NewtonFailures  int
	Work            Work
}

// StepError says that an integration could not go on.
type StepError struct {
	Time    float64 // s
	Unknown string  // whose error or equation forbids a longer step
	Devices []string
	Reason  error
}

func (e *StepError) Error() string {
	return fmt.Sprintf("the integration stopped at %.9g s: even the shortest step fails at %s", e.Time, e.Unknown)
}

func (e *StepError) Unwrap() error { return e.Reason }

const (
	defaultAccuracy = 1e-4
	// internalShare is the local tolerance as a share of the accuracy a user asks for: local errors of many
	// steps add up to the global one.
	internalShare = 0.1
	// stepsPerScale is the least number of steps in the shortest time in which a signal changes character.
	stepsPerScale = 8
	// firstPerScale is that of the first step after a corner.
	firstPerScale = 200
	// leastShare bounds steps from below, as a share of the whole time.
	leastShare = 1e-15
	// leastSteps is the least number of steps of a whole run without signals that change.
	leastSteps = 50
)

// Step is one accepted step, valid until the sink returns.
type Step struct {
	T0, T1 float64 // s
	r      *integration
}

// At fills x, of the system's size, with the solution at a time within the step: held nodes exactly, the others by
// the polynomial through the method's own stages.
func (p *Step) At(t float64, x []float64) { p.r.interpolate(t, x) }

// gamma and what follows from it: TR-BDF2 takes a trapezoidal step over gamma h and a second-order backward
// differentiation over the rest. Bank et al., Transient simulation of silicon devices and circuits, IEEE Trans. Electron Devices 32, 1985;
// Hosea & Shampine, Analysis and implementation of TR-BDF2, Appl. Numer. Math. 20, 1996, 21-37. With this gamma both stages
// have the same Jacobian and the method is L-stable.
const (
	gamma    = 2 - math.Sqrt2
	share    = gamma / 2      // of the step that every stage treats implicitly
	explicit = math.Sqrt2 / 4 // weight of the slopes at the start and in the middle in the second stage

	// Weights of the slopes in the difference to the embedded third-order result (Hosea & Shampine, table 1).
	errorStart  = explicit - (1-explicit)/3
	errorMiddle = explicit - (3*explicit+1)/3
	errorEnd    = share - share/3
)

// Transient integrates f(x,t) + d/dt q(x,t) = 0 from time 0 and calls sink with every accepted step. An error of the sink ends it.
//
// Steps are chosen so that the estimated error of every unknown, algebraic ones and the interpolated solution
// included, stays below a tenth of the accuracy times the swing that the unknown has shown so far. It lands on every
// corner of every signal and starts afresh there.
//
// It returns *StepError, *SingularError or the context's error.
func (s *System) Transient(ctx context.Context, o TransientOptions, sink func(*Step) error) (*TransientStats, error) {
	if s.analysis == nil {
		return nil, s.singular
	}
	r := newIntegration(ctx, s, o)
	err := r.run(sink)
	r.stats.Work = r.w.work
	return &r.stats, err
}

// integration is one run of the integrator.
type integration struct {
	ctx   context.Context
	s     *System
	o     TransientOptions
	w     *workspace
	tol   float64
	stats TransientStats
	log   *slog.Logger

	t      float64 // s, end of the last accepted step
	fresh  bool    // no step since the last corner: slopes before it say nothing
	h      float64 // s, the step to try
	corner float64 // s, the next corner
	norm   float64 // error of the last accepted step, 1 being allowed

	start, middle, end point
	before             point // the middle of the last step, if smooth
	smooth             bool
	low, high          []float64 // extremes of every unknown so far
	constant           []float64
	stimulus           float64 // V or A, the largest swing of a signal seen or ahead
	worst              int
}

// point is the solution at one time.
type point struct {
	t    float64
	x    []float64
	q    []float64
	rate []float64 // dq/dt
}

func newIntegration(ctx context.Context, s *System, o TransientOptions) *integration {
	if !(o.Accuracy > 0) {
		o.Accuracy = defaultAccuracy
	}
	if o.Logger == nil {
		o.Logger = slog.New(slog.DiscardHandler)
	}
	n := len(s.names)
	vector := func() []float64 { return make([]float64, n) }
	newPoint := func() point { return point{x: vector(), q: vector(), rate: vector()} }
	return &integration{
		ctx: ctx, s: s, o: o, w: s.newWorkspace(), tol: internalShare * o.Accuracy, log: o.Logger,
		start: newPoint(), middle: newPoint(), end: newPoint(), before: newPoint(),
		low: vector(), high: vector(), constant: vector(), norm: 1,
	}
}

func (r *integration) run(sink func(*Step) error) error {
	if err := r.begin(); err != nil {
		return err
	}
	for r.t < r.o.Until {
		if err := r.ctx.Err(); err != nil {
			return err
		}
		end := r.target()
		ok, err := r.try(end)
		if err != nil {
			return err
		}
		if !ok {
			continue
		}
		r.stats.Steps++
		if err := sink(&Step{T0: r.start.t, T1: r.end.t, r: r}); err != nil {
			return err
		}
		r.advance()
	}
	return nil
}

// begin finds the state at time 0.
func (r *integration) begin() error {
	e := &r.w.eval
	if r.o.Start != nil {
		copy(e.X, r.o.Start)
	}
	r.s.hold(e.X, 0, 1)
	e.Limit = false
	r.w.evaluate(&problem{drive: 1, alpha: 1, cold: r.o.Cold})
	copy(r.start.q, e.Q)
	r.enter()
	if r.o.Cold {
		if err := r.settle(); err != nil {
			return err
		}
	}
	copy(r.start.x, e.X)
	copy(r.low, e.X)
	copy(r.high, e.X)
	return nil
}

// settleShare is the share of the first step over which a cold circuit finds the voltages that go with its charges.
const settleShare = 1e-6

// settle takes one implicit Euler step, so short that no charge moves but in a jump.
func (r *integration) settle() error {
	p := &problem{time: 0, drive: 1, alpha: 1 / (settleShare * r.h), constant: r.constant}
	for i, q := range r.start.q {
		r.constant[i] = -p.alpha * q
	}
	if _, err := r.w.newton(r.ctx, p, biasIterations); err != nil {
		return r.fail(err)
	}
	r.w.evaluate(p)
	copy(r.start.q, r.w.eval.Q)
	return nil
}

// enter chooses the first step after a corner and looks up the next one.
func (r *integration) enter() {
	r.corner = r.o.Until
	scale := math.Inf(1)
	for _, list := range [][]Signal{r.s.held, r.s.timed} {
		for _, signal := range list {
			r.corner = math.Min(r.corner, signal.Corner(r.t))
			scale = math.Min(scale, signal.Scale(r.t))
		}
	}
	span := math.Min(r.corner-r.t, r.o.Until/leastSteps)
	r.h = math.Min(span, scale) / firstPerScale
	r.smooth, r.fresh = false, true
	r.norm = 1
	r.lookAhead()
}

// target returns the end of the step to try.
func (r *integration) target() float64 {
	h := math.Min(r.h, r.o.Until/leastSteps)
	if r.o.MaxStep > 0 {
		h = math.Min(h, r.o.MaxStep)
	}
	for _, list := range [][]Signal{r.s.held, r.s.timed} {
		for _, signal := range list {
			h = math.Min(h, signal.Scale(r.t)/stepsPerScale)
		}
	}
	r.h = h
	left := r.corner - r.t
	switch {
	case h >= left*(1-1e-9):
		return r.corner
	case 2*h > left:
		return r.t + left/2
	}
	return r.t + h
}

// try attempts the step to a time and reports whether it is accepted; r.h is what to take next.
func (r *integration) try(end float64) (bool, error) {
	h := end - r.t
	if !(h > leastShare*r.o.Until) || r.t+h == r.t {
		return false, r.fail(nil)
	}
	if err := r.stages(end, h); err != nil {
		if r.ctx.Err() != nil {
			return false, r.ctx.Err()
		}
		r.stats.NewtonFailures++
		r.h = h / 4
		if !(r.h > leastShare*r.o.Until) {
			return false, r.fail(err)
		}
		return false, nil
	}
	norm := r.measure(h)
	factor := r.factor(norm)
	r.h = h * factor
	if !(norm <= 1) {
		r.stats.Rejected++
		return false, nil
	}
	r.norm = math.Max(norm, 1e-4)
	return true, nil
}

// The controller of Gustafsson, Lundh & Soderlind, A PI stepsize control for the numerical solution of ordinary differential equations,
// BIT 28, 1988, 270-287, for an error of third order.
const (
	safety       = 0.9
	integralGain = 0.7 / 3
	pastGain     = 0.4 / 3
	shrinkMost   = 0.2
	growMost     = 4
)

func (r *integration) factor(norm float64) float64 {
	if math.IsNaN(norm) {
		return shrinkMost
	}
	f := safety * math.Pow(math.Max(norm, 1e-6), -integralGain) * math.Pow(r.norm, pastGain)
	if norm > 1 {
		f = math.Min(f, safety)
	}
	return math.Max(shrinkMost, math.Min(growMost, f))
}

// stages solves both stages of the step.
func (r *integration) stages(end, h float64) error {
	alpha := 1 / (share * h)
	first, weight := gamma, share
	if r.fresh {
		// Without a slope at the start: the two stages of Alexander, Diagonally implicit Runge-Kutta methods for stiff
		// ODEs, SIAM J. Numer. Anal. 14, 1977, 1006-1021, whose implicit share is the same.
		first, weight = share, 0
	}
	for i := range r.constant {
		r.constant[i] = -alpha * (r.start.q[i] + weight*h*r.start.rate[i])
	}
	if err := r.stage(&r.middle, r.start.t+first*h, alpha); err != nil {
		return err
	}
	startWeight, middleWeight := explicit, explicit
	if r.fresh {
		startWeight, middleWeight = 0, 1-share
	}
	for i := range r.constant {
		r.constant[i] = -alpha * (r.start.q[i] + h*(startWeight*r.start.rate[i]+middleWeight*r.middle.rate[i]))
	}
	return r.stage(&r.end, end, alpha)
}

// stageIterations bounds Newton's method within a stage; a step that needs more is too long.
const stageIterations = 12

// stage solves f + alpha q + constant = 0 at time t.
func (r *integration) stage(p *point, t, alpha float64) error {
	e := &r.w.eval
	r.predict(t, e.X)
	q := &problem{time: t, drive: 1, alpha: alpha, constant: r.constant}
	if err := r.solve(q); err != nil {
		return err
	}
	p.t = t
	copy(p.x, e.X)
	for i, charge := range e.Q {
		p.q[i] = charge
		p.rate[i] = alpha*charge + r.constant[i]
	}
	return nil
}

// newtonShare is the share of the allowed error below which the last update of a stage must lie.
const newtonShare = 1e-3

// solve is Newton's method to the precision that the step needs. It leaves the charges of the solution in eval.
func (r *integration) solve(p *problem) error {
	e := &r.w.eval
	r.s.hold(e.X, p.time, 1)
	e.Limit = true
	for range stageIterations {
		r.w.evaluate(p)
		r.w.assemble(p)
		limited := e.Limited
		if err := r.w.step(); err != nil {
			return err
		}
		first := r.s.first()
		small := true
		for i, d := range r.w.update {
			e.X[first+i] += d
			if !(math.Abs(d) <= newtonShare*r.tol*r.scale(first+i)) {
				small = false
			}
			if !(math.Abs(e.X[first+i]) <= runaway) {
				return errDiverged
			}
		}
		if small && !limited {
			// First-order update of the charges to the solution found: exact but for the square of a tiny step.
			for k, row := range r.s.rows {
				if col := int(r.s.cols[k]); row > 0 && col >= first {
					e.Q[row] += e.C[k] * r.w.update[col-first]
				}
			}
			return nil
		}
	}
	return errSlow
}

const (
	// An unknown that hardly moves is not resolved below these shares: of its size, and of the
	// largest swing of a stimulus (a voltage 60 dB below it is still resolved to the full accuracy of its own swing).
	swingShare    = 1e-6
	stimulusShare = 1e-3
	swingVoltage  = 1e-9  // V
	swingCurrent  = 1e-13 // A
	// stimulusCurrent turns the stimulus into a floor for branch currents.
	stimulusCurrent = 1e-9 // S
	// stimulusSamples is the number of points at which a stimulus is looked at over its time scale.
	stimulusSamples = 16
)

// lookAhead raises the stimulus to the largest swing of a signal over its time scale from now on.
func (r *integration) lookAhead() {
	for _, list := range [][]Signal{r.s.held, r.s.timed} {
		for _, signal := range list {
			scale := math.Min(signal.Scale(r.t), r.o.Until)
			low, high := math.Inf(1), math.Inf(-1)
			for k := range stimulusSamples + 1 {
				v := signal.At(r.t + scale*float64(k)/stimulusSamples)
				low, high = math.Min(low, v), math.Max(high, v)
			}
			r.stimulus = math.Max(r.stimulus, high-low)
		}
	}
}

// scale is the swing of an unknown so far, to which its error is compared.
func (r *integration) scale(i int) float64 {
	floor := math.Max(swingVoltage, stimulusShare*r.stimulus)
	if r.s.branch[i] {
		floor = math.Max(swingCurrent, stimulusCurrent*r.stimulus)
	}
	size := math.Max(math.Abs(r.low[i]), math.Abs(r.high[i]))
	return math.Max(r.high[i]-r.low[i], swingShare*size+floor)
}

// predict extrapolates the solution to time t.
func (r *integration) predict(t float64, x []float64) {
	if r.fresh || !r.smooth {
		copy(x, r.start.x)
		return
	}
	// The line through the middle of the last step and its end.
	u := (t - r.start.t) / (r.start.t - r.before.t)
	for i := range x {
		x[i] = r.start.x[i] + u*(r.start.x[i]-r.before.x[i])
	}
}

// measure estimates the error of the step against what is allowed: 1 is just allowed.
func (r *integration) measure(h float64) float64 {
	first := r.s.first()
	free := r.w.update
	alpha := 1 / (share * h)
	for i := range free {
		k := first + i
		e := h * (errorStart*r.start.rate[k] + errorMiddle*r.middle.rate[k] + errorEnd*r.end.rate[k])
		if r.fresh {
			e = h * share * (r.end.rate[k] - r.middle.rate[k])
		}
		free[i] = alpha * e
	}
	r.w.lu.Solve(free)
	r.w.work.Solves++
	norm := 0.0
	for i, e := range free {
		k := first + i
		scale := math.Max(r.scale(k), math.Abs(r.end.x[k]-r.start.x[k]))
		ratio := math.Max(math.Abs(e), r.bend(k, h)) / (r.tol * scale)
		if !(ratio <= norm) {
			norm, r.worst = ratio, k
		}
	}
	return norm
}

// bendShare turns the third difference of the interpolation points into the error of their parabola: the largest
// value of u (u - gamma) (1 - u) is 0.066, and the cubic that is used is better than the parabola by an order.
const bendShare = 0.05

// bend estimates the error of the interpolation of an unknown within the step.
func (r *integration) bend(k int, h float64) float64 {
	if !r.smooth {
		return 0
	}
	return bendShare * math.Abs(r.third(k)) * h * h * h
}

// third is the third divided difference over the middle of the last step and the three points of this one.
func (r *integration) third(k int) float64 {
	a, b, c, d := &r.before, &r.start, &r.middle, &r.end
	ab := (b.x[k] - a.x[k]) / (b.t - a.t)
	bc := (c.x[k] - b.x[k]) / (c.t - b.t)
	cd := (d.x[k] - c.x[k]) / (d.t - c.t)
	abc := (bc - ab) / (c.t - a.t)
	bcd := (cd - bc) / (d.t - b.t)
	return (bcd - abc) / (d.t - a.t)
}

// interpolate fills x with the solution at t within the last step: the cubic through its three points and the middle of the step
// before, or the parabola after a corner.
func (r *integration) interpolate(t float64, x []float64) {
	b, c, d := &r.start, &r.middle, &r.end
	ub, uc, ud := t-b.t, t-c.t, t-d.t
	for k := r.s.first(); k < len(x); k++ {
		bc := (c.x[k] - b.x[k]) / (c.t - b.t)
		cd := (d.x[k] - c.x[k]) / (d.t - c.t)
		bcd := (cd - bc) / (d.t - b.t)
		v := b.x[k] + ub*(bc+uc*bcd)
		if r.smooth {
			v += ub * uc * ud * r.third(k)
		}
		x[k] = v
	}
	r.s.hold(x, t, 1)
}

// advance makes the end of the accepted step the start of the next.
func (r *integration) advance() {
	for i, v := range r.end.x {
		r.low[i] = math.Min(r.low[i], v)
		r.high[i] = math.Max(r.high[i], v)
	}
	r.t = r.end.t
	reached := r.t >= r.corner
	r.before, r.middle = r.middle, r.before
	r.start, r.end = r.end, r.start
	r.smooth, r.fresh = true, false
	if reached && r.t < r.o.Until {
		r.enter()
	}
}

// fail names the unknown that stops the integration.
func (r *integration) fail(reason error) error {
	e := &StepError{Time: r.t, Reason: reason, Unknown: "the circuit"}
	if r.worst > 0 {
		e.Unknown = r.s.names[r.worst]
		e.Devices = r.s.touching(Unknown(r.worst))
	}
	return e
}
