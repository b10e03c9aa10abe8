package parikh

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"

	"pathtally/parikh/lia"
	"pathtally/pds"
)

// dense makes loops with many entries: each of n nonterminals leads to several
// others, counting one or the other, and the start only to a few. Most flows of
// such a grammar are disconnected.
func dense(seed uint64, n int) *Grammar {
	r := rand.New(rand.NewPCG(seed, 8))
	b := NewBuilder("a", "b", "c")
	s := b.NT("S")
	var nts []NT
	for i := range n {
		nts = append(nts, b.NT(fmt.Sprintf("N%d", i)))
	}
	b.Add(s, nil, nts[0])
	b.Add(s, nil, nts[n/2])
	for i, a := range nts {
		for range 3 {
			effect := make([]int64, 3)
			effect[r.IntN(3)] = int64(1 + r.IntN(3))
			b.Add(a, effect, nts[r.IntN(n)])
		}
		if i%4 == 0 {
			b.Add(a, nil)
		}
		if i%5 == 0 {
			b.Add(a, []int64{0, 0, 1}, nts[r.IntN(n)], nts[r.IntN(n)])
		}
	}
	return b.Grammar()
}

// TestDense compares the ways to connectivity on dense loops with several
// entries, and with enumeration.
func TestDense(t *testing.T) {
	cuts, ranked := 0, 0
	for seed := range uint64(4) {
		g := dense(seed, 14)
		want := brute(g, 4)
		for _, opt := range []Options{{}, {Plain: true, MaxCuts: 1 << 30}, {Plain: true, MaxCuts: -1}, {Eager: true, MaxCuts: 3}} {
			im := New(g, opt)
			box(3, 4, func(v []int64) {
				if (v[0]+2*v[1]+3*v[2])%11 != int64(seed) {
					return
				}
				a := im.Member(bg, bigs(v...))
				if a.Status == Unknown || (a.Status == Yes) != want[fmt.Sprint(v)] {
					t.Fatalf("seed %d, %+v: %v: %v %s", seed, opt, v, a.Status, a.Budget)
				}
				if a.Status == Yes {
					checkYes(t, g, a)
				}
			})
			c, k := im.Cuts()
			cuts, ranked = cuts+c, ranked+k
		}
	}
	t.Logf("%d lazy clauses, %d ranked regions", cuts, ranked)
	if cuts < 40 || ranked < 4 {
		t.Errorf("%d lazy clauses, %d ranked regions: not dense", cuts, ranked)
	}
}

// TestParseGrammar: errors name the line; what is printed reads back.
func TestParseGrammar(t *testing.T) {
	for text, want := range map[string]string{
		"":                             "line 1: no productions",
		"S a":                          "line 1: expected",
		"S -> a | ":                    "line 1: an empty side",
		"counts a\nS -> b":             `line 2: count "b" is not declared`,
		"counts a a\nS -> a":           `line 1: count "a" comes twice`,
		"S -> 9223372036854775808*a":   "expected a number within 64 bits",
		"S -> 9223372036854775807*a a": `count "a" passes 64 bits`,
		"S -> 2*S":                     `"S" is no count`,
		"S -> a\ncounts a":             "stand in one line above",
		"counts S\nS -> eps":           `"S" is a count`,
	} {
		if _, err := ParseGrammar(text); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v, want %s", text, err, want)
		}
	}
	g := parse(t, "S -> a S -2*b | T  # comment\n\nT -> eps | S S")
	if again := parse(t, g.String()); again.String() != g.String() {
		t.Errorf("got\n%swant\n%s", again, g)
	}
}

func FuzzParseGrammar(f *testing.F) {
	f.Add("S -> a S b | eps")
	f.Add("counts a b\nS -> 2*a T T | -1*b\nT -> S | eps")
	f.Fuzz(func(t *testing.T, text string) {
		g, err := ParseGrammar(text)
		if err != nil || len(g.Prods) > 60 {
			return
		}
		im := New(g, Options{Solver: lia.Options{MaxNodes: 50, MaxPivots: 2000, MaxClauses: 200}})
		if len(g.Counts) == 0 {
			return
		}
		if a := im.Ask(bg, lia.GE(im.Count(0), lia.Const(3))); a.Status == Yes {
			checkYes(t, g, a)
		}
	})
}

// FuzzSystem reads systems, with data too, and asks for a run.
func FuzzSystem(f *testing.F) {
	for _, table := range []*pds.Table{predicateSystem(3), randomSystem(rand.New(rand.NewPCG(1, 3)))} {
		var b bytes.Buffer
		if err := table.WriteJSON(&b); err != nil {
			f.Fatal(err)
		}
		f.Add(b.Bytes())
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		table, err := pds.Read(bytes.NewReader(data))
		if err != nil || len(table.Starts()) == 0 || len(data) > 5000 {
			return
		}
		s, err := NewSystem(table, table.Starts()[0], SystemOptions{Budget: 2000, Options: Options{Solver: lia.Options{MaxNodes: 50, MaxPivots: 2000, MaxClauses: 200}}})
		if err != nil {
			return
		}
		if a := s.Ask(bg, lia.True()); a.Status == Yes {
			if _, err := s.Path(a); err != nil && err != ErrTooLong {
				t.Fatal(err)
			}
		}
	})
}
