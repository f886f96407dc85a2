package sparse

import (
	"math"
	"math/cmplx"
)

// conditionSteps bounds the search for the vector that the inverse enlarges most; it hardly ever takes more than three.
const conditionSteps = 5

// Condition estimates the condition number |A| |A^-1| in the norm of the largest column sum, of the matrix of values that the factors were computed for. It is never above the true
// one but for rounding, and hardly ever below a third of it (Hager, Condition estimates, SIAM J. Sci. Stat. Comput. 5, 1984, 311-316; Higham, FORTRAN codes for
// estimating the one-norm of a real or complex matrix, ACM Trans. Math. Softw. 14, 1988, 381-396, algorithms 4.1 and 5.1). It costs up to ten solutions. Of a matrix
// of order 0 it is 0.
func (f *LU[T]) Condition(values []T) float64 {
	return norm(f.a.pattern, values) * norm1(f.enlarged())
}

// norm1 is the sum of the magnitudes.
func norm1[T Scalar](x []T) float64 {
	sum := 0.0
	for _, v := range x {
		sum += modulus(v)
	}
	return sum
}

// enlarged returns A^-1 x for a vector x whose magnitudes sum to 1 and which A^-1 enlarges as much as the search finds.
func (f *LU[T]) enlarged() []T {
	n := f.a.pattern.n
	x, best := make([]T, n), make([]T, n)
	for i := range x {
		x[i] = fromFloat[T](1 / float64(n))
	}
	f.Solve(x)
	copy(best, x)
	last := -1
	for range conditionSteps {
		for i, v := range x {
			x[i] = conjugate(phase(v))
		}
		f.SolveTranspose(x)
		j := furthest(x)
		if j == last {
			break
		}
		last = j
		clear(x)
		x[j] = fromFloat[T](1)
		f.Solve(x)
		if !(norm1(x) > norm1(best)) {
			break
		}
		copy(best, x)
	}
	if x = f.alternating(); norm1(x) > norm1(best) {
		return x
	}
	return best
}

// alternating returns A^-1 x for a vector of alternating signs, which catches matrices made to deceive the search.
func (f *LU[T]) alternating() []T {
	n := f.a.pattern.n
	x, sum := make([]T, n), 0.0
	for i := range x {
		v := 1 + float64(i)/math.Max(1, float64(n-1))
		sum += v
		if i%2 == 1 {
			v = -v
		}
		x[i] = fromFloat[T](v)
	}
	for i := range x {
		x[i] /= fromFloat[T](sum)
	}
	f.Solve(x)
	return x
}

// furthest returns the index of the largest magnitude.
func furthest[T Scalar](x []T) int {
	at, largest := 0, -1.0
	for i, v := range x {
		if m := modulus(v); m > largest {
			at, largest = i, m
		}
	}
	return at
}

// norm is the largest sum of magnitudes in a column; of entries at the same place it takes the sum.
func norm[T Scalar](p *Pattern, values []T) float64 {
	largest := 0.0
	for j := range p.n {
		sum := 0.0
		for e := p.colStart[j]; e < p.colStart[j+1]; {
			v, row := values[p.entry[e]], p.row[e]
			for e++; e < p.colStart[j+1] && p.row[e] == row; e++ {
				v += values[p.entry[e]]
			}
			sum += modulus(v)
		}
		largest = math.Max(largest, sum)
	}
	return largest
}

// modulus is |x|.
func modulus[T Scalar](x T) float64 {
	switch v := any(x).(type) {
	case float64:
		return math.Abs(v)
	case complex128:
		return cmplx.Abs(v)
	}
	return math.NaN()
}

// phase is x/|x|, 1 for 0.
func phase[T Scalar](x T) T {
	if m := modulus(x); m > 0 {
		return x / fromFloat[T](m)
	}
	return fromFloat[T](1)
}

func conjugate[T Scalar](x T) T {
	if v, ok := any(x).(complex128); ok {
		return any(cmplx.Conj(v)).(T)
	}
	return x
}
