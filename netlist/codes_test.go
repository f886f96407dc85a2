package netlist

import (
	"errors"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/netlist/syntax"
)

// problems loads a text and returns everything the loader has to say of it.
func problems(t *testing.T, src string, opts ...Option) DiagnosticList {
	d, err := Load(fstest.MapFS{"x.poise": {Data: []byte(src)}}, "x.poise", opts...)
	if err == nil {
		return d.Warnings
	}
	var list DiagnosticList
	require.True(t, errors.As(err, &list), "%v", err)
	return list
}

// TestEveryCodeHasItsExample loads each example and wants exactly its problem, at the marked place.
func TestEveryCodeHasItsExample(t *testing.T) {
	seen := map[syntax.Code]bool{}
	for _, c := range Codes() {
		assert.False(t, seen[c.Code], "%s stands twice in the table", c.Code)
		seen[c.Code] = true
		if c.Example == "" {
			continue
		}
		t.Run(string(c.Code), func(t *testing.T) {
			before, after, marked := strings.Cut(c.Example, "«")
			require.True(t, marked)
			list := problems(t, before+after)
			require.Len(t, list, 1, "%v", list.Error())
			assert.Equal(t, c.Code, list[0].Code)
			if c.Code != syntax.CodeNotText {
				assert.Equal(t, len(before), list[0].Span.Start.Offset, "%v", list.Error())
				assert.NotEmpty(t, list[0].Line)
			}
		})
	}
}

func TestCodesThatNeedALargeText(t *testing.T) {
	deep := circuitOf("vp -- R2 " + strings.Repeat("(", 600) + "1kohm" + strings.Repeat(")", 600) + " -- gnd\n")
	assert.Equal(t, syntax.CodeTooDeep, problems(t, deep)[0].Code)
	large := circuitOf("# " + strings.Repeat("x", 2000) + "\n")
	assert.Equal(t, CodeLimit, problems(t, large, WithLimits(Limits{FileBytes: 1000}))[0].Code)
	parts := circuitOf("vp -- R2 1kohm -- gnd\nvp -- R3 1kohm -- gnd\n")
	assert.Equal(t, CodeLimit, problems(t, parts, WithLimits(Limits{Parts: 2}))[0].Code)
	grid := circuitOf("bench b {\n  vary temperature = 0degC..50degC count 60\n  expect volts(vp) >= 1V\n}\n")
	assert.Equal(t, CodeLimit, problems(t, grid, WithLimits(Limits{Points: 50}))[0].Code)
}

func TestEveryErrorIsReportedInOrder(t *testing.T) {
	list := problems(t, "design d\nrail vp = 9V\nlet a = 3V + 2A\nvp -- R1 0ohm -- gnd\nvp -- R2 $ -- gnd\nbench b {\n  expect volts(vp) >= 1A\n}\n")
	require.Len(t, list, 4, "%v", list.Error())
	assert.True(t, slices.IsSortedFunc(list, func(a, b *Diagnostic) int { return a.Span.Start.Offset - b.Span.Start.Offset }))
}

func TestOrderOfLetsDoesNotMatter(t *testing.T) {
	for _, lets := range []string{"let a = 2 * b\nlet b = 3kohm\n", "let b = 3kohm\nlet a = 2 * b\n"} {
		d, err := Load(fstest.MapFS{"x.poise": {Data: []byte(circuitOf(lets + "vp -- R2 a -- gnd\n"))}}, "x.poise")
		require.NoError(t, err)
		c, err := d.Circuit()
		require.NoError(t, err)
		assert.Equal(t, 6000.0, c.Elements[1].Value)
	}
}

func TestUseBringsPartsBlocksAndLets(t *testing.T) {
	files := fstest.MapFS{
		"a/main.poise":    {Data: []byte("design d\nuse \"../lib/parts.poise\"\nuse \"std/sources.poise\"\nrail vp = 9V\nvp -- R1 big -- x\nM = mirror(in: x, out: y, low: gnd)\nvp -- R2 big -- y\n")},
		"lib/parts.poise": {Data: []byte("let big = 10kohm\nrail ignored = 3V\n")},
	}
	d, err := Load(files, "a/main.poise")
	require.NoError(t, err)
	c, err := d.Circuit()
	require.NoError(t, err)
	assert.Len(t, c.Rails, 1)
	var names []string
	for _, e := range c.Elements {
		names = append(names, e.Name)
	}
	assert.Equal(t, []string{"R1", "M.Qin", "M.Qout", "M.Rin", "M.Rout", "R2"}, sorted(names, []string{"R1", "M.Qin", "M.Qout", "M.Rin", "M.Rout", "R2"}))
}

// sorted puts names in the order of want, which holds the same names.
func sorted(names, want []string) []string {
	slices.SortFunc(names, func(a, b string) int { return slices.Index(want, a) - slices.Index(want, b) })
	return names
}

func TestLibraryFilesLoad(t *testing.T) {
	entries, err := library.ReadDir("std")
	require.NoError(t, err)
	for _, e := range entries {
		list := problems(t, circuitOf("use \"std/"+e.Name()+"\"\n"))
		assert.Empty(t, list, "%s: %v", e.Name(), list.Error())
	}
}

func TestSettingsOfABench(t *testing.T) {
	src := circuitOf("let k = 2\nvp -- R2 (k * 1kohm) -- gnd\nbench b {\n  let add = 1V\n  set vp = 4V + add\n  set R1 = 3kohm\n  vary k = 2, 3\n  vary temperature = 0degC, 50degC\n  expect volts(vp) = 5V +- 1%\n}\n")
	d, err := Load(fstest.MapFS{"x.poise": {Data: []byte(src)}}, "x.poise")
	require.NoError(t, err)
	s, err := d.Bench("b").Setup([]float64{3, 323.15})
	require.NoError(t, err)
	assert.Equal(t, 5.0, s.Circuit.Rails[0].Signal.At(0))
	assert.Equal(t, 3000.0, s.Circuit.Elements[0].Value)
	assert.Equal(t, 3000.0, s.Circuit.Elements[1].Value)
	assert.Equal(t, 323.15, s.Circuit.Temperature)
}

func FuzzLoad(f *testing.F) {
	for _, c := range Codes() {
		f.Add(c.Example)
	}
	f.Add("design d\nuse \"std/sources.poise\"\nrail vp = 9V\nvp -- R1 1kohm -- x\nM = mirror(in: x, out: x, low: gnd)\n")
	f.Fuzz(func(t *testing.T, src string) {
		d, err := Load(fstest.MapFS{"x.poise": {Data: []byte(src)}}, "x.poise", WithLimits(Limits{FileBytes: 4000, Parts: 1000, Points: 100}))
		if (d == nil) == (err == nil) {
			t.Fatalf("neither a design nor an error, or both: %v", err)
		}
		if err != nil {
			var list DiagnosticList
			if !errors.As(err, &list) || len(list) == 0 {
				t.Fatalf("not a list of problems: %v", err)
			}
		}
	})
}

// BenchmarkLoadLargeFile loads files of some lengths: the time for a line must not depend on it.
func BenchmarkLoadLargeFile(b *testing.B) {
	for _, lines := range []int{2000, 20_000, 100_000} {
		var src strings.Builder
		src.WriteString("design large\nrail vp = 9V\n")
		for i := range lines {
			src.WriteString("vp -- R" + itoa(i) + " 4k7ohm tol 1% -- gnd\n")
		}
		files := fstest.MapFS{"x.poise": {Data: []byte(src.String())}}
		b.Run(itoa(lines), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				d, err := Load(files, "x.poise")
				if err != nil {
					b.Fatal(err)
				}
				if _, err := d.Circuit(); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(lines)*float64(b.N)/b.Elapsed().Seconds(), "lines/s")
		})
	}
}

func itoa(i int) string {
	if i < 10 {
		return string(rune('0' + i))
	}
	return itoa(i/10) + string(rune('0'+i%10))
}
