// Package sparse factors sparse square matrices over float64 and complex128. It knows no circuits.
//
// The work is split so that what depends only on the pattern is done once:
//
//	p, err := sparse.NewPattern(n, rows, cols)  // where the entries are
//	a, err := sparse.Analyse(p)                 // transversal and fill-reducing order; shareable
//	f := sparse.NewLU[float64](a)               // one for each goroutine
//	err = f.Factor(values)                      // pivots and pattern of the factors
//	err = f.Refactor(values)                    // numbers only, on the frozen pivots
//	f.Solve(b)
//
// Names: n is the order of the matrix, k an entry of the pattern, i a row, j a column; p and q are the
// permutations of rows and columns, so that the factors are those of (P R A Q) with R the scaling of the rows.
package sparse
