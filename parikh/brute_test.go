package parikh

import (
	"fmt"
	"math/big"
	"math/rand/v2"
	"sort"
	"strings"
	"testing"
)

// brute enumerates the image up to a bound on every count: least fixpoint of sets
// of vectors, those with a number above the bound dropped. All effects must be
// natural. It shares nothing with the package but Grammar.
func brute(g *Grammar, bound int64) map[string]bool {
	k := len(g.Counts)
	sets := make([]map[string][]int64, len(g.Names))
	for i := range sets {
		sets[i] = map[string][]int64{}
	}
	for changed := true; changed; {
		changed = false
		for _, p := range g.Prods {
			base := make([]int64, k)
			for _, e := range p.Effect {
				base[e.Count] = e.N
			}
			list := [][]int64{base}
			if !within(base, bound) {
				continue
			}
			for _, r := range p.Rhs {
				next := map[string][]int64{}
				for _, v := range list {
					for _, w := range sets[r] {
						s := make([]int64, k)
						for i := range s {
							s[i] = v[i] + w[i]
						}
						if within(s, bound) {
							next[fmt.Sprint(s)] = s
						}
					}
				}
				list = list[:0]
				for _, v := range next {
					list = append(list, v)
				}
			}
			for _, v := range list {
				if key := fmt.Sprint(v); sets[p.Lhs][key] == nil {
					sets[p.Lhs][key] = v
					changed = true
				}
			}
		}
	}
	out := map[string]bool{}
	for key := range sets[g.Start] {
		out[key] = true
	}
	return out
}

func within(v []int64, bound int64) bool {
	for _, n := range v {
		if n > bound {
			return false
		}
	}
	return true
}

// box calls f for every vector of k numbers up to bound.
func box(k int, bound int64, f func(v []int64)) {
	v := make([]int64, k)
	var rec func(i int)
	rec = func(i int) {
		if i == k {
			f(v)
			return
		}
		for v[i] = 0; v[i] <= bound; v[i]++ {
			rec(i + 1)
		}
	}
	rec(0)
}

func bigs(v ...int64) []*big.Int {
	var out []*big.Int
	for _, n := range v {
		out = append(out, big.NewInt(n))
	}
	return out
}

// randomGrammar makes a small grammar with loops, several entries, branching.
func randomGrammar(r *rand.Rand) *Grammar {
	n := 2 + r.IntN(5)
	k := 1 + r.IntN(3)
	names := []string{"a", "b", "c"}
	b := NewBuilder(names[:k]...)
	for i := range n {
		b.NT(fmt.Sprintf("N%d", i))
	}
	prods := n + r.IntN(2*n)
	for i := range prods {
		lhs := NT(r.IntN(n))
		if i < n {
			lhs = NT(i)
		}
		effect := make([]int64, k)
		for j := range effect {
			if r.IntN(3) == 0 {
				effect[j] = int64(1 + r.IntN(2))
			}
		}
		var rhs []NT
		for range []int{0, 1, 1, 1, 2, 2, 3}[r.IntN(7)] {
			rhs = append(rhs, NT(r.IntN(n)))
		}
		b.Add(lhs, effect, rhs...)
	}
	b.Add(NT(n-1), nil)
	return b.Grammar()
}

func sortedKeys(m map[string]bool) string {
	var keys []string
	for k := range m {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	return strings.Join(keys, " ")
}

// effectOf adds up the effects of productions.
func effectOf(g *Grammar, y []*big.Int) []*big.Int {
	out := make([]*big.Int, len(g.Counts))
	for i := range out {
		out[i] = new(big.Int)
	}
	for p, n := range y {
		for _, e := range g.Prods[p].Effect {
			out[e.Count].Add(out[e.Count], new(big.Int).Mul(n, big.NewInt(e.N)))
		}
	}
	return out
}

// checkYes rebuilds the derivation of an answer and compares its counts.
func checkYes(t *testing.T, g *Grammar, a Answer) *Derivation {
	t.Helper()
	d, err := Derive(g, a.Productions())
	if err != nil {
		t.Fatalf("%v\n%s", err, g)
	}
	y, err := d.Check()
	if err != nil {
		t.Fatalf("%v\n%s", err, g)
	}
	if got := effectOf(g, y); fmt.Sprint(got) != fmt.Sprint(a.Counts) {
		t.Fatalf("the derivation counts %v, the answer says %v\n%s", got, a.Counts, g)
	}
	return d
}
