package analyses

import (
	"math"
	"math/cmplx"
	"runtime"
	"sync"
	"sync/atomic"

	"poise/netlist"
)

// curvePerDecade is the number of frequencies a decade at which a curve is computed if the
// file does not say; between them the worst point is refined.
const curvePerDecade = 20

// Curve is a quantity over frequency.
type Curve struct {
	Frequencies []float64    // Hz, ascending
	Values      []complex128 // SI; real quantities have no imaginary part
	Complex     bool
	at          func(frequency float64) (complex128, error)
}

// bandOf returns the range of the first metric of q that is a curve.
func bandOf(q netlist.Quantity) (netlist.Band, bool) {
	switch q := q.(type) {
	case *netlist.Metric:
		return q.Band, q.Shape == netlist.Curve
	case *netlist.Apply:
		for _, x := range q.X {
			if b, ok := bandOf(x); ok {
				return b, true
			}
		}
	}
	return netlist.Band{}, false
}

// curve computes a quantity over its range of frequencies.
func (e *evaluation) curve(q netlist.Quantity) (*Curve, error) {
	band, ok := bandOf(q)
	if !ok {
		return nil, &InputError{Message: q.Describe().Text + " has no range of frequencies"}
	}
	perDecade := band.PerDecade
	if perDecade == 0 {
		perDecade = curvePerDecade
	}
	c := &Curve{Frequencies: logGrid(band.Low, band.High, perDecade), Complex: q.Describe().Complex}
	c.Values = make([]complex128, len(c.Frequencies))
	if _, err := e.linear(); err != nil {
		return nil, err
	}
	if err := e.fill(c, q); err != nil {
		return nil, err
	}
	p := nowhere()
	c.at = func(frequency float64) (complex128, error) {
		p.frequency = frequency
		return e.number(q, p)
	}
	return c, nil
}

// shareSize is the number of frequencies that are computed one after the other: factors begin with the pivots of the last frequency, so that the last bits of a
// value depend on those before it in its share, and shares must not depend on the number of goroutines.
const shareSize = 32

// fill computes the values of c, shares of the frequencies in as many goroutines as there are processors.
func (e *evaluation) fill(c *Curve, q netlist.Quantity) error {
	shares := (len(c.Frequencies) + shareSize - 1) / shareSize
	errs := make([]error, shares)
	var next atomic.Int64
	var wait sync.WaitGroup
	for range min(runtime.GOMAXPROCS(0), shares) {
		wait.Go(func() {
			for k := int(next.Add(1)) - 1; k < shares; k = int(next.Add(1)) - 1 {
				errs[k] = e.fillShare(c, q, k)
			}
		})
	}
	wait.Wait()
	for _, err := range errs {
		if err != nil {
			return err
		}
	}
	return nil
}

// fillShare computes share k of the values of c.
func (e *evaluation) fillShare(c *Curve, q netlist.Quantity, k int) (err error) {
	p := nowhere()
	for i := k * shareSize; i < min((k+1)*shareSize, len(c.Frequencies)); i++ {
		if err := e.ctx.Err(); err != nil {
			return err
		}
		p.frequency = c.Frequencies[i]
		if c.Values[i], err = e.number(q, p); err != nil {
			return err
		}
	}
	return nil
}

// compared is the real number by which a value is compared: complex values by their magnitude.
func compared(v complex128, isComplex bool) float64 {
	if isComplex {
		return cmplx.Abs(v)
	}
	return real(v)
}

// worst returns the frequency and the value at which margin is smallest. Every local minimum of the samples is refined.
func (c *Curve) worst(margin func(float64) float64) (frequency, value float64, err error) {
	samples := make([]float64, len(c.Values))
	for i, v := range c.Values {
		samples[i] = margin(compared(v, c.Complex))
	}
	least := math.Inf(1)
	note := func(f, v float64) {
		if m := margin(v); !(m >= least) {
			least, frequency, value = m, f, v
		}
	}
	for i, m := range samples {
		if math.IsNaN(m) {
			return c.Frequencies[i], math.NaN(), nil
		}
		left, right := max(0, i-1), min(len(samples)-1, i+1)
		if samples[left] < m || samples[right] < m {
			continue
		}
		note(c.Frequencies[i], compared(c.Values[i], c.Complex))
		if samples[left] == m && samples[right] == m {
			continue
		}
		f, _, err := maximise(func(f float64) (float64, error) {
			v, err := c.at(f)
			return -margin(compared(v, c.Complex)), err
		}, c.Frequencies[left], c.Frequencies[right])
		if err != nil {
			return math.NaN(), math.NaN(), err
		}
		v, err := c.at(f)
		if err != nil {
			return math.NaN(), math.NaN(), err
		}
		note(f, compared(v, c.Complex))
	}
	return frequency, value, nil
}
