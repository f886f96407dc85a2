package devices

import (
	"bufio"
	"context"
	"fmt"
	"math"
	"os"
	"testing"

	"github.com/stretchr/testify/require"

	"poise/mna"
)

func pairSystem(t testing.TB, cm, dm mna.Signal) (*mna.System, map[string]int) {
	b := mna.NewBuilder()
	n := map[string]int{"gnd": 0}
	node := func(s string) int {
		if _, ok := n[s]; !ok {
			n[s] = b.Node(s)
		}
		return n[s]
	}
	f := Families()[0]
	v := f.Defaults()
	set := func(name string, x float64) { v[f.Index(name)] = x }
	for k, x := range map[string]float64{"Is": 6.7e-15, "betaF": 410, "betaR": 4, "earlyF": 72, "earlyR": 14, "kneeF": 55e-3, "kneeR": 20e-3, "leakE": 8e-15, "emE": 1.7, "leakC": 4e-15, "emC": 1.9,
		"rB": 38, "rE": 0.4, "rC": 1.5, "capE": 11e-12, "phiE": 0.72, "gradE": 0.36, "capC": 4e-12, "phiC": 0.6, "gradC": 0.34, "fcap": 0.5, "tauF": 370e-12, "tauR": 25e-9} {
		set(k, x)
	}
	place := Place{Temperature: 300.15, Area: 1}
	left, err := f.New(v, place)
	require.NoError(t, err)
	set("Is", 6.8005e-15)
	set("betaF", 393.6)
	right, err := f.New(v, place)
	require.NoError(t, err)
	R := func(name, a, c string, x float64) { b.Add(name, NewResistor(x), node(a), node(c)) }
	C := func(name, a, c string, x float64) { b.Add(name, NewCapacitor(x, math.NaN()), node(a), node(c)) }
	require.NoError(t, b.Hold(node("vp"), Constant(9)))
	require.NoError(t, b.Hold(node("vn"), Constant(-9)))
	require.NoError(t, b.Hold(node("sp"), Sum(cm, Scaled(dm, 0.5))))
	require.NoError(t, b.Hold(node("sn"), Sum(cm, Scaled(dm, -0.5))))
	R("Rlead1", "sp", "bp", 175)
	R("Rlead2", "sn", "bn", 185)
	C("Ccab1", "bp", "gnd", 220e-12)
	C("Ccab2", "bn", "gnd", 260e-12)
	b.Add("Q1", left, node("vp"), node("bp"), node("e1"), 0)
	b.Add("Q2", right, node("out"), node("bn"), node("e2"), 0)
	R("Re1", "e1", "tail", 270)
	R("Re2", "tail", "e2", 270.54)
	R("Rload", "vp", "out", 39e3)
	R("Rtail", "tail", "vn", 36e3)
	s, err := b.Build()
	require.NoError(t, err)
	return s, n
}

func TestPair(t *testing.T) {
	s, n := pairSystem(t, Constant(0), Constant(0))
	b, err := s.Bias(context.Background(), mna.BiasOptions{})
	require.NoError(t, err)
	fmt.Println(b.Rung, b.Iterations, s.Size())
	fmt.Printf("%.12f %.12f\n", b.X[s.Unknown(n["out"])], b.X[s.Unknown(n["tail"])])
	m := s.Small(b.X, 0)
	v := m.Solver()
	require.NoError(t, v.At(2*math.Pi*50))
	x := make([]complex128, s.Size())
	x[s.Unknown(n["sp"])] = 0.5
	x[s.Unknown(n["sn"])] = -0.5
	v.Solve(x)
	fmt.Println(x[s.Unknown(n["out"])])
}

func TestPairRuns(t *testing.T) {
	sine := func(a, f float64) mna.Signal { s, _ := Sine{Peak: a, Frequency: f}.New(); return s }
	mod, _ := Modulated{0.2, 1e6, 1e3, 0.8}.New()
	sur, err := Surge{5, 5e-9, 50e-9, 1e-6}.New()
	require.NoError(t, err)
	fmt.Println(sur.(*surge).shape)
	for _, c := range []struct {
		name   string
		cm, dm mna.Signal
		until  float64
		swing  float64
	}{{"hum", sine(1, 50), sine(10e-3, 4), 1, 1.819916}, {"burst", sur, Constant(0), 20e-6, 6.2914}, {"carrier", mod, Constant(0), 2e-3, 1.563575}} {
		for _, acc := range []float64{1e-3, 1e-4, 1e-5} {
			if c.name == "carrier" && acc < 1e-4 {
				continue
			}
			s, n := pairSystem(t, c.cm, c.dm)
			b, err := s.Bias(context.Background(), mna.BiasOptions{})
			require.NoError(t, err)
			var ts, vs []float64
			f, _ := os.Open("/tmp/golden.txt")
			sc := bufio.NewScanner(f)
			for sc.Scan() {
				var name string
				var tt, vv float64
				fmt.Sscan(sc.Text(), &name, &tt, &vv)
				if name == c.name {
					ts = append(ts, tt)
					vs = append(vs, vv)
				}
			}
			f.Close()
			k := 0
			worst := 0.0
			x := make([]float64, s.Size())
			st, err := s.Transient(context.Background(), mna.TransientOptions{Until: c.until, Accuracy: acc, Start: b.X}, func(p *mna.Step) error {
				for k < len(ts) && ts[k] <= p.T1 {
					p.At(ts[k], x)
					worst = max(worst, math.Abs(x[s.Unknown(n["out"])]-vs[k]))
					k++
				}
				return nil
			})
			require.NoError(t, err)
			fmt.Printf("%s acc %g: error %.2e of swing, points %d/%d, %+v\n", c.name, acc, worst/c.swing, k, len(ts), *st)
		}
	}
}
