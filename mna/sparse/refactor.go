package sparse

import (
	"math"
	"slices"
)

// pack lays the factors out by columns, each sorted by position.
func (f *LU[T]) pack() {
	b := &f.b
	total := len(b.off) + len(b.u) + len(b.l) + len(b.inverse)
	f.values, f.row = slices.Grow(f.values[:0], total)[:total], slices.Grow(f.row[:0], total)[:total]
	at := int32(0)
	put := func(row int32, v T) {
		f.row[at], f.values[at] = row, v
		at++
	}
	for k := range int32(len(b.inverse)) {
		f.start[k] = at
		for e := b.offStart[k]; e < b.offStart[k+1]; e++ {
			put(f.position[b.offRow[e]], b.off[e])
		}
		f.upper[k] = at
		for e := b.uStart[k]; e < b.uStart[k+1]; e++ {
			put(b.uRow[e], b.u[e])
		}
		f.sort(f.upper[k], at)
		f.pivot[k] = at
		put(k, b.inverse[k])
		for e := b.lStart[k]; e < b.lStart[k+1]; e++ {
			put(f.position[b.lRow[e]], b.l[e])
		}
		f.sort(f.pivot[k]+1, at)
	}
	f.start[len(b.inverse)] = at
}

// sort sorts a range of values by position. Positions ascend in the order in which they may be eliminated.
func (f *LU[T]) sort(from, until int32) {
	row, v := f.row[from:until], f.values[from:until]
	if len(row) > insertionMost {
		f.sortLong(row, v)
		return
	}
	for i := 1; i < len(row); i++ {
		for j := i; j > 0 && row[j] < row[j-1]; j-- {
			row[j], row[j-1] = row[j-1], row[j]
			v[j], v[j-1] = v[j-1], v[j]
		}
	}
}

// insertionMost is the length up to which insertion is the faster way to sort.
const insertionMost = 24

// sortLong sorts by position, with the dense column for the values.
func (f *LU[T]) sortLong(row []int32, v []T) {
	for i, at := range row {
		f.work[at] = v[i]
	}
	slices.Sort(row)
	for i, at := range row {
		v[i] = f.work[at]
	}
}

// schedule is the arithmetic of a factorisation with all places worked out beforehand, so that nothing is looked for while numbers are computed:
// for each entry of U, in order, multiples of a column of L are taken from the values at targets.
type schedule struct {
	updates []update
	first   []int32 // of each column, its first update
	targets []int32
}

// update takes values[from:until] times values[entry] from the values at the next targets.
type update struct{ entry, from, until int32 }

const (
	// targetsMost and targetsShare bound the length of a schedule, absolutely and beside the number of entries. Beyond, memory costs more than
	// it spares.
	targetsMost  = 1 << 24
	targetsShare = 16
)

// freeze works out, for the present pivots, where every entry of the matrix goes and what is done to it there.
func (f *LU[T]) freeze() {
	f.load()
	f.plan()
}

// load lists where the entries of the matrix go.
func (f *LU[T]) load() {
	p := f.a.pattern
	place := f.b.reach // of each position in the present column
	f.gather = f.gather[:0]
	for k, j := range f.a.order {
		for e := f.start[k]; e < f.start[k+1]; e++ {
			place[f.row[e]] = e
		}
		for e := p.colStart[j]; e < p.colStart[j+1]; e++ {
			row := p.row[e]
			f.gather = append(f.gather, load{place[f.position[row]], p.entry[e], row})
		}
	}
}

// plan makes the schedule, or leaves it empty if it became too long.
func (f *LU[T]) plan() {
	s := &f.schedule
	s.updates, s.first, s.targets = s.updates[:0], s.first[:0], s.targets[:0]
	most := min(targetsMost, targetsShare*len(f.values))
	place := f.b.reach
	for k := range f.pivot {
		s.first = append(s.first, int32(len(s.updates)))
		for e := f.upper[k]; e < f.start[k+1]; e++ {
			place[f.row[e]] = e
		}
		for e := f.upper[k]; e < f.pivot[k]; e++ {
			from := f.row[e]
			l := f.row[f.pivot[from]+1 : f.start[from+1]]
			if len(l) == 0 {
				continue
			}
			if len(s.targets)+len(l) > most {
				*s = schedule{}
				return
			}
			s.updates = append(s.updates, update{e, f.pivot[from] + 1, f.start[from+1]})
			for _, row := range l {
				s.targets = append(s.targets, place[row])
			}
		}
	}
	s.first = append(s.first, int32(len(s.updates)))
}

// Refactor computes the factors for new values on the pattern and pivots of the last [LU.Factor]. If a pivot has become
// small beside its column, or there are no factors yet, it calls Factor.
func (f *LU[T]) Refactor(values []T) error {
	if !f.factored {
		return f.Factor(values)
	}
	clear(f.values)
	for _, g := range f.gather {
		f.values[g.value] += values[g.entry] * f.scale[g.row]
	}
	ok := false
	if len(f.schedule.first) > 0 {
		ok = f.follow()
	} else {
		ok = f.eliminate()
	}
	if ok {
		return nil
	}
	f.repivots++
	return f.Factor(values)
}

// follow does what the schedule says and reports whether the pivots are still large enough.
func (f *LU[T]) follow() bool {
	v, targets := f.values, f.schedule.targets
	first := f.schedule.first
	for k, pivot := range f.pivot {
		for _, u := range f.schedule.updates[first[k]:first[k+1]] {
			x := v[u.entry]
			l := v[u.from:u.until]
			to := targets[:len(l)]
			targets = targets[len(l):]
			for i, at := range to {
				v[at] -= l[i] * x
			}
		}
		if !f.divide(pivot, f.start[k+1]) {
			return false
		}
	}
	return true
}

// divide inverts a pivot and divides the entries of L behind it. It reports whether the pivot is large enough beside them.
func (f *LU[T]) divide(pivot, until int32) bool {
	p := f.values[pivot]
	inverse := 1 / p
	f.values[pivot] = inverse
	largest := 0.0
	l := f.values[pivot+1 : until]
	for i, v := range l {
		v *= inverse
		l[i] = v
		if m := magnitude(v); !(m <= largest) {
			largest = m
		}
	}
	size := magnitude(p)
	return size > 0 && size <= math.MaxFloat64 && largest <= 1/growthShare
}

// eliminate computes the factors column by column in a dense column.
func (f *LU[T]) eliminate() bool {
	x := f.work
	for k, pivot := range f.pivot {
		start, end := f.upper[k], f.start[k+1]
		rows, values := f.row[start:end], f.values[start:end]
		for i, at := range rows {
			x[at] = values[i]
		}
		for _, at := range f.row[start:pivot] {
			v := x[at]
			if v == 0 {
				continue
			}
			from, until := f.pivot[at]+1, f.start[at+1]
			l, row := f.values[from:until], f.row[from:until]
			for i, r := range row {
				x[r] -= l[i] * v
			}
		}
		for i, at := range rows {
			values[i] = x[at]
		}
		if !f.divide(pivot, end) {
			return false
		}
	}
	return true
}
