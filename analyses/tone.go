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

// Tone returns the component of the waveform at frequency F in Hz: amplitude (peak) and phase, as the complex A
// with A = a exp(j p) for a sin(2 pi F t + p), t in absolute time.
//
// It is a least-squares fit of a constant, a slope and the tone, weighted by a raised cosine
// over the window (Harris, On the use of windows for harmonic analysis, Proc. IEEE 66, 1978), so that neither a broken number
// of periods nor other components far from F matter.
func (w *Waveform) Tone(frequency float64) (complex128, error) {
	from, until := w.Window()
	span := until - from
	if periods := frequency * span; !(periods >= leastPeriods) {
		return cmplx.NaN(), &InputError{Message: fmt.Sprintf("the window holds %.2g periods of the tone; at least one is needed", periods)}
	}
	if frequency*span*toneSlices*4 > toneLimit {
		return cmplx.NaN(), &InputError{Message: "the window holds too many periods of the tone to fit it"}
	}
	var normal [4][4]float64
	var right [4]float64
	add := func(t, v, weight float64) {
		s, c := math.Sincos(2 * math.Pi * frequency * t)
		u := (t-from)/span - 0.5
		basis := [4]float64{1, u, s, c}
		g := weight * 0.5 * (1 + math.Cos(2*math.Pi*u))
		for i, b := range basis {
			right[i] += g * b * v
			for j := 0; j <= i; j++ {
				normal[i][j] += g * b * basis[j]
			}
		}
	}
	for i := range w.steps() {
		p, t0, h := w.piece(i)
		slices := max(1, int(math.Ceil(max(h*frequency, h/span)*toneSlices)))
		du := 1 / float64(slices)
		for k := range slices {
			for _, g := range gauss4 {
				u := (float64(k) + g[0]) * du
				add(t0+u*h, p.at(u), h*du*g[1])
			}
		}
	}
	return solveTone(normal, right)
}

// solveTone solves the normal equations by Cholesky and returns the tone.
func solveTone(normal [4][4]float64, right [4]float64) (complex128, error) {
	a := mat.NewSymDense(4, nil)
	for i := range normal {
		for j := 0; j <= i; j++ {
			a.SetSym(i, j, normal[i][j])
		}
	}
	var factor mat.Cholesky
	if !factor.Factorize(a) {
		return cmplx.NaN(), &InputError{Message: "the window is too short to tell the tone from a slope"}
	}
	var x mat.VecDense
	if err := factor.SolveVecTo(&x, mat.NewVecDense(4, right[:])); err != nil {
		return cmplx.NaN(), &InputError{Message: "the window is too short to tell the tone from a slope"}
	}
	return complex(x.AtVec(2), x.AtVec(3)), nil
}
