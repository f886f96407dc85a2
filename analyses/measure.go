package analyses

import (
	"context"
	"fmt"

	"poise/netlist"
)

// Value is a computed quantity. Which field holds it depends on the shape.
type Value struct {
	Text    string // the quantity as written
	Unit    string // SI unit, "" for a number
	Shape   netlist.Shape
	Complex bool       // Number is complex
	Number  complex128 // of a Scalar; a real one has no imaginary part
	Word    string     // of a Word
	Wave    *Waveform  // of a Waveform
	Curve   *Curve     // of a Curve
}

// Float returns the number by which an expectation compares a scalar: a real value itself, a complex one's magnitude.
func (v *Value) Float() float64 { return compared(v.Number, v.Complex) }

// Measure computes quantities, written in the language, for one set-up of a bench (see
// [netlist.Bench.Setup] and [netlist.Design.Setup]): volts(out), cmrr at 50Hz, tone(volts(out), 50Hz) ...
// A set-up with a run is integrated once for all of them.
//
// It returns a netlist.DiagnosticList for a quantity that makes no sense there, *InputError for one that cannot be computed as
// asked, and the errors of the analyses it needs.
func Measure(ctx context.Context, setup *netlist.Setup, quantities ...string) ([]Value, error) {
	var qs []netlist.Quantity
	for _, text := range quantities {
		q, err := setup.Quantity(text)
		if err != nil {
			return nil, err
		}
		qs = append(qs, q)
	}
	e, err := newEvaluation(ctx, setup, nil)
	if err != nil {
		return nil, err
	}
	if setup.Run != nil {
		kept, measured := sorted(qs)
		if err := e.run(kept, measured); err != nil {
			return nil, err
		}
	}
	var values []Value
	for _, q := range qs {
		v, err := e.value(q)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", q.Describe().Text, err)
		}
		values = append(values, v)
	}
	return values, nil
}

// sorted parts the waveforms from what is measured on some.
func sorted(qs []netlist.Quantity) (waveforms, others []netlist.Quantity) {
	for _, q := range qs {
		if q.Describe().Shape == netlist.Waveform {
			waveforms = append(waveforms, q)
		} else {
			others = append(others, q)
		}
	}
	return waveforms, others
}

// value computes a quantity of any shape.
func (e *evaluation) value(q netlist.Quantity) (v Value, err error) {
	info := q.Describe()
	v = Value{Text: info.Text, Unit: info.Unit.Symbol(), Shape: info.Shape, Complex: info.Complex}
	switch info.Shape {
	case netlist.Word:
		v.Word, _, err = e.word(q, "")
	case netlist.Waveform:
		v.Wave, err = e.waveform(q)
	case netlist.Curve:
		v.Curve, err = e.curve(q)
	default:
		v.Number, err = e.number(q, nowhere())
	}
	return v, err
}
