package netlist

import (
	"fmt"
	"maps"
	"math/bits"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// messagesOf loads a circuit with a few more lines and returns what is said of it: code, message and hint.
func messagesOf(t *testing.T, lines string) []string {
	var out []string
	for _, d := range problems(t, circuitOf(lines)) {
		text := string(d.Code) + " " + d.Message
		if d.Hint != "" {
			text += "; " + d.Hint
		}
		out = append(out, text)
	}
	return out
}

const unlimited = ": nothing limits the current in a loop of voltage sources and inductors"

// TestLoopsAreNamed wants the shortest independent loops by the user's names, each where its last member is written.
func TestLoopsAreNamed(t *testing.T) {
	for name, c := range map[string]struct {
		lines string
		want  []string
	}{
		"two sources":  {"a -- V1 1V -- b\na -- V2 2V -- b\na -- R2 1kohm -- gnd\n", []string{"V2 lies across V1"}},
		"a rail":       {"vp -- L1 1mH -- gnd\n", []string{"L1 lies across the rail vp"}},
		"an input":     {"a -- R2 1kohm -- gnd\na -- V1 1V -- b\nb -- R3 1kohm -- gnd\ninput i = (a, b)\n", []string{"V1 lies across the input i"}},
		"an open end":  {"a -- V1 1V -- b -- V2 1V -- c -- R2 1kohm -- gnd\na -- L1 1mH -- b\na -- R3 1kohm -- gnd\n", []string{"L1 lies across V1"}},
		"a longer way": {"a -- V1 1V -- b -- V2 1V -- c -- V3 1V -- d\na -- L1 1mH -- e -- L2 1mH -- d\na -- R2 1kohm -- gnd\n", []string{"L2 closes a loop with V3, V2, V1, L1"}},
		"the shortest of several": {
			"a -- V1 1V -- b -- V2 1V -- c -- V3 1V -- e -- V4 1V -- d\na -- L1 1mH -- f -- L2 1mH -- d\na -- L3 1mH -- d\na -- R2 1kohm -- gnd\n",
			[]string{"V4 closes a loop with V3, V2, V1, L3", "L3 closes a loop with L1, L2"},
		},
		"a triangle on a square": {
			"a -- L1 1mH -- b -- L2 1mH -- c -- L3 1mH -- d -- L4 1mH -- a\na -- L5 1mH -- c\na -- R2 1kohm -- gnd\n",
			[]string{"L2 closes a loop with L1, L5", "L5 closes a loop with L3, L4"},
		},
		"inside a block": {
			"block k(p, q) {\n p -- L1 1mH -- m -- L2 1mH -- q\n p -- L3 1mH -- q\n m -- R1 1kohm -- gnd\n}\nA = k(p: vp, q: x)\nx -- R2 1kohm -- gnd\n",
			[]string{"A.L3 closes a loop with A.L1, A.L2"},
		},
		"through blocks": {
			"block k(p, q) {\n p -- V1 1V -- m -- L1 1mH -- q\n m -- R1 1kohm -- q\n}\nblock two(p, q) {\n A = k(p: p, q: x)\n B = k(p: x, q: q)\n}\nT = two(p: vp, q: z)\nz -- L9 1mH -- gnd\n",
			[]string{"L9 closes a loop with the rail vp, T.A.V1, T.A.L1, T.B.V1, T.B.L1"},
		},
		"capacitors and resistors are no part": {"vp -- C1 1uF -- a -- L1 1mH -- gnd\nvp -- V1 1V -- b -- C2 1uF -- gnd\nb -- R2 1kohm -- gnd\n", nil},
		"an inductor behind a current source":  {"gnd -- I1 1mA -- a -- L1 1mH -- b -- R2 1kohm -- gnd\n", nil},
		"a capacitor across a source":          {"vp -- C1 1uF -- gnd\na -- V1 1V -- gnd\na -- C2 1uF -- vp\n", nil},
		"inductors that meet a current source": {"gnd -- I1 1mA -- x\nx -- L1 1mH -- a -- R2 1ohm -- gnd\nx -- L2 1mH -- b -- R3 1ohm -- gnd\n", nil},
	} {
		t.Run(name, func(t *testing.T) {
			var want []string
			for _, w := range c.want {
				want = append(want, "P232 "+w+unlimited)
			}
			assert.Equal(t, want, messagesOf(t, c.lines))
		})
	}
}

// TestCutsAreNamed wants everything that joins nodes without a path for direct current to the rest, and nothing else.
func TestCutsAreNamed(t *testing.T) {
	const (
		noPath = " has no path for direct current to gnd"
		only   = "; only capacitors join it to the rest: "
		fixes  = ": nothing fixes its voltage"
	)
	for name, c := range map[string]struct {
		lines string
		want  []string
	}{
		"between capacitors": {"vp -- C1 1nF -- x -- C2 1nF -- gnd\n", []string{"P231 the node x" + noPath + only + "C1, C2"}},
		"between sources":    {"vp -- I1 1mA -- x -- I2 1mA -- gnd\n", []string{"P233 only current sources join the node x to the rest (I1, I2)" + fixes}},
		"between both":       {"vp -- C1 1nF -- x -- I2 1mA -- gnd\n", []string{"P233 only current sources and capacitors join the node x to the rest (I2; C1)" + fixes}},
		"parts inside do not count": {"vp -- C1 1nF -- x -- R2 1kohm -- y -- C2 1nF -- x\ny -- L1 1mH -- z -- V1 1V -- x\nz -- C3 1nF -- gnd\n",
			[]string{"P231 the node x" + noPath + only + "C1, C3"}},
		"one behind the other": {"vp -- C1 1nF -- x -- C2 1nF -- y -- R2 1kohm -- z\nz -- R3 1kohm -- y\n",
			[]string{"P231 the node x" + noPath + only + "C1, C2", "P231 the node y" + noPath + only + "C2"}},
		"nothing at all":  {"x -- R2 1kohm -- y -- R3 2kohm -- x\n", []string{"P231 the node x" + noPath + "; nothing joins it to the rest"}},
		"a current input": {"a -- R2 1kohm -- b\ninput i = (a, b) current\n", []string{"P233 only current sources join the node a to the rest (the input i)" + fixes}},
		"in an instance": {"block k(p, q) {\n p -- C1 1nF -- m -- R1 1kohm -- n -- C2 1nF -- q\n}\nA = k(p: vp, q: gnd)\n",
			[]string{"P231 the node A.m" + noPath + only + "A.C1, A.C2"}},
		"through instances": {"block k(p, q) {\n p -- R1 1kohm -- q\n}\nA = k(p: x, q: y)\nB = k(p: y, q: z)\nvp -- C1 1nF -- x\nz -- C2 1nF -- gnd\n",
			[]string{"P231 the node x" + noPath + only + "C1, C2"}},
		"a substrate does not conduct": {"part n = npn { capS = 1pF }\nQ1 = n(b: x, c: y, e: x, s: gnd)\nx -- C1 1nF -- gnd\ny -- C2 1nF -- vp\n",
			[]string{"P231 the node x" + noPath + only + "C1, C2"}},
		"a junction does":     {"part d = diode\nvp -- C1 1nF -- x -- D1 d -- gnd\npart n = npn\nQ1 = n(b: b, c: vp, e: gnd)\nb -- C2 1nF -- gnd\n", nil},
		"an inductor does":    {"vp -- C1 1nF -- x -- L1 1mH -- gnd\n", nil},
		"a source does":       {"vp -- C1 1nF -- x -- V1 1V -- y -- R2 1kohm -- gnd\n", nil},
		"more than are named": {strings.Repeat("x -- C%d 1nF -- gnd\n", 9), []string{"P231 the node x" + noPath + only + "C1, C2, C3, C4, C5, C6 and 3 more"}},
	} {
		t.Run(name, func(t *testing.T) {
			lines := c.lines
			for k := 1; strings.Contains(lines, "%d"); k++ {
				lines = strings.Replace(lines, "%d", fmt.Sprint(k), 1)
			}
			assert.Equal(t, c.want, messagesOf(t, lines))
		})
	}
}

// TestLoopsAreTheShortest compares the loops of small random graphs with those that trying every set of edges finds.
func TestLoopsAreTheShortest(t *testing.T) {
	const graphs = 400
	r := rand.New(rand.NewPCG(3, 1))
	several := 0
	for range graphs {
		nodes := 3 + r.IntN(4)
		var edges []edge
		for range 3 + r.IntN(8) {
			a := r.IntN(nodes)
			edges = append(edges, edge{a: a, b: (a + 1 + r.IntN(nodes-1)) % nodes})
		}
		g, beyond := newRing(edges, nodes, witnessed)
		require.Empty(t, beyond)
		var lengths []int
		sets := gf2{}
		for _, loop := range g.loops() {
			lengths = append(lengths, len(loop))
			set := uint(0)
			for _, i := range loop {
				set |= 1 << i
			}
			require.Equal(t, len(loop), bits.OnesCount(set), "an edge twice")
			require.True(t, isLoop(edges, set), "no loop: %v of %v", loop, edges)
			require.True(t, inOrder(edges, loop), "not in order: %v of %v", loop, edges)
			require.True(t, sets.add(set), "a loop that follows from others")
		}
		slices.Sort(lengths)
		require.Equal(t, shortestLoops(edges), lengths, "%v", edges)
		if len(lengths) > 2 {
			several++
		}
	}
	require.Greater(t, several, graphs/10)
}

// shortestLoops returns the lengths of the shortest independent loops: all loops by their lengths, without those that follow from shorter ones
// (Horton, A polynomial-time algorithm to find the shortest cycle basis of a graph, SIAM J. Comput. 16, 1987, on why that is right).
func shortestLoops(edges []edge) []int {
	var all []uint
	for set := uint(1); set < 1<<len(edges); set++ {
		if isLoop(edges, set) {
			all = append(all, set)
		}
	}
	slices.SortStableFunc(all, func(a, b uint) int { return bits.OnesCount(a) - bits.OnesCount(b) })
	var lengths []int
	sets := gf2{}
	for _, set := range all {
		if sets.add(set) {
			lengths = append(lengths, bits.OnesCount(set))
		}
	}
	return lengths
}

// isLoop reports whether a set of edges is one loop.
func isLoop(edges []edge, set uint) bool {
	degree := map[int]int{}
	sets := newUnion(8)
	parts := 0
	for i, x := range edges {
		if set>>i&1 == 1 {
			degree[x.a]++
			degree[x.b]++
			if sets.join(x.a, x.b) {
				parts++
			}
		}
	}
	for _, d := range degree {
		if d != 2 {
			return false
		}
	}
	return parts == len(degree)-1
}

// inOrder reports whether each edge of a loop meets the next.
func inOrder(edges []edge, loop []int) bool {
	for k, i := range loop {
		a, b := edges[i], edges[loop[(k+1)%len(loop)]]
		if a.a != b.a && a.a != b.b && a.b != b.a && a.b != b.b {
			return false
		}
	}
	return true
}

// gf2 is a set of independent sets of edges, by their highest edge.
type gf2 map[int]uint

// add adds a set unless it is the symmetric difference of others.
func (g gf2) add(set uint) bool {
	for set != 0 {
		top := bits.Len(set)
		if g[top] == 0 {
			g[top] = set
			return true
		}
		set ^= g[top]
	}
	return false
}

// TestEveryFloatingGroupIsFound compares what is said of random circuits with a search of its own.
func TestEveryFloatingGroupIsFound(t *testing.T) {
	const circuits = 300
	r := rand.New(rand.NewPCG(5, 2))
	found := 0
	for range circuits {
		nodes := 3 + r.IntN(6)
		parts := randomParts(r, nodes)
		var lines strings.Builder
		for _, p := range parts {
			fmt.Fprintf(&lines, "%s -- %s %s -- %s\n", nodeOf(p.a), p.name, p.value, nodeOf(p.b))
		}
		var got []string
		for _, d := range problems(t, circuitOf(lines.String())) {
			if d.Code == CodeFloating || d.Code == CodeCut {
				got = append(got, cutIn(d))
			}
		}
		want := floatingGroups(parts, nodes)
		require.ElementsMatch(t, want, got, lines.String())
		found += len(want)
	}
	require.Greater(t, found, circuits)
}

// joint is a part between two nodes of a random circuit.
type joint struct {
	name, value string
	a, b        int
}

func nodeOf(n int) string {
	if n == 0 {
		return "gnd"
	}
	return fmt.Sprint("n", n)
}

func randomParts(r *rand.Rand, nodes int) []joint {
	kinds := []string{"C", "C", "C", "I", "R"}
	values := map[string]string{"C": "1nF", "I": "1mA", "R": "1kohm"}
	var parts []joint
	for k := range 2 * nodes {
		kind := kinds[r.IntN(len(kinds))]
		a := r.IntN(nodes)
		parts = append(parts, joint{fmt.Sprint(kind, k+10), values[kind], a, (a + 1 + r.IntN(nodes-1)) % nodes})
	}
	return parts
}

// floatingGroups lists, for every group of nodes that resistors join and not to gnd, the names of what joins it to the rest; not of groups of lonely nodes that
// one part touches each.
func floatingGroups(parts []joint, nodes int) []string {
	group := make([]int, nodes)
	for n := range group {
		group[n] = n
	}
	for range nodes { // labels sink until nothing changes
		for _, p := range parts {
			if p.name[0] == 'R' {
				low := min(group[p.a], group[p.b])
				group[p.a], group[p.b] = low, low
			}
		}
	}
	var groups []string
	for n := 1; n < nodes; n++ {
		if group[n] != n {
			continue
		}
		var cut []string
		touches := map[int]int{} // of each node of the group
		for _, p := range parts {
			if (group[p.a] == n) != (group[p.b] == n) {
				cut = append(cut, p.name)
			}
			for _, end := range []int{p.a, p.b} {
				if group[end] == n {
					touches[end]++
				}
			}
		}
		if len(touches) > 0 && slices.Max(slices.Collect(maps.Values(touches))) > 1 {
			groups = append(groups, cutKey(cut))
		}
	}
	return groups
}

// cutIn returns the names of the parts in what is said of a floating group.
func cutIn(d *Diagnostic) string {
	_, text, is := strings.Cut(d.Hint, "rest: ")
	if !is {
		_, text, _ = strings.Cut(d.Message, "(")
		text, _, _ = strings.Cut(text, ")")
	}
	if strings.Contains(text, "more") {
		return "many"
	}
	return cutKey(strings.FieldsFunc(text, func(c rune) bool { return c == ',' || c == ';' || c == ' ' }))
}

func cutKey(names []string) string {
	sources, capacitors := 0, 0
	for _, name := range names {
		if name[0] == 'I' {
			sources++
		} else {
			capacitors++
		}
	}
	if sources > namedMost || capacitors > namedMost {
		return "many"
	}
	slices.Sort(names)
	return strings.Join(names, " ")
}
