package syntax

import (
	"fmt"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// statements is the size of the large file of the benchmarks.
const statements = 100_000

func largeFile() string {
	var b strings.Builder
	b.WriteString("design large\n")
	for i := range statements {
		fmt.Fprintf(&b, "n%d -- R%d %d.5kohm tol 1%% -- n%d\n", i, i, i%90+1, i+1)
	}
	return b.String()
}

// BenchmarkParse reads 100,000 paths.
func BenchmarkParse(b *testing.B) {
	src := largeFile()
	b.SetBytes(int64(len(src)))
	b.ReportAllocs()
	for b.Loop() {
		f, list := Parse("large", src, Limits{})
		require.NoError(b, list.Err())
		require.Len(b, f.Statements, statements+1)
	}
}

// BenchmarkFormat writes 100,000 paths, reading included.
func BenchmarkFormat(b *testing.B) {
	src := largeFile()
	b.SetBytes(int64(len(src)))
	b.ReportAllocs()
	for b.Loop() {
		got, err := Format("large", src)
		require.NoError(b, err)
		require.Len(b, got, len(src))
	}
}

// BenchmarkParseBenches reads 10,000 benches, whose statements go through the parser library.
func BenchmarkParseBenches(b *testing.B) {
	src := strings.Repeat("bench b \"t\" {\n  drive i common = sine(2Vpp, 50Hz)\n  run 1s from 500ms\n  expect tone(volts(out), 50Hz) <= 700mV\n}\n", statements/10)
	b.SetBytes(int64(len(src)))
	b.ReportAllocs()
	for b.Loop() {
		f, list := Parse("benches", src, Limits{})
		require.NoError(b, list.Err())
		require.Len(b, f.Statements, statements/10)
	}
}
