package netlist

import (
	"iter"
	"maps"
	"slices"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// drive puts a value or a waveform in the place of what the circuit says.
func (f *filled) drive(x *syntax.Drive) {
	c, name := f.circuit, x.Target.String()
	if i := slices.IndexFunc(c.Inputs, func(in Input) bool { return in.Name == name }); i >= 0 {
		f.driveInput(x, &c.Inputs[i])
		return
	}
	r, isRail := f.rail[name]
	s, isElement := f.element[name]
	switch {
	case isElement && c.Elements[s].Kind == "":
	case !isRail && !(isElement && c.Elements[s].Signal != nil):
		f.noDrive(x, isElement)
	case x.Mode != nil || x.Open:
		f.failHint("drive "+name+" = ...", CodeBench, x.Place(), "%s is no input; it has no modes and cannot be open", name)
	case f.driven[name]:
		f.fail(CodeDuplicate, x.Target.Place(), "%s is driven twice", name)
	case isRail:
		f.driven[name] = true
		if w, ok := f.driveSignal(x, name, unit.Voltage); ok {
			c.Rails[r].Signal = w.signal
		}
	default:
		f.driven[name] = true
		f.driveSource(x, &c.Elements[s])
	}
}

func (f *filled) driveSource(x *syntax.Drive, s *Element) {
	if s.Kind == KindCurrentSource {
		if w, ok := f.driveSignal(x, s.Name, unit.Current); ok {
			s.Signal, s.Value, s.Device = w.signal, w.signal.At(0), devices.NewCurrentSource(w.signal)
		}
		return
	}
	if w, ok := f.driveSignal(x, s.Name, unit.Voltage); ok {
		s.Signal, s.Value, s.Device = w.signal, w.signal.At(0), devices.NewVoltageSource(w.signal)
	}
}

// driveSignal evaluates what something is driven by.
func (f *filled) driveSignal(x *syntax.Drive, name string, want unit.Dimension) (signal, bool) {
	if q := circuitQuantity(x.Value); q != nil {
		return signal{}, f.later(q.Place(), "a source whose value depends on the circuit")
	}
	w, ok := f.signalOf(f.bench, x.Value)
	if ok && w.dimension != want {
		return w, f.fail(CodeDimension, x.Value.Place(), "%s is driven by %s, not by %s", name, want.Noun(), w.dimension.Noun())
	}
	return w, ok
}

// noDrive says that a name is nothing that can be driven.
func (f *filled) noDrive(x *syntax.Drive, isElement bool) {
	name := x.Target.String()
	isOutput := slices.ContainsFunc(f.circuit.Outputs, func(o Output) bool { return o.Name == name })
	switch {
	case f.unsure(x.Target) || f.isLost(name):
	case isElement:
		f.fail(CodeBench, x.Target.Place(), "%s is no source; inputs, rails and sources are driven", name)
	case isOutput:
		f.fail(CodeBench, x.Target.Place(), "%s is an output; inputs, rails and sources are driven", name)
	default:
		hint := f.guess(name, both(f.inputNames(), maps.Keys(f.rail)))
		f.failHint(hint, CodeUnknown, x.Target.Place(), "there is no input, rail or source called %s", name)
	}
}

func (e *elaborator) inputNames() iter.Seq[string] {
	return each(e.circuit.Inputs, func(in *Input) string { return in.Name })
}

func (e *elaborator) outputNames() iter.Seq[string] {
	return each(e.circuit.Outputs, func(o *Output) string { return o.Name })
}

// driveInput drives one mode of a port, or leaves it open.
func (f *filled) driveInput(x *syntax.Drive, in *Input) {
	driven := in.Single != nil || in.Differential != nil || in.Common != nil
	switch modes := modesOf(in); {
	case x.Open && (driven || in.Open), !x.Open && in.Open:
		f.fail(CodeDuplicate, x.Place(), "%s is driven in this bench, and open", in.Name)
	case x.Open:
		in.Open = true
	case x.Mode == nil:
		f.fail(CodePort, x.Target.Place(), "say in which mode %s is driven: %s", in.Name, strings.Join(modes, " or "))
	case !slices.Contains(modes, x.Mode.Name):
		f.failHint(f.guess(x.Mode.Name, slices.Values(modes)), CodePort, x.Mode.Place(), "%s has no mode called %s; it is driven in %s", in.Name, x.Mode.Name, strings.Join(modes, " or "))
	default:
		f.driveMode(x, in)
	}
}

func (f *filled) driveMode(x *syntax.Drive, in *Input) {
	w, ok := f.driveSignal(x, in.Name, drive(in.Current))
	place := &in.Single
	switch x.Mode.Name {
	case "differential":
		place = &in.Differential
	case "common":
		place = &in.Common
	}
	if *place != nil {
		f.fail(CodeDuplicate, x.Place(), "the %s mode of %s is driven twice", x.Mode.Name, in.Name)
		return
	}
	if !ok {
		w.signal = devices.Constant(0)
	}
	*place = w.signal
}

// modesOf lists the modes of an input.
func modesOf(in *Input) []string {
	if len(in.Nodes) == 1 {
		return []string{"signal"}
	}
	return []string{"differential", "common"}
}
