package devices

import (
	"math"
	"math/rand/v2"

	"poise/mna"
)

// Hiss is Gaussian noise, white up to Band and nothing above: samples of variance Density^2 Band at twice the band, joined by a windowed
// sinc (Shannon, Communication in the presence of noise, Proc. IRE 37, 1949). It is the same at every call with the same seed.
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
	return hiss{h, h.Density * math.Sqrt(h.Band)}, nil
}

type hiss struct {
	h     Hiss
	sigma float64
}

// hissReach is the number of samples on each side that a value is made of.
const hissReach = 32

// sample is the n-th sample, of unit variance: it depends on the seed and n alone.
func (h hiss) sample(n int64) float64 {
	return rand.New(rand.NewPCG(h.h.Seed, uint64(n)*0x9e3779b97f4a7c15)).NormFloat64()
}

func (h hiss) At(t float64) float64 {
	x := t * 2 * h.h.Band
	n := int64(math.Floor(x))
	v := 0.0
	for k := n - hissReach + 1; k <= n+hissReach; k++ {
		u := x - float64(k)
		// A raised-cosine window keeps the truncated sum smooth.
		window := 0.5 * (1 + math.Cos(math.Pi*u/hissReach))
		v += h.sample(k) * sinc(u) * window
	}
	return h.sigma * v
}

func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}

func (h hiss) Corner(float64) float64 { return inf }
func (h hiss) Scale(float64) float64  { return 1 / h.h.Band }
