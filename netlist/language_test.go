package netlist

import (
	"os"
	"regexp"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/netlist/syntax"
)

// TestLanguageReference loads the examples of LANGUAGE.md: those that must load, and those that must give the problem they name.
func TestLanguageReference(t *testing.T) {
	data, err := os.ReadFile("LANGUAGE.md")
	require.NoError(t, err)
	examples := regexp.MustCompile("(?s)```poise(?:-error (P\\d+))?\n(.*?)```").FindAllStringSubmatch(string(data), -1)
	require.Greater(t, len(examples), 4)
	for _, m := range examples {
		if m[1] != "" {
			list := problems(t, m[2])
			require.Len(t, list, 1)
			assert.Equal(t, syntax.Code(m[1]), list[0].Code)
			continue
		}
		d, err := Load(fstest.MapFS{"x.poise": {Data: []byte(m[2])}}, "x.poise")
		require.NoError(t, err)
		assert.Empty(t, d.Warnings)
		formatted, err := Format("x.poise", m[2])
		require.NoError(t, err)
		assert.Equal(t, formatted, m[2])
	}
}

// TestReferenceNamesEveryMetricAndReducer keeps the page complete.
func TestReferenceNamesEveryMetricAndReducer(t *testing.T) {
	data, err := os.ReadFile("LANGUAGE.md")
	require.NoError(t, err)
	for _, m := range Metrics() {
		assert.Contains(t, string(data), m.Name)
	}
	for _, r := range Reducers() {
		assert.Contains(t, string(data), r.Name)
	}
	for _, w := range waveformNames() {
		assert.Contains(t, string(data), w+"(")
	}
}
