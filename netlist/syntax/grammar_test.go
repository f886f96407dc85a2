package syntax

import (
	"math/rand/v2"
	"os"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/alecthomas/participle/v2/lexer"
	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// node is a piece of a production: a sequence, an alternative, a repetition, an option, or a leaf.
type node struct {
	kind rune // 's' sequence, '|' one of, '{' repetition, '[' option, '"' literal, 'n' production or class of tokens
	text string
	of   []*node
}

var grammarToken = regexp.MustCompile(`"[^"]*"|[A-Za-z]+|[][(){}|=.]`)

// grammar reads grammar.txt.
func grammar(t testing.TB) map[string]*node {
	text, err := os.ReadFile("grammar.txt")
	require.NoError(t, err)
	rules := regexp.MustCompile(`(?m)^#.*$`).ReplaceAllString(string(text), "")
	tokens := grammarToken.FindAllString(rules, -1)
	g := map[string]*node{}
	for len(tokens) > 0 {
		name := tokens[0]
		require.Equal(t, "=", tokens[1], name)
		require.NotContains(t, g, name)
		g[name], tokens = alternatives(tokens[2:])
		require.Equal(t, ".", tokens[0], name)
		tokens = tokens[1:]
	}
	return g
}

func alternatives(tokens []string) (*node, []string) {
	alt := &node{kind: '|'}
	for {
		seq := &node{kind: 's'}
		for !strings.Contains(".|)]}", tokens[0]) {
			var n *node
			switch c := rune(tokens[0][0]); c {
			case '(', '[', '{':
				n, tokens = alternatives(tokens[1:])
				if c != '(' {
					n = &node{kind: c, of: []*node{n}}
				}
			case '"':
				n = &node{kind: '"', text: strings.Trim(tokens[0], `"`)}
			default:
				n = &node{kind: 'n', text: tokens[0]}
			}
			tokens = tokens[1:]
			seq.of = append(seq.of, n)
		}
		alt.of = append(alt.of, seq)
		if tokens[0] != "|" {
			return alt, tokens
		}
		tokens = tokens[1:]
	}
}

// leaves calls f with every leaf.
func (n *node) leaves(f func(*node)) {
	if len(n.of) == 0 && (n.kind == '"' || n.kind == 'n') {
		f(n)
	}
	for _, m := range n.of {
		m.leaves(f)
	}
}

func TestGrammarIsWhole(t *testing.T) {
	g := grammar(t)
	used := map[string]bool{"File": true}
	literals := map[string]bool{}
	for _, n := range g {
		n.leaves(func(n *node) {
			if n.kind == '"' {
				literals[n.text] = true
			} else if !slices.Contains([]string{"name", "keyword", "number", "signed", "mode", "text", "EOL"}, n.text) {
				assert.Contains(t, g, n.text)
				used[n.text] = true
			}
		})
	}
	for name := range g {
		assert.True(t, used[name], "%s is used nowhere", name)
	}
	for _, w := range append(slices.Clone(statementWords()), "at", "over", "within", "from", "with", "tol", "sigma", "tc", "start") {
		assert.True(t, literals[w], "%s is not in the grammar", w)
	}
	for l := range literals {
		word := l[0] >= 'a' && l[0] <= 'z'
		assert.True(t, word || l == "_" || signLength(l) == len(l), "%s is no token", l)
	}
}

// maker derives a random sentence.
type maker struct {
	g      map[string]*node
	height map[string]int // of the lowest tree of a production
	r      *rand.Rand
	tokens []string
}

const (
	tooHigh = 1000
	deep    = 30 // where a sentence takes the lowest tree
)

// heights returns the height of the lowest tree of every production.
func heights(g map[string]*node) map[string]int {
	h := map[string]int{}
	for name := range g {
		h[name] = tooHigh
	}
	for range g {
		for name, n := range g {
			h[name] = min(h[name], 1+low(n, h))
		}
	}
	return h
}

// low is the height of the lowest tree of a piece.
func low(n *node, h map[string]int) int {
	switch n.kind {
	case '[', '{':
		return 0
	case 'n':
		return h[n.text] // 0 for a class of tokens
	}
	result := 0
	for i, x := range n.of {
		if y := low(x, h); n.kind == 's' {
			result = max(result, y)
		} else if i == 0 || y < result {
			result = y
		}
	}
	return result
}

func (m *maker) pick(list ...string) { m.tokens = append(m.tokens, list[m.r.IntN(len(list))]) }

func (m *maker) derive(n *node, depth int) {
	switch n.kind {
	case 's':
		for _, x := range n.of {
			m.derive(x, depth)
		}
	case '|':
		i := m.r.IntN(len(n.of))
		for k := range n.of {
			if depth > deep && low(n.of[k], m.height) < low(n.of[i], m.height) {
				i = k
			}
		}
		m.derive(n.of[i], depth)
	case '[', '{':
		if depth < deep && m.r.IntN(3) == 0 {
			m.derive(n.of[0], depth+1)
			if n.kind == '{' && m.r.IntN(3) == 0 {
				m.derive(n.of[0], depth+1)
			}
		}
	case '"':
		m.tokens = append(m.tokens, n.text)
	default:
		m.class(n.text, depth)
	}
}

func (m *maker) class(name string, depth int) {
	switch name {
	case "name":
		m.pick("a", "b2", "Q1", "rest", "open", "count", "größe", "by", "x_y")
	case "mode":
		m.pick("common", "differential", "signal")
	case "keyword":
		m.pick("at", "over", "from", "within", "start", "tol")
	case "number":
		m.pick("1", "4k7ohm", "2.5V", "1e-3A", "50%", "25ppm/K", "0R5", "3nV/rtHz")
	case "signed":
		m.pick("-40degC", "+3V", "-1")
	case "text":
		m.pick(`"t"`, `"a # b"`, `"\"\\"`)
	case "EOL":
		m.tokens = append(m.tokens, "\n")
	default:
		m.derive(m.g[name], depth+1)
	}
}

// TestParserTakesGrammar derives files; the parser takes them, and the formatter and the printer keep their trees.
func TestParserTakesGrammar(t *testing.T) {
	g := grammar(t)
	h := heights(g)
	kinds := map[string]bool{}
	for seed := range uint64(4000) {
		m := &maker{g: g, height: h, r: rand.New(rand.NewPCG(seed, 1))}
		m.derive(g["Statement"], 0)
		src := strings.Join(append(m.tokens, "\n"), " ")
		f, list := Parse("t", src, Limits{})
		if !assert.NoError(t, list.Err(), "seed %d: %s", seed, src) {
			return
		}
		for _, s := range f.Statements {
			kinds[shape(s)[:4]] = true
		}
		requireSameTree(t, "t", src)
	}
	assert.GreaterOrEqual(t, len(kinds), 20)
}

// recogniser finds where the pieces of a grammar may end in a text.
type recogniser struct {
	g      map[string]*node
	tokens []lexer.Token
	memo   map[string]map[int][]int
}

// recognises reports whether a text is a File of the grammar.
func recognises(t testing.TB, g map[string]*node, src string) bool {
	lex, err := lexer.Upgrade(newScanner("t", src, defaultTokens))
	require.NoError(t, err)
	r := &recogniser{g: g, memo: map[string]map[int][]int{}}
	parens := 0
	for token := lex.Next(); token.Type != kindEOF; token = lex.Next() {
		switch {
		case isSign(token, "("):
			parens++
		case isSign(token, ")"):
			parens--
		}
		if token.Type != kindLine || parens <= 0 {
			r.tokens = append(r.tokens, *token)
		}
	}
	return slices.Contains(r.production("File", 0), len(r.tokens))
}

// production returns the places where a production that begins at a place may end.
func (r *recogniser) production(name string, at int) []int {
	if _, ok := r.memo[name]; !ok {
		r.memo[name] = map[int][]int{}
	}
	ends, ok := r.memo[name][at]
	if !ok {
		ends = r.ends(r.g[name], []int{at})
		r.memo[name][at] = ends
	}
	return ends
}

// ends returns where a piece may end that begins at one of some places.
func (r *recogniser) ends(n *node, starts []int) []int {
	var out []int
	switch n.kind {
	case 's':
		out = starts
		for _, x := range n.of {
			out = r.ends(x, out)
		}
	case '|':
		for _, x := range n.of {
			out = append(out, r.ends(x, starts)...)
		}
	case '[':
		out = append(slices.Clone(starts), r.ends(n.of[0], starts)...)
	case '{':
		out = slices.Clone(starts)
		for fresh := starts; len(fresh) > 0; {
			fresh = slices.DeleteFunc(r.ends(n.of[0], fresh), func(i int) bool { return slices.Contains(out, i) })
			out = append(out, fresh...)
		}
	default:
		for _, at := range starts {
			if _, ok := r.g[n.text]; ok && n.kind == 'n' {
				out = append(out, r.production(n.text, at)...)
			} else if size := r.leaf(n, at); size > 0 {
				out = append(out, at+size)
			}
		}
	}
	slices.Sort(out)
	return slices.Compact(out)
}

// leaf returns how many tokens a leaf takes at a place, 0 if it does not stand there.
func (r *recogniser) leaf(n *node, at int) int {
	if at >= len(r.tokens) {
		return 0
	}
	t := r.tokens[at]
	name := t.Type == kindName && t.Value[0] != '_' && !(t.Value == "periodic" && at > 0 && r.tokens[at-1].Value == "run")
	fits := false
	switch {
	case n.kind == '"':
		fits = t.Value == n.text && t.Type != kindString
	case n.text == "signed":
		if at+1 < len(r.tokens) && (isSign(&t, "-") || isSign(&t, "+")) && r.tokens[at+1].Type == kindNumber && r.tokens[at+1].Pos.Offset == t.Pos.Offset+1 {
			return 2
		}
	default:
		fits = map[string]bool{
			"name": name, "mode": name && t.Value != "open", "keyword": t.Type == kindKeyword, "number": t.Type == kindNumber,
			"text": t.Type == kindString, "EOL": t.Type == kindLine,
		}[n.text]
	}
	if fits {
		return 1
	}
	return 0
}

// spoil changes one or two tokens of a sentence.
func (m *maker) spoil() {
	for range 1 + m.r.IntN(2) {
		i := m.r.IntN(len(m.tokens))
		switch m.r.IntN(4) {
		case 0:
			m.tokens = slices.Delete(m.tokens, i, i+1)
		case 1:
			m.tokens = slices.Insert(m.tokens, i, m.tokens[m.r.IntN(len(m.tokens))])
		case 2:
			j := m.r.IntN(len(m.tokens))
			m.tokens[i], m.tokens[j] = m.tokens[j], m.tokens[i]
		default:
			m.tokens[i] = []string{"-", "+", ",", "=", "--", "(", ")", "{", "}", "\n", "a", "3V", "-3V", "at", "within", "..", ".", ":", "^", "_", "open", "let"}[m.r.IntN(22)]
		}
		if len(m.tokens) == 0 {
			return
		}
	}
}

// TestParserIsGrammar compares the parser with the grammar on spoiled files. Texts are left out: the parser takes them in more places.
func TestParserIsGrammar(t *testing.T) {
	g := grammar(t)
	h := heights(g)
	taken := map[bool]int{}
	for seed := range uint64(8000) {
		m := &maker{g: g, height: h, r: rand.New(rand.NewPCG(seed, 2))}
		m.derive(g["Statement"], deep-12)
		m.spoil()
		src := strings.Join(append(m.tokens, "\n"), " ")
		if strings.Contains(src, `"`) {
			continue
		}
		_, list := Parse("t", src, Limits{})
		want := recognises(t, g, src)
		taken[want]++
		if !assert.Equal(t, want, list.Err() == nil, "seed %d: %s\n%v", seed, src, list.Err()) {
			return
		}
	}
	assert.Greater(t, min(taken[true], taken[false]), 500, "%v", taken)
}
