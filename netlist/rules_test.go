package netlist

import (
	"strings"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// TestRules loads a circuit with a few more lines and wants exactly these problems: code and a part of the message each.
func TestRules(t *testing.T) {
	const ports = "a -- Ra 1kohm -- gnd\nb -- Rb 1kohm -- gnd\ninput i = (a, b)\noutput o = (vp)\n"
	for name, c := range map[string]struct{ lines, want string }{
		"cycle is named":              {"let x = y\nlet y = x\nvp -- R2 (x * 1ohm) -- gnd\n", "P204 x needs y needs x"},
		"source with tol":             {"vp -- R2 (4.5V * 2S) tol 1% -- gnd\n", "P216 is a current (A)"},
		"step in degC":                {"bench q {\n vary temperature = 0degC..40degC by 20degC\n expect volts(vp) >= 1V\n}\n", "P203 difference of temperatures"},
		"bench shadows a let":         {"let k = 2\nvp -- R2 (k * 1kohm) -- gnd\nbench q {\n let k = 3\n expect volts(vp) >= 1V\n}\n", "P202 `set`"},
		"loop is named":               {"vp -- L1 1mH -- x -- L2 1mH -- gnd\n", "P232 L2 closes a loop with"},
		"block not instantiated":      {"block k(p) {\n p -- R1 0ohm -- gnd\n}\n", "P206 0 ohm"},
		"rail unseen in a block":      {"block k(p) {\n p -- R1 1kohm -- vp\n}\nA = k(p: vp)\n", "P230 A.vp"},
		"node inside an instance":     {"block k(p) {\n p -- R1 1kohm -- m -- R2 1kohm -- gnd\n}\nA.m -- R3 1kohm -- gnd\nA = k(p: vp)\n", ""},
		"unknown node in an instance": {"block k(p) {\n p -- R1 1kohm -- gnd\n}\nA = k(p: vp)\nA.m -- R3 1kohm -- gnd\n", "P201 A.m"},
		"pins name each other":        {"block k(p, q) {\n p -- R1 1kohm -- q\n}\nA = k(p: vp, q: B.p)\nB = k(p: n, q: gnd)\n", ""},
		"open port floats":            {"a -- C1 1nF -- gnd\ninput i = (a)\nbench q {\n drive i open\n expect volts(vp) >= 1V\n}\n", "P231 where i is open"},
		"metric of an open port":      {ports + "bench q {\n drive i open\n expect cmrr at 50Hz >= 3\n}\n", "P245 open"},
		"last point of a grid":        {"let k = 1\nvp -- R2 (k * 1kohm) -- gnd\nbench q {\n vary k = 1..-1 count 3\n expect volts(vp) >= 1V\n}\n", "P206 with k = 0"},
		"negative magnitude":          {ports + "bench q {\n expect dm_gain at 50Hz <= -3\n}\n", "P244 never negative"},
		"positional phase":            {"vp -- V1 sine(1V, 50Hz, 90deg) -- x -- R2 1kohm -- gnd\n", "P207 with its name"},
		"value outside the window":    {"bench q {\n run 1ms\n expect value(volts(vp), at: 2ms) >= 1V\n}\n", "P206 the window"},
		"bad line brings no others":   {"vp -- R2 1kohm x\nbench q {\n expect volts(x) >= 1V\n}\n", "P101"},
	} {
		t.Run(name, func(t *testing.T) {
			list := problems(t, circuitOf(c.lines))
			if c.want == "" {
				assert.Empty(t, list, "%v", list.Error())
				return
			}
			require.Len(t, list, 1, "%v", list.Error())
			code, part, _ := strings.Cut(c.want, " ")
			assert.Equal(t, code, string(list[0].Code))
			assert.Contains(t, list[0].Message+" "+list[0].Hint, part)
		})
	}
}

// TestSettingsReachEverything: what is set may depend on what is varied, and on its own old value.
func TestSettingsReachEverything(t *testing.T) {
	src := circuitOf("let k = 2\nlet r = k * 1kohm\nset temperature = warm\nlet warm = 50degC\nvp -- R2 r -- gnd\nblock b(p) {\n let Rset = 1kohm\n p -- R Rset -- gnd\n}\nA = b(p: vp)\nbench q {\n vary k = 2, 3\n set r = 1.5 * r\n set R1 = k * 7kohm\n set A.Rset = 5kohm\n expect volts(vp) >= 1V\n}\n")
	d, err := Load(fstest.MapFS{"x.poise": {Data: []byte(src)}}, "x.poise")
	require.NoError(t, err)
	s, err := d.Bench("q").Setup([]float64{3})
	require.NoError(t, err)
	got := map[string]float64{}
	for _, e := range s.Circuit.Elements {
		got[e.Name] = e.Value
	}
	assert.Equal(t, map[string]float64{"R1": 21000, "R2": 4500, "A.R": 5000}, got)
	assert.Equal(t, 323.15, s.Circuit.Temperature)
}
