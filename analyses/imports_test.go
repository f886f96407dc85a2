package analyses_test

import (
	"go/parser"
	"go/token"
	"io/fs"
	"path"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// layers lists the packages from the lowest to the highest: each may import those before it and those within its own layer's
// subfolders that stand before it.
var layers = []string{
	"mna/sparse", "mna", "devices", "netlist/unit", "netlist/syntax", "netlist", "analyses", "analyses/report", "cmd/poise",
}

// TestImportsPointOneWay keeps the packages in their order, and the drawing library out of all but the one that draws.
func TestImportsPointOneWay(t *testing.T) {
	const root = ".."
	found := map[string]bool{}
	err := filepath.WalkDir(root, func(file string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() && (strings.HasPrefix(d.Name(), ".") && d.Name() != ".." || d.Name() == "testdata") {
			return filepath.SkipDir
		}
		if !strings.HasSuffix(file, ".go") || strings.HasSuffix(file, "_test.go") {
			return nil
		}
		relative, err := filepath.Rel(root, filepath.Dir(file))
		require.NoError(t, err)
		folder := filepath.ToSlash(relative)
		found[folder] = true
		tree, err := parser.ParseFile(token.NewFileSet(), file, nil, parser.ImportsOnly)
		require.NoError(t, err)
		for _, spec := range tree.Imports {
			imported, err := strconv.Unquote(spec.Path.Value)
			require.NoError(t, err)
			checkImport(t, file, folder, imported)
		}
		return nil
	})
	require.NoError(t, err)
	for _, l := range layers {
		assert.True(t, found[l], "%s is gone: the list of layers is out of date", l)
	}
}

func checkImport(t *testing.T, file, folder, imported string) {
	own := layer(folder)
	assert.GreaterOrEqual(t, own, 0, "%s: the folder %s has no layer", file, folder)
	if strings.HasPrefix(imported, "gonum.org/v1/plot") {
		assert.Equal(t, "analyses/report", folder, "%s: only analyses/report draws", file)
	}
	if rest, ok := strings.CutPrefix(imported, "poise/"); ok {
		assert.Less(t, layer(rest), own, "%s: %s may not import %s", file, folder, imported)
	}
}

// layer returns the position of a package, -1 if it has none.
func layer(folder string) int {
	for i, l := range layers {
		if folder == l || path.Dir(folder) == l && strings.HasPrefix(path.Base(folder), "internal") {
			return i
		}
	}
	return -1
}
