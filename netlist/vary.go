package netlist

import (
	"math"

	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// axes evaluates the axes of a bench's grid.
func (e *elaborator) axes(b *Bench) {
	for _, s := range b.tree.Body {
		if x, ok := s.(*syntax.Vary); ok {
			e.axis(b, x)
		}
	}
}

// axis evaluates one vary.
func (e *elaborator) axis(b *Bench, x *syntax.Vary) {
	v := Vary{Target: x.Target.String(), Span: x.Span, target: x.Target}
	values, ok := e.axisList(x, &v.dimension)
	if x.From != nil {
		values, ok = e.axisRange(x, &v.dimension)
	}
	if !ok || len(values) == 0 {
		return
	}
	total := float64(len(values))
	for _, other := range b.Vary {
		if other.Target == v.Target {
			e.fail(CodeDuplicate, x.Target.Place(), "%s is varied twice", v.Target)
			return
		}
		total *= float64(len(other.Values))
	}
	if !e.fewPoints(x, total) {
		return
	}
	v.Values, v.Unit = values, v.dimension.Symbol()
	b.Vary = append(b.Vary, v)
}

// axisList evaluates v1, v2, ...
func (e *elaborator) axisList(x *syntax.Vary, d *unit.Dimension) (values []float64, ok bool) {
	ok = true
	for i, item := range x.List {
		v, good := e.single(e.bench, item)
		switch {
		case !good:
			ok = false
			continue
		case i > 0 && ok && v.Dimension != *d:
			ok = e.fail(CodeDimension, item.Place(), "the values of one axis are alike: %s beside %s", v.Dimension.Noun(), d.Noun())
		}
		*d = v.Dimension
		values = append(values, v.SI)
	}
	return values, ok
}

// axisRange evaluates a..b by step, or a..b count n.
func (e *elaborator) axisRange(x *syntax.Vary, d *unit.Dimension) ([]float64, bool) {
	from, ok1 := e.single(e.bench, x.From)
	to, ok2 := e.single(e.bench, x.To)
	if !ok1 || !ok2 {
		return nil, false
	}
	if *d = from.Dimension; to.Dimension != *d {
		return nil, e.fail(CodeDimension, x.To.Place(), "the range goes from %s to %s", d.Noun(), to.Dimension.Noun())
	}
	if from.SI == to.SI {
		return nil, e.fail(CodeEmptyRange, x.From.Place(), "the range is empty")
	}
	if x.Count != nil {
		const most = 1 << 30
		n, ok := e.whole(e.bench, x.Count, "the count", 2, most)
		if !ok || !e.fewPoints(x, n) {
			return nil, false
		}
		return spaced(from.SI, to.SI, int(n)), true
	}
	return e.stepped(x, from, to)
}

// stepped evaluates a..b by step: a, a + step, ... as far as b.
func (e *elaborator) stepped(x *syntax.Vary, from, to value) ([]float64, bool) {
	if x.By == nil || !e.difference(x.By) {
		return nil, false
	}
	step, ok := e.wanted(e.bench, x.By, from.Dimension, "the step")
	if !ok {
		return nil, false
	}
	if !(step*(to.SI-from.SI) > 0) {
		return nil, e.fail(CodeEmptyRange, x.By.Place(), "the step does not lead from the first value to the last")
	}
	const slack = 1e-9 // of a step: the last value is met in spite of rounding
	n := math.Floor((to.SI-from.SI)/step+slack) + 1
	if !e.fewPoints(x, n) {
		return nil, false
	}
	last := from.SI + (n-1)*step
	if math.Abs(last-to.SI) <= slack*math.Abs(step) {
		last = to.SI
	}
	return spaced(from.SI, last, int(n)), true
}

// fewPoints keeps a grid within the limit.
func (e *elaborator) fewPoints(x *syntax.Vary, n float64) bool {
	if most := e.program.limits.Points; n > float64(most) {
		return e.fail(CodeLimit, x.Place(), "the grid has %.0f points; at most %d are computed", n, most)
	}
	return true
}

// spaced returns n values at equal distances, both ends as they are.
func spaced(from, to float64, n int) []float64 {
	values := make([]float64, n)
	for i := range values {
		values[i] = from
		if i > 0 {
			values[i] = from + float64(i)/float64(n-1)*(to-from)
		}
	}
	if n > 1 {
		values[n-1] = to
	}
	return values
}
