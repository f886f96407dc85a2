package netlist

import (
	"fmt"
	"slices"
	"strings"

	"poise/netlist/syntax"
)

// structure looks for what makes a circuit unsolvable whatever its values: before anything is solved, by the user's names.
func (e *elaborator) structure() {
	c := e.circuit
	e.singles()
	e.loops(c)
	e.floating(c)
}

// singles reports nodes that only one thing touches.
func (e *elaborator) singles() {
	for i := 1; i < len(e.circuit.Nodes); i++ {
		switch {
		case e.degree[i] >= 2:
		case e.degree[i] == 1:
			e.fail(CodeSingle, e.mention[i], fmt.Sprintf("only one thing is connected to the node %s", e.circuit.Nodes[i]))
		default:
			e.fail(CodeSingle, e.mention[i], fmt.Sprintf("nothing is connected to the node %s", e.circuit.Nodes[i]))
		}
	}
}

// union is a forest of sets of nodes (Tarjan, Efficiency of a good but not linear set union algorithm, J. ACM 22, 1975).
type union []int32

func newUnion(n int) union {
	u := make(union, n)
	for i := range u {
		u[i] = int32(i)
	}
	return u
}

func (u union) find(i int) int {
	for int(u[i]) != i {
		u[i] = u[u[i]]
		i = int(u[i])
	}
	return i
}

// join unites two sets and reports whether they were apart.
func (u union) join(a, b int) bool {
	a, b = u.find(a), u.find(b)
	u[b] = int32(a)
	return a != b
}

// edge is something that fixes the voltage between two nodes.
type edge struct {
	a, b int
	name string
	at   syntax.Span
}

// stiff lists what fixes voltages: rails, driven inputs, voltage sources, inductors.
func stiff(c *Circuit) []edge {
	var list []edge
	for _, r := range c.Rails {
		list = append(list, edge{r.Node, 0, "the rail " + r.Name, r.Span})
	}
	for _, in := range c.Inputs {
		if in.Open || in.Current {
			continue
		}
		for _, n := range in.Nodes {
			list = append(list, edge{n, 0, "the input " + in.Name, in.Span})
		}
	}
	for _, x := range c.Elements {
		if x.Kind == KindVoltageSource || x.Kind == KindInductor {
			list = append(list, edge{x.Nodes[0], x.Nodes[1], x.Name, x.Span})
		}
	}
	return list
}

// loops reports each source or inductor that closes a loop with others, and the shortest such loop.
func (e *elaborator) loops(c *Circuit) {
	u := newUnion(len(c.Nodes))
	var tree []edge
	for _, x := range stiff(c) {
		if u.join(x.a, x.b) {
			tree = append(tree, x)
			continue
		}
		names := []string{x.name}
		for _, y := range shortest(tree, x.a, x.b) {
			names = append(names, y.name)
		}
		if len(names) == 1 {
			e.fail(CodeLoop, x.at, fmt.Sprintf("both ends of %s are at the node %s", x.name, c.Nodes[x.a]))
			continue
		}
		e.fail(CodeLoop, x.at, fmt.Sprintf("%s form a loop of voltage sources and inductors: nothing limits the current in it", strings.Join(names, ", ")))
	}
}

// shortest finds the fewest edges from a to b, breadth first.
func shortest(edges []edge, a, b int) []edge {
	if a == b {
		return nil
	}
	next := map[int][]int{}
	for i, x := range edges {
		next[x.a] = append(next[x.a], i)
		next[x.b] = append(next[x.b], i)
	}
	came := map[int]int{a: -1}
	queue := []int{a}
	for len(queue) > 0 {
		n := queue[0]
		queue = queue[1:]
		for _, i := range next[n] {
			m := edges[i].a + edges[i].b - n
			if _, seen := came[m]; seen {
				continue
			}
			came[m] = i
			queue = append(queue, m)
		}
	}
	var path []edge
	for n := b; n != a; {
		i, ok := came[n]
		if !ok || i < 0 {
			break
		}
		path = append(path, edges[i])
		n = edges[i].a + edges[i].b - n
	}
	slices.Reverse(path)
	return path
}

// floating reports groups of nodes that no direct current can leave: only capacitors, or capacitors and current sources, join them to the rest.
func (e *elaborator) floating(c *Circuit) {
	u := newUnion(len(c.Nodes))
	for _, x := range stiff(c) {
		u.join(x.a, x.b)
	}
	for _, x := range c.Elements {
		if x.Kind == KindCapacitor || x.Kind == KindCurrentSource {
			continue
		}
		for i, n := range x.Nodes {
			// A substrate is a capacitance only.
			if x.Pins[i] != "s" || x.Path {
				u.join(x.Nodes[0], n)
			}
		}
	}
	reported := map[int]bool{u.find(0): true}
	for n := 1; n < len(c.Nodes); n++ {
		group := u.find(n)
		if reported[group] || e.degree[n] < 2 {
			continue
		}
		reported[group] = true
		e.reportFloating(c, u, group, n)
	}
}

// reportFloating names the parts that cut a group off.
func (e *elaborator) reportFloating(c *Circuit, u union, group, n int) {
	var capacitors, sources []string
	for _, x := range c.Elements {
		if x.Kind != KindCapacitor && x.Kind != KindCurrentSource {
			continue
		}
		if (u.find(x.Nodes[0]) == group) == (u.find(x.Nodes[1]) == group) {
			continue
		}
		if x.Kind == KindCapacitor {
			capacitors = append(capacitors, x.Name)
		} else {
			sources = append(sources, x.Name)
		}
	}
	for _, in := range c.Inputs {
		if in.Current && !in.Open && slices.ContainsFunc(in.Nodes, func(m int) bool { return u.find(m) == group }) {
			sources = append(sources, "the input "+in.Name)
		}
	}
	name := c.Nodes[n]
	if len(sources) == 0 {
		d := e.diagnostic(CodeFloating, e.mention[n], fmt.Sprintf("the node %s has no path for direct current to gnd", name))
		if len(capacitors) > 0 {
			d.Hint = "only capacitors join it to the rest: " + someOf(capacitors)
		}
		e.add(d)
		return
	}
	e.fail(CodeCut, e.mention[n], fmt.Sprintf("only current sources and capacitors join the node %s to the rest (%s): nothing fixes its voltage", name, someOf(append(sources, capacitors...))))
}

// someOf lists at most a few names.
func someOf(names []string) string {
	const most = 6
	if len(names) > most {
		return strings.Join(names[:most], ", ") + fmt.Sprintf(" and %d more", len(names)-most)
	}
	return strings.Join(names, ", ")
}
