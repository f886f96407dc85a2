package sparse

import (
	"math"
	"math/bits"
	"slices"
)

// minimumDegree orders the columns of the matched pattern by approximate minimum degree on the pattern of B + B^T, where B has
// the matched rows on its diagonal: Amestoy, Davis & Duff, An approximate minimum degree ordering algorithm,
// SIAM J. Matrix Anal. Appl. 17, 1996, 886-905. Elements are absorbed aggressively, indistinguishable variables
// merged, dense rows put last. It differs from the paper in keeping lists instead of one packed workspace.
func minimumDegree(p *Pattern, columnOf []int32) []int32 {
	g := newQuotientGraph(p, columnOf)
	for g.left > 0 {
		g.eliminate(g.next())
	}
	return g.finish()
}

// quotientGraph is the graph of the matrix as elimination goes on: variables that are left, and elements, which
// stand for the cliques that eliminated variables leave.
type quotientGraph struct {
	n        int
	vars     [][]int32 // of each variable: adjacent variables
	elements [][]int32 // of each variable: adjacent elements
	members  [][]int32 // of each element: its variables
	weight   []int32   // of each variable: how many it stands for; 0 when eliminated or merged
	degree   []int32   // of each variable: approximate external degree
	dead     []bool    // of each element
	merged   [][]int32 // of each variable: those merged into it
	order    []int32
	dense    []int32
	near     []uint64 // of each variable and each element: the dense variables it is adjacent to, as far as denseSeen
	left     int32    // variables not yet eliminated

	// degree buckets: doubly linked lists
	head, forward, back []int32
	least               int32

	mark   []int32 // of each variable: stamp of the last set it was put in
	stamp  int32
	outer  []int32 // of each element: weight of its members outside the new one
	outerS []int32 // of each element: stamp for which outer holds
}

func newQuotientGraph(p *Pattern, columnOf []int32) *quotientGraph {
	n := p.n
	g := &quotientGraph{
		n: n, vars: make([][]int32, n), elements: make([][]int32, n), members: make([][]int32, n),
		weight: filled(n, 1), degree: make([]int32, n), dead: make([]bool, n), merged: make([][]int32, n), left: int32(n),
		head: filled(n+1, -1), forward: filled(n, -1), back: filled(n, -1),
		mark: filled(n, 0), near: make([]uint64, n), outer: make([]int32, n), outerS: make([]int32, n),
	}
	for j := range int32(n) {
		for k := p.colStart[j]; k < p.colStart[j+1]; k++ {
			if i := columnOf[p.row[k]]; i != j {
				g.vars[i] = append(g.vars[i], j)
				g.vars[j] = append(g.vars[j], i)
			}
		}
	}
	limit := max(16, int(10*math.Sqrt(float64(n))))
	for i := range int32(n) {
		slices.Sort(g.vars[i])
		g.vars[i] = slices.Compact(g.vars[i])
		if len(g.vars[i]) > limit {
			g.dense = append(g.dense, i)
			g.weight[i] = 0
			g.left--
		}
	}
	for k, i := range g.dense[:min(denseSeen, len(g.dense))] {
		for _, j := range g.vars[i] {
			g.near[j] |= 1 << k
		}
	}
	for i := range int32(n) {
		if g.weight[i] > 0 {
			g.vars[i] = slices.DeleteFunc(g.vars[i], func(j int32) bool { return g.weight[j] == 0 })
			g.degree[i] = int32(len(g.vars[i])) + count(g.near[i])
			g.insert(i)
		}
	}
	return g
}

// denseSeen is the number of dense variables, rails mostly, that degrees count.
const denseSeen = 64

func count(set uint64) int32 { return int32(bits.OnesCount64(set)) }

func (g *quotientGraph) insert(i int32) {
	d := g.degree[i]
	g.forward[i], g.back[i] = g.head[d], -1
	if g.head[d] >= 0 {
		g.back[g.head[d]] = i
	}
	g.head[d] = i
	g.least = min(g.least, d)
}

func (g *quotientGraph) remove(i int32) {
	if g.back[i] >= 0 {
		g.forward[g.back[i]] = g.forward[i]
	} else {
		g.head[g.degree[i]] = g.forward[i]
	}
	if g.forward[i] >= 0 {
		g.back[g.forward[i]] = g.back[i]
	}
}

// next takes a variable of least degree.
func (g *quotientGraph) next() int32 {
	for g.head[g.least] < 0 {
		g.least++
	}
	i := g.head[g.least]
	g.remove(i)
	return i
}

// eliminate makes an element of variable p.
func (g *quotientGraph) eliminate(p int32) {
	members := g.gather(p)
	g.left -= g.weight[p]
	g.order = append(g.order, p)
	g.weight[p] = 0
	size := int32(0)
	for _, i := range members {
		size += g.weight[i]
		g.remove(i)
	}
	g.members[p] = members
	g.measure(members)
	kept := g.update(p, members, size)
	kept = g.mergeTwins(kept)
	g.members[p] = kept
	for _, i := range kept {
		g.insert(i)
	}
	g.vars[p], g.elements[p] = nil, nil
}

// gather returns the variables adjacent to p, through its elements too, which p absorbs.
func (g *quotientGraph) gather(p int32) []int32 {
	g.stamp++
	g.mark[p] = g.stamp
	var members []int32
	add := func(i int32) {
		if g.weight[i] > 0 && g.mark[i] != g.stamp {
			g.mark[i] = g.stamp
			members = append(members, i)
		}
	}
	for _, i := range g.vars[p] {
		add(i)
	}
	for _, e := range g.elements[p] {
		if g.dead[e] {
			continue
		}
		for _, i := range g.members[e] {
			add(i)
		}
		g.near[p] |= g.near[e]
		g.dead[e], g.members[e] = true, nil
	}
	return members
}

// measure finds, for every element next to the new one, the weight of its members outside.
func (g *quotientGraph) measure(members []int32) {
	for _, i := range members {
		live := g.elements[i][:0]
		for _, e := range g.elements[i] {
			if g.dead[e] {
				continue
			}
			live = append(live, e)
			if g.outerS[e] != g.stamp {
				g.outerS[e], g.outer[e] = g.stamp, 0
				for _, j := range g.members[e] {
					g.outer[e] += g.weight[j]
				}
			}
			g.outer[e] -= g.weight[i]
		}
		g.elements[i] = live
	}
}

// update connects the members to the new element and recomputes their degrees; it returns those that are left.
func (g *quotientGraph) update(p int32, members []int32, size int32) []int32 {
	kept := members[:0:0]
	for _, i := range members {
		d := int32(0)
		live := g.elements[i][:0]
		for _, e := range g.elements[i] {
			if g.dead[e] {
				continue
			}
			if g.outer[e] == 0 {
				g.near[p] |= g.near[e]
				g.dead[e], g.members[e] = true, nil
				continue
			}
			live = append(live, e)
			d += g.outer[e]
		}
		g.elements[i] = append(live, p)
		vars := g.vars[i][:0]
		for _, j := range g.vars[i] {
			if g.weight[j] > 0 && g.mark[j] != g.stamp {
				vars = append(vars, j)
				d += g.weight[j]
			}
		}
		g.vars[i] = vars
		far := g.near[p] // of the dense variables, those that i reaches
		for _, e := range live {
			far |= g.near[e]
		}
		far |= g.near[i]
		if d == 0 && far == g.near[p] {
			g.absorb(p, i)
			size -= g.weight[i]
			g.left -= g.weight[i]
			g.weight[i] = 0
			continue
		}
		rest := size - g.weight[i]
		known := count(far)
		g.degree[i] = max(0, min(g.left-g.weight[i]+known, g.degree[i]+rest+count(g.near[p]), d+rest+known, int32(g.n)))
		kept = append(kept, i)
	}
	return kept
}

// absorb notes that i is eliminated together with p.
func (g *quotientGraph) absorb(p, i int32) { g.merged[p] = append(g.merged[p], i) }

// mergeTwins merges members that have the same neighbours.
func (g *quotientGraph) mergeTwins(members []int32) []int32 {
	if len(members) < 2 {
		return members
	}
	buckets := map[uint64][]int32{}
	for _, i := range members {
		h := uint64(len(g.vars[i]))<<32 | uint64(len(g.elements[i]))
		for _, j := range g.vars[i] {
			h += uint64(j) * 0x9e3779b97f4a7c15
		}
		for _, e := range g.elements[i] {
			h += uint64(e) * 0xbf58476d1ce4e5b9
		}
		same := buckets[h]
		twin := slices.IndexFunc(same, func(k int32) bool { return g.twins(k, i) })
		if twin < 0 {
			buckets[h] = append(same, i)
			continue
		}
		k := same[twin]
		g.weight[k] += g.weight[i]
		g.degree[k] = max(0, g.degree[k]-g.weight[i])
		g.weight[i] = 0
		g.merged[k] = append(g.merged[k], i)
	}
	return slices.DeleteFunc(members, func(i int32) bool { return g.weight[i] == 0 })
}

// twins reports whether two members have the same neighbours.
func (g *quotientGraph) twins(a, b int32) bool {
	return g.near[a] == g.near[b] && sameSet(g.vars[a], g.vars[b]) && sameSet(g.elements[a], g.elements[b])
}

func sameSet(a, b []int32) bool {
	if len(a) != len(b) {
		return false
	}
	for _, x := range a {
		if !slices.Contains(b, x) {
			return false
		}
	}
	return true
}

// finish lists the columns in order, merged ones behind the one they were merged into, dense ones last.
func (g *quotientGraph) finish() []int32 {
	out := make([]int32, 0, g.n)
	stack := []int32{}
	for _, p := range g.order {
		stack = append(stack, p)
		for len(stack) > 0 {
			i := stack[len(stack)-1]
			stack = stack[:len(stack)-1]
			out = append(out, i)
			stack = append(stack, g.merged[i]...)
		}
	}
	return append(out, g.dense...)
}
