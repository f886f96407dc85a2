package sparse

import (
	"fmt"
	"slices"
)

// Analysis is what the pattern alone decides: a row for every column, and the order of elimination.
// It is immutable and shared by any number of factorisations.
type Analysis struct {
	pattern *Pattern
	rowOf   []int32 // rowOf[j] is the row matched to column j: the preferred pivot
	order   []int32 // order[k] is the column eliminated k-th
	// The order runs through diagonal blocks; entries outside them stand above. Block i has the positions blocks[i] to blocks[i+1]-1.
	blocks   []int32
	block    []int32 // of each column
	rowBlock []int32 // of each row: that of the column it is matched to
}

// StructuralError says that no values can make the matrix regular: some rows and columns cannot be matched.
type StructuralError struct {
	Rows    []int // rows without a column of their own
	Columns []int // columns without a row of their own
}

func (e *StructuralError) Error() string {
	return fmt.Sprintf("sparse: the matrix is structurally singular: rows %v and columns %v cannot be matched", e.Rows, e.Columns)
}

// Analyse matches rows to columns and orders the columns to keep the factors sparse.
// A pattern without a complete match is a *StructuralError.
func Analyse(p *Pattern) (*Analysis, error) {
	a := &Analysis{pattern: p}
	m := newMatching(p)
	if err := m.complete(); err != nil {
		return nil, err
	}
	a.rowOf = m.rowOf
	a.split(m.columnOf)
	return a, nil
}

// split finds the diagonal blocks and orders the columns within each.
func (a *Analysis) split(columnOf []int32) {
	p := a.pattern
	members, start := components(p, columnOf)
	a.block, a.rowBlock = make([]int32, p.n), make([]int32, p.n)
	for i := range len(start) - 1 {
		for _, j := range members[start[i]:start[i+1]] {
			a.block[j] = int32(i)
		}
	}
	for row, j := range columnOf {
		a.rowBlock[row] = a.block[j]
	}
	a.blocks = start
	if len(start) == 2 {
		a.order = minimumDegree(p, columnOf)
		return
	}
	a.order = make([]int32, 0, p.n)
	within := &within{a: a, columnOf: columnOf, local: make([]int32, p.n)}
	for i := range len(start) - 1 {
		group := members[start[i]:start[i+1]]
		slices.Sort(group) // ties are broken as in the whole pattern
		a.order = append(a.order, within.order(group)...)
	}
}

// within orders the columns of single blocks.
type within struct {
	a        *Analysis
	columnOf []int32
	local    []int32 // of each column of the block: its number there
}

func (w *within) order(members []int32) []int32 {
	if len(members) == 1 {
		return members
	}
	for k, j := range members {
		w.local[j] = int32(k)
	}
	p := w.a.pattern
	block := &Pattern{n: len(members), colStart: make([]int32, len(members)+1)}
	identity := make([]int32, len(members))
	for k, j := range members {
		identity[k] = int32(k)
		for e := p.colStart[j]; e < p.colStart[j+1]; e++ {
			if row := p.row[e]; w.a.rowBlock[row] == w.a.block[j] {
				block.row = append(block.row, w.local[w.columnOf[row]])
			}
		}
		block.colStart[k+1] = int32(len(block.row))
	}
	order := minimumDegree(block, identity)
	for k, j := range order {
		order[k] = members[j]
	}
	return order
}

// matching is a maximum transversal: Duff, On algorithms for obtaining a maximum transversal, ACM Trans. Math.
// Softw. 7, 1981, 315-330. Diagonal entries are taken first, so that a pattern with a full diagonal keeps it.
type matching struct {
	p        *Pattern
	rowOf    []int32 // of each column, -1 if none
	columnOf []int32 // of each row, -1 if none
	cheap    []int32 // of each column: entries before it are known to be taken
	visited  []int32 // of each column: the search that came by
}

func newMatching(p *Pattern) *matching {
	m := &matching{p: p, rowOf: filled(p.n, -1), columnOf: filled(p.n, -1), cheap: make([]int32, p.n), visited: filled(p.n, -1)}
	copy(m.cheap, p.colStart)
	for j := range int32(p.n) {
		for k := p.colStart[j]; k < p.colStart[j+1]; k++ {
			if p.row[k] == j {
				m.rowOf[j], m.columnOf[j] = j, j
				break
			}
		}
	}
	return m
}

func filled(n int, v int32) []int32 {
	s := make([]int32, n)
	for i := range s {
		s[i] = v
	}
	return s
}

// complete gives every column a row, or says which are left.
func (m *matching) complete() error {
	e := &StructuralError{}
	for j := range int32(m.p.n) {
		if m.rowOf[j] < 0 && !m.augment(j) {
			e.Columns = append(e.Columns, int(j))
		}
	}
	for i, j := range m.columnOf {
		if j < 0 {
			e.Rows = append(e.Rows, i)
		}
	}
	if len(e.Columns) > 0 {
		return e
	}
	return nil
}

// augment looks for an alternating path from column start to a free row, depth first without recursion.
func (m *matching) augment(start int32) bool {
	type frame struct{ column, next int32 }
	stack := []frame{{start, m.p.colStart[start]}}
	m.visited[start] = start
	for len(stack) > 0 {
		top := &stack[len(stack)-1]
		j := top.column
		if row, ok := m.freeRow(j); ok {
			for k := len(stack) - 1; k >= 0; k-- {
				column := stack[k].column
				row, m.rowOf[column], m.columnOf[row] = m.rowOf[column], row, column
			}
			return true
		}
		advanced := false
		for ; top.next < m.p.colStart[j+1]; top.next++ {
			other := m.columnOf[m.p.row[top.next]]
			if m.visited[other] != start {
				m.visited[other] = start
				top.next++
				stack = append(stack, frame{other, m.p.colStart[other]})
				advanced = true
				break
			}
		}
		if !advanced {
			stack = stack[:len(stack)-1]
		}
	}
	return false
}

func (m *matching) freeRow(j int32) (int32, bool) {
	for ; m.cheap[j] < m.p.colStart[j+1]; m.cheap[j]++ {
		if row := m.p.row[m.cheap[j]]; m.columnOf[row] < 0 {
			return row, true
		}
	}
	return 0, false
}
