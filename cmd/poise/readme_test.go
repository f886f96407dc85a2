package main

import (
	"os"
	"regexp"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/netlist"
)

// TestReadme runs the commands of the README and compares what it shows.
func TestReadme(t *testing.T) {
	data, err := os.ReadFile("../../README.md")
	require.NoError(t, err)
	readme := string(data)
	t.Chdir("../..")
	shown := regexp.MustCompile("(?s)```console\n\\$ go run ./cmd/poise (.*?)\n(.*?)```").FindAllStringSubmatch(readme, -1)
	require.NotEmpty(t, shown)
	for _, m := range shown {
		code, out, _ := command(t, strings.Fields(m[1])...)
		assert.Equal(t, exitHeld, code)
		assert.Equal(t, m[2], out)
	}
	assert.Contains(t, readme, "\n    go run ./cmd/poise check testdata/...\n")
	assert.Contains(t, readme, "\n    go test ./...\n")
	ci, err := os.ReadFile(".ci/run")
	require.NoError(t, err)
	assert.Contains(t, string(ci), "go run ./cmd/poise check testdata/...")
	assert.Contains(t, string(ci), "go test ./...")
	circuits := regexp.MustCompile("(?s)```poise\n(.*?)```").FindAllStringSubmatch(readme, -1)
	require.NotEmpty(t, circuits)
	for _, m := range circuits {
		d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(m[1])}}, "x.poise")
		require.NoError(t, err)
		assert.Empty(t, d.Warnings)
		r := analyses.Check(t.Context(), []analyses.Job{{File: "x.poise", Design: d}}, analyses.Options{})
		assert.Zero(t, r.Totals.Fail+r.Totals.Error, "%+v", r)
		formatted, err := netlist.Format("x.poise", m[1])
		require.NoError(t, err)
		assert.Equal(t, formatted, m[1])
	}
}
