package analyses

import (
	"math"
	"math/cmplx"
)

// operation combines numbers; real ones have no imaginary part.
type operation func(x []complex128) complex128

// operationOf returns the operation called op. Complex numbers have + - * / and their parts; what else is done to them is
// done to their magnitude.
func operationOf(op string, isComplex bool) (operation, bool) {
	if op == "/" && !isComplex {
		return realQuotient, true
	}
	if f, ok := operations[op]; ok {
		return f, true
	}
	part := func(v complex128) float64 { return real(v) }
	if isComplex {
		part = cmplx.Abs
	}
	if f, ok := unary[op]; ok {
		return func(x []complex128) complex128 { return complex(f(part(x[0])), 0) }, true
	}
	f, ok := binary[op]
	if !ok {
		return nil, false
	}
	return func(x []complex128) complex128 {
		v := part(x[0])
		for _, y := range x[1:] {
			v = f(v, part(y))
		}
		return complex(v, 0)
	}, true
}

// realQuotient keeps the infinities and the signs of zero that a complex division loses.
func realQuotient(x []complex128) complex128 { return complex(real(x[0])/real(x[1]), 0) }

// operations holds the functions of complex numbers.
var operations = map[string]operation{
	"+":     func(x []complex128) complex128 { return x[0] + x[1] },
	"-":     func(x []complex128) complex128 { return x[0] - x[1] },
	"*":     func(x []complex128) complex128 { return x[0] * x[1] },
	"/":     func(x []complex128) complex128 { return x[0] / x[1] },
	"||":    func(x []complex128) complex128 { return x[0] * x[1] / (x[0] + x[1]) },
	"real":  func(x []complex128) complex128 { return complex(real(x[0]), 0) },
	"imag":  func(x []complex128) complex128 { return complex(imag(x[0]), 0) },
	"phase": func(x []complex128) complex128 { return complex(cmplx.Phase(x[0]), 0) },
	"neg":   func(x []complex128) complex128 { return -x[0] },
	"abs":   func(x []complex128) complex128 { return complex(cmplx.Abs(x[0]), 0) },
}

// unary holds the functions of one real number.
var unary = map[string]func(float64) float64{
	"sqrt": math.Sqrt, "exp": math.Exp, "ln": math.Log, "log10": math.Log10, "tanh": math.Tanh, "sin": math.Sin, "cos": math.Cos, "atan": math.Atan,
}

// binary holds the functions of two real numbers; of more they are taken from left to right.
var binary = map[string]func(x, y float64) float64{"^": math.Pow, "min": math.Min, "max": math.Max}
