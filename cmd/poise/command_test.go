package main

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// command runs the command and returns its exit code and outputs.
func command(t *testing.T, args ...string) (code int, out, err string) {
	t.Helper()
	var o, e bytes.Buffer
	code = run(context.Background(), args, streams{in: strings.NewReader(""), out: &o, err: &e})
	return code, o.String(), e.String()
}

func TestMalformedFilesEachGiveALocatedMessage(t *testing.T) {
	files, err := filepath.Glob("testdata/malformed/*.poise")
	require.NoError(t, err)
	require.GreaterOrEqual(t, len(files), 30)
	for _, f := range files {
		t.Run(filepath.Base(f), func(t *testing.T) {
			code, _, messages := command(t, "check", f)
			assert.Equal(t, exitInput, code)
			located := regexp.MustCompile(`(?m)^` + regexp.QuoteMeta(f) + `:\d+:\d+: error: .+ \[P\d+\]$`)
			assert.Regexp(t, located, messages)
		})
	}
}

func TestExamplesHold(t *testing.T) {
	code, out, messages := command(t, "check", "../../testdata/...")
	assert.Equal(t, exitHeld, code, "%s%s", out, messages)
	assert.Empty(t, messages)
	assert.Regexp(t, `(?m)^\d+ passed, 0 failed, 0 skipped\n$`, out)
}

func TestExamplesAreFormatted(t *testing.T) {
	code, out, _ := command(t, "format", "--check", "../../testdata/...")
	assert.Equal(t, exitHeld, code, "%s", out)
}

// write makes a file of a circuit with a bench.
func write(t *testing.T, bench string) string {
	name := filepath.Join(t.TempDir(), "x.poise")
	src := "design d \"a divider\"\nrail vp = 9V\nvp -- R1 1kohm -- m -- R2 2kohm -- gnd\nm -- C1 1uF -- gnd\n" + bench
	require.NoError(t, os.WriteFile(name, []byte(src), 0o600))
	return name
}

func TestExitCodes(t *testing.T) {
	code, out, _ := command(t, "check", write(t, "bench b {\n  expect volts(m) = 6V +- 1%\n}\n"))
	assert.Equal(t, exitHeld, code, out)
	code, out, _ = command(t, "check", write(t, "bench b {\n  expect \"too high\" volts(m) <= 5V\n}\n"))
	assert.Equal(t, exitFailed, code)
	assert.Contains(t, out, "it is 6 V, wanted at most 5 V: outside by 1 V")
	assert.True(t, strings.HasSuffix(out, "0 passed, 1 failed, 0 skipped\n"))
	code, _, messages := command(t, "check", write(t, ""))
	assert.Equal(t, exitInput, code)
	assert.Contains(t, messages, "nothing to check")
	code, _, _ = command(t, "check", "--allow-empty", write(t, ""))
	assert.Equal(t, exitHeld, code)
	code, _, messages = command(t, "check", "no-such-file.poise")
	assert.Equal(t, exitInput, code)
	assert.Contains(t, messages, "no such file")
	code, out, _ = command(t, "check", write(t, "bench b {\n  run 1ms\n  expect crosses(volts(m), 100V, 1) <= 1ms\n}\n"))
	assert.Equal(t, exitUnsolved, code)
	assert.Contains(t, out, "never")
	for _, args := range [][]string{{"nonsense"}, {"check", "--format", "xml"}, {"check", "--report", "text"}, {"run", "x"}} {
		code, _, messages = command(t, args...)
		assert.Equal(t, exitInput, code, "%v", args)
		assert.NotEmpty(t, messages)
	}
}

func TestJSONOfACheck(t *testing.T) {
	_, out, _ := command(t, "check", "--format", "json", write(t, "bench b {\n  expect volts(m) = 6V +- 1%\n  expect amps(vp) >= 1mA\n}\n"))
	var r struct {
		Schema int
		Files  []struct {
			Design  string
			Benches []struct {
				Status       string
				Expectations []struct {
					Line               int
					Text, Unit, Shown  string
					Value, Low, Margin float64
					High               *float64
				}
			}
		}
		Totals struct{ Pass int }
	}
	require.NoError(t, json.Unmarshal([]byte(out), &r))
	assert.Equal(t, 1, r.Schema)
	assert.Equal(t, 2, r.Totals.Pass)
	x := r.Files[0].Benches[0].Expectations
	assert.Equal(t, "volts(m) = 6V +- 1%", x[0].Text)
	assert.InDelta(t, 6, x[0].Value, 1e-9)
	assert.Equal(t, "6 V", x[0].Shown)
	assert.Equal(t, 6, x[0].Line)
	assert.Nil(t, x[1].High, "an open side is null")
	assert.InDelta(t, 3e-3, x[1].Value, 1e-12)
}

func TestCurvesAndWaveforms(t *testing.T) {
	picture := filepath.Join(t.TempDir(), "hum.svg")
	code, out, messages := command(t, "run", "../../testdata/examples/mooring.poise", "hum", "--points", "5", "--plot", picture)
	require.Equal(t, exitHeld, code, messages)
	lines := strings.Split(strings.TrimSpace(out), "\n")
	assert.Equal(t, "time [s],volts(out) [V],volts(bp) [V]", lines[0])
	assert.Len(t, lines, 6)
	svg, err := os.ReadFile(picture)
	require.NoError(t, err)
	assert.Contains(t, string(svg), "<svg")
	code, out, messages = command(t, "response", "../../testdata/examples/mooring.poise", "--quantity", "cmrr", "--over", "1Hz..10Hz", "--per-decade", "2")
	require.Equal(t, exitHeld, code, messages)
	assert.Equal(t, "frequency [Hz],cmrr over 1Hz..10Hz per decade 2", strings.Split(out, "\n")[0])
	code, out, _ = command(t, "bias", "../../testdata/examples/mooring.poise")
	assert.Equal(t, exitHeld, code)
	assert.Contains(t, out, "region")
	code, out, _ = command(t, "parts", "npn")
	assert.Equal(t, exitHeld, code)
	assert.Contains(t, out, "Gummel")
}
