package devices

import (
	"math"
	"math/rand/v2"

	"poise/mna"
)

// Hiss is Gaussian noise, white up to Band and nothing above: samples of variance Density^2 Band at twice the band, joined by a windowed
// sinc (Shannon, Communication in the presence of noise, Proc. IRE 37, 1949). The window makes the edge of the band a slope, from 0.95 Band to
// 1.05 Band, and takes 2.5 % of the power midway between two samples. It is the same at every call with the same seed.
type Hiss struct {
	Density float64 // V/rtHz or A/rtHz, one-sided
	Band    float64 // Hz
	Seed    uint64
}

// New checks the numbers and returns the signal.
func (h Hiss) New() (mna.Signal, error) {
	if err := positive("density", h.Density, "V/rtHz"); err != nil {
		return nil, err
	}
	if err := positive("band", h.Band, "Hz"); err != nil {
		return nil, err
	}
	return &hiss{seed: h.Seed, rate: 2 * h.Band, rms: h.Density * math.Sqrt(h.Band)}, nil
}

type hiss struct {
	seed uint64
	rate float64 // Hz, of the samples
	rms  float64 // V or A
}

// hissReach is the number of samples on each side that a value is made of.
const hissReach = 32

// At returns the value at t in s: the sum of the samples about it, each times sinc(u) (1 + cos(pi u/hissReach))/2 with u its distance in samples.
// From one sample to the next the sine of the sinc changes its sign and the angle of the window turns by a fixed one.
func (h *hiss) At(t float64) float64 {
	x := t * h.rate
	n := math.Floor(x)
	place := x - n
	if place == 0 {
		return h.rms * h.sample(int64(n))
	}
	const first = hissReach - 1 // samples back from n
	sine := math.Sin(math.Pi*min(place, 1-place)) / math.Pi
	if first%2 != 0 {
		sine = -sine
	}
	windowSin, windowCos := math.Sincos(math.Pi / hissReach * (place + first))
	turnSin, turnCos := math.Sincos(math.Pi / hissReach)
	sum := 0.0
	for back := first; back >= -hissReach; back-- {
		u := place + float64(back)
		sum += h.sample(int64(n)-int64(back)) * sine / u * (1 + windowCos) / 2
		sine = -sine
		windowSin, windowCos = windowSin*turnCos-windowCos*turnSin, windowCos*turnCos+windowSin*turnSin
	}
	return h.rms * sum
}

// sample is the n-th sample, of unit variance: it depends on the seed and n alone. A number uniform between 0 and 1, never either, becomes a
// normal one by the inverse of the normal distribution.
func (h *hiss) sample(n int64) float64 {
	var g rand.PCG
	g.Seed(h.seed, uint64(n))
	uniform := (float64(g.Uint64()>>12) + 0.5) * 0x1p-52
	return math.Sqrt2 * math.Erfinv(2*uniform-1)
}

// Corner returns +Inf: there is none.
func (h *hiss) Corner(float64) float64 { return inf }

// Scale returns the shortest period within the band.
func (h *hiss) Scale(float64) float64 { return 2 / h.rate }
