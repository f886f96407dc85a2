package analyses

import (
	"context"
	"flag"
	"fmt"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/mna"
	"poise/netlist"
)

var update = flag.Bool("update", false, "write the records of testdata anew")

const (
	hardFolder = "../testdata/hard"
	hardRecord = hardFolder + "/iterations.txt"
	// leastHard is the number of circuits that the folder holds at least: a test of none would pass.
	leastHard = 74
	// iterationSlack and longSearch are by how many iterations, and by which share of them, a count may exceed the record: processors that fuse a
	// product and a sum round differently, and a search that forks on its way takes a few steps more or less.
	iterationSlack = 3
	longSearch     = 0.1
)

// finding is how a bias point was found.
type finding struct {
	rung       string
	iterations int
}

func (f finding) String() string { return fmt.Sprintf("%d %s", f.iterations, f.rung) }

// readFindings reads lines of a name, a number of iterations and a rung.
func readFindings(t *testing.T) map[string]finding {
	data, err := os.ReadFile(hardRecord)
	if *update && os.IsNotExist(err) {
		return nil
	}
	require.NoError(t, err)
	list := map[string]finding{}
	for _, line := range strings.Split(strings.TrimSpace(string(data)), "\n") {
		var name string
		var f finding
		_, err := fmt.Sscan(line, &name, &f.iterations)
		require.NoError(t, err, line)
		f.rung = strings.Join(strings.Fields(line)[2:], " ")
		list[name] = f
	}
	return list
}

func writeFindings(t *testing.T, list map[string]finding) {
	var b strings.Builder
	for _, name := range slices.Sorted(maps.Keys(list)) {
		fmt.Fprintf(&b, "%s %s\n", name, list[name])
	}
	require.NoError(t, os.WriteFile(hardRecord, []byte(b.String()), 0o600))
}

// hardModel makes the equations of a file of the folder.
func hardModel(t *testing.T, file string) *model {
	d, err := netlist.Load(os.DirFS(hardFolder), file)
	require.NoError(t, err)
	c, err := d.Circuit()
	require.NoError(t, err)
	m, err := newModel(c)
	require.NoError(t, err)
	return m
}

// TestHardCircuits solves every circuit of testdata/hard from nothing, without a setting, and compares how it was found with the record:
// `go test ./analyses -run Hard -update` writes it anew. The currents of the answer are summed once more, without the solver;
// what is known of the answers stands in the circuits' own benches, which are checked with the examples (cmd/poise).
func TestHardCircuits(t *testing.T) {
	files, err := filepath.Glob(hardFolder + "/*.poise")
	require.NoError(t, err)
	require.GreaterOrEqual(t, len(files), leastHard)
	want, got := readFindings(t), map[string]finding{}
	for _, path := range files {
		file := filepath.Base(path)
		name := strings.TrimSuffix(file, ".poise")
		t.Run(name, func(t *testing.T) {
			m := hardModel(t, file)
			b, err := m.system.Bias(context.Background(), mna.BiasOptions{})
			require.NoError(t, err)
			got[name] = finding{b.Rung, b.Iterations}
			t.Log(got[name])
			s := sumsAt(m.system, m.parts(), b.X)
			verifyBalance(t, m.system, s, b.X)
			oneMoreStep(t, m.system, s, b.X)
			if *update {
				return
			}
			require.Contains(t, want, name, "-update records it")
			assert.Equal(t, want[name].rung, b.Rung)
			recorded := want[name].iterations
			assert.LessOrEqual(t, b.Iterations, recorded+iterationSlack+int(longSearch*float64(recorded)), "it was found in fewer")
		})
	}
	if *update {
		writeFindings(t, got)
		return
	}
	for name := range want {
		assert.FileExists(t, filepath.Join(hardFolder, name+".poise"), "the record names it")
	}
}
