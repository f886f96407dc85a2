package sparse

// components returns the columns grouped into the diagonal blocks of the block upper triangular form of a matched pattern, and where each group starts: the
// strongly connected components of the graph with an edge from column j to the column that each row of j is matched to, in
// an order in which edges lead to earlier groups (Tarjan, Depth-first search and linear graph algorithms, SIAM J. Comput. 1, 1972, 146-160; Duff & Reid, An
// implementation of Tarjan's algorithm for the block triangularization of a matrix, ACM Trans. Math. Softw. 4, 1978, 137-147).
func components(p *Pattern, columnOf []int32) (members, start []int32) {
	t := &tarjan{p: p, columnOf: columnOf, number: filled(p.n, -1), low: make([]int32, p.n), next: make([]int32, p.n), done: make([]bool, p.n), start: []int32{0}}
	for j := range int32(p.n) {
		if t.number[j] < 0 {
			t.visit(j)
		}
	}
	return t.members, t.start
}

type tarjan struct {
	p        *Pattern
	columnOf []int32
	number   []int32 // of each column in the order of discovery, -1 before
	low      []int32 // the least number known to be reached from it
	next     []int32 // the next entry to look at
	done     []bool  // its component is known
	count    int32
	open     []int32 // discovered columns without a component
	path     []int32
	members  []int32
	start    []int32
}

// visit goes through all that is reached from root, without recursion.
func (t *tarjan) visit(root int32) {
	t.discover(root)
	for len(t.path) > 0 {
		j := t.path[len(t.path)-1]
		if k, ok := t.child(j); ok {
			t.discover(k)
			continue
		}
		t.path = t.path[:len(t.path)-1]
		if len(t.path) > 0 {
			above := t.path[len(t.path)-1]
			t.low[above] = min(t.low[above], t.low[j])
		}
		if t.low[j] == t.number[j] {
			t.close(j)
		}
	}
}

func (t *tarjan) discover(j int32) {
	t.number[j], t.low[j] = t.count, t.count
	t.count++
	t.next[j] = t.p.colStart[j]
	t.open, t.path = append(t.open, j), append(t.path, j)
}

// child returns the next column reached from j that is not discovered yet.
func (t *tarjan) child(j int32) (int32, bool) {
	for t.next[j] < t.p.colStart[j+1] {
		k := t.columnOf[t.p.row[t.next[j]]]
		t.next[j]++
		switch {
		case t.number[k] < 0:
			return k, true
		case !t.done[k]:
			t.low[j] = min(t.low[j], t.number[k])
		}
	}
	return 0, false
}

// close makes a component of the columns discovered since j.
func (t *tarjan) close(j int32) {
	for {
		k := t.open[len(t.open)-1]
		t.open = t.open[:len(t.open)-1]
		t.done[k] = true
		t.members = append(t.members, k)
		if k == j {
			break
		}
	}
	t.start = append(t.start, int32(len(t.members)))
}
