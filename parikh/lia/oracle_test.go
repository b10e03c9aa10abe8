package lia

import (
	"bytes"
	"context"
	"fmt"
	"math/big"
	"os"
	"os/exec"
	"sort"
	"strings"
	"testing"
	"time"
)

// oracle returns the path of an outside tool; without it the test is skipped,
// unless PATHTALLY_REQUIRE_ORACLES=1 asks for a failure.
func oracle(t *testing.T, name string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		if os.Getenv("PATHTALLY_REQUIRE_ORACLES") == "1" {
			t.Fatalf("%s is required and missing", name)
		}
		t.Skipf("%s is not installed", name)
	}
	return path
}

// cvc5 runs scripts in one process, separated by (reset), and returns the answer
// to each.
func cvc5(t *testing.T, scripts []string) []string {
	t.Helper()
	path := oracle(t, "cvc5")
	ctx, cancel := context.WithTimeout(context.Background(), 2*time.Minute)
	defer cancel()
	// A question on which cvc5 gives up after a second counts as unanswered.
	cmd := exec.CommandContext(ctx, path, "--lang", "smt2", "--tlimit-per=1000", "-")
	cmd.Stdin = strings.NewReader(strings.Join(scripts, "(reset)\n"))
	out, err := cmd.CombinedOutput()
	if err != nil {
		t.Fatalf("cvc5: %v\n%s", err, out)
	}
	got := strings.Fields(string(out))
	if len(got) != len(scripts) {
		t.Fatalf("cvc5 gave %d answers to %d scripts:\n%s", len(got), len(scripts), out)
	}
	return got
}

// TestCVC5 compares random problems with an independent solver. Unlike in
// TestRandom half of the variables are unbounded, so brute force cannot decide.
func TestCVC5(t *testing.T) {
	n := 100
	if long {
		n = 2000
	}
	var scripts []string
	var seeds []int64
	var ours []Status
	unknown := 0
	for seed := int64(1); seed <= int64(n); seed++ {
		s := unboundedProblem(seed, Options{Sanity: true, MaxNodes: 3000})
		got := mustCheck(t, s)
		if got.Status == Unknown {
			unknown++
			continue
		}
		var b bytes.Buffer
		if err := s.WriteSMTLIB(&b); err != nil {
			t.Fatal(err)
		}
		scripts, seeds, ours = append(scripts, b.String()), append(seeds, seed), append(ours, got.Status)
	}
	count := map[string]int{}
	for i, a := range cvc5(t, scripts) {
		count[a]++
		if a != "unknown" && a != ours[i].String() {
			t.Errorf("seed %d: cvc5 says %s, we say %v\n%s", seeds[i], a, ours[i], scripts[i])
		}
	}
	t.Logf("%v, our unknowns: %d", count, unknown)
	if unknown > n/20 || count["sat"] < n/5 || count["unsat"] < n/20 || count["unknown"] > n/10 {
		t.Errorf("lopsided: %v, our unknowns %d", count, unknown)
	}
}

func unboundedProblem(seed int64, opt Options) *Solver {
	p := randomProblem(seed + 5e6)
	s := New(opt)
	for i := 0; i < p.nv; i++ {
		switch (int(seed) + i) % 3 {
		case 0:
			s.NewFree("")
		case 1:
			s.NewVar("")
		case 2:
			s.NewBounded("", big.NewInt(p.lo[i]), big.NewInt(p.hi[i]))
		}
	}
	for i := 0; i < p.nb; i++ {
		s.NewBool("")
	}
	for i, f := range p.fs {
		s.Assert(fmt.Sprint("f", i), f)
	}
	return s
}

// TestCoreCVC5 has cvc5 refute the minimal core of each refuted problem and
// find a model when any one assertion is left out.
func TestCoreCVC5(t *testing.T) {
	n := 60
	if long {
		n = 600
	}
	var scripts, wants []string
	open := 0 // cores of which a part was left undecided
	for seed := int64(1); seed <= int64(n); seed++ {
		s := unboundedProblem(seed, Options{MaxNodes: 3000})
		if mustCheck(t, s).Status != Unsat {
			continue
		}
		core, minimal := s.Core(context.Background())
		if core == nil {
			t.Errorf("seed %d: no core", seed)
			continue
		}
		if !minimal {
			open++
			continue
		}
		script := func(skip int) string {
			f := s.fresh()
			for _, i := range core {
				if i != skip {
					f.Assert("", s.asserts[i].f)
				}
			}
			var b bytes.Buffer
			if err := f.WriteSMTLIB(&b); err != nil {
				t.Fatal(err)
			}
			return b.String()
		}
		scripts, wants = append(scripts, script(-1)), append(wants, "unsat")
		for _, i := range core {
			scripts, wants = append(scripts, script(i)), append(wants, "sat")
		}
	}
	for i, got := range cvc5(t, scripts) {
		if got != "unknown" && got != wants[i] {
			t.Errorf("cvc5 says %s, want %s:\n%s", got, wants[i], scripts[i])
		}
	}
	if open > n/50 {
		t.Errorf("%d of %d cores are undecided", open, n)
	}
	if len(scripts) < 10 {
		t.Errorf("only %d questions: the generator refutes too little", len(scripts))
	}
}

// TestSMTLIBSymbols lets cvc5 read awkward names and shared formulas.
func TestSMTLIBSymbols(t *testing.T) {
	s := New(Options{})
	x, y := s.NewVar("a b"), s.NewFree("let")
	names := map[Var]string{x: "a b|\\", y: "let"}
	shared := Or(LE(V(x), Const(-3)), Divides(4, V(x).Add(V(y))))
	f := And(Iff(shared, LE(V(y), ConstBig(bigPow(-2, 71)))), shared)
	var b bytes.Buffer
	err := WriteSMTLIB(&b, f, Names{Var: func(v Var) string { return names[v] }, Vars: []Var{x, y},
		Lo: func(v Var) *big.Int {
			if v == x {
				return new(big.Int)
			}
			return nil
		}})
	if err != nil {
		t.Fatal(err)
	}
	if want := "(declare-const |a b__| Int)\n(assert (>= |a b__| 0))\n(declare-const |let| Int)\n"; !strings.Contains(b.String(), want) {
		t.Errorf("declarations differ:\n%s", b.String())
	}
	if n := strings.Count(b.String(), "(mod "); n != 1 {
		t.Errorf("the shared formula is written %d times", n)
	}
	if got := cvc5(t, []string{b.String()}); got[0] != "sat" {
		t.Errorf("cvc5 says %s", got[0])
	}
}

// TestHilbert enumerates the minimal solutions of 3x + 5y = z + 7w by asking for
// one solution after the other that is above none of those found, each descended
// to a minimal one, and compares them with normaliz.
func TestHilbert(t *testing.T) {
	path := oracle(t, "normaliz")
	dir := t.TempDir()
	in := "amb_space 4\nequations 1\n3 5 -1 -7\nnonnegative\nHilbertBasis\n"
	if err := os.WriteFile(dir+"/h.in", []byte(in), 0o644); err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(path, "h.in")
	cmd.Dir = dir
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Fatalf("normaliz: %v\n%s", err, out)
	}
	out, err := os.ReadFile(dir + "/h.out")
	if err != nil {
		t.Fatal(err)
	}
	var theirs []string
	for _, l := range strings.Split(string(out), "\n") {
		// The file also lists hyperplanes; keep what solves the equation.
		var a, b, c, d int
		if n, _ := fmt.Sscan(l, &a, &b, &c, &d); n == 4 && min(a, b, c, d) >= 0 && 3*a+5*b == c+7*d && len(strings.Fields(l)) == 4 {
			theirs = append(theirs, strings.Join(strings.Fields(l), " "))
		}
	}
	theirs = unique(theirs)

	s := New(Options{Sanity: true})
	var x [4]Lin
	for i := range x {
		x[i] = V(s.NewVar(""))
	}
	s.Assert("", EQ(Sum(x[0].Scale(3), x[1].Scale(5), x[2].Scale(-1), x[3].Scale(-7)), Const(0)))
	s.Assert("", GE(Sum(x[:]...), Const(1)))
	var ours []string
	for {
		r := mustCheck(t, s)
		if r.Status != Sat {
			want(t, r, Unsat)
			break
		}
		m := r.Model
		for {
			var below []Formula
			for i := range x {
				below = append(below, LE(x[i], ConstBig(m.Value(x[i]))))
			}
			down := mustCheck(t, s, append(below, LT(Sum(x[:]...), ConstBig(m.Value(Sum(x[:]...)))))...)
			if down.Status != Sat {
				break
			}
			m = down.Model
		}
		var notAbove []Formula
		text := make([]string, len(x))
		for i := range x {
			v := m.Value(x[i])
			text[i] = v.String()
			notAbove = append(notAbove, LT(x[i], ConstBig(v)))
		}
		ours = append(ours, strings.Join(text, " "))
		s.Assert("", Or(notAbove...))
	}
	sort.Strings(ours)
	if fmt.Sprint(ours) != fmt.Sprint(theirs) || len(ours) < 5 {
		t.Errorf("minimal solutions\nours     %v\nnormaliz %v", ours, theirs)
	}
}

func unique(l []string) []string {
	sort.Strings(l)
	out := l[:0]
	for i, x := range l {
		if i == 0 || x != l[i-1] {
			out = append(out, x)
		}
	}
	return out
}
