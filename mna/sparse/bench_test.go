package sparse

import (
	"math/rand/v2"
	"testing"
)

// sheet is a matrix in the making: conductances and controlled conductances between nodes, -1 being ground.
type sheet struct {
	n          int
	rows, cols []int32
	values     []float64
	random     *rand.Rand
}

func newSheet(n int) *sheet { return &sheet{n: n, random: rand.New(rand.NewPCG(7, uint64(n)))} }

// add adds a conductance of about g S, from row to column only if it is controlled.
func (s *sheet) entry(row, col int, g float64) {
	if row < 0 || col < 0 {
		return
	}
	s.rows, s.cols, s.values = append(s.rows, int32(row)), append(s.cols, int32(col)), append(s.values, g)
}

func (s *sheet) conductance(a, b int, g float64) {
	g *= 0.8 + 0.4*s.random.Float64()
	s.entry(a, a, g)
	s.entry(b, b, g)
	s.entry(a, b, -g)
	s.entry(b, a, -g)
}

// transistor adds a bipolar transistor with resistances to its three inner nodes, which start at inner.
func (s *sheet) transistor(b, c, e, inner int) {
	b1, c1, e1 := inner, inner+1, inner+2
	s.conductance(b, b1, 1.0/38)
	s.conductance(c, c1, 1.0/1.5)
	s.conductance(e, e1, 1.0/0.4)
	s.conductance(b1, e1, 2e-5)
	s.conductance(b1, c1, 1e-9)
	s.conductance(c1, e1, 1e-6)
	g := 8e-3 * (0.8 + 0.4*s.random.Float64())
	s.entry(c1, b1, g)
	s.entry(c1, e1, -g)
	s.entry(e1, b1, -g)
	s.entry(e1, e1, g)
}

// pair adds an emitter-coupled pair of 12 unknowns between two sources and two rails.
func (s *sheet) pair(first, sp, sn, vp, vn int) {
	bp, bn, e1, e2, tail, out := first, first+1, first+2, first+3, first+4, first+5
	s.conductance(sp, bp, 1.0/175)
	s.conductance(sn, bn, 1.0/185)
	s.conductance(bp, -1, 1e-5)
	s.conductance(bn, -1, 1e-5)
	s.transistor(bp, vp, e1, first+6)
	s.transistor(bn, out, e2, first+9)
	s.conductance(e1, tail, 1.0/270)
	s.conductance(tail, e2, 1.0/270)
	s.conductance(vp, out, 1.0/39e3)
	s.conductance(tail, vn, 1.0/36e3)
}

// array is a number of pairs on common rails, each rail behind a filter and one of them with a source whose current is unknown: 7 unknowns more.
func array(pairs int) *sheet {
	s := newSheet(12*pairs + 7)
	vp, vn, midP, midN, rawP, rawN, amps := 12*pairs, 12*pairs+1, 12*pairs+2, 12*pairs+3, 12*pairs+4, 12*pairs+5, 12*pairs+6
	for k := range pairs {
		s.pair(12*k, -1, -1, vp, vn)
	}
	s.conductance(vp, midP, 1)
	s.conductance(midP, rawP, 1)
	s.conductance(vn, midN, 1)
	s.conductance(midN, rawN, 1)
	s.conductance(rawN, -1, 10)
	s.entry(rawP, amps, 1)
	s.entry(amps, rawP, 1)
	return s
}

func onePair() *sheet {
	s := newSheet(12)
	s.pair(0, -1, -1, -1, -1)
	return s
}

func rcLadder(n int) *sheet {
	s := newSheet(n)
	for k := range n {
		s.conductance(k-1, k, 1e-3)
		s.conductance(k, -1, 1e-4)
	}
	return s
}

func grid(side int) *sheet {
	s := newSheet(side * side)
	for i := range side {
		for j := range side {
			if j+1 < side {
				s.conductance(i*side+j, i*side+j+1, 1e-3)
			}
			if i+1 < side {
				s.conductance(i*side+j, (i+1)*side+j, 1e-3)
			}
		}
	}
	s.conductance(0, -1, 1e-3)
	return s
}

var subjects = []struct {
	name string
	make func() *sheet
}{
	{"pair", onePair},
	{"array-64", func() *sheet { return array(64) }},
	{"array-1000", func() *sheet { return array(1000) }},
	{"array-10000", func() *sheet { return array(10000) }},
	{"ladder-100000", func() *sheet { return rcLadder(100_000) }},
	{"grid-100", func() *sheet { return grid(100) }},
	{"grid-300", func() *sheet { return grid(300) }},
}

func (s *sheet) analysis(t testing.TB) *Analysis {
	p, err := NewPattern(s.n, s.rows, s.cols)
	if err != nil {
		t.Fatal(err)
	}
	a, err := Analyse(p)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func BenchmarkAnalyse(b *testing.B) {
	for _, c := range subjects {
		b.Run(c.name, func(b *testing.B) {
			s := c.make()
			for b.Loop() {
				s.analysis(b)
			}
		})
	}
}

func BenchmarkFactor(b *testing.B) {
	eachFactored(b, func(f *LU[float64], v []float64) error { return f.Factor(v) })
}
func BenchmarkRefactor(b *testing.B) {
	eachFactored(b, func(f *LU[float64], v []float64) error { return f.Refactor(v) })
}

func BenchmarkSolve(b *testing.B) {
	var x []float64
	eachFactored(b, func(f *LU[float64], v []float64) error {
		if len(x) != f.a.pattern.n {
			x = make([]float64, f.a.pattern.n)
			for i := range x {
				x[i] = 1 + float64(i%7)
			}
		}
		f.Solve(x)
		for i := range x {
			x[i] = 1 + float64(i%7)
		}
		return nil
	})
}

func eachFactored(b *testing.B, do func(f *LU[float64], values []float64) error) {
	for _, c := range subjects {
		b.Run(c.name, func(b *testing.B) {
			s := c.make()
			f := NewLU[float64](s.analysis(b))
			if err := f.Factor(s.values); err != nil {
				b.Fatal(err)
			}
			for b.Loop() {
				if err := do(f, s.values); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(f.FillIn()), "entries")
		})
	}
}

func BenchmarkRefactorComplex(b *testing.B) {
	for _, c := range subjects {
		b.Run(c.name, func(b *testing.B) {
			s := c.make()
			values := make([]complex128, len(s.values))
			for i, v := range s.values {
				values[i] = complex(v, v*phaseOf(i))
			}
			f := NewLU[complex128](s.analysis(b))
			if err := f.Factor(values); err != nil {
				b.Fatal(err)
			}
			for b.Loop() {
				if err := f.Refactor(values); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

// phaseOf varies the phase of entries.
func phaseOf(i int) float64 { return float64(i%5) / 10 }
