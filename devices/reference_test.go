package devices

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"poise/mna"
)

// The files testdata/reference/bjt.json and diode.json hold evaluations of the written equations on 60 digits, made by the scripts beside them.

// evaluationError is the relative difference allowed: a junction voltage rounded to its last bit moves an exponential by v/V_T of
// that, some 1e-14 here, and the temperature laws raise ratios to powers that lose two more digits.
const evaluationError = 2e-12

// evaluations is one of the files.
type evaluations struct {
	Cases []struct {
		Case        string
		Family      string
		Area        float64
		Temperature float64
		Parameters  map[string]float64
		Points      []struct {
			// of a transistor
			V1, V2, IC, IB, Qb, Rbb, QE, QC, QX, QS float64
			Inner, Volts                            map[string]float64
			// of a diode
			Junction, I, Q float64
		}
	}
}

// readEvaluations reads a file, whose key v is a map for a transistor and a number for a diode.
func readEvaluations(t *testing.T, name string) evaluations {
	data, err := os.ReadFile("../testdata/reference/" + name)
	require.NoError(t, err)
	var raw map[string]any
	require.NoError(t, json.Unmarshal(data, &raw))
	for _, c := range raw["cases"].([]any) {
		for _, p := range c.(map[string]any)["points"].([]any) {
			point := p.(map[string]any)
			if volts, ok := point["v"].(map[string]any); ok {
				point["volts"] = volts
				delete(point, "i")
			}
			delete(point, "v")
		}
	}
	data, err = json.Marshal(raw)
	require.NoError(t, err)
	var e evaluations
	require.NoError(t, json.Unmarshal(data, &e))
	require.NotEmpty(t, e.Cases)
	return e
}

// made makes a device of a family from the parameters given and the others' defaults.
func made(t require.TestingT, family string, parameters map[string]float64, at Place) mna.Device {
	all := Families()
	k := slices.IndexFunc(all, func(f Family) bool { return f.Name == family })
	require.GreaterOrEqual(t, k, 0, family)
	f := &all[k]
	v := f.Defaults()
	for name, x := range parameters {
		i := f.Index(name)
		require.GreaterOrEqual(t, i, 0, name)
		v[i] = x
	}
	d, err := f.New(v, at)
	require.NoError(t, err)
	return d
}

func compare(t *testing.T, what string, want, got, floor float64) {
	if d := math.Abs(got - want); !(d <= evaluationError*math.Abs(want)+floor) {
		t.Errorf("%s: want %.15g, got %.15g", what, want, got)
	}
}

func TestBipolarAgainstReference(t *testing.T) {
	for _, c := range readEvaluations(t, "bjt.json").Cases {
		q := made(t, c.Family, c.Parameters, Place{Temperature: c.Temperature, Area: c.Area}).(*bipolar)
		for k, p := range c.Points {
			name := fmt.Sprintf("%s, point %d: ", c.Case, k)
			var v core
			q.at(&v, p.V1, p.V2)
			// IC and IB are differences of an exponential and 1, times the saturation currents.
			floor := 1e-15 * (q.forward.is + q.reverse.is + q.leakE.is + q.leakC.is)
			compare(t, name+"I_C", p.IC, v.it-v.bc, floor+1e-14*math.Abs(v.bc))
			compare(t, name+"I_B", p.IB, v.be+v.bc, floor+1e-14*(math.Abs(v.be)+math.Abs(v.bc)))
			compare(t, name+"q_b", p.Qb, 1/v.share, 0)
			rb, _, _ := q.resistance(&v)
			compare(t, name+"r_bb", p.Rbb, rb, 0)
			qe, _ := q.layerE.at(p.V1)
			qd, _, _ := q.diffusion(&v, p.V2)
			compare(t, name+"Q_E", p.QE, qe+qd, 1e-14*(math.Abs(qe)+math.Abs(qd)))
			qc, _ := q.layerC.at(p.V2)
			compare(t, name+"Q_C", p.QC, qc+q.tauR*v.ri, 1e-14*(math.Abs(qc)+math.Abs(q.tauR*v.ri)))
			qx, _ := q.layerX.at(q.sign * (p.Volts["b"] - p.Inner["c"]))
			compare(t, name+"Q_X", p.QX, qx, 1e-14*q.layerX.c)
			qs, _ := q.layerS.at(q.sign * (p.Volts["s"] - p.Inner["c"]))
			compare(t, name+"Q_S", p.QS, qs, 1e-14*q.layerS.c)
		}
	}
}

func TestDiodeAgainstReference(t *testing.T) {
	for _, c := range readEvaluations(t, "diode.json").Cases {
		d := made(t, c.Family, c.Parameters, Place{Temperature: c.Temperature, Area: c.Area}).(*diode)
		for k, p := range c.Points {
			name := fmt.Sprintf("%s, point %d: ", c.Case, k)
			i, _, forward, _ := d.current(p.Junction)
			compare(t, name+"I", p.I, i, 1e-15*d.forward.is)
			q, _ := d.layer.at(p.Junction)
			compare(t, name+"Q", p.Q, q+d.tau*forward, 1e-14*(math.Abs(q)+math.Abs(d.tau*forward)))
		}
	}
}
