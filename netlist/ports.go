package netlist

import (
	"fmt"

	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// ports elaborates inputs and outputs.
func (e *elaborator) ports() {
	names := map[string]bool{}
	for _, s := range e.program.inputs {
		if names[s.Name.Name] || !e.portNodes(s.Name, s.Nodes) {
			if names[s.Name.Name] {
				e.fail(CodeDuplicate, s.Name.Place(), fmt.Sprintf("there is a port called %s already", s.Name.Name))
			}
			continue
		}
		names[s.Name.Name] = true
		in := Input{Name: s.Name.Name, Current: s.Current, Span: s.Span}
		for _, r := range s.Nodes {
			in.Nodes = append(in.Nodes, e.nodes[r.String()])
		}
		e.circuit.Inputs = append(e.circuit.Inputs, in)
	}
	for _, s := range e.program.outputs {
		if names[s.Name.Name] || !e.portNodes(s.Name, s.Nodes) {
			if names[s.Name.Name] {
				e.fail(CodeDuplicate, s.Name.Place(), fmt.Sprintf("there is a port called %s already", s.Name.Name))
			}
			continue
		}
		names[s.Name.Name] = true
		out := Output{Name: s.Name.Name, Span: s.Span}
		for _, r := range s.Nodes {
			out.Nodes = append(out.Nodes, e.nodes[r.String()])
		}
		if s.Rest != nil {
			out.Rest, out.HasRest = e.wanted(e.file.scope, s.Rest, unit.Voltage, "the rest of "+s.Name.Name)
		}
		e.circuit.Outputs = append(e.circuit.Outputs, out)
	}
}

// portNodes checks the nodes of a port and counts them as connected.
func (e *elaborator) portNodes(name syntax.Ident, nodes []syntax.Ref) bool {
	if len(nodes) < 1 || len(nodes) > 2 {
		return e.fail(CodeArguments, name.Place(), fmt.Sprintf("the port %s has %d nodes, want one or two", name.Name, len(nodes)))
	}
	ok := true
	for i, r := range nodes {
		n, known := e.nodes[r.String()]
		switch {
		case !known:
			ok = e.unknownNode(r.Place(), r.String())
		case n == 0:
			ok = e.fail(CodeArguments, r.Place(), "a port against gnd is written with one node")
		case i == 1 && n == e.nodes[nodes[0].String()]:
			ok = e.fail(CodeArguments, r.Place(), "both nodes of the port are the same")
		default:
			e.degree[n]++
		}
	}
	return ok
}
