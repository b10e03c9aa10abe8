// Grammars with counts: the input of this package, its text form, trimming.

package parikh

import (
	"fmt"
	"slices"
	"strconv"
	"strings"

	"pathtally/summary"
)

// NT names a nonterminal of a [Grammar]; dense from 0.
type NT int32

// ProdID names a production: index into Grammar.Prods.
type ProdID int32

// Amount is N units of one count.
type Amount struct {
	Count int32 // index into Grammar.Counts
	N     int64 // not 0
}

// Production is Lhs → Effect Rhs....
type Production struct {
	Lhs    NT
	Rhs    []NT
	Effect []Amount // ascending in Count, no zeros; nil is the zero vector
}

// Grammar is a context-free grammar whose productions carry count vectors. A
// derivation from Start counts the sum over its productions; the order of symbols
// matters to derivations, not to counts. It need not be trimmed. Sample, in the
// form that [ParseGrammar] reads:
//
//	S -> a S b | eps
type Grammar struct {
	Counts []string // names of counts, unique
	Names  []string // of nonterminals; len = number of nonterminals
	Start  NT
	Prods  []Production
}

// NumNT is the number of nonterminals.
func (g *Grammar) NumNT() int { return len(g.Names) }

// Builder makes a [Grammar] by names; names are declared by their first use. The
// first nonterminal is the start.
type Builder struct {
	g   Grammar
	nts map[string]NT
}

// NewBuilder starts a grammar with the named counts.
func NewBuilder(counts ...string) *Builder {
	return &Builder{g: Grammar{Counts: slices.Clone(counts)}, nts: map[string]NT{}}
}

// NT gives the id of a nonterminal, declaring it.
func (b *Builder) NT(name string) NT {
	a, ok := b.nts[name]
	if !ok {
		a = NT(len(b.g.Names))
		b.nts[name] = a
		b.g.Names = append(b.g.Names, name)
	}
	return a
}

// Add adds a production; effect has one number per count, or is nil.
func (b *Builder) Add(lhs NT, effect []int64, rhs ...NT) ProdID {
	p := Production{Lhs: lhs, Rhs: slices.Clone(rhs), Effect: sparse(effect)}
	b.g.Prods = append(b.g.Prods, p)
	return ProdID(len(b.g.Prods) - 1)
}

// Grammar gives the finished grammar. The builder must not be used after.
func (b *Builder) Grammar() *Grammar { return &b.g }

func sparse(v []int64) []Amount {
	var out []Amount
	for i, n := range v {
		if n != 0 {
			out = append(out, Amount{int32(i), n})
		}
	}
	return out
}

// A TextError says what is wrong with the text of a grammar.
type TextError struct {
	Line int // from 1
	Text string
}

func (e *TextError) Error() string { return fmt.Sprintf("line %d: %s", e.Line, e.Text) }

// ParseGrammar reads the text form of a grammar: one line per left side, with
// alternatives behind "|". A name that stands left of an arrow somewhere is a
// nonterminal, any other one a count; "3*a" and "-2*a" count more than once, "eps"
// is nothing. "counts a b" as the first line fixes names and order of the counts,
// which otherwise is that of first appearance. "#" starts a comment. The first
// left side is the start. Errors are *TextError.
func ParseGrammar(text string) (*Grammar, error) {
	type line struct {
		n        int
		lhs, rhs string
	}
	var lines []line
	b := NewBuilder()
	fixed := false
	counts := map[string]int{}
	count := func(name string) int {
		i, ok := counts[name]
		if !ok {
			i = len(b.g.Counts)
			counts[name] = i
			b.g.Counts = append(b.g.Counts, name)
		}
		return i
	}
	for i, l := range strings.Split(text, "\n") {
		l, _, _ = strings.Cut(l, "#")
		f := strings.Fields(l)
		if len(f) == 0 {
			continue
		}
		if f[0] == "counts" && !strings.Contains(l, "->") {
			if fixed || len(lines) > 0 {
				return nil, &TextError{i + 1, "the counts stand in one line above all others"}
			}
			fixed = true
			for _, name := range f[1:] {
				if _, ok := counts[name]; ok {
					return nil, &TextError{i + 1, fmt.Sprintf("count %q comes twice", name)}
				}
				count(name)
			}
			continue
		}
		lhs, rhs, ok := strings.Cut(l, "->")
		lhs = strings.TrimSpace(lhs)
		if !ok || lhs == "" || len(strings.Fields(lhs)) != 1 || lhs == "eps" || strings.ContainsAny(lhs, "|*") {
			return nil, &TextError{i + 1, `expected "name -> symbols | symbols"`}
		}
		if _, ok := counts[lhs]; ok {
			return nil, &TextError{i + 1, fmt.Sprintf("%q is a count", lhs)}
		}
		b.NT(lhs)
		lines = append(lines, line{i + 1, lhs, rhs})
	}
	if len(lines) == 0 {
		return nil, &TextError{1, "no productions"}
	}
	for _, l := range lines {
		for _, alt := range strings.Split(l.rhs, "|") {
			f := strings.Fields(alt)
			if len(f) == 0 {
				return nil, &TextError{l.n, `an empty side is written "eps"`}
			}
			var rhs []NT
			effect := map[int]int64{}
			for _, s := range f {
				if s == "eps" {
					continue
				}
				n := int64(1)
				if w, name, ok := strings.Cut(s, "*"); ok {
					v, err := strconv.ParseInt(w, 10, 64)
					if err != nil || name == "" {
						return nil, &TextError{l.n, fmt.Sprintf("%q: expected a number within 64 bits, *, and a count", s)}
					}
					n, s = v, name
					if _, ok := b.nts[s]; ok {
						return nil, &TextError{l.n, fmt.Sprintf("%q is no count", s)}
					}
				} else if a, ok := b.nts[s]; ok {
					rhs = append(rhs, a)
					continue
				}
				if _, ok := counts[s]; !ok && fixed {
					return nil, &TextError{l.n, fmt.Sprintf("count %q is not declared", s)}
				}
				i := count(s)
				sum, ok := safeAdd(effect[i], n)
				if !ok {
					return nil, &TextError{l.n, fmt.Sprintf("count %q passes 64 bits", s)}
				}
				effect[i] = sum
			}
			p := Production{Lhs: b.nts[l.lhs], Rhs: rhs}
			for i := range b.g.Counts {
				if n := effect[i]; n != 0 {
					p.Effect = append(p.Effect, Amount{int32(i), n})
				}
			}
			b.g.Prods = append(b.g.Prods, p)
		}
	}
	return b.Grammar(), nil
}

func safeAdd(a, b int64) (int64, bool) {
	s := a + b
	return s, (s > a) == (b > 0)
}

// String prints the grammar in the form that [ParseGrammar] reads, if its names
// are words.
func (g *Grammar) String() string {
	var b strings.Builder
	b.WriteString("counts")
	for _, c := range g.Counts {
		b.WriteString(" " + c)
	}
	b.WriteByte('\n')
	order := []NT{g.Start}
	for a := range g.Names {
		if NT(a) != g.Start {
			order = append(order, NT(a))
		}
	}
	by := g.byLhs()
	for _, a := range order {
		for _, p := range by[a] {
			fmt.Fprintf(&b, "%s ->%s\n", g.Names[a], g.sideText(p))
		}
	}
	return b.String()
}

func (g *Grammar) sideText(p ProdID) string {
	var b strings.Builder
	pr := &g.Prods[p]
	for _, e := range pr.Effect {
		if e.N == 1 {
			b.WriteString(" " + g.Counts[e.Count])
		} else {
			fmt.Fprintf(&b, " %d*%s", e.N, g.Counts[e.Count])
		}
	}
	for _, r := range pr.Rhs {
		b.WriteString(" " + g.Names[r])
	}
	if b.Len() == 0 {
		return " eps"
	}
	return b.String()
}

// byLhs lists the productions of each nonterminal, in order.
func (g *Grammar) byLhs() [][]ProdID {
	by := make([][]ProdID, len(g.Names))
	for p := range g.Prods {
		a := g.Prods[p].Lhs
		by[a] = append(by[a], ProdID(p))
	}
	return by
}

// check panics if an id is out of range: the caller's bug.
func (g *Grammar) check() {
	n := NT(len(g.Names))
	if g.Start < 0 || g.Start >= n {
		panic(fmt.Sprintf("parikh: grammar: start %d of %d nonterminals", g.Start, n))
	}
	for i, p := range g.Prods {
		bad := p.Lhs < 0 || p.Lhs >= n
		for _, r := range p.Rhs {
			bad = bad || r < 0 || r >= n
		}
		last := int32(-1)
		for _, e := range p.Effect {
			bad = bad || e.Count <= last || int(e.Count) >= len(g.Counts) || e.N == 0
			last = e.Count
		}
		if bad {
			panic(fmt.Sprintf("parikh: grammar: production %d is malformed: %+v", i, p))
		}
	}
}

// useful says which productions occur in derivations from the start: all on their
// right sides have derivations, and the left side is reached through such ones.
// Linear time.
func (g *Grammar) useful() []bool {
	miss := make([]int, len(g.Prods))
	users := make([][]ProdID, len(g.Names))
	productive := make([]bool, len(g.Names))
	var work []NT
	mark := func(a NT) {
		if !productive[a] {
			productive[a] = true
			work = append(work, a)
		}
	}
	for p := range g.Prods {
		miss[p] = len(g.Prods[p].Rhs)
		for _, r := range g.Prods[p].Rhs {
			users[r] = append(users[r], ProdID(p))
		}
		if miss[p] == 0 {
			mark(g.Prods[p].Lhs)
		}
	}
	for len(work) > 0 {
		a := work[len(work)-1]
		work = work[:len(work)-1]
		for _, p := range users[a] {
			if miss[p]--; miss[p] == 0 {
				mark(g.Prods[p].Lhs)
			}
		}
	}
	use := make([]bool, len(g.Prods))
	by := g.byLhs()
	reached := make([]bool, len(g.Names))
	if productive[g.Start] {
		reached[g.Start] = true
		work = append(work, g.Start)
	}
	for len(work) > 0 {
		a := work[len(work)-1]
		work = work[:len(work)-1]
		for _, p := range by[a] {
			if miss[p] != 0 {
				continue
			}
			use[p] = true
			for _, r := range g.Prods[p].Rhs {
				if !reached[r] {
					reached[r] = true
					work = append(work, r)
				}
			}
		}
	}
	return use
}

// FromSummary turns a trimmed grammar of a system's runs into a Grammar with the
// same nonterminals and productions in the same order. counts names the counts,
// vector gives the counts of an effect, and more, if not nil, adds further amounts
// for a production (beside those of its effect; of other counts).
func FromSummary(sg *summary.Grammar, counts []string, vector func(summary.Production) []int64, more func(summary.Production) []Amount) *Grammar {
	g := &Grammar{Counts: counts, Names: uniqueNames(sg.Names), Start: NT(sg.Start), Prods: make([]Production, len(sg.Prods))}
	for i, p := range sg.Prods {
		q := Production{Lhs: NT(p.Lhs)}
		for _, r := range p.Rhs {
			q.Rhs = append(q.Rhs, NT(r))
		}
		q.Effect = sparse(vector(p))
		if more != nil {
			q.Effect = append(q.Effect, more(p)...)
			slices.SortFunc(q.Effect, func(a, b Amount) int { return int(a.Count - b.Count) })
		}
		g.Prods[i] = q
	}
	return g
}

func uniqueNames(names []string) []string {
	out := make([]string, len(names))
	for i, s := range names {
		out[i] = strings.ReplaceAll(s, " ", ",")
	}
	return out
}
