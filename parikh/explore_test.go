package parikh

import (
	"fmt"
	"math/big"
	"math/rand/v2"
	"testing"

	"pathtally/parikh/lia"
)

// TestRandomShape compares linear sets, minimal vectors, bounds and grids of random
// grammars with enumeration.
func TestRandomShape(t *testing.T) {
	n := 150
	complete, unbounded, bounded := 0, 0, 0
	for seed := range n {
		r := rand.New(rand.NewPCG(uint64(seed), 2))
		g := randomGrammar(r)
		k := len(g.Counts)
		bound := int64(10)
		if k == 3 {
			bound = 5
		}
		want := brute(g, bound)
		im := New(g, Options{})
		u := New(g, Options{Solver: lia.Options{MaxNodes: 300, MaxPivots: 20000}}).LinearSets(bg, 40)
		if u.Complete {
			complete++
		}
		box(k, bound, func(v []int64) {
			in := false
			for _, s := range u.Sets {
				in = in || s.Contains(bigs(v...))
			}
			if in && !want[fmt.Sprint(v)] || u.Complete && !in && want[fmt.Sprint(v)] {
				t.Fatalf("seed %d: %v in the sets: %v\n%v\n%s", seed, v, in, u.Sets, g)
			}
		})
		m, err := im.Minimal(bg, lia.True(), 50)
		if err != nil || !m.Complete {
			t.Fatalf("seed %d: %v %s", seed, err, m.Budget)
		}
		got := map[string]bool{}
		for i, v := range m.List {
			checkYes(t, g, m.Proofs[i])
			got[fmt.Sprint(v)] = true
		}
		// Of those in the box, all minimal ones and no other.
		box(k, bound, func(v []int64) {
			minimal := want[fmt.Sprint(v)]
			box(k, bound, func(w []int64) {
				below, equal := true, true
				for i := range v {
					below = below && w[i] <= v[i]
					equal = equal && w[i] == v[i]
				}
				if below && !equal && want[fmt.Sprint(w)] {
					minimal = false
				}
			})
			if minimal != got[fmt.Sprint(v)] {
				t.Fatalf("seed %d: %v minimal: %v, listed: %v\n%s", seed, v, minimal, got[fmt.Sprint(v)], g)
			}
		})
		// Bounds agree with the sets.
		for range 3 {
			f := make(Form, k)
			for i := range f {
				f[i] = int64(r.IntN(7) - 3)
			}
			b := im.Greatest(bg, f)
			if b.Status == Unknown {
				t.Fatalf("seed %d: greatest %v: %s", seed, f, b.Budget)
			}
			if !u.Complete || b.Status == No {
				continue
			}
			grows := false
			var best *big.Int
			fv := bigs(f...)
			for _, s := range u.Sets {
				if x := dot(fv, s.Base); best == nil || x.Cmp(best) > 0 {
					best = x
				}
				for _, p := range s.Periods {
					grows = grows || dot(fv, p).Sign() > 0
				}
			}
			if grows != b.Unbounded || !grows && b.Value.Cmp(best) != 0 {
				t.Fatalf("seed %d: greatest %v: %+v, from the sets: %v %v\n%s", seed, f, b, grows, best, g)
			}
			if grows {
				unbounded++
			} else {
				bounded++
				checkYes(t, g, b.Answer)
			}
		}
		// The cone of rays is that of the periods.
		if u.Complete {
			all := make([]int, k)
			for i := range all {
				all[i] = i
			}
			rays := im.Rays(bg, all)
			var periods [][]*big.Int
			for _, s := range u.Sets {
				periods = append(periods, s.Periods...)
			}
			facets, lines := dualCone(k, periods)
			for _, l := range lines {
				facets = append(facets, l, negated(l))
			}
			ext, _ := dualCone(k, facets)
			sortVectors(ext)
			if rays.Status != No && fmt.Sprint(rays.Rays) != fmt.Sprint(ext) {
				t.Fatalf("seed %d: rays %v, of the periods %v\n%s", seed, rays.Rays, ext, g)
			}
		}
		if k >= 2 {
			grid := im.Grid(bg, 0, 1, 4, lia.True())
			for y := range grid.Cells {
				for x, st := range grid.Cells[y] {
					has := im.Member(bg, append(bigs(int64(x), int64(y)), make([]*big.Int, k-2)...)).Status
					if st != has || k == 2 && (st == Yes) != want[fmt.Sprint([]int64{int64(x), int64(y)})] {
						t.Fatalf("seed %d: grid at %d,%d: %v, member: %v\n%s", seed, x, y, st, has, g)
					}
				}
			}
		}
	}
	t.Logf("%d of %d unions complete, %d forms unbounded, %d bounded", complete, n, unbounded, bounded)
	if complete < n*8/10 || unbounded < n/3 || bounded < n/3 {
		t.Errorf("lopsided: %d complete, %d unbounded, %d bounded", complete, unbounded, bounded)
	}
}
