package analyses_test

import (
	"context"
	"flag"
	"fmt"
	"maps"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/mna"
	"poise/netlist"
)

// TestHardCircuits solves every circuit of testdata/hard from nothing, without a setting, and compares how it was found with the record of the last
// time: `go test ./analyses -run Hard -update` writes it anew. What the circuits' own benches expect is checked with the examples
// (cmd/poise); here the currents are summed once more, without the solver.

var update = flag.Bool("update", false, "write the records of testdata anew")

const (
	hardFolder = "../testdata/hard"
	hardRecord = hardFolder + "/iterations.txt"
	// leastHard is the number of circuits that the folder holds at least: a test of none would pass.
	leastHard = 70
	// iterationSlack is by how many iterations a count may exceed the record: processors that fuse a product and a sum round
	// differently, and a search that forks on its way takes a few steps more or less.
	iterationSlack = 3
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
	require.NoError(t, os.WriteFile(hardRecord, []byte(b.String()), 0o644))
}

// hardCircuit loads a file of the folder.
func hardCircuit(t *testing.T, file string) *netlist.Circuit {
	d, err := netlist.Load(os.DirFS(hardFolder), file)
	require.NoError(t, err)
	c, err := d.Circuit()
	require.NoError(t, err)
	return c
}

func TestHardCircuits(t *testing.T) {
	files, err := filepath.Glob(hardFolder + "/*.poise")
	require.NoError(t, err)
	require.GreaterOrEqual(t, len(files), leastHard)
	want, got := readFindings(t), map[string]finding{}
	for _, path := range files {
		file := filepath.Base(path)
		name := strings.TrimSuffix(file, ".poise")
		t.Run(name, func(t *testing.T) {
			r, err := analyses.Bias(context.Background(), hardCircuit(t, file))
			require.NoError(t, err)
			f := finding{r.Rung, r.Iterations}
			got[name] = f
			t.Log(f)
			if *update {
				return
			}
			require.Contains(t, want, name, "-update records it")
			assert.Equal(t, want[name].rung, f.rung)
			assert.LessOrEqual(t, f.iterations, want[name].iterations+iterationSlack, "it was found in fewer")
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

var _ = math.Abs
var _ mna.Unknown
