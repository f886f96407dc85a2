package sparse

import "fmt"

// Analysis is what the pattern alone decides: a row for every column, and the order of elimination.
// It is immutable and shared by any number of factorisations.
type Analysis struct {
	pattern *Pattern
	rowOf   []int32 // rowOf[j] is the row matched to column j: the preferred pivot
	order   []int32 // order[k] is the column eliminated k-th
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
	a.order = minimumDegree(p, m.columnOf)
	return a, nil
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
