package devices

import (
	"math"
	"math/cmplx"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/mna"
)

const (
	hissDensity = 3e-9 // V/rtHz
	hissBand    = 10e3 // Hz
)

func newHiss(t testing.TB, seed uint64) mna.Signal {
	s, err := Hiss{Density: hissDensity, Band: hissBand, Seed: seed}.New()
	require.NoError(t, err)
	return s
}

// TestHissIsGaussian looks at values a sample apart, which are independent: at the samples and midway between them. An estimate of the variance
// from n values of variance v scatters by v sqrt(2/n), of the fourth moment by v^2 sqrt(96/n), of a correlation by v/sqrt n; five times that is allowed.
func TestHissIsGaussian(t *testing.T) {
	const n, sigmas = 20000, 5
	s := newHiss(t, 7)
	want := hissDensity * hissDensity * hissBand
	for _, c := range []struct {
		place, share float64 // between two samples; of the power, from the window
	}{{0, 1}, {0.5, hissPower(0.5)}, {0.23, hissPower(0.23)}} {
		var sum, squares, fourths, neighbours, before float64
		for k := range n {
			v := s.At((float64(k)+c.place)/(2*hissBand)) / math.Sqrt(want*c.share)
			sum, squares, fourths = sum+v, squares+v*v, fourths+v*v*v*v
			neighbours += v * before
			before = v
		}
		assert.InDelta(t, 0, sum/n, sigmas/math.Sqrt(n), "mean at %g", c.place)
		assert.InDelta(t, 1, squares/n, sigmas*math.Sqrt(2./n), "variance at %g", c.place)
		assert.InDelta(t, 3, fourths/n, sigmas*math.Sqrt(96./n), "fourth moment at %g", c.place)
		if c.place == 0 {
			assert.InDelta(t, 0, neighbours/n, sigmas/math.Sqrt(n), "neighbours")
		}
	}
	assert.InDelta(t, 0.975, hissPower(0.5), 1e-3, "as documented")
}

// hissKernel is the shape that every sample has, by the distance in samples.
func hissKernel(u float64) float64 {
	if u == 0 {
		return 1
	}
	return math.Sin(math.Pi*u) / (math.Pi * u) * (1 + math.Cos(math.Pi*u/hissReach)) / 2
}

// hissPower is the share of the power of a sample that is left at a place between two of them.
func hissPower(place float64) float64 {
	sum := 0.0
	for k := -hissReach + 1; k <= hissReach; k++ {
		h := hissKernel(place - float64(k))
		sum += h * h
	}
	return sum
}

// TestHissIsItsSamplesJoined compares with the plain sum.
func TestHissIsItsSamplesJoined(t *testing.T) {
	s := newHiss(t, 3).(*hiss)
	for _, x := range []float64{0, 0.3, 17.999999, 100.5, -41.25, 1e6 + 0.125} {
		want, n := 0.0, int64(math.Floor(x))
		for k := n - hissReach + 1; k <= n+hissReach; k++ {
			want += s.rms * s.sample(k) * hissKernel(x-float64(k))
		}
		// The place between two samples is known to x 2^-53, the sum rounds 64 times.
		assert.InDelta(t, want, s.At(x/s.rate), s.rms*(1e-14+1e-15*math.Abs(x)), x)
	}
}

// TestHissSpectrum averages the spectra of stretches: flat at the density up to the band, nothing above it. An estimate of a density from m
// independent ones scatters by 1/sqrt m.
func TestHissSpectrum(t *testing.T) {
	const perSample, samples, stretches = 4, 128, 60
	s := newHiss(t, 11)
	step := 1 / (2 * hissBand * perSample)
	in, above, count, countAbove := 0.0, 0.0, 0, 0
	for stretch := range stretches {
		v := make([]float64, samples*perSample)
		window := 0.0
		for k := range v {
			w := math.Sin(math.Pi * (float64(k) + 0.5) / float64(len(v)))
			v[k] = w * w * s.At(float64(stretch*len(v)+k)*step)
			window += w * w * w * w
		}
		for line := 2; line < len(v)/2; line++ {
			f := float64(line) / (float64(len(v)) * step)
			density := 2 * step / window * square2(cmplx.Abs(fourier(v, line)))
			switch {
			case f < 0.95*hissBand:
				in, count = in+density, count+1
			case f > 1.1*hissBand:
				above, countAbove = above+density, countAbove+1
			}
		}
	}
	want := hissDensity * hissDensity
	// The window makes neighbouring lines dependent: about half of them count.
	assert.InDelta(t, 1, in/float64(count)/want, 5/math.Sqrt(float64(count)/2))
	assert.Less(t, above/float64(countAbove)/want, 1e-6)
}

func square2(x float64) float64 { return x * x }

// fourier returns one line of the discrete spectrum.
func fourier(v []float64, line int) complex128 {
	sum := complex128(0)
	turn := cmplx.Rect(1, -2*math.Pi*float64(line)/float64(len(v)))
	at := complex128(1)
	for _, x := range v {
		sum += complex(x, 0) * at
		at *= turn
	}
	return sum
}

func TestHissDependsOnItsSeedAlone(t *testing.T) {
	a, again, b := newHiss(t, 1), newHiss(t, 1), newHiss(t, 2)
	var both, size float64
	for k := range 4000 {
		at := float64(k) * 1.7e-5
		require.Equal(t, a.At(at), again.At(at))
		both, size = both+a.At(at)*b.At(at), size+a.At(at)*a.At(at)
	}
	assert.Less(t, math.Abs(both/size), 0.1, "two seeds have nothing in common")
	require.Zero(t, testing.AllocsPerRun(100, func() { a.At(1.234) }))
}
