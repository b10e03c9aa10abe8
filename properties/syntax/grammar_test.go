package syntax

// The grammar is normative: these tests read grammar.ebnf with a reader and a
// recogniser of their own (J. Earley, An efficient context-free parsing
// algorithm, 1970; empty productions after Aycock and Horspool, Practical
// Earley parsing, 2002) and compare them with the parser.

import (
	"fmt"
	"math/rand"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// bnf is a grammar without brackets: rules[nt] lists alternatives. A symbol
// 'x' in quotes is a terminal, others are nonterminals or token classes.
type bnf struct {
	rules map[string][][]string
	fresh int
}

// readEBNF reads Go's EBNF: Name = alternatives .
func readEBNF(text string) (*bnf, error) {
	g := &bnf{rules: map[string][][]string{}}
	toks := strings.Fields(spaceOut(text))
	for len(toks) > 0 {
		if len(toks) < 3 || toks[1] != "=" {
			return nil, fmt.Errorf("expected a production at %q", toks[0])
		}
		name := toks[0]
		if g.rules[name] != nil {
			return nil, fmt.Errorf("%s is defined twice", name)
		}
		alts, rest, err := g.alternatives(toks[2:])
		if err != nil {
			return nil, err
		}
		if len(rest) == 0 || rest[0] != "." {
			return nil, fmt.Errorf("%s does not end in a dot", name)
		}
		g.rules[name] = alts
		toks = rest[1:]
	}
	for name, alts := range g.rules {
		for _, alt := range alts {
			for _, s := range alt {
				if s[0] != '"' && g.rules[s] == nil && !class[s] {
					return nil, fmt.Errorf("%s uses %s, which is not defined", name, s)
				}
			}
		}
	}
	return g, nil
}

var class = map[string]bool{"Name": true, "Int": true, "String": true, "Code": true}

// spaceOut puts spaces around the signs of EBNF outside of quotes.
func spaceOut(s string) string {
	var b strings.Builder
	quoted := false
	for _, r := range s {
		switch {
		case r == '"':
			quoted = !quoted
			b.WriteRune(r)
		case !quoted && strings.ContainsRune("=|()[]{}.", r):
			b.WriteString(" " + string(r) + " ")
		default:
			b.WriteRune(r)
		}
	}
	return b.String()
}

func (g *bnf) alternatives(toks []string) (alts [][]string, rest []string, err error) {
	var seq []string
	for len(toks) > 0 {
		switch t := toks[0]; t {
		case "|":
			alts = append(alts, seq)
			seq, toks = nil, toks[1:]
		case ".", ")", "]", "}":
			return append(alts, seq), toks, nil
		case "(", "[", "{":
			inner, r, err := g.alternatives(toks[1:])
			if err != nil {
				return nil, nil, err
			}
			end := map[string]string{"(": ")", "[": "]", "{": "}"}[t]
			if len(r) == 0 || r[0] != end {
				return nil, nil, fmt.Errorf("expected %s", end)
			}
			g.fresh++
			n := fmt.Sprintf("#%d", g.fresh)
			switch t {
			case "[":
				inner = append(inner, []string{})
			case "{":
				for i := range inner {
					inner[i] = append(inner[i], n)
				}
				inner = append(inner, []string{})
			}
			g.rules[n] = inner
			seq = append(seq, n)
			toks = r[1:]
		default:
			seq = append(seq, t)
			toks = toks[1:]
		}
	}
	return nil, nil, fmt.Errorf("the grammar ends inside a production")
}

type item struct {
	nt, alt, dot, from int
}

// earley is one recognition.
type earley struct {
	names []string
	index map[string]int
	alts  [][][]int // per nonterminal; symbols ≥ 0 nonterminals, < 0 terminals (^index into terms)
	terms map[string]int
	in    []int // terminals of the input
	sets  []map[item]bool
	done  []map[int][]int // per position: nonterminal -> starts
	memo  map[item]map[int]int
}

func newEarley(g *bnf) *earley {
	e := &earley{index: map[string]int{}, terms: map[string]int{}}
	// In a fixed order throughout: the fuzzing engine takes code that runs now
	// and then for something new.
	for n := range g.rules {
		e.names = append(e.names, n)
	}
	slices.Sort(e.names)
	for i, n := range e.names {
		e.index[n] = i
	}
	e.alts = make([][][]int, len(e.names))
	for _, n := range e.names {
		for _, alt := range g.rules[n] {
			var syms []int
			for _, s := range alt {
				if i, ok := e.index[s]; ok {
					syms = append(syms, i)
					continue
				}
				s = strings.Trim(s, `"`)
				if class[s] {
					s = "class " + s
				}
				if _, ok := e.terms[s]; !ok {
					e.terms[s] = len(e.terms)
				}
				syms = append(syms, ^e.terms[s])
			}
			e.alts[e.index[n]] = append(e.alts[e.index[n]], syms)
		}
	}
	return e
}

// parses gives the number of derivations of the tokens, counted up to 2.
func (e *earley) parses(toks []Token) int {
	e.in = nil
	for _, t := range toks {
		s := t.Text
		switch t.Kind {
		case EOF:
			continue
		case Name:
			s = "class Name"
		case Int:
			s = "class Int"
		case String:
			s = "class String"
		case Code:
			s = "class Code"
		}
		n, ok := e.terms[s]
		if !ok {
			return 0
		}
		e.in = append(e.in, ^n)
	}
	n := len(e.in)
	e.sets = make([]map[item]bool, n+1)
	e.done = make([]map[int][]int, n+1)
	e.memo = map[item]map[int]int{}
	start := e.index["File"]
	waiting := make([]map[int][]item, n+1) // items before a nonterminal
	scanned := make([][]item, n+2)         // items behind a terminal, by where it ends
	for j := 0; j <= n; j++ {
		if e.sets[j] == nil {
			e.sets[j] = map[item]bool{}
		}
		e.done[j], waiting[j] = map[int][]int{}, map[int][]item{}
		var work []item
		add := func(it item) {
			if !e.sets[j][it] {
				e.sets[j][it] = true
				work = append(work, it)
			}
		}
		work = append(work, scanned[j]...)
		if j == 0 {
			for a := range e.alts[start] {
				add(item{start, a, 0, 0})
			}
		}
		for len(work) > 0 {
			it := work[len(work)-1]
			work = work[:len(work)-1]
			syms := e.alts[it.nt][it.alt]
			if it.dot == len(syms) {
				known := false
				for _, k := range e.done[j][it.nt] {
					known = known || k == it.from
				}
				if known {
					continue
				}
				e.done[j][it.nt] = append(e.done[j][it.nt], it.from)
				for _, w := range waiting[it.from][it.nt] {
					w.dot++
					add(w)
				}
				continue
			}
			s := syms[it.dot]
			if s < 0 {
				if j < n && e.in[j] == s {
					if e.sets[j+1] == nil {
						e.sets[j+1] = map[item]bool{}
					}
					next := it
					next.dot++
					if !e.sets[j+1][next] {
						e.sets[j+1][next] = true
						scanned[j+1] = append(scanned[j+1], next)
					}
				}
				continue
			}
			waiting[j][s] = append(waiting[j][s], it)
			for a := range e.alts[s] {
				add(item{s, a, 0, j})
			}
			for _, k := range e.done[j][s] { // it was empty before it was asked for
				if k == j {
					next := it
					next.dot++
					add(next)
				}
			}
		}
	}
	return e.count(start, 0, n)
}

// count gives the derivations of in[i:j] from a nonterminal, up to 2.
func (e *earley) count(nt, i, j int) int {
	sum := 0
	for a, syms := range e.alts[nt] {
		sum = min(2, sum+e.ways(item{nt, a, len(syms), i}, j))
	}
	return sum
}

// ways gives the derivations of in[it.from:j] from the symbols before the dot.
func (e *earley) ways(it item, j int) int {
	if it.dot == 0 {
		if it.from == j {
			return 1
		}
		return 0
	}
	if !e.sets[j][it] {
		return 0
	}
	if m, ok := e.memo[it][j]; ok {
		if m < 0 {
			return 2 // a cycle: infinitely many
		}
		return m
	}
	if e.memo[it] == nil {
		e.memo[it] = map[int]int{}
	}
	e.memo[it][j] = -1
	prev := it
	prev.dot--
	sum := 0
	if s := e.alts[it.nt][it.alt][prev.dot]; s < 0 {
		if j > 0 && e.in[j-1] == s {
			sum = e.ways(prev, j-1)
		}
	} else {
		for _, k := range e.done[j][s] {
			if w := e.ways(prev, k); w > 0 {
				sum = min(2, sum+w*e.count(s, k, j))
			}
		}
	}
	e.memo[it][j] = sum
	return sum
}

func grammarFromFile(t testing.TB) *bnf {
	src, err := os.ReadFile("grammar.ebnf")
	if err != nil {
		t.Fatal(err)
	}
	g, err := readEBNF(string(src))
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// TestOneDerivation: every rule file of the project is derivable from the
// grammar in exactly one way.
func TestOneDerivation(t *testing.T) {
	e := newEarley(grammarFromFile(t))
	for _, name := range ruleFiles(t) {
		src, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		toks, err := Tokens(name, string(src))
		if err != nil {
			t.Fatal(err)
		}
		if n := e.parses(toks); n != 1 {
			t.Errorf("%s has %d derivations (2 means several)", name, n)
		}
	}
}

// TestRecogniserCounts: the recogniser itself sees two derivations where there are two.
func TestRecogniserCounts(t *testing.T) {
	for _, c := range []struct {
		grammar string
		input   string
		want    int
	}{
		{`File = File File | Name | .`, "a", 2},
		{`File = { Name } [ Name ] .`, "a a", 2},
		{`File = { Name "," } [ Name ] .`, "a, a, a", 1},
		{`File = Sum . Sum = Sum "+" Sum | Name .`, "a + b + c", 2},
		{`File = Sum . Sum = Name { "+" Name } .`, "a + b +", 0},
		{`File = [ Name ] [ Int ] { String } .`, `7 "x"`, 1},
	} {
		g, err := readEBNF(c.grammar)
		if err != nil {
			t.Fatal(err)
		}
		toks, err := Tokens("", c.input)
		if err != nil {
			t.Fatal(err)
		}
		var plain []Token
		for _, tok := range toks {
			if !tok.auto {
				plain = append(plain, tok)
			}
		}
		if n := newEarley(g).parses(plain); n != c.want {
			t.Errorf("%s on %q: %d derivations, want %d", c.grammar, c.input, n, c.want)
		}
	}
}

// TestReservedWords: the lexer's words are the quoted words of the grammar.
func TestReservedWords(t *testing.T) {
	in := map[string]bool{}
	for _, s := range strings.Fields(spaceOut(grammar)) {
		if s[0] != '"' {
			continue
		}
		w := strings.Trim(s, `"`)
		if w != "<-chan" && w != "chan<-" && (isLetters(w) || w == "_") {
			in[w] = true
		}
	}
	for w := range in {
		if !words[w] {
			t.Errorf("%s is a word of the grammar, not of the lexer", w)
		}
	}
	for w := range words {
		if !in[w] {
			t.Errorf("%s is a word of the lexer, not of the grammar", w)
		}
	}
	for _, set := range []map[string]bool{clauseWords, topWords} {
		for w := range set {
			if !words[w] {
				t.Errorf("%s starts a clause and is no word", w)
			}
		}
	}
}

// TestParserIsTheGrammar: on small changes of well-formed rules the parser and
// the grammar accept the same texts.
func TestParserIsTheGrammar(t *testing.T) {
	e := newEarley(grammarFromFile(t))
	src, err := os.ReadFile("testdata/every.rules")
	if err != nil {
		t.Fatal(err)
	}
	seed := int64(20)
	rnd := rand.New(rand.NewSource(seed))
	var decls []string
	for _, d := range strings.Split(string(src), "\n\n") {
		decls = append(decls, strings.TrimSpace(d))
	}
	var vocabulary []string
	toks, err := Tokens("", string(src))
	if err != nil {
		t.Fatal(err)
	}
	for _, tok := range toks {
		if tok.Kind != EOF && !tok.auto {
			vocabulary = append(vocabulary, tok.Text)
		}
	}
	accepted := 0
	const rounds = 6000
	for range rounds {
		toks, err := Tokens("", decls[rnd.Intn(len(decls))])
		if err != nil {
			t.Fatal(err)
		}
		var texts []string
		for _, tok := range toks {
			if tok.Kind != EOF {
				texts = append(texts, tok.Text)
			}
		}
		for range 1 + rnd.Intn(2) {
			i := rnd.Intn(len(texts))
			switch rnd.Intn(4) {
			case 0:
				texts = append(texts[:i], texts[i+1:]...)
			case 1:
				texts[i] = vocabulary[rnd.Intn(len(vocabulary))]
			case 2:
				k := rnd.Intn(len(texts))
				texts[i], texts[k] = texts[k], texts[i]
			case 3:
				texts = append(texts[:i], append([]string{vocabulary[rnd.Intn(len(vocabulary))]}, texts[i:]...)...)
			}
			if len(texts) == 0 {
				break
			}
		}
		text := strings.Join(texts, " ")
		again, lexErr := Tokens("", text)
		_, parseErr := Parse("", text)
		ok := lexErr == nil && e.parses(again) == 1
		if ok != (parseErr == nil) {
			t.Errorf("grammar accepts: %v, parser: %v (seed %d)\n%s", ok, parseErr, seed, text)
		}
		if ok {
			accepted++
		}
	}
	if accepted < rounds/50 || accepted > rounds*9/10 {
		t.Errorf("%d of %d changed texts are well-formed: the test compares too little", accepted, rounds)
	}
}

// FuzzParse: no input makes the parser panic, spans stay inside the source, and
// what parses without error has exactly one derivation and can be laid out. Run
// it with -fuzzminimizetime 1x: the engine spends its time on making the long
// seeds shorter otherwise.
func FuzzParse(f *testing.F) {
	for _, name := range append(ruleFiles(f), "testdata/every.rules") {
		src, err := os.ReadFile(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(string(src))
	}
	bad, err := filepath.Glob("../testdata/bad/*.rules")
	if err != nil {
		f.Fatal(err)
	}
	for _, name := range bad {
		src, err := os.ReadFile(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(string(src))
	}
	e := newEarley(grammarFromFile(f))
	f.Fuzz(func(t *testing.T, src string) {
		file, err := Parse("x.rules", src)
		for _, d := range file.Decls {
			s := d.Pos()
			if s.From < 0 || s.To > len(src) || s.From > s.To {
				t.Fatalf("span %v outside of the source", s)
			}
		}
		if err != nil {
			if err.(Errors).Text() == "" {
				t.Fatal("an error without a text")
			}
			return
		}
		toks, err := Tokens("x.rules", src)
		if err != nil {
			t.Fatal(err)
		}
		checkFormat(t, "x.rules", src)
		if len(toks) < 200 {
			if n := e.parses(toks); n != 1 {
				t.Fatalf("%d derivations", n)
			}
		}
	})
}
