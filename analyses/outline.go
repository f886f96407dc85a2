package analyses

import "math"

// outline accumulates the waveform itself, for reducers that need to know the whole of it before they can begin: where its states are, what its last
// value is. It keeps every piece up to a number of them. Beyond it, neighbours are merged as long as one cubic stays within pieceShare of the
// accuracy of all that it stands for, beside the swing: what is kept follows the shape of the waveform, not the number of steps.
type outline struct {
	accuracy  float64
	limit     int // pieces that are kept before neighbours are merged
	wave      Waveform
	slack     []float64 // of each piece: what its cubic may be off what it stands for
	low, high float64   // of the samples
}

// outlineLimit is the number of pieces, about 6 MB, up to which an outline is the waveform itself.
const outlineLimit = 1 << 17

func newOutline(accuracy float64) *outline {
	return &outline{accuracy: accuracy, limit: outlineLimit, low: math.Inf(1), high: math.Inf(-1)}
}

func (a *outline) add(p *piece) {
	a.wave.append(p)
	a.slack = append(a.slack, 0)
	for _, v := range p.y {
		a.low, a.high = math.Min(a.low, v), math.Max(a.high, v)
	}
	if len(a.slack) >= a.limit {
		a.merge()
		a.limit = max(a.limit, 2*len(a.slack))
	}
}

// merge joins neighbours, the shorter ones first, so that a piece is looked at a few times only.
func (a *outline) merge() {
	allowed := allowance(a.accuracy, a.low, a.high)
	w, n := &a.wave, 0
	for i := range a.slack {
		copy(w.values[samplesPerStep*n:], w.values[samplesPerStep*i:samplesPerStep*(i+1)])
		w.knots[n+1], a.slack[n] = w.knots[i+1], a.slack[i]
		for n++; n >= 2 && a.join(n-2, allowed); {
			n--
		}
	}
	w.knots, w.values, a.slack = w.knots[:n+1], w.values[:samplesPerStep*n], a.slack[:n]
}

// join makes one piece of pieces i and i+1 if it is good enough and the first is not far longer, and reports whether it did.
func (a *outline) join(i int, allowed float64) bool {
	var first, second, both piece
	w := &a.wave
	w.set(&first, i)
	w.set(&second, i+1)
	if first.length() > 2*second.length() {
		return false
	}
	var y samples
	h := second.t1 - first.t0
	for k := range y {
		switch t := first.t0 + h*float64(k)/(samplesPerStep-1); {
		case k == 0:
			y[k] = first.y[0]
		case k == samplesPerStep-1:
			y[k] = second.y[k]
		case t < first.t1:
			y[k] = first.at(t)
		default:
			y[k] = second.at(t)
		}
	}
	both.set(first.t0, second.t1, &y)
	slack := max(a.slack[i]+both.distance(&first), a.slack[i+1]+both.distance(&second))
	if !(slack <= allowed) {
		return false
	}
	w.knots[i+1], a.slack[i] = second.t1, slack
	copy(w.values[samplesPerStep*i:], y[:])
	return true
}

// distance bounds how far p is from another piece within the time of that.
func (p *piece) distance(o *piece) float64 {
	var d samples
	for k := range d {
		d[k] = p.at(o.time(float64(k)/(samplesPerStep-1))) - o.y[k]
	}
	c := newCubic(d[:])
	low, high := c.hull()
	return max(math.Abs(low), math.Abs(high))
}
