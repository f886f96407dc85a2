package sparse

import (
	"fmt"
	"sort"
)

// Pattern says where the entries of an n x n matrix are. Entry k of any slice of values belongs to
// row rows[k] and column cols[k] of [NewPattern].
type Pattern struct {
	n       int
	entries int // length of a slice of values, ignored entries included
	// by column: the entries of column j are at colStart[j] .. colStart[j+1]
	colStart []int32
	row      []int32
	entry    []int32 // index into the values
}

// NewPattern makes the pattern of an n x n matrix. An entry with a negative row or column is ignored;
// entries at the same place are summed. An index outside the matrix is an error.
func NewPattern(n int, rows, cols []int32) (*Pattern, error) {
	if n < 0 || len(rows) != len(cols) {
		return nil, fmt.Errorf("sparse: a pattern needs an order of at least 0 and as many rows as columns, got order %d, %d rows and %d columns", n, len(rows), len(cols))
	}
	p := &Pattern{n: n, entries: len(rows), colStart: make([]int32, n+1)}
	for k := range rows {
		if rows[k] < 0 || cols[k] < 0 {
			continue
		}
		if int(rows[k]) >= n || int(cols[k]) >= n {
			return nil, fmt.Errorf("sparse: entry %d at row %d, column %d lies outside a matrix of order %d", k, rows[k], cols[k], n)
		}
		p.colStart[cols[k]+1]++
	}
	for j := range n {
		p.colStart[j+1] += p.colStart[j]
	}
	p.row = make([]int32, p.colStart[n])
	p.entry = make([]int32, p.colStart[n])
	next := append([]int32(nil), p.colStart[:n]...)
	for k := range rows {
		if rows[k] < 0 || cols[k] < 0 {
			continue
		}
		at := next[cols[k]]
		p.row[at], p.entry[at] = rows[k], int32(k)
		next[cols[k]]++
	}
	for j := range n {
		sort.Sort(columnEntries{p.row[p.colStart[j]:p.colStart[j+1]], p.entry[p.colStart[j]:p.colStart[j+1]]})
	}
	return p, nil
}

// columnEntries sorts the entries of a column by row and then by index, so that sums have one order.
type columnEntries struct{ row, entry []int32 }

func (c columnEntries) Len() int { return len(c.row) }
func (c columnEntries) Less(i, j int) bool {
	return c.row[i] < c.row[j] || c.row[i] == c.row[j] && c.entry[i] < c.entry[j]
}
func (c columnEntries) Swap(i, j int) {
	c.row[i], c.row[j] = c.row[j], c.row[i]
	c.entry[i], c.entry[j] = c.entry[j], c.entry[i]
}

// Order returns n.
func (p *Pattern) Order() int { return p.n }
