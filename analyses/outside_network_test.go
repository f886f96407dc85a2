package analyses_test

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// Closed form: n sections of a ladder of 1 ohm parts look like F(2n+1)/F(2n), a ratio of Fibonacci numbers, and many like the golden ratio.
func TestResistorLadder(t *testing.T) {
	for _, n := range []int{1, 2, 3, 7, 15, 40} {
		src, node := "x -- I1 -1A -- gnd\n", "x"
		for i := range n {
			src += fmt.Sprintf("%s -- S%d 1ohm -- n%d -- P%d 1ohm -- gnd\n", node, i, i, i)
			node = fmt.Sprintf("n%d", i)
		}
		// F(2n+1)/F(2n) by the recurrence.
		a, b := 1.0, 1.0
		for range 2*n - 1 {
			a, b = a+b, a
		}
		v := scalars(t, src, "volts(x)")
		relative(t, a/b, v[0], rounded, "%d sections", n)
		if n == 40 {
			relative(t, (1+math.Sqrt(5))/2, v[0], rounded, "golden ratio")
		}
	}
}

// Closed form: the cube of 1 ohm edges has 5/6 ohm between opposite corners, 3/4 across a face, 7/12 along an edge.
func TestResistorCube(t *testing.T) {
	for corner, want := range map[int]float64{7: 5.0 / 6, 3: 3.0 / 4, 1: 7.0 / 12} {
		cube := fmt.Sprintf("n%d -- I1 -1A -- gnd\n", corner)
		name := func(i int) string {
			if i == 0 {
				return "gnd"
			}
			return fmt.Sprintf("n%d", i)
		}
		for i := range 8 {
			for bit := 1; bit < 8; bit *= 2 {
				if i&bit == 0 {
					cube += fmt.Sprintf("%s -- R%d_%d 1ohm -- %s\n", name(i), i, bit, name(i|bit))
				}
			}
		}
		relative(t, want, scalars(t, cube, fmt.Sprintf("volts(n%d)", corner))[0], rounded, "corner %d", corner)
	}
}

// lattice writes a square grid of 1 ohm edges, w x h nodes, with the node at (gx, gy) on gnd, closed to a torus if asked.
func lattice(w, h, gx, gy int, torus bool) string {
	var src strings.Builder
	name := func(x, y int) string {
		if x, y = x%w, y%h; x == gx && y == gy {
			return "gnd"
		}
		return fmt.Sprintf("n%d_%d", x%w, y%h)
	}
	for y := range h {
		for x := range w {
			if x+1 < w || torus {
				fmt.Fprintf(&src, "%s -- X%d_%d 1ohm -- %s\n", name(x, y), x, y, name(x+1, y))
			}
			if y+1 < h || torus {
				fmt.Fprintf(&src, "%s -- Y%d_%d 1ohm -- %s\n", name(x, y), x, y, name(x, y+1))
			}
		}
	}
	return src.String()
}

// Cserti, Application of the lattice Green's function for calculating the resistance of an infinite network of resistors, Am. J. Phys. 68, 2000: 1/2 ohm between neighbours
// of the endless square lattice, 2/pi across a square, 4/pi - 1/2 a knight's move away. A grid cut off at a distance m errs by terms in 1/m^2.
func TestSquareLattice(t *testing.T) {
	want := []float64{0.5, 2 / math.Pi, 4/math.Pi - 0.5}
	var last []float64
	for _, m := range []int{6, 12, 24} {
		src := lattice(2*m+1, 2*m+1, m, m, false)
		var got []float64
		for _, move := range [][2]int{{1, 0}, {1, 1}, {2, 1}} {
			node := fmt.Sprintf("n%d_%d", m+move[0], m+move[1])
			got = append(got, scalars(t, src+node+" -- I1 -1A -- gnd\n", "volts("+node+")")[0])
		}
		for k := range want {
			off := got[k] - want[k]
			absolute(t, 0, off, 2.5/float64(m*m), "case %d, grid of %d: %.6f ohm", k, 2*m+1, got[k])
			if last != nil {
				relative(t, 4, (last[k]-want[k])/off, 0.1, "error falls with the square of the grid")
			}
		}
		last = got
	}
}

// Foster, The average impedance of an electrical network, 1949: over all edges the conductance times the resistance between its ends sums to the number of nodes less one.
// On a torus all edges are equal, so each has (n - 1)/2n ohm.
func TestTorus(t *testing.T) {
	for _, m := range []int{3, 10, 31} {
		n := float64(m * m)
		src := lattice(m, m, 1, 2, true)
		v := scalars(t, src+"n2_2 -- I1 -1A -- gnd\n", "volts(n2_2)")
		relative(t, (n-1)/(2*n), v[0], rounded, "torus of %d", m)
	}
}

// Symmetry: n nodes joined each to each by 1 ohm have 2/n ohm between any two.
func TestCompleteGraph(t *testing.T) {
	const n = 12
	src := "n4 -- I1 -1A -- gnd\n"
	for i := range n - 1 {
		src += fmt.Sprintf("n%d -- R%d 1ohm -- gnd\n", i, i)
		for k := range i {
			src += fmt.Sprintf("n%d -- R%d_%d 1ohm -- n%d\n", i, i, k, k)
		}
	}
	relative(t, 2.0/n, scalars(t, src, "volts(n4)")[0], rounded, "complete graph")
}

// Closed form: an R-2R ladder of n bits divides its reference by powers of two.
func TestBinaryLadder(t *testing.T) {
	const bits = 10
	for _, code := range []int{1, 358, 777, 1023} {
		src, node := "", "gnd"
		for k := range bits {
			if k == 0 {
				src += "n0 -- Rt 20kohm -- gnd\n"
			} else {
				src += fmt.Sprintf("%s -- S%d 10kohm -- n%d\n", node, k, k)
			}
			node = fmt.Sprintf("n%d", k)
			src += fmt.Sprintf("%s -- B%d 20kohm -- _ -- V%d %dV -- gnd\n", node, k, k, 5*(code>>k&1))
		}
		v := scalars(t, src, fmt.Sprintf("volts(n%d)", bits-1))
		relative(t, 5*float64(code)/(1<<bits), v[0], rounded, "code %d", code)
	}
}

// Maxwell, A Treatise on Electricity and Magnetism, 1873, on Wheatstone's bridge: the galvanometer's current of an unbalanced bridge in closed form, by the
// Thevenin equivalent of its two dividers.
func TestUnbalancedBridge(t *testing.T) {
	v := scalars(t, `
rail vx = 3.3V
vx -- R1 350ohm -- p -- R2 351.2ohm -- gnd
vx -- R3 349.1ohm -- n -- R4 350.4ohm -- gnd
p -- Rg 47ohm -- n
`, "amps(Rg)", "amps(vx)")
	parallel := func(a, b float64) float64 { return a * b / (a + b) }
	open := 3.3 * (351.2/(350+351.2) - 350.4/(349.1+350.4))
	i := open / (47 + parallel(350, 351.2) + parallel(349.1, 350.4))
	// Two dividers of half the supply differ in the fourth digit.
	relative(t, i, v[0], 1e4*1e-15, "galvanometer")
	up := (3.3 + i*351.2) / (350 + 351.2) // through R1: 3.3 V = i1 R1 + (i1 - i) R2
	un := (3.3 - i*350.4) / (349.1 + 350.4)
	relative(t, up+un, v[1], rounded, "supply")
}
