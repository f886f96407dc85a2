package netlist

import "slices"

// ring is a graph without its dead ends, with its independent loops.
type ring struct {
	edges  []edge
	near   map[int][]int32 // edges at each node
	chords []int           // the edges that close loops over a forest of the others, in order
	chord  map[int]int     // place of each among the chords
}

// newRing keeps the edges that are part of a loop. At most so many chords are kept; those beyond are returned.
func newRing(edges []edge, nodes, most int) (g *ring, beyond []int) {
	g = &ring{edges: edges, near: map[int][]int32{}, chord: map[int]int{}}
	sets := newUnion(nodes)
	drop := map[int]bool{}
	for i, x := range edges {
		switch {
		case x.a == x.b:
			drop[i] = true
		case sets.join(x.a, x.b):
		case len(g.chords) < most:
			g.chord[i] = len(g.chords)
			g.chords = append(g.chords, i)
		default:
			drop[i] = true
			beyond = append(beyond, i)
		}
	}
	if len(g.chords) == 0 {
		return g, beyond
	}
	for i, x := range edges {
		if !drop[i] {
			g.near[x.a] = append(g.near[x.a], int32(i))
			g.near[x.b] = append(g.near[x.b], int32(i))
		}
	}
	g.prune()
	return g, beyond
}

// prune takes dead ends away until none is left.
func (g *ring) prune() {
	var ends []int
	for n, at := range g.near {
		if len(at) == 1 {
			ends = append(ends, n)
		}
	}
	for len(ends) > 0 {
		n := ends[len(ends)-1]
		ends = ends[:len(ends)-1]
		if len(g.near[n]) == 0 {
			continue
		}
		i := g.near[n][0]
		delete(g.near, n)
		m := g.edges[i].other(n)
		g.near[m] = slices.DeleteFunc(g.near[m], func(k int32) bool { return k == i })
		if len(g.near[m]) == 1 {
			ends = append(ends, m)
		}
	}
}

// other returns the node at the other end of x.
func (x *edge) other(n int) int { return x.a + x.b - n }

// loops returns independent loops, as many as there are chords and as short as they can be together: a minimum cycle basis (de Pina's algorithm, as
// in Kavitha, Mehlhorn, Michail & Paluch, An O(m^2 n) algorithm for minimum cycle basis of graphs, Algorithmica 52, 2008, section 2). Each
// is the list of its edges in order.
func (g *ring) loops() [][]int {
	k := len(g.chords)
	witness := make([][]bool, k) // sets of chords; each loop holds an odd number of its own and is independent of those before
	for i := range witness {
		witness[i] = make([]bool, k)
		witness[i][i] = true
	}
	var found [][]int
	for i, s := range witness {
		loop := g.shortestOdd(s)
		found = append(found, loop)
		for _, later := range witness[i+1:] {
			if g.odd(loop, later) {
				for c := range later {
					later[c] = later[c] != s[c]
				}
			}
		}
	}
	return found
}

// odd reports whether a loop holds an odd number of the chords of a set.
func (g *ring) odd(loop []int, set []bool) bool {
	is := false
	for _, i := range loop {
		if c, isChord := g.chord[i]; isChord && set[c] {
			is = !is
		}
	}
	return is
}

// shortestOdd returns the shortest loop with an odd number of the chords of a set.
func (g *ring) shortestOdd(set []bool) []int {
	var best []int
	for c, isIn := range set {
		if !isIn {
			continue
		}
		if loop := g.shortestFrom(g.edges[g.chords[c]].a, set, len(best)); loop != nil {
			best = loop
		}
	}
	return best
}

// place is a node with the parity of the chords on the way to it.
type place struct {
	node int
	odd  bool
}

// shortestFrom searches breadth first from a node for the shortest way back to it with an odd number of the chords of a set; nil if it is not
// shorter than less, unless that is 0.
func (g *ring) shortestFrom(node int, set []bool, less int) []int {
	type step struct {
		from  place
		along int32
		long  int
	}
	start, goal := place{node, false}, place{node, true}
	came := map[place]step{start: {}}
	for queue := []place{start}; len(queue) > 0; queue = queue[1:] {
		at := queue[0]
		long := came[at].long + 1
		if less > 0 && long >= less {
			return nil
		}
		for _, i := range g.near[at.node] {
			c, isChord := g.chord[int(i)]
			to := place{g.edges[i].other(at.node), at.odd != (isChord && set[c])}
			if _, seen := came[to]; !seen {
				came[to] = step{at, i, long}
				queue = append(queue, to)
			}
		}
		if _, back := came[goal]; back {
			break
		}
	}
	var loop []int
	for at := goal; at != start; at = came[at].from {
		if _, reached := came[at]; !reached {
			return nil
		}
		loop = append(loop, int(came[at].along))
	}
	return loop
}
