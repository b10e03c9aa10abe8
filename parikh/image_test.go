package parikh

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"
)

var bg = context.Background()

func parse(t testing.TB, text string) *Grammar {
	t.Helper()
	g, err := ParseGrammar(text)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

// TestRandomGrammars asks for every vector of a box, with every variant of the
// system, and compares with enumeration; each yes gives a derivation.
func TestRandomGrammars(t *testing.T) {
	n := 500
	if testing.Short() {
		n = 100
	}
	variants := []Options{{}, {Plain: true}, {Eager: true}, {Plain: true, MaxCuts: -1}}
	yes, no, cuts, ranked := 0, 0, 0, 0
	for seed := range n {
		r := rand.New(rand.NewPCG(uint64(seed), 1))
		g := randomGrammar(r)
		bound := int64(4)
		if len(g.Counts) == 1 {
			bound = 8
		}
		if len(g.Counts) == 3 {
			bound = 2
		}
		want := brute(g, bound)
		im := New(g, variants[seed%len(variants)])
		box(len(g.Counts), bound, func(v []int64) {
			a := im.Member(bg, bigs(v...))
			key := fmt.Sprint(v)
			switch {
			case a.Status == Unknown:
				t.Fatalf("seed %d: %s: unknown: %s", seed, key, a.Budget)
			case (a.Status == Yes) != want[key]:
				t.Fatalf("seed %d: %s: %v\n%s", seed, key, a.Status, g)
			case a.Status == Yes:
				yes++
				checkYes(t, g, a)
			default:
				no++
			}
		})
		c, k := im.Cuts()
		cuts += c
		ranked += k
	}
	t.Logf("%d yes, %d no, %d lazy clauses, %d ranked regions", yes, no, cuts, ranked)
	if yes < n || no < n || cuts < n/50 || ranked < 1 {
		t.Errorf("too lopsided to mean much: %d yes, %d no, %d cuts, %d ranked", yes, no, cuts, ranked)
	}
}
