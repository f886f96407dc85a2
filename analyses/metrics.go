package analyses

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"

	"poise/netlist"
)

// responseMetrics computes the metrics of the linearised circuit at the frequency of r.
// The definitions are those of the language reference.
var responseMetrics = map[string]func(r *responder, q *netlist.Metric) (complex128, error){
	"dm_gain":       dmGain,
	"cm_gain":       cmGain,
	"cmrr":          rejection,
	"cm_to_dm":      cmToDM,
	"dm_to_cm":      dmToCM,
	"psrr":          railRejection,
	"dm_impedance":  dmImpedance,
	"cm_impedance":  cmImpedance,
	"out_impedance": outImpedance,
	"gain":          anyGain,
	"group_delay":   groupDelay,
}

// mainMode is the mode of an input that carries the wanted signal.
func mainMode(in *netlist.Input) string {
	if len(in.Nodes) == 1 {
		return modeSignal
	}
	return modeDifferential
}

func dmGain(r *responder, q *netlist.Metric) (complex128, error) {
	in, err := r.m.input(q.Input)
	if err != nil {
		return cmplx.NaN(), err
	}
	return r.transfer(drive{driveInput, in.Name, mainMode(in)}, q.Output)
}

// pairInput returns the input of a metric that needs two leads.
func pairInput(r *responder, q *netlist.Metric) (*netlist.Input, error) {
	in, err := r.m.input(q.Input)
	if err != nil {
		return nil, err
	}
	if len(in.Nodes) != 2 {
		return nil, &InputError{Message: q.Name + " needs an input with two nodes, and " + in.Name + " has one"}
	}
	return in, nil
}

// pairOutput returns the output of a metric that needs two nodes.
func pairOutput(r *responder, q *netlist.Metric) (*netlist.Output, error) {
	out, err := r.m.output(q.Output)
	if err != nil {
		return nil, err
	}
	if len(out.Nodes) != 2 {
		return nil, &InputError{Message: q.Name + " needs an output with two nodes, and " + out.Name + " has one"}
	}
	return out, nil
}

func cmGain(r *responder, q *netlist.Metric) (complex128, error) {
	in, err := pairInput(r, q)
	if err != nil {
		return cmplx.NaN(), err
	}
	return r.transfer(drive{driveInput, in.Name, modeCommon}, q.Output)
}

func rejection(r *responder, q *netlist.Metric) (complex128, error) {
	wanted, err := dmGain(r, q)
	if err != nil {
		return cmplx.NaN(), err
	}
	unwanted, err := cmGain(r, q)
	if err != nil {
		return cmplx.NaN(), err
	}
	return magnitudeRatio(wanted, unwanted), nil
}

// magnitudeRatio is abs(a/b), +Inf where b vanishes and a does not.
func magnitudeRatio(a, b complex128) complex128 {
	return complex(cmplx.Abs(a)/cmplx.Abs(b), 0)
}

func cmToDM(r *responder, q *netlist.Metric) (complex128, error) {
	if _, err := pairOutput(r, q); err != nil {
		return cmplx.NaN(), err
	}
	return cmGain(r, q)
}

func dmToCM(r *responder, q *netlist.Metric) (complex128, error) {
	in, err := pairInput(r, q)
	if err != nil {
		return cmplx.NaN(), err
	}
	out, err := pairOutput(r, q)
	if err != nil {
		return cmplx.NaN(), err
	}
	x, err := r.solve(drive{driveInput, in.Name, modeDifferential})
	if err != nil {
		return cmplx.NaN(), err
	}
	return (x[r.m.system.Unknown(out.Nodes[0])] + x[r.m.system.Unknown(out.Nodes[1])]) / 2, nil
}

func railRejection(r *responder, q *netlist.Metric) (complex128, error) {
	wanted, err := dmGain(r, q)
	if err != nil {
		return cmplx.NaN(), err
	}
	unwanted, err := r.transfer(drive{kind: driveRail, name: q.Rail}, q.Output)
	if err != nil {
		return cmplx.NaN(), err
	}
	return magnitudeRatio(wanted, unwanted), nil
}

// pinStates returns the voltages of an input's nodes and the currents that its ideal sources deliver there.
func (r *responder) pinStates(in *netlist.Input, x []complex128) (volts, amps []complex128) {
	for _, node := range in.Nodes {
		u := r.m.system.Unknown(node)
		volts = append(volts, x[u])
		amps = append(amps, r.solver.Leaving(x, u))
	}
	return volts, amps
}

// dmImpedance is one differential volt over half the difference of the two pin currents, 2/(i_a - i_b); of
// an input driven by currents the differential voltage over the current that flows in at a and out at b.
func dmImpedance(r *responder, q *netlist.Metric) (complex128, error) {
	in, err := r.m.input(q.Input)
	if err != nil {
		return cmplx.NaN(), err
	}
	x, err := r.solve(drive{driveInput, in.Name, mainMode(in)})
	if err != nil {
		return cmplx.NaN(), err
	}
	volts, amps := r.pinStates(in, x)
	if len(in.Nodes) == 1 {
		return volts[0] / amps[0], nil
	}
	return (volts[0] - volts[1]) / ((amps[0] - amps[1]) / 2), nil
}

// cmImpedance is one common volt over the total current into both pins.
func cmImpedance(r *responder, q *netlist.Metric) (complex128, error) {
	in, err := pairInput(r, q)
	if err != nil {
		return cmplx.NaN(), err
	}
	x, err := r.solve(drive{driveInput, in.Name, modeCommon})
	if err != nil {
		return cmplx.NaN(), err
	}
	volts, amps := r.pinStates(in, x)
	return (volts[0] + volts[1]) / 2 / (amps[0] + amps[1]), nil
}

func outImpedance(r *responder, q *netlist.Metric) (complex128, error) {
	out, err := r.m.output(q.Output)
	if err != nil {
		return cmplx.NaN(), err
	}
	return r.transfer(drive{kind: driveOutput, name: out.Name}, out.Name)
}

func anyGain(r *responder, q *netlist.Metric) (complex128, error) {
	d := drive{kind: driveSource, name: q.From}
	if _, ok := r.m.rail[q.From]; ok {
		d.kind = driveRail
	}
	if q.Mode != "" {
		d = drive{driveInput, q.From, q.Mode}
	}
	x, err := r.solve(d)
	if err != nil {
		return cmplx.NaN(), err
	}
	return r.measure(x, q.To)
}

// delayStep is the relative step in frequency of the difference that gives the group delay: with the fourth-order
// formula its error is of the order of delayStep^4 and of rounding over delayStep, both below 1e-10.
const delayStep = 1e-3

// groupDelay is -d arg(dm_gain) / d omega in s.
func groupDelay(r *responder, q *netlist.Metric) (complex128, error) {
	f := r.frequency
	var h [4]complex128
	for i, step := range []float64{-2, -1, 1, 2} {
		if err := r.at(f * (1 + step*delayStep)); err != nil {
			return cmplx.NaN(), err
		}
		var err error
		if h[i], err = dmGain(r, q); err != nil {
			return cmplx.NaN(), err
		}
	}
	if err := r.at(f); err != nil {
		return cmplx.NaN(), err
	}
	middle, err := dmGain(r, q)
	if err != nil {
		return cmplx.NaN(), err
	}
	slope := (h[0] - 8*h[1] + 8*h[2] - h[3]) / complex(12*delayStep*f*2*math.Pi, 0)
	return complex(-imag(slope/middle), 0), nil
}

// The range searched for corners of dm_gain if none is given, in Hz.
const (
	searchLow  = 1e-3
	searchHigh = 10e9
	// searchPerDecade is fine enough for the resonances of front ends: a peak narrower than a tenth
	// of an octave is refined from its flank.
	searchPerDecade = 40
	// cornerPrecision is the relative precision of a corner and of the frequency of a peak.
	cornerPrecision = 1e-5
)

// gainSearch looks along the magnitude of dm_gain.
type gainSearch struct {
	frequency []float64
	magnitude []float64
	at        func(f float64) (float64, error)
	peak      float64 // largest magnitude, refined
	peakAt    float64
	top       int // index of the largest sample
}

func searchGain(ctx context.Context, r *responder, q *netlist.Metric) (*gainSearch, error) {
	low, high := q.Band.Low, q.Band.High
	if !(high > 0) {
		low, high = searchLow, searchHigh
	}
	perDecade := q.Band.PerDecade
	if perDecade == 0 {
		perDecade = searchPerDecade
	}
	s := &gainSearch{frequency: logGrid(low, high, perDecade)}
	s.at = func(f float64) (float64, error) {
		if err := r.at(f); err != nil {
			return math.NaN(), err
		}
		g, err := dmGain(r, q)
		return cmplx.Abs(g), err
	}
	for i, f := range s.frequency {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		g, err := s.at(f)
		if err != nil {
			return nil, err
		}
		s.magnitude = append(s.magnitude, g)
		if g > s.magnitude[s.top] {
			s.top = i
		}
	}
	return s, s.refinePeak()
}

// refinePeak finds the largest magnitude near the largest sample.
func (s *gainSearch) refinePeak() error {
	a := s.frequency[max(0, s.top-1)]
	b := s.frequency[min(len(s.frequency)-1, s.top+1)]
	var err error
	s.peakAt, s.peak, err = maximise(s.at, a, b)
	if s.magnitude[s.top] >= s.peak {
		s.peakAt, s.peak = s.frequency[s.top], s.magnitude[s.top]
	}
	return err
}

// corner returns the frequency, from the peak in direction step, where the magnitude first falls to 1/sqrt 2 of
// the peak, or none if it does not within the range.
func (s *gainSearch) corner(step int, none float64) (float64, error) {
	level := s.peak / math.Sqrt2
	inside := s.peakAt
	for i := s.top + step; i >= 0 && i < len(s.frequency); i += step {
		if s.magnitude[i] <= level {
			return s.bisectCorner(inside, s.frequency[i], level)
		}
		inside = s.frequency[i]
	}
	return none, nil
}

func (s *gainSearch) bisectCorner(inside, outside, level float64) (float64, error) {
	for math.Abs(inside/outside-1) > cornerPrecision {
		m := math.Sqrt(inside * outside)
		g, err := s.at(m)
		if err != nil {
			return math.NaN(), err
		}
		if g > level {
			inside = m
		} else {
			outside = m
		}
	}
	return math.Sqrt(inside * outside), nil
}

// maximise returns where f is largest in a..b, by golden sections of the logarithm (Kiefer, 1953).
func maximise(f func(float64) (float64, error), a, b float64) (at, value float64, err error) {
	const ratio = 0.6180339887498949
	la, lb := math.Log(a), math.Log(b)
	l1, l2 := lb-ratio*(lb-la), la+ratio*(lb-la)
	f1, err := f(math.Exp(l1))
	if err != nil {
		return math.NaN(), math.NaN(), err
	}
	f2, err := f(math.Exp(l2))
	if err != nil {
		return math.NaN(), math.NaN(), err
	}
	for lb-la > cornerPrecision {
		if f1 > f2 {
			lb, l2, f2 = l2, l1, f1
			l1 = lb - ratio*(lb-la)
			f1, err = f(math.Exp(l1))
		} else {
			la, l1, f1 = l1, l2, f2
			l2 = la + ratio*(lb-la)
			f2, err = f(math.Exp(l2))
		}
		if err != nil {
			return math.NaN(), math.NaN(), err
		}
	}
	if f1 > f2 {
		return math.Exp(l1), f1, nil
	}
	return math.Exp(l2), f2, nil
}

// logGrid returns frequencies from low to high, both included, evenly spaced in the logarithm.
func logGrid(low, high float64, perDecade int) []float64 {
	n := max(1, int(math.Ceil(math.Log10(high/low)*float64(perDecade)-1e-9)))
	grid := make([]float64, n+1)
	for i := range grid {
		grid[i] = low * math.Pow(high/low, float64(i)/float64(n))
	}
	grid[n] = high
	return grid
}

// searchMetrics computes the metrics that search dm_gain over a range.
var searchMetrics = map[string]func(s *gainSearch) (float64, error){
	"bandwidth":  func(s *gainSearch) (float64, error) { return s.corner(1, math.Inf(1)) },
	"low_corner": func(s *gainSearch) (float64, error) { return s.corner(-1, 0) },
	"peak_gain":  func(s *gainSearch) (float64, error) { return s.peak, nil },
}

// biasMetrics computes the metrics of the quiescent state.
var biasMetrics = map[string]func(e *evaluation, q *netlist.Metric) (float64, error){
	"bias_current":   biasCurrent,
	"offset_current": offsetCurrent,
	"offset":         offset,
}

// pinCurrents returns what the ideal sources of a pair deliver at rest, in A.
func (e *evaluation) pinCurrents(q *netlist.Metric) ([]float64, error) {
	in, err := e.model.input(q.Input)
	if err != nil {
		return nil, err
	}
	if in.Open || in.Current {
		return nil, &InputError{Message: fmt.Sprintf("%s is the current that voltages at the input draw; %s is not driven by voltages in this bench", q.Name, in.Name)}
	}
	x, err := e.quiescent()
	if err != nil {
		return nil, err
	}
	var amps []float64
	for _, node := range in.Nodes {
		i, err := e.model.currentTap(1, e.model.fed[node]...).rest(x)
		if err != nil {
			return nil, err
		}
		amps = append(amps, i)
	}
	return amps, nil
}

// biasCurrent is the mean current into the input pins from the port.
func biasCurrent(e *evaluation, q *netlist.Metric) (float64, error) {
	amps, err := e.pinCurrents(q)
	if err != nil {
		return math.NaN(), err
	}
	sum := 0.0
	for _, i := range amps {
		sum += i
	}
	return sum / float64(len(amps)), nil
}

// offsetCurrent is the current into the first pin less that into the second.
func offsetCurrent(e *evaluation, q *netlist.Metric) (float64, error) {
	amps, err := e.pinCurrents(q)
	if err != nil {
		return math.NaN(), err
	}
	if len(amps) != 2 {
		return math.NaN(), &InputError{Message: "offset_current needs an input with two nodes"}
	}
	return amps[0] - amps[1], nil
}
