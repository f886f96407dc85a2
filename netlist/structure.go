package netlist

import (
	"fmt"
	"slices"
	"strings"

	"poise/netlist/syntax"
)

// structure looks for what makes a circuit unsolvable whatever its values are: before anything is solved, by the user's names. setUp
// says in which set-up, for messages; it may be empty.
func (e *elaborator) structure(setUp string) {
	e.singles()
	stiff := e.stiff()
	e.loops(stiff, setUp)
	e.floating(stiff, setUp)
}

// singles reports nodes that only one thing touches.
func (e *elaborator) singles() {
	for n := 1; n < len(e.circuit.Nodes); n++ {
		if e.degree[n] >= 2 {
			continue
		}
		name := e.circuit.Nodes[n]
		things := "only one thing is"
		if e.degree[n] == 0 {
			things = "nothing is"
		}
		e.failHint(e.singleHint(name), CodeSingle, e.mention[n], "%s connected to %s", things, nodeText(name))
	}
}

// nodeText names a node for a message.
func nodeText(name string) string {
	if name[strings.LastIndexByte(name, '.')+1] == '_' {
		return "the node without a name"
	}
	return "the node " + name
}

// singleHint explains a lonely node inside a block that is called like one outside, or suggests the name that was meant.
func (e *elaborator) singleHint(name string) string {
	dot := strings.LastIndexByte(name, '.')
	local := name[dot+1:]
	if dot >= 0 {
		if _, outside := e.nodes[local]; outside {
			return fmt.Sprintf("a block does not see the node %s of the outside: give the block a pin for it", local)
		}
		return ""
	}
	if local[0] == '_' {
		return ""
	}
	return e.guess(name, func(yield func(string) bool) {
		for i := 1; i < len(e.circuit.Nodes); i++ {
			if e.degree[i] >= 2 && !yield(e.circuit.Nodes[i]) {
				return
			}
		}
	})
}

// edge is something that fixes the voltage between two nodes.
type edge struct {
	a, b int
	name string
	at   syntax.Span
}

// stiff lists what fixes voltages: rails, driven inputs, voltage sources, inductors.
func (e *elaborator) stiff() []edge {
	c := e.circuit
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
	for i := range c.Elements {
		if x := &c.Elements[i]; x.Kind == KindVoltageSource || x.Kind == KindInductor {
			list = append(list, edge{x.Nodes[0], x.Nodes[1], x.Name, x.Span})
		}
	}
	return list
}

// witnessed bounds the loops whose members are sought: each costs a search.
const witnessed = 100

// loops reports the independent loops of sources and inductors, as short as they can be, each where the last of its members is written.
func (e *elaborator) loops(stiff []edge, setUp string) {
	for _, x := range stiff {
		if x.a == x.b {
			e.fail(CodeLoop, x.at, "both ends of %s are at %s", x.name, nodeText(e.circuit.Nodes[x.a]))
		}
	}
	g, beyond := newRing(stiff, len(e.circuit.Nodes), witnessed)
	closing := map[int]bool{}
	for _, loop := range g.loops() {
		last := lastOf(loop, closing)
		closing[loop[last]] = true
		loop = append(slices.Clone(loop[last:]), loop[:last]...)
		if others := loop[1:]; others[0] > others[len(others)-1] {
			slices.Reverse(others) // that which is written first comes first
		}
		e.reportLoop(stiff, loop, setUp)
	}
	for _, i := range beyond {
		e.reportLoop(stiff, []int{i}, setUp)
	}
}

// lastOf returns the place of the last-written member of a loop that has not been told to close another one.
func lastOf(loop []int, closing map[int]bool) int {
	last := -1
	for k, i := range loop {
		if !closing[i] && (last < 0 || i > loop[last]) {
			last = k
		}
	}
	return max(last, 0)
}

// reportLoop names a loop of edges, that which closes it first.
func (e *elaborator) reportLoop(stiff []edge, loop []int, setUp string) {
	var names []string
	for _, i := range loop {
		if name := stiff[i].name; !slices.Contains(names, name) {
			names = append(names, name)
		}
	}
	e.fail(CodeLoop, stiff[loop[0]].at, "%s%s: nothing limits the current in a loop of voltage sources and inductors", loopText(names), setUp)
}

func loopText(names []string) string {
	switch len(names) {
	case 1:
		return names[0] + " closes a loop with others"
	case 2:
		return names[0] + " lies across " + names[1]
	}
	return names[0] + " closes a loop with " + strings.Join(names[1:], ", ")
}

// union is a forest of sets of nodes (Tarjan, Efficiency of a good but not linear set union algorithm, J. ACM 22, 1975; paths are halved).
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

// join unites two sets and reports whether they were apart. The smaller number stands for both, so that gnd stands for its own.
func (u union) join(a, b int) bool {
	a, b = u.find(a), u.find(b)
	u[max(a, b)] = int32(min(a, b))
	return a != b
}
