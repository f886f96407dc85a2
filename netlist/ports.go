package netlist

import (
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// ports elaborates inputs and outputs.
func (e *elaborator) ports() {
	names := map[string]syntax.Span{}
	for _, s := range e.program.inputs {
		nodes, ok := e.portNodes(s.Name, s.Nodes)
		if !e.claimPort(names, s.Name) || !ok {
			continue
		}
		e.circuit.Inputs = append(e.circuit.Inputs, Input{Name: s.Name.Name, Nodes: nodes, Current: s.Current, Span: s.Span})
	}
	for _, s := range e.program.outputs {
		nodes, ok := e.portNodes(s.Name, s.Nodes)
		if !e.claimPort(names, s.Name) || !ok {
			continue
		}
		out := Output{Name: s.Name.Name, Nodes: nodes, Span: s.Span}
		if s.Rest != nil {
			out.Rest, out.HasRest = e.wanted(e.file.scope, s.Rest, unit.Voltage, "the rest of "+s.Name.Name)
		}
		e.circuit.Outputs = append(e.circuit.Outputs, out)
	}
}

// claimPort reserves the name of a port. A rail or a source of the same name could not be told from it in `drive`.
func (e *elaborator) claimPort(names map[string]syntax.Span, n syntax.Ident) bool {
	if at, twice := names[n.Name]; twice {
		return e.fail(CodeDuplicate, n.Place(), "there is a port called %s already, in line %d", n.Name, at.Start.Line)
	}
	names[n.Name] = n.Place()
	_, isRail := e.rail[n.Name]
	if _, isElement := e.element[n.Name]; isRail || isElement {
		return e.fail(CodeDuplicate, n.Place(), "there is a rail or part called %s already", n.Name)
	}
	return true
}

// portNodes checks the nodes of a port and counts them as connected.
func (e *elaborator) portNodes(name syntax.Ident, refs []syntax.Ref) (nodes []int, ok bool) {
	if len(refs) < 1 || len(refs) > 2 {
		return nil, e.fail(CodeArguments, name.Place(), "the port %s has %d nodes, want one or two", name.Name, len(refs))
	}
	ok = true
	for _, r := range refs {
		n, known := e.lookUp(r.String())
		switch {
		case !known:
			ok = e.unknownNode(r, r.String())
		case n == 0:
			ok = e.fail(CodeArguments, r.Place(), "a port against gnd is written with one node")
		case len(nodes) == 1 && n == nodes[0]:
			ok = e.fail(CodeArguments, r.Place(), "both nodes of the port %s are %s", name.Name, r)
		default:
			e.degree[n]++
			nodes = append(nodes, n)
		}
	}
	if !ok {
		e.suspect(append(nodes, 0)...)
	}
	return nodes, ok
}
