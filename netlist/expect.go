package netlist

import (
	"math"
	"slices"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// expect resolves one expectation.
func (f *filled) expect(m *measurer, x *syntax.Expect) {
	q, ok := m.quantity(x.Quantity)
	if !ok {
		f.limitAlone(&x.Comparison)
		return
	}
	l, ok := f.limit(q, &x.Comparison)
	if !ok {
		return
	}
	if q.Describe().Complex && l.High < 0 {
		f.failHint("real(...), imag(...) and phase(...) have a sign", CodeComparison, x.Comparison.Place(), "%s is complex and compares by its magnitude, which is never negative", q.Describe().Text)
		return
	}
	n := Expectation{Span: x.Span, Unit: q.Describe().Unit.Symbol(), Ratio: l.Ratio, Word: l.Word}
	if x.Label != nil {
		n.Label = x.Label.Value
	}
	n.Text = m.textOf(syntax.Span{File: x.File, Start: x.Quantity.Place().Start, End: x.Comparison.End})
	f.expects = append(f.expects, n)
	f.setup.Expected = append(f.setup.Expected, Expected{q, l})
}

// limitAlone looks for what is wrong with a comparison whose quantity is wrong.
func (f *filled) limitAlone(c *syntax.Comparison) {
	if c.Operator == syntax.Equal {
		return // perhaps a word
	}
	for _, x := range []syntax.Expr{c.Value, c.High, c.Tolerance} {
		if x != nil {
			f.single(f.bench, x)
		}
	}
}

// limit evaluates a comparison.
func (f *filled) limit(q Quantity, c *syntax.Comparison) (l Limit, ok bool) {
	l.Low, l.High = math.Inf(-1), math.Inf(1)
	switch {
	case q.Describe().Shape == Word:
		return f.wordLimit(q, c)
	case c.Operator == syntax.Equal:
		return l, f.failHint("write `= value +- tolerance`", CodeComparison, c.Place(), "a number is hardly ever met exactly")
	}
	v, ok := f.limitValue(q, c.Value)
	if c.Operator == syntax.Within {
		high, ok2 := f.limitValue(q, c.High)
		return f.within(v, high, c, ok && ok2)
	}
	if !ok {
		return l, false
	}
	l.Ratio = v.Ratio
	switch c.Operator {
	case syntax.AtLeast:
		l.Low = v.SI
	case syntax.Above:
		l.Low, l.LowOpen = v.SI, true
	case syntax.AtMost:
		l.High = v.SI
	case syntax.Below:
		l.High, l.HighOpen = v.SI, true
	case syntax.Near:
		return l, f.near(q, v, c, &l)
	}
	return l, true
}

// within evaluates within a..b.
func (f *filled) within(low, high value, c *syntax.Comparison, ok bool) (Limit, bool) {
	l := Limit{Low: low.SI, High: high.SI, Ratio: low.Ratio || high.Ratio}
	if ok && !(l.Low < l.High) {
		at := c.Value.Place()
		at.End = c.High.Place().End
		what := "reversed"
		if l.Low == l.High {
			what = "empty"
		}
		return l, f.fail(CodeEmptyRange, at, "the range is %s", what)
	}
	return l, ok
}

// near evaluates = v +- tolerance: a share of v, a band of ratios, or a difference.
func (f *filled) near(q Quantity, v value, c *syntax.Comparison, l *Limit) bool {
	t, ok := f.single(f.bench, c.Tolerance)
	if !ok {
		return false
	}
	d := q.Describe().Unit
	switch {
	case c.Relative || t.Dimension == unit.Number && d != unit.Number && !t.Ratio:
		l.Low, l.High = v.SI-math.Abs(v.SI)*t.SI, v.SI+math.Abs(v.SI)*t.SI
		ok = t.SI > 0 && v.SI != 0
	case t.Ratio && !v.Ratio:
		return f.fail(CodeDimension, c.Tolerance.Place(), "a tolerance in dB belongs to a value in dB")
	case t.Ratio:
		r := math.Max(t.SI, 1/t.SI)
		l.Low, l.High = v.SI/r, v.SI*r
		ok = t.SI > 1
	default:
		if !f.difference(c.Tolerance) || !f.sameUnit(q, t, c.Tolerance) {
			return false
		}
		l.Low, l.High = v.SI-t.SI, v.SI+t.SI
		ok = t.SI > 0
	}
	if !ok || !(l.Low < l.High) {
		return f.fail(CodeEmptyRange, c.Tolerance.Place(), "the band around %s has no width", q.Describe().Text)
	}
	return true
}

// limitValue evaluates a limit in the unit of a quantity.
func (f *filled) limitValue(q Quantity, x syntax.Expr) (value, bool) {
	v, ok := f.single(f.bench, x)
	return v, ok && f.sameUnit(q, v, x)
}

func (f *filled) sameUnit(q Quantity, v value, x syntax.Expr) bool {
	if v.Dimension == q.Describe().Unit {
		return true
	}
	return f.fail(CodeDimension, x.Place(), "%s is %s, but the limit is %s", q.Describe().Text, q.Describe().Unit.Noun(), v.Dimension.Noun())
}

// wordLimit evaluates = word.
func (f *filled) wordLimit(q Quantity, c *syntax.Comparison) (l Limit, ok bool) {
	words := f.wordsOf(q)
	n, isName := c.Value.(*syntax.Name)
	if c.Operator != syntax.Equal || !isName {
		return l, f.failHint("write `= word`", CodeComparison, c.Place(), "%s is one of the words %s", q.Describe().Text, strings.Join(words, ", "))
	}
	if !slices.Contains(words, n.String()) {
		return l, f.failHint(f.guess(n.String(), slices.Values(words)), CodeComparison, n.Place(), "%s is one of the words %s", q.Describe().Text, strings.Join(words, ", "))
	}
	l.Word = n.String()
	return l, true
}

// wordsOf lists the words that a quantity may be.
func (f *filled) wordsOf(q Quantity) []string {
	switch q := q.(type) {
	case *Quiescent:
		return f.wordsOf(q.X)
	case *Operating:
		family := f.program.family(f.circuit.Elements[f.element[q.Element]].Kind)
		if i := slices.IndexFunc(family.Operating, func(x devices.OperatingQuantity) bool { return x.Name == q.Name }); i >= 0 {
			return family.Operating[i].Words
		}
	}
	return nil
}
