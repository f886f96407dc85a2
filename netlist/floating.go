package netlist

import (
	"fmt"
	"slices"
	"strings"

	"poise/devices"
)

// island is a group of nodes that direct current cannot leave: what joins it to the rest.
type island struct {
	first      int // its first node that more than one thing touches; a lonely node is reported as such
	capacitors cut
	sources    cut
}

// cut lists some of the things that join an island to the rest, and how many there are.
type cut struct {
	names []string
	count int
}

// namedMost is the number of things that a message names.
const namedMost = 6

func (c *cut) add(name string) {
	if slices.Contains(c.names, name) {
		return // both pins of an input
	}
	if c.count++; len(c.names) < namedMost {
		c.names = append(c.names, name)
	}
}

func (c *cut) String() string {
	s := strings.Join(c.names, ", ")
	if more := c.count - len(c.names); more > 0 {
		s += fmt.Sprintf(" and %d more", more)
	}
	return s
}

// floating reports groups of nodes whose voltage nothing fixes at rest: only capacitors, or capacitors and current sources, join them to the
// rest.
func (e *elaborator) floating(stiff []edge, setUp string) {
	c := e.circuit
	sets := newUnion(len(c.Nodes))
	for _, x := range stiff {
		sets.join(x.a, x.b)
	}
	for i := range c.Elements {
		e.conduct(sets, &c.Elements[i])
	}
	islands := map[int]*island{}
	for n := 1; n < len(c.Nodes); n++ {
		if g := sets.find(n); g != 0 && islands[g] == nil && e.degree[n] >= 2 {
			islands[g] = &island{first: n}
		}
	}
	if len(islands) == 0 {
		return
	}
	e.cuts(sets, islands)
	for n := 1; n < len(c.Nodes); n++ {
		if x := islands[sets.find(n)]; x != nil && x.first == n {
			e.reportIsland(x, setUp)
		}
	}
}

// conduct unites the nodes between which a part lets direct current through. Of a part that could not be made everything is assumed.
func (e *elaborator) conduct(sets union, x *Element) {
	if x.Kind == KindCapacitor || x.Kind == KindCurrentSource {
		return
	}
	var pins []devices.Pin
	if x.Part != "" {
		if family := e.program.family(x.Kind); family != nil {
			pins = family.Pins
		}
	}
	first := -1
	for i, n := range x.Nodes {
		switch {
		case i < len(pins) && pins[i].Insulated:
		case first < 0:
			first = n
		default:
			sets.join(first, n)
		}
	}
}

// cuts notes what joins each island to the rest.
func (e *elaborator) cuts(sets union, islands map[int]*island) {
	note := func(a, b int, name string, source bool) {
		a, b = sets.find(a), sets.find(b)
		for _, g := range []int{a, b} {
			if x := islands[g]; x != nil && a != b && source {
				x.sources.add(name)
			} else if x != nil && a != b {
				x.capacitors.add(name)
			}
		}
	}
	for i := range e.circuit.Elements {
		x := &e.circuit.Elements[i]
		if x.Kind == KindCapacitor || x.Kind == KindCurrentSource {
			note(x.Nodes[0], x.Nodes[1], x.Name, x.Kind == KindCurrentSource)
		}
	}
	for _, in := range e.circuit.Inputs {
		if in.Current && !in.Open {
			for _, n := range in.Nodes {
				note(n, 0, "the input "+in.Name, true)
			}
		}
	}
}

func (e *elaborator) reportIsland(x *island, setUp string) {
	name, at := nodeText(e.circuit.Nodes[x.first]), e.mention[x.first]
	switch {
	case x.sources.count > 0 && x.capacitors.count > 0:
		e.fail(CodeCut, at, "only current sources and capacitors join %s to the rest%s (%s; %s): nothing fixes its voltage", name, setUp, &x.sources, &x.capacitors)
	case x.sources.count > 0:
		e.fail(CodeCut, at, "only current sources join %s to the rest%s (%s): nothing fixes its voltage", name, setUp, &x.sources)
	case x.capacitors.count > 0:
		e.failHint("only capacitors join it to the rest: "+x.capacitors.String(), CodeFloating, at, "%s has no path for direct current to gnd%s", name, setUp)
	default:
		e.failHint("nothing joins it to the rest", CodeFloating, at, "%s has no path for direct current to gnd%s", name, setUp)
	}
}
