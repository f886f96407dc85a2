package mna

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"math"
)

// TransientOptions say how to integrate. Only Until is required.
type TransientOptions struct {
	Until    float64      // s, the end; it starts at 0
	MaxStep  float64      // s, the longest step; 0: accuracy and the signals decide
	Accuracy float64      // relative error of a waveform that is wanted, above 0 and below 1; 0: 1e-4
	Start    []float64    // all unknowns at time 0, a bias point; nil: found first
	Cold     bool         // start from the devices' own start values instead, uncharged without
	Method   Method       // 0: NDF
	Logger   *slog.Logger // nil: silent
}

// Method is an implicit integration method.
type Method int

const (
	NDF    Method = iota // numerical differentiation formulas of orders 1 to 5
	TRBDF2               // a trapezoidal step and a backward differentiation of second order
)

func (m Method) String() string {
	switch m {
	case NDF:
		return "NDF"
	case TRBDF2:
		return "TR-BDF2"
	}
	return fmt.Sprintf("method %d", int(m))
}

// TransientStats count what an integration took.
type TransientStats struct {
	Steps          int // accepted
	Rejected       int // for their error
	NewtonFailures int // steps shortened because Newton's method failed
	Unresolved     int // steps too short to be refused for their error: jumps, as far as times can be told apart
	Restarts       int // at corners of signals, the start included
	Work           Work
}

// StepError says that an integration could not go on.
type StepError struct {
	Time    float64  // s
	Unknown string   // whose error or equation forbids a longer step
	Devices []string // that touch it
	Reason  error
}

func (e *StepError) Error() string {
	if errors.Is(e.Reason, errCreeping) {
		return fmt.Sprintf("the integration stopped at %.9g s: %v, for %s (at %s)", e.Time, e.Reason, e.Unknown, list(e.Devices))
	}
	return fmt.Sprintf("the integration stopped at %.9g s: even the shortest step fails at %s (at %s): %v", e.Time, e.Unknown, list(e.Devices), e.Reason)
}

func (e *StepError) Unwrap() error { return e.Reason }

var (
	errInexact  = errors.New("the estimated error stays too large")
	errCreeping = errors.New("hundreds of thousands of steps bring it no further")
)

const (
	defaultAccuracy = 1e-4
	// stepsPerScale is the least number of steps in the shortest time in which a signal changes character.
	stepsPerScale = 8
	// firstPerScale is that of the first step after a corner.
	firstPerScale = 150
	// leastSteps is the least number of steps of a whole run.
	leastSteps = 20
	// leastShare bounds steps from below, as a share of the whole time: near time 0, where a cold circuit may do things of any
	// speed, numbers tell apart far shorter times.
	leastShare = 1e-21
	// creepTries and creepShare bound a run that gets nowhere: that many tries must advance by that share of the whole time.
	creepTries = 1 << 19
	creepShare = 1e-9
	// leastBits is the shortest step in last bits of the time.
	leastBits = 16
)

// Step is one accepted step, valid until the sink returns.
type Step struct {
	T0, T1 float64 // s
	r      *integration
}

// At fills x, of the system's size, with the solution at t seconds, within the step: held nodes exactly from their signals, the others by
// the method's own interpolant, a polynomial of degree 5 at most. At a jump of a signal T0 is just after it and T1 just before.
func (p *Step) At(t float64, x []float64) {
	p.r.method.interpolate(t, x, p.r.free)
	p.r.s.hold(x, p.r.inside(t), 1)
}

// Values is [Step.At] for some unknowns: it fills x, of the system's size, at those alone.
func (p *Step) Values(t float64, unknowns []Unknown, x []float64) {
	p.r.method.interpolate(t, x, unknowns)
	for _, u := range unknowns {
		p.r.s.holdOne(u, x, p.r.inside(t))
	}
}

// End returns the solution at T1, all unknowns. It must not be changed.
func (p *Step) End() []float64 { return p.r.method.end().x }

// Transient integrates f(x,t) + d/dt q(x,t) = 0 from time 0 to o.Until and calls sink with every accepted step, in order. An error of
// the sink ends it and is returned as it is.
//
// Steps are chosen so that the estimated error of every unknown, algebraic ones and the interpolated solution
// included, stays below a share of the accuracy times the swing that the unknown has shown so far. The integration lands on every
// corner of every signal and starts afresh there: nothing before the corner is used, and unknowns that no charge holds may jump.
//
// It returns *OptionError, *StepError (which wraps the reason), *SingularError or *NoConvergenceError (of the bias point it starts from), or the
// context's error. The statistics are never nil.
func (s *System) Transient(ctx context.Context, o TransientOptions, sink func(*Step) error) (*TransientStats, error) {
	if err := o.check(s); err != nil {
		return &TransientStats{}, err
	}
	r := newIntegration(ctx, s, o)
	err := r.run(sink)
	r.stats.Work = r.w.work
	return &r.stats, err
}

func (o *TransientOptions) check(s *System) error {
	switch {
	case !(o.Until > 0) || math.IsInf(o.Until, 1):
		return &OptionError{"Until", "a time above 0"}
	case !(o.MaxStep >= 0):
		return &OptionError{"MaxStep", "a time above 0, or 0 for none"}
	case !(o.Accuracy >= 0 && o.Accuracy < 1):
		return &OptionError{"Accuracy", "a number above 0 and below 1, or 0 for 1e-4"}
	case o.Method != NDF && o.Method != TRBDF2:
		return &OptionError{"Method", "one of the methods of the package"}
	case o.Start != nil && len(o.Start) != len(s.names):
		return &OptionError{"Start", "as many values as the system has unknowns"}
	}
	return nil
}

// integration is one run of an integrator.
type integration struct {
	ctx    context.Context
	s      *System
	o      TransientOptions
	w      *workspace
	log    *slog.Logger
	stats  TransientStats
	method method
	free   []Unknown // all free unknowns
	*resolution

	t      float64 // s, end of the last accepted step; after a restart the time of the consistent point, just after the corner
	since  float64 // s, where the next step begins: t but for a restart, where it is the corner
	h      float64 // s, the step to try
	corner float64 // s, the next corner

	tries int     // since mark
	mark  float64 // s

	first float64 // s, the step that was tried first after the last corner
	blind float64 // s, the length of the next step whose error is not asked for, after one of that kind
	step  Step
}

// method is an implicit integration method. It keeps what it needs of the past.
type method interface {
	// restart forgets the past and goes on from a consistent point.
	restart(from *point)
	// attempt solves the equations at the end of a step, in s. An error means that they could not be solved.
	attempt(end float64) error
	// judge estimates the error of the attempted step beside the allowed one, 1 being just allowed, with the unknown it is largest in, and
	// proposes the length of the next step, or of another try, in s.
	judge() (ratio float64, worst int, next float64)
	// accept makes the attempted step the last one.
	accept()
	// end returns the point at the end of the last step.
	end() *point
	// interpolate fills some of the free unknowns of x at a time within the last step, in s. What it writes for others has no meaning.
	interpolate(t float64, x []float64, unknowns []Unknown)
}

// point is the solution at one time.
type point struct {
	t    float64   // s
	x    []float64 // by unknown
	q    []float64 // C or Wb, by unknown
	rate []float64 // dq/dt
}

// setRate takes dq/dt from the currents: as a difference of charges it would carry their rounding over a short step.
func (p *point) setRate(f []float64) {
	for i, v := range f {
		p.rate[i] = -v
	}
}

func (s *System) newPoint() point {
	n := len(s.names)
	return point{x: make([]float64, n), q: make([]float64, n), rate: make([]float64, n)}
}

func newIntegration(ctx context.Context, s *System, o TransientOptions) *integration {
	if o.Accuracy == 0 {
		o.Accuracy = defaultAccuracy
	}
	if o.Logger == nil {
		o.Logger = slog.New(slog.DiscardHandler)
	}
	r := &integration{ctx: ctx, s: s, o: o, w: s.newWorkspace(), log: o.Logger}
	r.step.r = r
	for u := s.first(); u < len(s.names); u++ {
		r.free = append(r.free, Unknown(u))
	}
	switch o.Method {
	case TRBDF2:
		r.resolution = newResolution(s, o.Accuracy, trbdf2Share, trbdf2Order)
		r.method = newTRBDF2(r)
	default:
		r.resolution = newResolution(s, o.Accuracy, ndfShare, ndfMost)
		r.method = newNDF(r)
	}
	return r
}

func (r *integration) run(sink func(*Step) error) error {
	if err := r.begin(); err != nil {
		return err
	}
	for r.t < r.o.Until {
		if err := r.ctx.Err(); err != nil {
			return err
		}
		start := r.since
		accepted, err := r.try()
		if err != nil {
			return err
		}
		if !accepted {
			continue
		}
		r.stats.Steps++
		r.widen(r.method.end().x)
		r.step.T0, r.step.T1 = start, r.t
		if err := sink(&r.step); err != nil {
			return err
		}
		if r.t >= r.corner && r.t < r.o.Until {
			if err := r.enter(r.method.end()); err != nil {
				return err
			}
		}
	}
	return nil
}

// try attempts one step and reports whether it is accepted; r.h is what to take next.
func (r *integration) try() (bool, error) {
	if r.tries++; r.tries == creepTries {
		if r.t-r.mark < creepShare*r.o.Until {
			return false, r.fail(r.worst, errCreeping)
		}
		r.tries, r.mark = 0, r.t
	}
	end := r.target()
	if !(end-r.t >= r.shortest()) && end != r.corner {
		return false, r.fail(r.worst, errInexact)
	}
	if err := r.method.attempt(end); err != nil {
		if r.ctx.Err() != nil {
			return false, r.ctx.Err()
		}
		r.stats.NewtonFailures++
		if r.h = (end - r.t) / 2; !(r.h >= r.shortest()) {
			return false, r.fail(r.resisting(), err)
		}
		return false, nil
	}
	if !r.good(end - r.t) {
		r.stats.Rejected++
		return false, nil
	}
	r.method.accept()
	r.t, r.since = end, end
	return true, nil
}

// good judges the attempted step of the given length in s.
func (r *integration) good(length float64) bool {
	ratio, worst, next := r.method.judge()
	r.worst, r.h = worst, next
	switch {
	case ratio <= 1:
		r.blind = 0
		return true
	case length > r.finest() || math.IsInf(ratio, 1):
		return false
	}
	r.stats.Unresolved++
	r.blind = 4 * length
	r.h = r.blind
	return true
}

const (
	// finestShare is the length of steps, as a share of the whole time, below which nothing is resolved any more.
	finestShare = 1e-12
	// finestFirst bounds it as a share of the first step after the last corner.
	finestFirst = 1e-6
	// finestMost bounds what they may grow to, as a share of the same.
	finestMost = 1e-5
)

// finest is the length in s of steps whose error is not asked for (it grows while such steps follow each other: what does not end is no jump but rounding): what happens within one is a jump to anything that looks at the run. Ideal parts do
// such things (a junction without depletion charge, the moment its stored charge is gone), and a slope that rounding spoilt at a corner looks like one.
func (r *integration) finest() float64 {
	finest := math.Max(math.Min(finestShare*r.o.Until, finestFirst*r.first), 4*r.shortest())
	return math.Max(finest, math.Min(r.blind, finestMost*r.first))
}

// shortest is the length in s of the shortest step from the present time.
func (r *integration) shortest() float64 {
	return math.Max(leastShare*r.o.Until, leastBits*bit(r.t))
}

// bit is the distance from t to the next number.
func bit(t float64) float64 { return math.Nextafter(t, math.Inf(1)) - t }

// target returns the end of the step to try.
func (r *integration) target() float64 {
	h := min(r.h, r.o.Until/leastSteps)
	if r.o.MaxStep > 0 {
		h = min(h, r.o.MaxStep)
	}
	for _, signal := range r.s.signals {
		h = min(h, signal.Scale(r.t)/stepsPerScale)
	}
	left := r.corner - r.t
	switch {
	case h >= left*(1-1e-9):
		return r.corner
	case 2*h > left:
		return r.t + left/2
	}
	return r.t + h
}

// inside moves a time at a corner to just before it: the step that ends there sees the signals as they were.
func (r *integration) inside(t float64) float64 {
	if t >= r.corner {
		return math.Nextafter(r.corner, math.Inf(-1))
	}
	return t
}

// fail names the unknown that stops the integration.
func (r *integration) fail(unknown int, reason error) error {
	e := &StepError{Time: r.t, Reason: reason, Unknown: "the circuit"}
	if unknown >= r.s.first() {
		e.Unknown = r.s.names[unknown]
		e.Devices = r.s.touching(Unknown(unknown))
	}
	return e
}

// resisting is the unknown whose equation balances worst in the last evaluation.
func (r *integration) resisting() int {
	if rows := r.w.worstRows(); len(rows) > 0 {
		return rows[0]
	}
	return 0
}
