package lia

import (
	"context"
	"errors"
	"fmt"
	"math/big"
	"math/rand"
	"os"
	"os/exec"
	"strings"
	"testing"
	"time"
)

func bigPow(b, e int64) *big.Int { return new(big.Int).Exp(big.NewInt(b), big.NewInt(e), nil) }

// eachVariant runs f under the plain version of each optimisation.
func eachVariant(t *testing.T, f func(t *testing.T, opt Options)) {
	for _, v := range variants {
		t.Run(v.name, func(t *testing.T) {
			bigOnly = v.big
			defer func() { bigOnly = false }()
			opt := v.opt
			opt.Sanity = true
			f(t, opt)
		})
	}
}

func want(t *testing.T, got Result, st Status) {
	t.Helper()
	if got.Status != st {
		t.Fatalf("got %v (%s), want %v", got.Status, got.Budget, st)
	}
}

// TestMinimiseRandom compares optima with brute force.
func TestMinimiseRandom(t *testing.T) {
	n := 150
	if long {
		n = 3000
	}
	for seed := int64(1); seed <= int64(n); seed++ {
		p := randomProblem(seed + 1e6)
		obj := randomLin(rand.New(rand.NewSource(seed)), p.nv, 6, true)
		var best *big.Int
		p.brute(func(m Model) bool {
			if v := m.Value(obj); best == nil || v.Cmp(best) < 0 {
				best = v
			}
			return true
		})
		for _, v := range variants {
			bigOnly = v.big
			s := p.solver(v.opt)
			for _, f := range p.fs {
				s.Assert("", f)
			}
			o, err := s.Minimise(context.Background(), obj)
			bigOnly = false
			if err != nil {
				t.Fatal(err)
			}
			switch {
			case best == nil && o.Status != Unsat:
				t.Fatalf("seed %d, %s: got %+v, want unsat", seed, v.name, o)
			case best != nil && (o.Status != Sat || o.Unbounded || o.Value.Cmp(best) != 0):
				t.Fatalf("seed %d, %s: got %+v, want %v", seed, v.name, o, best)
			}
		}
	}
}

// TestIncremental asks one solver many questions with changing assumptions and
// growing assertions and compares each answer with brute force.
func TestIncremental(t *testing.T) {
	n := 60
	if long {
		n = 1500
	}
	for seed := int64(1); seed <= int64(n); seed++ {
		p := randomProblem(seed + 2e6)
		r := rand.New(rand.NewSource(seed))
		s := p.solver(Options{})
		base := p.fs
		p.fs = nil
		for _, f := range base {
			s.Assert("", f)
			p.fs = append(p.fs, f)
			for k := 0; k < 3; k++ {
				a := []Formula{randomFormula(r, p.nv, p.nb, 1), randomFormula(r, p.nv, p.nb, 1)}
				keep := p.fs
				p.fs = append(append([]Formula(nil), keep...), a...)
				sat := p.satisfiable()
				got := mustCheck(t, s, a...)
				if (got.Status == Sat) != sat || got.Status == Unknown {
					t.Fatalf("seed %d: got %v, brute force says satisfiable=%v\n%v", seed, got, sat, p.fs)
				}
				if got.Status == Unsat {
					// The failed assumptions alone must suffice.
					p.fs = append([]Formula(nil), keep...)
					for _, i := range got.Failed {
						p.fs = append(p.fs, a[i])
					}
					if p.satisfiable() {
						t.Fatalf("seed %d: failed assumptions %v do not suffice", seed, got.Failed)
					}
				}
				p.fs = keep
			}
		}
	}
}

// TestLazy lets the callback enforce a formula that the solver does not know,
// by excluding one model at a time or by stating it.
func TestLazy(t *testing.T) {
	for seed := int64(1); seed <= 60; seed++ {
		p := randomProblem(seed + 3e6)
		s := p.solver(Options{})
		n := len(p.fs)
		hidden := p.fs[n-1]
		for _, f := range p.fs[:n-1] {
			s.Assert("", f)
		}
		calls := 0
		s.OnModel(func(m Model) ([]Formula, error) {
			calls++
			if m.Holds(hidden) {
				return nil, nil
			}
			if calls > 5 {
				return []Formula{hidden}, nil
			}
			var differs []Formula
			for x := 1; x <= p.nv; x++ {
				differs = append(differs, NE(V(Var(x)), ConstBig(m.Int(Var(x)))))
			}
			for b := 1; b <= p.nb; b++ {
				if f := IsBool(Bool(b)); m.Bool(Bool(b)) {
					differs = append(differs, Not(f))
				} else {
					differs = append(differs, f)
				}
			}
			return []Formula{Or(differs...)}, nil
		})
		got := mustCheck(t, s)
		if (got.Status == Sat) != p.satisfiable() {
			t.Fatalf("seed %d: got %v", seed, got)
		}
	}
}

func TestLazyErrors(t *testing.T) {
	s := New(Options{})
	x := s.NewVar("x")
	s.Assert("", GE(V(x), Const(3)))
	s.OnModel(func(Model) ([]Formula, error) { return []Formula{GE(V(x), Const(0))}, nil })
	if _, err := s.Check(context.Background()); !errors.Is(err, ErrStuck) {
		t.Errorf("a lemma that excludes nothing: got %v, want ErrStuck", err)
	}
	boom := errors.New("boom")
	s.OnModel(func(Model) ([]Formula, error) { return nil, boom })
	if _, err := s.Check(context.Background()); err != boom {
		t.Errorf("got %v, want the callback's error", err)
	}
	s.OnModel(nil)
	want(t, mustCheck(t, s), Sat)
}

// TestDivergence: unbounded integer search does not end on these without a test
// of divisibility; here they must need no branching at all.
func TestDivergence(t *testing.T) {
	for _, c := range []struct {
		name string
		make func(s *Solver, x, y, z, w Lin)
	}{
		{"one row", func(s *Solver, x, y, z, w Lin) {
			s.Assert("", EQ(Sum(x.Scale(6), y.Scale(10), z.Scale(-14)), Const(1)))
		}},
		{"inequality", func(s *Solver, x, y, z, w Lin) {
			d := x.Scale(3).Sub(y.Scale(3))
			s.Assert("", And(LE(Const(1), d), LE(d, Const(2))))
		}},
		{"two rows", func(s *Solver, x, y, z, w Lin) {
			// The sum of the rows is 2x + 4w = odd; neither row has a common divisor.
			s.Assert("", EQ(Sum(x, y.Scale(3), z.Scale(5), w), Const(4)))
			s.Assert("", EQ(Sum(x, y.Scale(-3), z.Scale(-5), w.Scale(3)), Const(1)))
		}},
		{"under an assumption of Booleans", func(s *Solver, x, y, z, w Lin) {
			b := IsBool(s.NewBool("b"))
			s.Assert("", Or(b, EQ(Sum(x, y.Scale(3), z.Scale(5), w), Const(4))))
			s.Assert("", EQ(Sum(x, y.Scale(-3), z.Scale(-5), w.Scale(3)), Const(1)))
			s.Assert("", Not(b))
		}},
	} {
		t.Run(c.name, func(t *testing.T) {
			s := New(Options{Sanity: true})
			var vs [4]Lin
			for i := range vs {
				vs[i] = V(s.NewFree(fmt.Sprintf("x%d", i)))
			}
			c.make(s, vs[0], vs[1], vs[2], vs[3])
			want(t, mustCheck(t, s), Unsat)
			if n := s.Stats().Nodes; n != 0 {
				t.Errorf("%d branching steps, want none", n)
			}
		})
	}
}

// TestFrobenius: the greatest number that is no sum of multiples of 6, 9, 20 is
// 43, of 3 and 5 it is 7 = 3*5-3-5 (Sylvester, 1884).
func TestFrobenius(t *testing.T) {
	eachVariant(t, func(t *testing.T, opt Options) {
		for _, c := range []struct {
			coins []int64
			last  int64
		}{{[]int64{3, 5}, 7}, {[]int64{6, 9, 20}, 43}} {
			s := New(opt)
			var parts []Lin
			for i, a := range c.coins {
				parts = append(parts, Term(a, s.NewVar(fmt.Sprint("n", i))))
			}
			total := s.NewVar("total")
			s.Assert("sum", EQ(V(total), Sum(parts...)))
			reach := map[int64]bool{0: true}
			for n := int64(0); n <= c.last+5; n++ {
				for _, a := range c.coins {
					reach[n] = reach[n] || reach[n-a]
				}
				st := Unsat
				if reach[n] {
					st = Sat
				}
				want(t, mustCheck(t, s, EQ(V(total), Const(n))), st)
			}
			if reach[c.last] || !reach[c.last+1] {
				t.Fatalf("the table is wrong: %v", c)
			}
		}
	})
}

// TestBig uses coefficients past 64 bits: for coprime a and b the greatest number
// that a·x + b·y misses is a·b - a - b (Sylvester, 1884). Presolve turns the
// equation into an interval question; plain branching would need about b steps.
func TestBig(t *testing.T) {
	a, b := bigPow(2, 80), bigPow(3, 50)
	last := new(big.Int).Mul(a, b)
	last.Sub(last, a).Sub(last, b)
	for _, v := range variants {
		if v.opt.NoPresolve {
			continue
		}
		bigOnly = v.big
		for d, st := range []Status{Unsat, Sat} {
			opt := v.opt
			opt.Sanity = true
			s := New(opt)
			sum := Sum(TermBig(a, s.NewVar("x")), TermBig(b, s.NewVar("y")))
			s.Assert("", EQ(sum, ConstBig(new(big.Int).Add(last, big.NewInt(int64(d))))))
			want(t, mustCheck(t, s), st)
		}
		bigOnly = false
	}
}

// TestDoubling counts past 64 bits by addition alone.
func TestDoubling(t *testing.T) {
	eachVariant(t, func(t *testing.T, opt Options) {
		s := New(opt)
		x := V(s.NewVar("x0"))
		s.Assert("", EQ(x, Const(1)))
		for i := 1; i <= 100; i++ {
			y := V(s.NewVar(fmt.Sprint("x", i)))
			s.Assert("", EQ(y, x.Add(x)))
			x = y
		}
		r := mustCheck(t, s)
		want(t, r, Sat)
		if v := r.Model.Value(x); v.Cmp(bigPow(2, 100)) != 0 {
			t.Errorf("got %v, want 2^100", v)
		}
		want(t, mustCheck(t, s, LT(x, ConstBig(bigPow(2, 100)))), Unsat)
	})
}

// TestBoxGrows needs models far outside the first box, in spite of branching.
func TestBoxGrows(t *testing.T) {
	eachVariant(t, func(t *testing.T, opt Options) {
		s := New(opt)
		x, y, z := V(s.NewFree("x")), V(s.NewFree("y")), V(s.NewFree("z"))
		far := ConstBig(bigPow(10, 15))
		s.Assert("", Or(LE(x, far.Scale(-1)), GE(x, far)))
		s.Assert("", LE(Const(1), Sum(x.Scale(3), y.Scale(-7), z.Scale(2))))
		s.Assert("", LE(Sum(x.Scale(3), y.Scale(-7), z.Scale(2)), Const(1)))
		s.Assert("", EQ(x.Mod(7), Const(3)))
		want(t, mustCheck(t, s), Sat)
	})
}

// TestPigeonholeCounts: p pigeons in h holes, as 0/1 integers.
func TestPigeonholeCounts(t *testing.T) {
	eachVariant(t, func(t *testing.T, opt Options) {
		for _, c := range []struct {
			p, h int
			st   Status
		}{{5, 5, Sat}, {6, 5, Unsat}} {
			s := New(opt)
			in := make([][]Lin, c.p)
			for i := range in {
				for j := 0; j < c.h; j++ {
					x := s.NewBounded("", big.NewInt(0), big.NewInt(1))
					in[i] = append(in[i], V(x))
				}
				s.Assert("placed", GE(Sum(in[i]...), Const(1)))
			}
			for j := 0; j < c.h; j++ {
				var col []Lin
				for i := range in {
					col = append(col, in[i][j])
				}
				s.Assert("hole", LE(Sum(col...), Const(1)))
			}
			want(t, mustCheck(t, s), c.st)
		}
	})
}

// TestPigeonholeDifferent: distinct integers in a range that is too small.
func TestPigeonholeDifferent(t *testing.T) {
	for _, n := range []int{3, 4, 5} {
		s := New(Options{Sanity: true})
		var xs []Lin
		for i := 0; i < n; i++ {
			xs = append(xs, V(s.NewBounded("", big.NewInt(0), big.NewInt(int64(n-2)))))
			for j := 0; j < i; j++ {
				s.Assert("", NE(xs[i], xs[j]))
			}
		}
		want(t, mustCheck(t, s), Unsat)
	}
}

// TestParity: a ring of sums that are all even forces an even total; an odd one
// is refuted by the lattice, not by search.
func TestParity(t *testing.T) {
	eachVariant(t, func(t *testing.T, opt Options) {
		n := 12
		if opt.NoLattice && opt.NoPresolve {
			n = 4
		}
		s := New(opt)
		x := make([]Lin, n)
		for i := range x {
			x[i] = V(s.NewBounded("", big.NewInt(0), big.NewInt(3)))
		}
		for i := range x {
			half := V(s.NewVar(""))
			s.Assert("", EQ(x[i].Add(x[(i+1)%n]), half.Scale(2)))
		}
		odd := V(s.NewVar(""))
		want(t, mustCheck(t, s, EQ(Sum(x...), odd.Scale(2))), Sat)
		want(t, mustCheck(t, s, EQ(Sum(x...), odd.Scale(2).Add(Const(1)))), Unsat)
	})
}

// TestKnapsack compares with dynamic programming.
func TestKnapsack(t *testing.T) {
	r := rand.New(rand.NewSource(7))
	for round := 0; round < 10; round++ {
		n := 8
		w, v := make([]int64, n), make([]int64, n)
		room := int64(40)
		best := make([]int64, room+1)
		for i := range w {
			w[i], v[i] = 3+r.Int63n(15), 1+r.Int63n(30)
			for c := room; c >= w[i]; c-- {
				best[c] = max(best[c], best[c-w[i]]+v[i])
			}
		}
		s := New(Options{Sanity: true})
		var weight, worth []Lin
		for i := range w {
			x := s.NewBounded("", big.NewInt(0), big.NewInt(1))
			weight = append(weight, Term(w[i], x))
			worth = append(worth, Term(v[i], x))
		}
		s.Assert("", LE(Sum(weight...), Const(room)))
		o, err := s.Maximise(context.Background(), Sum(worth...))
		if err != nil || o.Status != Sat || o.Value.Int64() != best[room] {
			t.Fatalf("round %d: got %+v (%v), want %d", round, o, err, best[room])
		}
	}
}

func TestUnbounded(t *testing.T) {
	s := New(Options{})
	x, y := V(s.NewVar("x")), V(s.NewVar("y"))
	s.Assert("", Or(LE(x, y), LE(x, Const(7))))
	o, err := s.Maximise(context.Background(), x)
	if err != nil || !o.Unbounded || o.Status != Sat {
		t.Errorf("got %+v, %v; want unbounded", o, err)
	}
	o, err = s.Maximise(context.Background(), x, LT(y, x), EQ(y.Mod(2), Const(1)))
	if err != nil || o.Status != Sat || o.Unbounded || o.Value.Int64() != 7 {
		t.Errorf("got %+v, %v; want 7", o, err)
	}
	o, err = s.Minimise(context.Background(), x, GT(x, Const(3)), LT(x, Const(4)))
	if err != nil || o.Status != Unsat {
		t.Errorf("got %+v, %v; want unsat", o, err)
	}
}

func TestCore(t *testing.T) {
	s := New(Options{})
	x, y, z := V(s.NewVar("x")), V(s.NewVar("y")), V(s.NewVar("z"))
	s.Assert("small", LE(x, Const(3)))
	s.Assert("noise", LE(z, Const(3)))
	s.Assert("more", GE(x, y))
	s.Assert("noise2", Or(GE(z, y), EQ(z.Mod(3), Const(2))))
	s.Assert("big", GE(y, Const(4)))
	want(t, mustCheck(t, s), Unsat)
	core, minimal := s.Core(context.Background())
	var names []string
	for _, i := range core {
		names = append(names, s.AssertionName(i))
	}
	if got := strings.Join(names, " "); got != "small more big" || !minimal {
		t.Errorf("core %q, minimal=%v", got, minimal)
	}
}

func TestBudgets(t *testing.T) {
	build := func(opt Options) *Solver {
		s := New(opt)
		// Market split: hard for its size.
		r := rand.New(rand.NewSource(3))
		var xs []Lin
		for i := 0; i < 20; i++ {
			xs = append(xs, V(s.NewBounded("", big.NewInt(0), big.NewInt(1))))
		}
		for k := 0; k < 3; k++ {
			var parts []Lin
			sum := int64(0)
			for _, x := range xs {
				c := r.Int63n(100)
				sum += c
				parts = append(parts, x.Scale(c))
			}
			s.Assert("", EQ(Sum(parts...), Const(sum/2)))
		}
		return s
	}
	for _, c := range []struct {
		opt  Options
		name string
	}{
		{Options{MaxPivots: 30}, "pivots"},
		{Options{MaxNodes: 20}, "nodes"},
		{Options{MaxClauses: 10}, "clauses"},
	} {
		a, b := build(c.opt), build(c.opt)
		ra, rb := mustCheck(t, a), mustCheck(t, b)
		if ra.Status != Unknown || ra.Budget != c.name {
			t.Errorf("%+v: got %v %q, want unknown %q", c.opt, ra.Status, ra.Budget, c.name)
		}
		if ra.Status != rb.Status || ra.Budget != rb.Budget || a.Stats() != b.Stats() {
			t.Errorf("two equal runs differ: %+v, %+v", a.Stats(), b.Stats())
		}
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if r, err := build(Options{}).Check(ctx); err != nil || r.Status != Unknown || r.Budget != "cancelled" {
		t.Errorf("cancelled context: got %+v, %v", r, err)
	}
}

// TestCancelSAT cancels within a single long run of the Boolean layer and then
// uses the solver again.
func TestCancelSAT(t *testing.T) {
	s := New(Options{})
	const p, h = 12, 11
	var in [p][h]Formula
	for i := range in {
		for j := range in[i] {
			in[i][j] = IsBool(s.NewBool(""))
		}
	}
	on := IsBool(s.NewBool("on"))
	for i := range in {
		s.Assert("", Implies(on, Or(in[i][:]...)))
	}
	for j := 0; j < h; j++ {
		for a := range in {
			for b := 0; b < a; b++ {
				s.Assert("", Not(And(in[a][j], in[b][j])))
			}
		}
	}
	ctx, cancel := context.WithTimeout(context.Background(), 50*time.Millisecond)
	defer cancel()
	r, err := s.Check(ctx, on)
	if err != nil || r.Status != Unknown || r.Budget != "cancelled" {
		t.Fatalf("got %+v, %v", r, err)
	}
	want(t, mustCheck(t, s, Not(on)), Sat)
}

// TestGuard shows that the guard literal keeps gini from ending the process: a
// child that uses gini as this package does survives thousands of refutations,
// asked again and again. The second child drives the same clauses into gini
// without the guard and must die; if one day it does not, the guard can go.
func TestGuard(t *testing.T) {
	if os.Getenv("LIA_GUARD_CHILD") != "" {
		return // see TestGuardChild
	}
	run := func(mode string) (string, error) {
		cmd := exec.Command(os.Args[0], "-test.run=^TestGuardChild$", "-test.v")
		cmd.Env = append(os.Environ(), "LIA_GUARD_CHILD="+mode)
		out, err := cmd.CombinedOutput()
		return string(out), err
	}
	if out, err := run("guarded"); err != nil || !strings.Contains(out, "survived") {
		t.Errorf("the guarded child died: %v\n%s", err, out)
	}
	if out, err := run("bare"); err == nil || strings.Contains(out, "survived") {
		t.Errorf("the bare child lived on: the guard may be needless\n%s", out)
	}
}

func TestGuardChild(t *testing.T) {
	mode := os.Getenv("LIA_GUARD_CHILD")
	if mode == "" {
		t.Skip("runs as a child of TestGuard")
	}
	r := rand.New(rand.NewSource(1))
	for round := 0; round < 2000; round++ {
		s := New(Options{})
		var bs []Formula
		for i := 0; i < 8; i++ {
			bs = append(bs, IsBool(s.NewBool("")))
		}
		if mode == "bare" {
			s.unguarded()
		}
		for k := 0; k < 60; k++ {
			var c []Formula
			for i := 0; i < 3; i++ {
				f := bs[r.Intn(len(bs))]
				if r.Intn(2) == 0 {
					f = Not(f)
				}
				c = append(c, f)
			}
			s.Assert("", Or(c...))
			mustCheck(t, s)
			mustCheck(t, s, bs[r.Intn(len(bs))])
		}
	}
	fmt.Println("survived")
}

// unguarded makes the guard a fact, which takes its effect away.
func (s *Solver) unguarded() {
	s.sat.Add(s.guard)
	s.sat.Add(0)
}
