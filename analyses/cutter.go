package analyses

import (
	"math"

	"poise/mna"
)

const (
	// pieceHalvings bounds how often a step is halved: at a kink no number of halvings is enough.
	pieceHalvings = 9
	// mostHalvings bounds the halvings of one step. A kink takes pieceHalvings of them; what takes more is no few kinks.
	mostHalvings = 63
	// newSlots is the number of points at which a piece is looked at anew if it is halved: the middles between its samples.
	newSlots = samplesPerStep - 1
	// allSlots is the number of points of a step that are in use at a time.
	allSlots = samplesPerStep + newSlots*pieceHalvings
)

// slots say where the taps hold what they read at the four points of a piece.
type slots [samplesPerStep]int

// cutter cuts a step into pieces on which all columns are cubics. Every point of the step is looked at once.
type cutter struct {
	x      []float64 // the solution at the point looked at
	smooth int       // halvings after which a cubic fits what is smooth
	left   int       // halvings that the step may still take
	whole  []samples
	halves [pieceHalvings]struct{ left, right []samples }
}

func newCutter(columns, unknowns int, accuracy float64) cutter {
	// Each halving makes the error of a cubic 16 times smaller.
	smooth := math.Ceil(math.Log2(1/(pieceShare*accuracy)) / 4)
	c := cutter{x: make([]float64, unknowns), smooth: int(min(smooth, pieceHalvings)), whole: make([]samples, columns)}
	for d := range c.halves {
		c.halves[d].left, c.halves[d].right = make([]samples, columns), make([]samples, columns)
	}
	return c
}

// cut hands the pieces of a step from a time in s on.
func (r *recording) cut(step *mna.Step, from float64) error {
	r.left = mostHalvings
	at := slots{0, 1, 2, 3}
	h := step.T1 - from
	for k, slot := range at {
		t := step.T1
		if k < samplesPerStep-1 {
			t = from + h*float64(k)/(samplesPerStep-1)
		}
		if err := r.look(step, t, slot); err != nil {
			return err
		}
	}
	r.read(at, h, r.whole)
	return r.halve(step, from, step.T1, at, r.whole, 0)
}

// halve passes a piece on if its cubics are good enough, else its halves. The piece has been halved depth times before; if that should have been enough, there
// is a kink in it or beside it.
func (r *recording) halve(step *mna.Step, from, until float64, at slots, values []samples, depth int) error {
	h := until - from
	middle := from + h/2
	broken := depth > r.smooth
	if depth == pieceHalvings || r.left == 0 || !(middle > from && middle < until) {
		r.pass(from, until, values, broken)
		return nil
	}
	first := samplesPerStep + newSlots*depth
	for k, t := range [newSlots]float64{from + h/6, middle, from + h*5/6} {
		if err := r.look(step, t, first+k); err != nil {
			return err
		}
	}
	left, right := slots{at[0], first, at[1], first + 1}, slots{first + 1, at[2], first + 2, at[3]}
	halves := &r.halves[depth]
	r.read(left, middle-from, halves.left)
	r.read(right, until-middle, halves.right)
	if r.good(values, halves.left, halves.right) {
		r.pass(from, until, values, broken)
		return nil
	}
	r.left--
	if err := r.halve(step, from, middle, left, halves.left, depth+1); err != nil {
		return err
	}
	return r.halve(step, middle, until, right, halves.right, depth+1)
}
