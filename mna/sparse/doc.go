// Package sparse solves sparse systems of linear equations, real and complex, of the kind that circuits lead to.
//
// The work is split by what it depends on. [Analyse] looks at the pattern alone: it matches every column with a row (Duff, 1981), finds the block
// triangular form (Tarjan, 1972) and orders the columns of each block so that the factors stay sparse (approximate minimum degree; Amestoy, Davis & Duff, 1996).
// [LU.Factor] chooses pivots for given values (Gilbert & Peierls, 1988, with threshold pivoting that prefers the matched entry) and works out the arithmetic that
// follows from them; [LU.Refactor] repeats that arithmetic for new values, and chooses anew if a pivot has become too small; [LU.Solve],
// [LU.SolveTranspose] and [LU.SolveMany] use the factors; [LU.Condition] says how far to trust them. Each function cites its source. None of the code is
// derived from another library.
//
// Indexes are those of the caller's matrix everywhere, in errors too. Rows are equilibrated by powers of two, so that equations in amperes and in volts, over any
// number of decades, can stand side by side. Nothing is allocated between two changes of the pivots.
package sparse
