package sparse

// Solve overwrites b with the solution of A x = b.
func (f *LU[T]) Solve(b []T) {
	y := f.work
	for k, row := range f.pivotRow {
		y[k] = b[row] * f.scale[row]
	}
	blocks := f.a.blocks
	for i := len(blocks) - 2; i >= 0; i-- {
		from, until := blocks[i], blocks[i+1]
		for k := from; k < until; k++ {
			v := y[k]
			low := f.pivot[k] + 1
			l := f.values[low:f.start[k+1]]
			for e, at := range f.row[low:f.start[k+1]] {
				y[at] -= l[e] * v
			}
		}
		for k := until - 1; k >= from; k-- {
			pivot := f.pivot[k]
			v := y[k] * f.values[pivot]
			y[k] = v
			u := f.values[f.start[k]:pivot]
			for e, at := range f.row[f.start[k]:pivot] {
				y[at] -= u[e] * v
			}
		}
	}
	for k, j := range f.a.order {
		b[j] = y[k]
	}
}

// SolveTranspose overwrites b with the solution of A^T x = b (no conjugation).
func (f *LU[T]) SolveTranspose(b []T) {
	y := f.work
	for k, j := range f.a.order {
		y[k] = b[j]
	}
	blocks := f.a.blocks
	for i := range len(blocks) - 1 {
		from, until := blocks[i], blocks[i+1]
		for k := from; k < until; k++ {
			pivot := f.pivot[k]
			v := y[k]
			u := f.values[f.start[k]:pivot]
			for e, at := range f.row[f.start[k]:pivot] {
				v -= u[e] * y[at]
			}
			y[k] = v * f.values[pivot]
		}
		for k := until - 1; k >= from; k-- {
			v := y[k]
			low := f.pivot[k] + 1
			l := f.values[low:f.start[k+1]]
			for e, at := range f.row[low:f.start[k+1]] {
				v -= l[e] * y[at]
			}
			y[k] = v
		}
	}
	for k, row := range f.pivotRow {
		b[row] = y[k] * f.scale[row]
	}
}

// SolveMany overwrites count right-hand sides with the solutions of A x = b, on one pass over the factors. Element i of
// right-hand side c is b[i*count+c].
func (f *LU[T]) SolveMany(b []T, count int) {
	n := len(f.pivotRow)
	if len(f.many) < n*count {
		f.many = make([]T, n*count)
	}
	y := f.many[:n*count]
	column := func(k int32) []T { return y[int(k)*count : int(k+1)*count] }
	for k, row := range f.pivotRow {
		s := f.scale[row]
		for c, v := range b[int(row)*count : int(row+1)*count] {
			y[k*count+c] = v * s
		}
	}
	take := func(from, until int32, v []T) {
		for e := from; e < until; e++ {
			l, to := f.values[e], column(f.row[e])
			for c, x := range v {
				to[c] -= l * x
			}
		}
	}
	blocks := f.a.blocks
	for i := len(blocks) - 2; i >= 0; i-- {
		for k := blocks[i]; k < blocks[i+1]; k++ {
			take(f.pivot[k]+1, f.start[k+1], column(k))
		}
		for k := blocks[i+1] - 1; k >= blocks[i]; k-- {
			v, inverse := column(k), f.values[f.pivot[k]]
			for c := range v {
				v[c] *= inverse
			}
			take(f.start[k], f.pivot[k], v)
		}
	}
	for k, j := range f.a.order {
		copy(b[int(j)*count:int(j+1)*count], column(int32(k)))
	}
}
