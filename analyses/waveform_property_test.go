package analyses

import (
	"fmt"
	"math"
	"slices"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// rounding is what a few thousand additions and the roots of a cubic may lose of numbers of the order of ten.
const rounding = 1e-9

// drawValue draws a value of a waveform from -5 to 5.
func drawValue() *rapid.Generator[float64] {
	return rapid.Custom(func(t *rapid.T) float64 { return float64(rapid.IntRange(-320, 320).Draw(t, "v")) / 64 })
}

// drawLevel draws a level that no sample of a waveform has: whether a waveform that only just touches it passes it is a matter of rounding.
func drawLevel() *rapid.Generator[float64] {
	return rapid.Custom(func(t *rapid.T) float64 {
		return float64(rapid.IntRange(-128, 128).Draw(t, "level"))/64 + math.Pi/1000
	})
}

// drawBand draws a distance that no two samples have.
func drawBand() *rapid.Generator[float64] {
	return rapid.Custom(func(t *rapid.T) float64 {
		return float64(rapid.IntRange(1, 192).Draw(t, "band"))/64 + math.E/1000
	})
}

// drawWaveform draws a piecewise cubic from -1 s or later: with jumps or without, wavy, straight or constant.
func drawWaveform(t *rapid.T) *Waveform {
	w := &Waveform{knots: []float64{rapid.Float64Range(-1, 1).Draw(t, "start")}}
	value := drawValue()
	last := value.Draw(t, "first")
	for range rapid.IntRange(1, 8).Draw(t, "pieces") {
		w.knots = append(w.knots, w.knots[len(w.knots)-1]+rapid.Float64Range(0.01, 1).Draw(t, "length"))
		if rapid.IntRange(0, 3).Draw(t, "jump") == 0 {
			last = value.Draw(t, "after")
		}
		y := samples{last, last, last, last}
		switch end := value.Draw(t, "end"); rapid.IntRange(0, 4).Draw(t, "form") {
		case 0:
		case 1:
			y = samples{last, last + (end-last)/3, last + 2*(end-last)/3, end}
		case 2: // steepest in the middle: 3 u^2 - 2 u^3
			y = samples{last, last + (end-last)*7/27, last + (end-last)*20/27, end}
		default:
			y = samples{last, value.Draw(t, "y1"), value.Draw(t, "y2"), end}
		}
		w.values = append(w.values, y[:]...)
		last = y[3]
	}
	return w
}

// mapped returns w with times and values changed.
func (w *Waveform) mapped(t, v func(float64) float64) *Waveform {
	m := &Waveform{}
	for _, x := range w.knots {
		m.knots = append(m.knots, t(x))
	}
	for _, x := range w.values {
		m.values = append(m.values, v(x))
	}
	return m
}

// cutAt returns w with piece i in two parts, the first the share u of it.
func (w *Waveform) cutAt(i int, u float64) *Waveform {
	var p piece
	w.set(&p, i)
	middle := p.time(u)
	var left, right samples
	for k := range left {
		left[k] = p.c.at(u * float64(k) / 3)
		right[k] = p.c.at(u + (1-u)*float64(k)/3)
	}
	return &Waveform{
		knots:  slices.Insert(slices.Clone(w.knots), i+1, middle),
		values: slices.Replace(slices.Clone(w.values), 4*i, 4*i+4, append(left[:], right[:]...)...),
	}
}

// fine returns n values of each piece and the times in s they stand for.
func (w *Waveform) fine(n int, f func(t, v, dt float64)) {
	for p := range w.pieces() {
		for k := range n {
			u := (float64(k) + 0.5) / float64(n)
			f(p.time(u), p.c.at(u), p.length()/float64(n))
		}
	}
}

func same(x float64) float64 { return x }

// TestReducersOfAnyWaveform compares with rules of another kind: closed Newton-Cotes formulas of four and seven points (Abramowitz & Stegun 25.4.13 and
// 25.4.18), exact for a cubic and its square, and a fine grid.
func TestReducersOfAnyWaveform(t *testing.T) {
	const grid = 500
	rapid.Check(t, func(t *rapid.T) {
		w := drawWaveform(t)
		from, until := w.Window()
		mean, square := 0.0, 0.0
		for p := range w.pieces() {
			mean += p.length() * (p.y[0] + 3*p.y[1] + 3*p.y[2] + p.y[3]) / 8
			for k, weight := range []float64{41, 216, 27, 272, 27, 216, 41} {
				v := p.c.at(float64(k) / 6)
				square += p.length() * weight / 840 * v * v
			}
		}
		near(t, mean/(until-from), w.Mean(), rounding)
		near(t, math.Sqrt(square/(until-from)), w.RMS(), rounding)
		low, high := -rapid.Float64Range(0, 5).Draw(t, "low"), rapid.Float64Range(0, 5).Draw(t, "high")
		top, bottom, steepest, outside := math.Inf(-1), math.Inf(1), 0.0, 0.0
		before := math.NaN()
		w.fine(grid, func(_, v, dt float64) {
			top, bottom = math.Max(top, v), math.Min(bottom, v)
			if v < low || v > high {
				outside += dt
			}
			before = v
		})
		require.False(t, math.IsNaN(before))
		for p := range w.pieces() {
			for k := range grid {
				a, b := float64(k)/grid, float64(k+1)/grid
				steepest = math.Max(steepest, math.Abs(p.c.at(b)-p.c.at(a))*grid/p.length())
			}
		}
		// Of a cubic through values of at most 5, slopes by u are below 200 and bends below 2000: the grid misses this much at most.
		const slopes, bends = 200.0, 2000.0
		peak, peakAt := w.Peak()
		trough, troughAt := w.Trough()
		assert.True(t, peak >= top && peak <= top+slopes/grid, "peak %g, on the grid %g", peak, top)
		assert.True(t, trough <= bottom && trough >= bottom-slopes/grid, "trough %g, on the grid %g", trough, bottom)
		assert.True(t, peakAt >= from && peakAt <= until && troughAt >= from && troughAt <= until)
		assert.Equal(t, peak-trough, w.PeakToPeak())
		assert.True(t, w.Slew() >= steepest*(1-rounding)-rounding && w.Slew() <= steepest+bends/grid/0.01, "slew %g, on the grid %g", w.Slew(), steepest)
		// Each level is passed three times a piece at most, and each passage is missed by one cell at most.
		near(t, outside, w.Outside(low, high), 6*(until-from)/grid+rounding)
		near(t, until-from, w.Outside(high+10, high+20), rounding)
		assert.Zero(t, w.Outside(-1000, 1000))
	})
}

func TestPassagesOfAnyWaveform(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawWaveform(t)
		level := drawLevel().Draw(t, "level")
		previous, _ := w.Window()
		start := w.values[0] < level
		n := 0
		for ; ; n++ {
			at, err := w.Crossing(level, n+1)
			if err != nil {
				require.ErrorContains(t, err, fmt.Sprintf("the level is crossed %s only", times(n)))
				break
			}
			require.GreaterOrEqual(t, at, previous)
			previous = at
			after, err := w.At(at)
			require.NoError(t, err)
			if !slices.Contains(w.knots, at) {
				near(t, level, after, rounding, "at a passage within a piece")
			}
		}
		assert.Equal(t, n%2 == 1, start != (w.values[len(w.values)-1] < level), "an odd number of passages changes sides")
	})
}

func TestSettlingOfAnyWaveform(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawWaveform(t)
		within := drawBand().Draw(t, "within")
		from, _ := w.Window()
		settled := from + w.Settling(within)
		final := w.values[len(w.values)-1]
		last := math.Inf(-1)
		w.fine(1000, func(at, v, _ float64) {
			if math.Abs(v-final) > within+rounding {
				last = at
			}
		})
		assert.LessOrEqual(t, last, settled+rounding, "outside after it has settled")
		if settled > from {
			const moment = 1e-9 // s, in which no value changes by more than 1e-5
			before, err := w.At(math.Max(from, settled-moment))
			require.NoError(t, err)
			assert.GreaterOrEqual(t, math.Abs(before-final), within-1e-5, "it settles where it enters")
		}
	})
}

// measures are the reducers whose results are exact for the cubics. Those that need the states of a waveform take a histogram of eight
// values a piece.
func measures(t require.TestingT, w *Waveform, level, band float64) map[string]float64 {
	from, until := w.Window()
	m := map[string]float64{}
	m["peak"], m["peak at"] = w.Peak()
	m["trough"], m["trough at"] = w.Trough()
	m["mean"], m["rms"], m["slew"], m["drift"] = w.Mean(), w.RMS(), w.Slew(), w.Drift()
	m["outside"], m["settles"] = w.Outside(level-band, level+band), w.Settling(band)
	crossing, err := w.Crossing(level, 2)
	if err == nil {
		m["crosses"] = crossing
	}
	v, err := w.At(from + 0.37*(until-from))
	require.NoError(t, err)
	m["value"] = v
	tone, err := w.Tone(3 / (until - from))
	require.NoError(t, err)
	m["tone"], m["quadrature"] = real(tone), imag(tone)
	return m
}

// toneQuadrature is what the fit of a tone may differ between two ways to cut a waveform. The rule of four Gauss points is off by 5.6e-10 of the eighth
// derivative (Abramowitz & Stegun 25.4.30), which for a cubic through values of at most 5 and an eighth of a period in one piece, a wilder one than a run takes, is
// some thousand: 56 third derivatives of 1600 and (pi/4)^5, in one of some twenty pieces.
const toneQuadrature = 2e-6

func TestCuttingAPieceChangesNothing(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawWaveform(t)
		cut := w.cutAt(rapid.IntRange(0, w.steps()-1).Draw(t, "piece"), rapid.Float64Range(0.05, 0.95).Draw(t, "at"))
		level, band := drawLevel().Draw(t, "level"), drawBand().Draw(t, "band")
		got := measures(t, cut, level, band)
		for name, want := range measures(t, w, level, band) {
			if name == "peak at" || name == "trough at" {
				continue // of equal extremes rounding makes another one the largest
			}
			near(t, want, got[name], conditioned(name)*(1+math.Abs(want)), name)
		}
	})
}

// conditioned is the rounding that a result may carry. A time at which a level is passed is as uncertain as the value over the slope there: a level
// touched at a turn makes half the digits uncertain.
func conditioned(name string) float64 {
	switch name {
	case "crosses", "settles", "outside":
		return 1e-6
	case "tone", "quadrature":
		return toneQuadrature
	}
	return rounding
}

func TestSignFlip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawWaveform(t)
		level, band := drawLevel().Draw(t, "level"), drawBand().Draw(t, "band")
		was, is := measures(t, w, level, band), measures(t, w.mapped(same, func(v float64) float64 { return -v }), -level, band)
		for _, name := range []string{"mean", "drift", "value", "tone", "quadrature"} {
			near(t, -was[name], is[name], rounding, name)
		}
		for _, name := range []string{"rms", "slew", "outside", "settles"} {
			near(t, was[name], is[name], rounding*(1+math.Abs(was[name])), name)
		}
		near(t, -was["trough"], is["peak"], rounding)
		near(t, was["trough at"], is["peak at"], rounding)
		near(t, -was["peak"], is["trough"], rounding)
		near(t, was["peak at"], is["trough at"], rounding)
	})
}

func TestTimeAndScale(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		w := drawWaveform(t)
		level, band := drawLevel().Draw(t, "level"), drawBand().Draw(t, "band")
		was := measures(t, w, level, band)
		is := measures(t, w.mapped(func(t float64) float64 { return 4 * t }, func(v float64) float64 { return 0.5 * v }), 0.5*level, 0.5*band)
		for name, factor := range map[string]float64{
			"peak": 0.5, "trough": 0.5, "mean": 0.5, "rms": 0.5, "drift": 0.5, "value": 0.5, "slew": 0.125, "peak at": 4, "trough at": 4, "outside": 4, "settles": 4,
		} {
			near(t, factor*was[name], is[name], rounding*(1+math.Abs(was[name])), name)
		}
		near(t, 0.5*math.Hypot(was["tone"], was["quadrature"]), math.Hypot(is["tone"], is["quadrature"]), toneQuadrature)
	})
}
