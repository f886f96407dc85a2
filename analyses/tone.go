package analyses

import (
	"fmt"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

const (
	// toneSlices is the number of pieces into which a period is cut for the quadrature: with
	// four Gauss points each, the error of a full period's products is below 1e-12.
	toneSlices = 8
	// toneLimit bounds the quadrature points of one fit.
	toneLimit = 200_000_000
	// leastPeriods in the window, without which a tone cannot be told from a slope.
	leastPeriods = 1.0
)

// toneTerms are the functions of the fit: a constant, a slope, a sine and a cosine.
const toneTerms = 4

// toneFit accumulates the component of a waveform at a frequency.
//
// It is a least-squares fit of a constant, a slope and the tone, weighted by a raised cosine
// over the window (Harris, On the use of windows for harmonic analysis, Proc. IEEE 66, 1978), so that neither a broken number
// of periods nor other components far from the frequency matter.
type toneFit struct {
	window
	frequency float64 // Hz
	err       error   // why it cannot be fitted
	// normal holds the lower triangle of the normal equations, right their right side.
	normal [toneTerms * (toneTerms + 1) / 2]compensated
	right  [toneTerms]compensated
}

func newToneFit(w window, frequency float64) *toneFit {
	a := &toneFit{window: w, frequency: frequency}
	switch periods := frequency * w.span(); {
	case !(periods >= leastPeriods):
		a.err = &InputError{Message: fmt.Sprintf("the window holds %.2g periods of the tone; at least one is needed", periods)}
	case periods*toneSlices*float64(len(gauss4)) > toneLimit:
		a.err = &InputError{Message: "the window holds too many periods of the tone to fit it"}
	}
	return a
}

func (a *toneFit) add(p *piece) {
	if a.err != nil {
		return
	}
	var part tonePart
	h := p.length()
	slices := max(1, int(math.Ceil(max(h*a.frequency, h/a.span())*toneSlices)))
	du := 1 / float64(slices)
	for k := range slices {
		for _, g := range gauss4 {
			u := (float64(k) + g[0]) * du
			part.add(a, p.time(u), p.c.at(u), h*du*g[1])
		}
	}
	for i, x := range part.normal {
		a.normal[i].add(x)
	}
	for i, x := range part.right {
		a.right[i].add(x)
	}
}

// tonePart is what one piece adds to the normal equations.
type tonePart struct {
	normal [toneTerms * (toneTerms + 1) / 2]float64
	right  [toneTerms]float64
}

// add accounts for the value v at time t in s.
func (p *tonePart) add(a *toneFit, t, v, weight float64) {
	s, c := math.Sincos(2 * math.Pi * a.frequency * t)
	u := (t-a.from)/a.span() - 0.5
	basis := [toneTerms]float64{1, u, s, c}
	weight *= 0.5 * (1 + math.Cos(2*math.Pi*u))
	k := 0
	for i, b := range basis {
		b *= weight
		p.right[i] += b * v
		for _, other := range basis[:i+1] {
			p.normal[k] += b * other
			k++
		}
	}
}

// tone returns amplitude (peak) and phase as the complex A with A = a exp(j p) for a sin(2 pi F t + p), t in absolute time.
func (a *toneFit) tone() (complex128, error) {
	if a.err != nil {
		return cmplx.NaN(), a.err
	}
	normal := mat.NewSymDense(toneTerms, nil)
	right := mat.NewVecDense(toneTerms, nil)
	k := 0
	for i := range toneTerms {
		right.SetVec(i, a.right[i].value())
		for j := 0; j <= i; j++ {
			normal.SetSym(i, j, a.normal[k].value())
			k++
		}
	}
	return solveTone(normal, right)
}

// solveTone solves the normal equations by Cholesky and returns the tone.
func solveTone(normal *mat.SymDense, right *mat.VecDense) (complex128, error) {
	short := &InputError{Message: "the window is too short to tell the tone from a slope"}
	var factor mat.Cholesky
	if !factor.Factorize(normal) {
		return cmplx.NaN(), short
	}
	var x mat.VecDense
	if err := factor.SolveVecTo(&x, right); err != nil {
		return cmplx.NaN(), short
	}
	return complex(x.AtVec(2), x.AtVec(3)), nil
}
