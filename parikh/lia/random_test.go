package lia

import (
	"context"
	"fmt"
	"math/big"
	"math/rand"
	"testing"
)

// problem is a random conjunction over a few variables. Every variable has the
// box [lo, hi], so that brute force decides it; the box is given to the solver
// as a formula, as declared bounds, or half and half.
type problem struct {
	seed  int64
	nv    int
	nb    int
	lo    []int64
	hi    []int64
	bound bool // declared bounds instead of formulas
	fs    []Formula
}

func randomLin(r *rand.Rand, nv, maxC int, mods bool) Lin {
	n := 1 + r.Intn(min(3, nv))
	parts := []Lin{Const(int64(r.Intn(2*maxC+1) - maxC))}
	for i := 0; i < n; i++ {
		c := int64(r.Intn(2*maxC+1) - maxC)
		t := Term(c, Var(1+r.Intn(nv)))
		if mods && r.Intn(6) == 0 {
			t = t.Add(V(Var(1 + r.Intn(nv)))).Mod(int64(2 + r.Intn(4))).Scale(c)
		}
		parts = append(parts, t)
	}
	return Sum(parts...)
}

func randomFormula(r *rand.Rand, nv, nb, depth int) Formula {
	if depth == 0 || r.Intn(4) == 0 {
		a, b := randomLin(r, nv, 5, true), randomLin(r, nv, 5, false)
		switch r.Intn(9) {
		case 0:
			return LE(a, b)
		case 1:
			return LT(a, b)
		case 2:
			return EQ(a, b)
		case 3:
			return NE(a, b)
		case 4:
			return GE(a, b)
		case 5:
			return GT(a, b)
		case 6:
			return Divides(int64(2+r.Intn(3)), a)
		case 7:
			return Congruent(a, b, int64(2+r.Intn(4)))
		}
		return IsBool(Bool(1 + r.Intn(nb)))
	}
	sub := func() Formula { return randomFormula(r, nv, nb, depth-1) }
	switch r.Intn(6) {
	case 0, 1:
		return And(sub(), sub())
	case 2:
		return Or(sub(), sub(), sub())
	case 3:
		return Not(sub())
	case 4:
		return Implies(sub(), sub())
	}
	return Iff(sub(), sub())
}

func randomProblem(seed int64) *problem {
	r := rand.New(rand.NewSource(seed))
	p := &problem{seed: seed, nv: 1 + r.Intn(4), nb: 2, bound: r.Intn(2) == 0}
	for i := 0; i < p.nv; i++ {
		lo := int64(-r.Intn(4))
		p.lo = append(p.lo, lo)
		p.hi = append(p.hi, lo+int64(1+r.Intn(6)))
	}
	for i := r.Intn(3); i > 0; i-- { // equations make the dense cases
		p.fs = append(p.fs, EQ(randomLin(r, p.nv, 7, false), Const(int64(r.Intn(9)-4))))
	}
	for i := 1 + r.Intn(4); i > 0; i-- {
		p.fs = append(p.fs, randomFormula(r, p.nv, p.nb, 2))
	}
	return p
}

func (p *problem) solver(opt Options) *Solver {
	opt.Sanity = true
	s := New(opt)
	for i := 0; i < p.nv; i++ {
		if p.bound {
			s.NewBounded(fmt.Sprintf("x%d", i+1), big.NewInt(p.lo[i]), big.NewInt(p.hi[i]))
		} else {
			x := s.NewFree(fmt.Sprintf("x%d", i+1))
			s.Assert("box", And(GE(V(x), Const(p.lo[i])), LE(V(x), Const(p.hi[i]))))
		}
	}
	for i := 0; i < p.nb; i++ {
		s.NewBool(fmt.Sprintf("b%d", i+1))
	}
	return s
}

// brute enumerates the models in the box; each is passed to yield until that
// returns false.
func (p *problem) brute(yield func(Model) bool) {
	ints := make([]*big.Int, p.nv+1)
	bools := make([]bool, p.nb+1)
	var rec func(i int) bool
	rec = func(i int) bool {
		if i <= p.nv {
			for v := p.lo[i-1]; v <= p.hi[i-1]; v++ {
				ints[i] = big.NewInt(v)
				if !rec(i + 1) {
					return false
				}
			}
			return true
		}
		for b := 0; b < 1<<p.nb; b++ {
			for k := 0; k < p.nb; k++ {
				bools[k+1] = b>>k&1 == 1
			}
			m := NewModel(ints, bools)
			ok := true
			for _, f := range p.fs {
				if !m.Holds(f) {
					ok = false
					break
				}
			}
			if ok && !yield(m) {
				return false
			}
		}
		return true
	}
	rec(1)
}

func (p *problem) satisfiable() bool {
	sat := false
	p.brute(func(Model) bool { sat = true; return false })
	return sat
}

// variants are the plain versions of each optimisation.
var variants = []struct {
	name string
	opt  Options
	big  bool
}{
	{"default", Options{}, false},
	{"no presolve", Options{NoPresolve: true}, false},
	{"no cuts", Options{NoCuts: true}, false},
	{"no lattice", Options{NoLattice: true}, false},
	{"no minimise", Options{NoMinimise: true}, false},
	{"plain", Options{NoPresolve: true, NoCuts: true, NoLattice: true, NoMinimise: true}, false},
	{"large-system pivoting", Options{smallDrive: true}, false},
	{"big only", Options{}, true},
}

func mustCheck(t testing.TB, s *Solver, fs ...Formula) Result {
	t.Helper()
	r, err := s.Check(context.Background(), fs...)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// TestRandom compares every variant with brute force.
func TestRandom(t *testing.T) {
	n := 300
	if long {
		n = 5000
	}
	sats := 0
	for seed := int64(1); seed <= int64(n); seed++ {
		p := randomProblem(seed)
		want := Unsat
		if p.satisfiable() {
			want = Sat
			sats++
		}
		for _, v := range variants {
			bigOnly = v.big
			s := p.solver(v.opt)
			for _, f := range p.fs {
				s.Assert("", f)
			}
			got := mustCheck(t, s)
			bigOnly = false
			if got.Status != want {
				t.Fatalf("seed %d, %s: got %v %s, want %v\n%v", seed, v.name, got.Status, got.Budget, want, p.fs)
			}
		}
	}
	if sats < n/5 || sats > n*9/10 {
		t.Errorf("the generator is lopsided: %d of %d are satisfiable", sats, n)
	}
}
