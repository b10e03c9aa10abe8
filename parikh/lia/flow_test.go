package lia

import (
	"context"
	"fmt"
	"math/big"
	"math/rand"
	"testing"
)

// A flow system as the count image of a grammar makes it: one variable per
// production, one equation per nonterminal (what enters leaves; the start has one
// extra), rows that sum events, and region implications.
type flowSystem struct {
	n     int       // nonterminals; 0 is the start
	left  []int     // by production
	right [][]int   // by production
	gain  [][]int64 // by production: effect on each event
	loops [][]int   // regions: sets of nonterminals without the start
}

// randomFlow makes a grammar in the shape of code: mostly chains of steps with a
// few branches, calls into a shared pool, and loops. All nonterminals are
// productive: each has a production to higher-numbered ones or none.
func randomFlow(seed int64, n, events int) *flowSystem {
	r := rand.New(rand.NewSource(seed))
	f := &flowSystem{n: n}
	add := func(a int, bs ...int) {
		f.left = append(f.left, a)
		f.right = append(f.right, bs)
		g := make([]int64, events)
		if r.Intn(8) == 0 {
			g[r.Intn(events)] = 1
		}
		f.gain = append(f.gain, g)
	}
	near := func(a int) int { return min(n-1, a+1+r.Intn(6)) }
	for a := 0; a < n; a++ {
		if a == n-1 {
			add(a)
			continue
		}
		switch r.Intn(10) {
		case 0, 1, 2, 3: // straight on
			add(a, near(a))
		case 4, 5, 6: // branch
			add(a, near(a))
			add(a, near(a))
		case 7: // call and go on
			add(a, near(a), a+1+r.Intn(n-1-a))
			add(a, near(a))
		case 8: // loop: a body that returns to its head
			if a > 0 && a+2 < n {
				add(a, a+1)
				add(a, near(a+1))
				add(a+1, a)
				f.loops = append(f.loops, []int{a, a + 1})
				a++
				add(a, near(a))
				continue
			}
			add(a, n-1)
		default: // branch or end
			add(a, near(a))
			add(a)
		}
	}
	return f
}

// solver builds the integer system; y are the production variables and events
// the event sums.
func (f *flowSystem) solver(opt Options, regions int) (s *Solver, y []Var, events []Lin) {
	s = New(opt)
	in := make([][]Lin, f.n)
	sums := make([][]Lin, len(f.gain[0]))
	for p := range f.left {
		x := s.NewVar(fmt.Sprint("y", p))
		y = append(y, x)
		in[f.left[p]] = append(in[f.left[p]], Term(-1, x))
		for _, b := range f.right[p] {
			in[b] = append(in[b], V(x))
		}
		for e, g := range f.gain[p] {
			if g != 0 {
				sums[e] = append(sums[e], Term(g, x))
			}
		}
	}
	for a := range in {
		extra := Const(0)
		if a == 0 {
			extra = Const(1)
		}
		s.Assert("flow", EQ(Sum(append(in[a], extra)...), Const(0)))
	}
	for _, t := range sums {
		events = append(events, Sum(t...))
	}
	for i, region := range f.loops {
		if i >= regions {
			break
		}
		inS := map[int]bool{}
		for _, a := range region {
			inS[a] = true
		}
		var enter []Lin
		var zero []Formula
		for p := range f.left {
			if inS[f.left[p]] {
				zero = append(zero, LE(V(y[p]), Const(0)))
				continue
			}
			for _, b := range f.right[p] {
				if inS[b] {
					enter = append(enter, V(y[p]))
					break
				}
			}
		}
		s.Assert("region", Or(And(zero...), GE(Sum(enter...), Const(1))))
	}
	return s, y, events
}

// questions are claims as rules make them; the first two are about single
// comparisons, the rest need branching or Boolean structure.
func questions(e []Lin) []Formula {
	return []Formula{
		GT(e[0], e[1]),
		NE(e[0], e[1]),
		And(EQ(e[0], e[1].Add(Const(3))), EQ(e[2].Mod(2), Const(1))),
		And(GE(e[0], Const(5)), LE(e[1], Const(2)), EQ(Sum(e[0], e[1], e[2]).Mod(7), Const(3))),
		Or(And(GT(e[0], e[1].Scale(3)), LT(e[2], Const(1))), And(EQ(e[2], Const(17)), EQ(e[0], Const(4)))),
	}
}

// TestFlow compares the variants on small flow systems, where optima of linear
// claims must be found without branching: every vertex of a flow is integral.
func TestFlow(t *testing.T) {
	for seed := int64(1); seed <= 6; seed++ {
		f := randomFlow(seed, 40, 3)
		type outcome struct {
			st   [5]Status
			best string
		}
		var first outcome
		for i, v := range variants {
			if v.opt.NoLattice && v.opt.NoPresolve {
				continue
			}
			bigOnly = v.big
			opt := v.opt
			opt.Sanity = true
			s, _, e := f.solver(opt, 100)
			var got outcome
			for k, q := range questions(e) {
				got.st[k] = mustCheck(t, s, q).Status
				if got.st[k] == Unknown {
					t.Errorf("seed %d, %s: question %d is unknown", seed, v.name, k)
				}
			}
			o, err := s.Maximise(context.Background(), e[0].Sub(e[1]))
			if err != nil {
				t.Fatal(err)
			}
			got.best = fmt.Sprint(o.Status, o.Unbounded)
			if !o.Unbounded {
				got.best += fmt.Sprint(o.Value)
			}
			if i == 0 {
				first = got
			} else if got != first {
				t.Errorf("seed %d, %s: got %+v, by default %+v", seed, v.name, got, first)
			}
			bigOnly = false
		}
		s, _, e := f.solver(Options{}, 0)
		mustCheck(t, s, GT(e[0], e[1]))
		if s.Stats().Nodes != 0 {
			t.Errorf("seed %d: %d branching steps for a linear claim on a flow", seed, s.Stats().Nodes)
		}
	}
}

// balance replaces the events: event 0 at productions with two nonterminals on
// the right, event 1 at those with none. A finite tree has one leaf more than it
// has branchings, so event 1 = event 0 + 1 on every path.
func (f *flowSystem) balance() {
	for p := range f.left {
		f.gain[p] = make([]int64, len(f.gain[p]))
		switch len(f.right[p]) {
		case 0:
			f.gain[p][1] = 1
		case 2:
			f.gain[p][0] = 1
		}
	}
}

// balanced asks claims about balanced systems that all hold, so each question has
// the answer unsat.
func balanced(e []Lin) []Formula {
	d := e[1].Sub(e[0])
	return []Formula{
		NE(d, Const(1)),
		Divides(2, d),
		And(GE(e[0], Const(3)), Or(LE(e[1], Const(3)), EQ(e[0].Add(e[1]).Mod(2), Const(0)))),
		Not(Iff(EQ(e[0].Mod(3), Const(1)), EQ(e[1].Mod(3), Const(2)))),
	}
}

func TestFlowBalanced(t *testing.T) {
	for seed := int64(1); seed <= 5; seed++ {
		for _, v := range variants {
			if v.opt.NoLattice {
				continue // 2 | d and 3 | d need it on unbounded counts
			}
			bigOnly = v.big
			f := randomFlow(seed, 60, 3)
			f.balance()
			opt := v.opt
			opt.Sanity = true
			s, _, e := f.solver(opt, 100)
			want(t, mustCheck(t, s), Sat)
			for i, q := range balanced(e) {
				if r := mustCheck(t, s, q); r.Status != Unsat {
					t.Errorf("seed %d, %s: question %d: %v %s", seed, v.name, i, r.Status, r.Budget)
				}
			}
			bigOnly = false
		}
	}
}

func BenchmarkFlowBalanced6000(b *testing.B) {
	f := randomFlow(1, 4000, 3)
	f.balance()
	var last *Solver
	for b.Loop() {
		s, _, e := f.solver(Options{}, 100)
		for i, q := range balanced(e) {
			if r, err := s.Check(context.Background(), q); err != nil || r.Status != Unsat {
				b.Fatalf("question %d: %v %s %v %+v", i, r.Status, r.Budget, err, s.Stats())
			}
		}
		last = s
	}
	b.ReportMetric(float64(last.Stats().Pivots), "pivots/op")
	b.ReportMetric(float64(last.Stats().Rounds), "rounds/op")
	b.ReportMetric(float64(last.Stats().Nodes), "nodes/op")
}

func benchFlow(b *testing.B, n, regions int) {
	f := randomFlow(1, n, 3)
	var last *Solver
	for b.Loop() {
		s, _, e := f.solver(Options{}, regions)
		for i, q := range questions(e) {
			r, err := s.Check(context.Background(), q)
			if err != nil || r.Status == Unknown {
				b.Fatalf("question %d: %+v %v %+v", i, r.Status, r.Budget, s.Stats())
			}
		}
		last = s
	}
	st := last.Stats()
	b.ReportMetric(float64(len(f.left)), "variables")
	b.ReportMetric(float64(st.Pivots), "pivots/op")
	b.ReportMetric(float64(st.Rounds), "rounds/op")
	b.ReportMetric(float64(st.Nodes), "nodes/op")
	b.ReportMetric(float64(st.Substituted), "substituted")
}

func BenchmarkFlow2000(b *testing.B) { benchFlow(b, 1400, 100) }
func BenchmarkFlow6000(b *testing.B) { benchFlow(b, 4000, 100) }

// BenchmarkFlowLP is one linear claim on 100,000 variables.
func BenchmarkFlowLP(b *testing.B) {
	f := randomFlow(1, 67000, 3)
	var last *Solver
	for b.Loop() {
		s, _, e := f.solver(Options{}, 0)
		r, err := s.Check(context.Background(), GT(e[0], e[1].Add(Const(100))))
		if err != nil || r.Status == Unknown {
			b.Fatal(r, err)
		}
		last = s
	}
	b.ReportMetric(float64(len(f.left)), "variables")
	b.ReportMetric(float64(last.Stats().Pivots), "pivots/op")
	b.ReportMetric(float64(last.Stats().Substituted), "substituted")
}

// BenchmarkKnapsack is a search that needs branching and learning.
func BenchmarkKnapsack(b *testing.B) {
	r := rand.New(rand.NewSource(5))
	w := make([]int64, 12)
	for i := range w {
		w[i] = 1000 + r.Int63n(9000)
	}
	for b.Loop() {
		s := New(Options{})
		var sum []Lin
		for i := range w {
			sum = append(sum, Term(w[i], s.NewBounded("", big.NewInt(0), big.NewInt(3))))
		}
		s.Assert("", EQ(Sum(sum...), Const(54321)))
		if r, err := s.Check(context.Background()); err != nil || r.Status == Unknown {
			b.Fatal(r, err)
		}
	}
}
