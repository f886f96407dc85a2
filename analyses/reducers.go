package analyses

import (
	"fmt"
	"math"

	"poise/netlist"
)

// reducer makes a number of a waveform: an accumulator of its pieces, and what is read off that in the end.
type reducer struct {
	kind  string // accumulators of one kind, and for the same numbers, are the same
	start func(w window, accuracy float64, n numbers) accumulator
	value func(a accumulator, n numbers) (float64, error)
	whole bool // the accumulator is an [outline]
}

// numbers are the arguments of a reducer behind the waveform, SI, by their names in the catalogue.
type numbers = map[string]float64

// key tells accumulators on one waveform apart.
func (r *reducer) key(n numbers) string {
	if r.whole {
		return r.kind
	}
	return r.kind + fmt.Sprint(n)
}

// reducing is a reducer whose accumulator keeps nothing of the pieces.
func reducing[A accumulator](start func(w window, n numbers) A, value func(a A) (float64, error)) reducer {
	return reducer{
		kind:  fmt.Sprintf("%T", *new(A)),
		start: func(w window, _ float64, n numbers) accumulator { return start(w, n) },
		value: func(a accumulator, _ numbers) (float64, error) { return value(a.(A)) },
	}
}

// looking is a reducer that needs the whole waveform.
func looking(value func(w *Waveform, n numbers) (float64, error)) reducer {
	return reducer{
		kind:  "outline",
		start: func(_ window, accuracy float64, _ numbers) accumulator { return newOutline(accuracy) },
		value: func(a accumulator, n numbers) (float64, error) { return value(&a.(*outline).wave, n) },
		whole: true,
	}
}

// sure turns a result that is always there into that of a reducer.
func sure[A accumulator](value func(A) float64) func(A) (float64, error) {
	return func(a A) (float64, error) { return value(a), nil }
}

// reducers make a number of a waveform. Their definitions are those of the language reference.
var reducers = map[string]reducer{
	"peak":       reducing(wantExtremes, sure(func(a *extremes) float64 { return a.high.value })),
	"trough":     reducing(wantExtremes, sure(func(a *extremes) float64 { return -a.low.value })),
	"pp":         reducing(wantExtremes, sure((*extremes).difference)),
	"mean":       reducing(func(w window, _ numbers) *integral { return newIntegral(w) }, sure((*integral).mean)),
	"rms":        reducing(func(w window, _ numbers) *power { return newPower(w) }, sure((*power).root)),
	"value":      reducing(func(w window, n numbers) *instant { return newInstant(w, n["at"]) }, (*instant).read),
	"tone":       reducing(wantTone, func(a *toneFit) (float64, error) { v, err := a.tone(); return math.Hypot(real(v), imag(v)), err }),
	"tone_phase": reducing(wantTone, func(a *toneFit) (float64, error) { v, err := a.tone(); return math.Atan2(imag(v), real(v)), err }),
	"slew":       reducing(func(window, numbers) *steepest { return newSteepest() }, sure(func(a *steepest) float64 { return a.value })),
	"crosses":    reducing(func(_ window, n numbers) *crossing { return newCrossing(n["level"], int(n["n"])) }, (*crossing).time),
	"outside":    reducing(func(_ window, n numbers) *outside { return newOutside(n["low"], n["high"]) }, sure(func(a *outside) float64 { return a.time.value() })),
	"drift":      reducing(func(w window, _ numbers) *drift { return newDrift(w) }, sure((*drift).rise)),

	"rise":      looking(func(w *Waveform, _ numbers) (float64, error) { return w.Rise() }),
	"fall":      looking(func(w *Waveform, _ numbers) (float64, error) { return w.Fall() }),
	"overshoot": looking(func(w *Waveform, _ numbers) (float64, error) { return w.Overshoot() }),
	"settles":   looking(func(w *Waveform, n numbers) (float64, error) { return w.Settling(n["within"]), nil }),
}

func wantExtremes(window, numbers) *extremes { return newExtremes() }

func wantTone(w window, n numbers) *toneFit { return newToneFit(w, n["frequency"]) }

// of computes a reducer of a waveform that is there.
func (r *reducer) of(w *Waveform, n numbers) (float64, error) {
	if r.whole {
		return r.value(&outline{wave: *w}, n)
	}
	return r.value(accumulated(w, r.start(w.window(), 0, n)), n)
}

// reduce computes a reducer: from what the run accumulated or, if that needed the result of another reducer first, from the recorded waveform.
func (e *evaluation) reduce(q *netlist.Reduce) (complex128, error) {
	if e.record == nil {
		return 0, &InputError{Message: "a waveform needs a run"}
	}
	r, ok := reducers[q.Name]
	if !ok {
		return 0, fmt.Errorf("the reducer %s cannot be computed", q.Name)
	}
	if s := e.record.readings[q]; s != nil {
		if s.err != nil {
			return 0, s.err
		}
		v, err := r.value(s.accumulator, q.Numbers)
		return complex(v, 0), err
	}
	w, err := e.waveform(q.X)
	if err != nil {
		return 0, err
	}
	v, err := r.of(w, q.Numbers)
	return complex(v, 0), err
}

// extremes returns the extremes of a waveform that the run was to watch.
func (e *evaluation) extremes(q netlist.Quantity) (*extremes, error) {
	if e.record != nil {
		if s := e.record.readings[q]; s != nil {
			if s.err != nil {
				return nil, s.err
			}
			return s.accumulator.(*extremes), nil
		}
	}
	w, err := e.waveform(q)
	if err != nil {
		return nil, err
	}
	return accumulated(w, newExtremes()), nil
}
