package syntax

import (
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func seeds(f *testing.F) {
	for _, src := range sources(f) {
		f.Add(src)
	}
	for _, c := range Codes() {
		f.Add(c.Example)
	}
	f.Add("bench b {\n  vary x = 1..\n  expect a over 1..2 per decade 3 = -2^2 +- 1%\n}\n")
	f.Add("let a = - - -40degC + 25ppm/K ^ 2 || f(\n1, at: 3..5\n)\r\n# end")
}

// FuzzParse: any bytes are read without a panic, and every error has its place in the text.
func FuzzParse(f *testing.F) {
	seeds(f)
	f.Fuzz(func(t *testing.T, src string) {
		file, list := Parse("f", src, Limits{})
		last := -1
		for _, d := range list {
			start, end := d.Span.Start, d.Span.End
			require.True(t, last <= start.Offset && start.Offset <= end.Offset && end.Offset <= len(file.Source), "%v in %q", d.Span, src)
			require.True(t, start.Line >= 1 && start.Column >= 1)
			require.NotEmpty(t, d.Code)
			require.NotEmpty(t, d.Message)
			last = start.Offset
		}
		_ = list.Error()
		if list.Err() == nil {
			for _, s := range file.Statements {
				checkSpans(t, file, s, s.Place())
			}
		}
	})
}

// FuzzFormat: what can be read keeps its tree and comments through the formatter and the printer, and neither changes its own output.
func FuzzFormat(f *testing.F) {
	seeds(f)
	f.Fuzz(func(t *testing.T, src string) {
		if _, list := Parse("f", src, Limits{}); list.Err() != nil {
			got, err := Format("f", src)
			assert.Error(t, err)
			assert.Equal(t, src, got)
			return
		}
		requireSameTree(t, "f", src)
	})
}
