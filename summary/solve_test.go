package summary

import (
	"errors"
	"fmt"
	"math/big"
	"math/rand/v2"
	"strings"
	"testing"

	"pathtally/pds"
)

// grammarSystem turns a context-free grammar into a system whose ended runs from
// ⟨q, S⟩ are its left-most derivations: productions are written "S -> a S b |
// eps", upper-case letters are nonterminals, lower-case ones count 1 of
// themselves.
func grammarSystem(t *testing.T, text string) *pds.Table {
	t.Helper()
	counts := map[string]bool{}
	var names []string
	for _, f := range strings.Fields(text) {
		if len(f) == 1 && f >= "a" && f <= "z" && !counts[f] {
			counts[f] = true
			names = append(names, f)
		}
	}
	b := pds.NewBuilder(names...)
	for _, line := range strings.Split(text, ";") {
		lhs, rhs, ok := strings.Cut(line, "->")
		if !ok {
			t.Fatalf("no arrow in %q", line)
		}
		lhs = strings.TrimSpace(lhs)
		for i, alt := range strings.Split(rhs, "|") {
			var opts []pds.Option
			var symbols []string
			for _, f := range strings.Fields(alt) {
				switch {
				case f == "eps":
				case counts[f]:
					opts = append(opts, pds.Adds(f, 1))
				default:
					symbols = append(symbols, f)
				}
			}
			// Long right sides go through names of their own.
			at := lhs
			for k := 0; ; k++ {
				switch len(symbols) {
				case 0:
					b.Pop("q", at, "q", opts...)
				case 1:
					b.Step("q", at, "q", symbols[0], opts...)
				case 2:
					b.Push("q", at, "q", symbols[0], symbols[1], opts...)
				default:
					rest := fmt.Sprintf("%s%d.%d", lhs, i, k)
					b.Push("q", at, "q", symbols[0], rest, opts...)
					symbols, at, opts = symbols[1:], rest, nil
					continue
				}
				break
			}
		}
	}
	b.Start("q", "S")
	return b.Table()
}

// greatest answers a question about S: "2a-b" style weights.
func greatest(t *testing.T, sys *pds.Table, moment bool, weights map[string]int64) Value {
	t.Helper()
	q := Question{AnyMoment: moment, Weights: make([]int64, sys.NumCounts())}
	for i, c := range sys.Counts() {
		q.Weights[i] = weights[c]
	}
	e := New(sys, 0)
	v := e.Solve(q).Greatest(sys.Starts()[0], all)
	if err := e.Sanity(); err != nil {
		t.Fatal(err)
	}
	return v
}

func TestTextbookGrammars(t *testing.T) {
	w := func(pairs ...any) map[string]int64 {
		m := map[string]int64{}
		for i := 0; i < len(pairs); i += 2 {
			m[pairs[i].(string)] = int64(pairs[i+1].(int))
		}
		return m
	}
	for _, c := range []struct {
		name, grammar string
		weights       map[string]int64
		ended, moment string
	}{
		// Hopcroft, Ullman, Introduction to Automata Theory, 1979: {a^n b^n}.
		{"a^n b^n", "S -> a S T | eps ; T -> b", w("a", 1, "b", -1), "0", "inf"},
		{"a^n b^n", "S -> a S T | eps ; T -> b", w("a", -1, "b", 1), "0", "0"},
		{"a^n b^n", "S -> a S T | eps ; T -> b", w("a", 1, "b", 1), "inf", "inf"},
		// Lukasiewicz language, image {(n, n+1)} (Lothaire, Combinatorics on Words).
		{"Lukasiewicz", "S -> a S S | b", w("b", 1, "a", -1), "1", "1"},
		{"Lukasiewicz", "S -> a S S | b", w("b", -1, "a", 1), "-1", "inf"},
		// Running example of Esparza, Ganty, Kiefer, Luttenberger, Parikh's theorem: a
		// simple and direct automaton construction, 2011: a = 1 + b + c.
		{"Parikh example", "S -> S B | a ; B -> b B A B | c S ; A -> a", w("a", 1, "b", -1, "c", -1), "1", "1"},
		{"Parikh example", "S -> S B | a ; B -> b B A B | c S ; A -> a", w("a", -1, "b", 1, "c", 1), "-1", "inf"},
		// Sylvester 1884: all but 1, 2, 4, 7 from 3 and 5; the least is 0.
		{"3 and 5", "S -> a a a S | a a a a a S | eps", w("a", -1), "0", "0"},
		// Brackets of two kinds (Chomsky, Schuetzenberger 1963).
		{"D2", "S -> a S C S | b S D S | eps ; C -> c ; D -> d", w("c", 1, "a", -1), "0", "0"},
		{"D2", "S -> a S C S | b S D S | eps ; C -> c ; D -> d", w("a", 1, "c", -1), "0", "inf"},
		// Inherently ambiguous a^i b^j c^k, i = j or j = k (Parikh, On context-free
		// languages, 1966).
		{"ambiguous", "S -> P C | A Q ; P -> a P B | eps ; B -> b ; C -> c C | eps ; A -> a A | eps ; Q -> b Q D | eps ; D -> c",
			w("a", -1, "b", 2, "c", -1), "inf", "inf"},
		{"ambiguous", "S -> P C | A Q ; P -> a P B | eps ; B -> b ; C -> c C | eps ; A -> a A | eps ; Q -> b Q D | eps ; D -> c",
			w("a", -1, "b", 1, "c", -1), "0", "inf"},
		// No run ends, every moment counts: for { mu.Lock() }.
		{"endless", "S -> a S", w("a", 1), "none", "inf"},
		{"endless", "S -> a S", w("a", -1), "none", "0"},
		// n rounds may all grow with a finite value.
		{"grows in round n", "S -> a | S", w("a", 1), "1", "1"},
		// The component is unbounded though S itself does not grow in round n+1.
		{"component", "S -> a a a a a a a a a a | A B ; A -> c A | S | eps ; B -> b b b b b b b b b b b b b b b b",
			w("a", 1, "b", -1, "c", 1), "inf", "inf"},
		// An unproductive part with a gain must not count.
		{"dead gain", "S -> a | D S ; D -> a D", w("a", 1), "1", "inf"},
		// A cycle that gains nothing is no pump.
		{"zero cycle", "S -> A | a ; A -> S | eps", w("a", 1), "1", "1"},
	} {
		sys := grammarSystem(t, c.grammar)
		for moment, want := range map[bool]string{false: c.ended, true: c.moment} {
			if got := greatest(t, sys, moment, c.weights); got.String() != want {
				t.Errorf("%s, %v, moment %v: %v, want %s", c.name, c.weights, moment, got, want)
			}
		}
	}
}

// doubling is A_n -> A_{n-1} A_{n-1}, ..., A_1 -> a: one vector, 2^(n-1)
// (the paper of TestTextbookGrammars, section on lower bounds).
func doubling(n int) *pds.Table {
	b := pds.NewBuilder("a")
	b.Start("q", fmt.Sprint(n))
	for i := n; i > 1; i-- {
		b.Push("q", fmt.Sprint(i), "q", fmt.Sprint(i-1), fmt.Sprint(i-1))
	}
	b.Pop("q", "1", "q", pds.Adds("a", 1))
	return b.Table()
}

func TestPast64Bits(t *testing.T) {
	sys := doubling(80)
	for _, w := range []int64{1, -1} {
		s := New(sys, 0).Solve(Question{Weights: []int64{w}})
		v := s.Greatest(sys.Starts()[0], all)
		want := new(big.Int).Lsh(big.NewInt(w), 79)
		if v.Kind != Finite || v.Int().Cmp(want) != 0 {
			t.Errorf("weight %d: %v, want %v", w, v, want)
		}
		if _, ok := v.Int64(); ok {
			t.Error("2^79 fits into 64 bits")
		}
		if _, err := s.FindWitness(sys.Starts()[0], all, 0); w > 0 && !errors.Is(err, ErrTooLong) {
			t.Errorf("witness of 2^80 steps: %v", err)
		}
	}
	// Sums that leave 64 bits and come back.
	b := pds.NewBuilder("a")
	b.Start("q", "s")
	b.Step("q", "s", "q", "t", pds.Adds("a", 1<<62))
	b.Step("q", "t", "q", "u", pds.Adds("a", 1<<62))
	b.Pop("q", "u", "q", pds.Adds("a", -1<<62))
	sys = b.Table()
	s := New(sys, 0).Solve(Question{Weights: []int64{3}})
	if v := s.Greatest(sys.Starts()[0], all); v.String() != "13835058055282163712" {
		t.Errorf("3*2^62 is %v", v)
	}
}

func TestBudget(t *testing.T) {
	sys := nested(1000, 3)
	h := pds.Head{State: 1, Symbol: 1}
	e := New(sys, 100)
	a := e.Saturate(h, 0)
	if !a.Exhausted || a.Budget != 100 || !strings.Contains(a.String(), "budget of 100 rule steps exhausted") || a.Worst == (pds.Head{}) {
		t.Errorf("%+v: %v", a, a)
	}
	s := e.Solve(Question{Weights: []int64{1, 0}})
	if v := s.Greatest(h, all); v.Kind != Exhausted {
		t.Errorf("greatest %v", v)
	}
	if _, err := s.FindWitness(h, all, 0); !errors.Is(err, ErrExhausted) {
		t.Errorf("witness: %v", err)
	}
	if _, err := e.Grammar(h, all, Question{}); !errors.Is(err, ErrExhausted) {
		t.Errorf("grammar: %v", err)
	}
	if f := s.AlongPath(Path{Start: h}, all); len(f) != 1 || f[0].Here.Kind != Exhausted {
		t.Errorf("along: %v", f)
	}
	// A start that does not lead to the unfinished part is not affected.
	low := pds.Head{State: 1, Symbol: 4*998 + 1}
	if a := e.Saturate(low, 0); a.Exhausted {
		t.Errorf("small start: %v", a)
	}
	if exits, complete := e.Exits(low); !complete || fmt.Sprint(exits) != "[1 2 3]" {
		t.Errorf("exits %v, %v", exits, complete)
	}
	if _, complete := e.Exits(h); complete {
		t.Error("the large start is complete")
	}
	// Later calls go on where the first one stopped, and end with the same exits.
	for range 10000 {
		if a = e.Saturate(h, 100); !a.Exhausted {
			break
		}
	}
	if exits, complete := e.Exits(h); !complete || fmt.Sprint(exits) != "[1 2 3]" {
		t.Errorf("exits %v, %v", exits, complete)
	}
	if err := e.Sanity(); err != nil {
		t.Error(err)
	}
}

func TestDoubt(t *testing.T) {
	// lock; perhaps unlock.
	b := pds.NewBuilder("taken", "released")
	b.Start("run", "f")
	b.Step("run", "f", "run", "g", pds.Adds("taken", 1))
	b.Pop("run", "g", "back", pds.Doubts("same desk?"), pds.DoubtAdds("released", 1))
	sys := b.Table()
	e := New(sys, 0)
	h := sys.Starts()[0]
	for _, c := range []struct {
		take bool
		w    []int64
		want string
	}{
		{false, []int64{1, -1}, "1"}, {true, []int64{1, -1}, "0"},
		// Released without taken: the doubt would make it worse, so it is not taken.
		{true, []int64{-1, 1}, "-1"},
	} {
		s := e.Solve(Question{Weights: c.w, TakeDoubts: c.take})
		if v := s.Greatest(h, all); v.String() != c.want {
			t.Errorf("%v, doubts %v: %v, want %s", c.w, c.take, v, c.want)
		}
		p, ok := s.Witness(h, all, -5)
		if !ok {
			t.Fatal("no witness")
		}
		run, err := pds.Replay(sys, h, p.Choices())
		if err != nil {
			t.Fatal(err)
		}
		if got := fmt.Sprint(run.Total[0]*c.w[0] + run.Total[1]*c.w[1]); got != c.want {
			t.Errorf("witness weighs %s, want %s", got, c.want)
		}
	}
}

func TestOff(t *testing.T) {
	sys := grammarSystem(t, "S -> a S | b")
	e := New(sys, 0)
	h := sys.Starts()[0]
	off := func(_ pds.Head, rule int) bool { return rule == 0 }
	if v := e.Solve(Question{Weights: []int64{1, 0}, Off: off}).Greatest(h, all); v.String() != "0" {
		t.Errorf("without the loop: %v", v)
	}
	if v := e.Solve(Question{Weights: []int64{1, 0}}).Greatest(h, all); v.Kind != Unbounded {
		t.Errorf("with the loop: %v", v)
	}
	off = func(_ pds.Head, rule int) bool { return rule == 1 }
	if v := e.Solve(Question{Weights: []int64{1, 0}, Off: off}).Greatest(h, all); v.Kind != NoPath {
		t.Errorf("without the end: %v", v)
	}
}

// TestLatePumps makes the search for pumps switch to its second way at once.
func TestLatePumps(t *testing.T) {
	sys := grammarSystem(t, "S -> A B ; A -> a S | b B | eps ; B -> A | b S | c")
	h := sys.Starts()[0]
	for _, w := range [][]int64{{1, 0, 0}, {1, -1, -1}, {-1, -1, -1}, {0, 1, -1}, {1, 1, -3}} {
		e := New(sys, 0)
		s := e.Solve(Question{Weights: w})
		want := s.Greatest(h, all)
		late := e.Solve(Question{Weights: w})
		late.allowance = -1
		if got := late.Greatest(h, all); got.String() != want.String() {
			t.Errorf("%v: %v when pumps are found late, else %v", w, got, want)
		}
		if want.Kind == Unbounded && len(late.pumps) != 0 {
			t.Error("the second way was not taken")
		}
		if p, ok := late.Witness(h, all, 100); ok != (want.Kind == Unbounded) {
			t.Errorf("%v: witness %v", w, ok)
		} else if ok {
			run, err := pds.Replay(sys, h, p.Choices())
			if err != nil {
				t.Fatal(err)
			}
			if got := run.Total[0]*w[0] + run.Total[1]*w[1] + run.Total[2]*w[2]; got <= 100 {
				t.Errorf("%v: witness weighs %d", w, got)
			}
		}
	}
}

func TestSolvingGivesUp(t *testing.T) {
	sys := recursion(200)
	h := pds.Head{State: 1, Symbol: 1}
	e := New(sys, 0)
	if a := e.Saturate(h, 0); a.Exhausted {
		t.Fatal(a)
	}
	e.budget = 500
	s := e.Solve(Question{Weights: []int64{1, 0}})
	if v := s.Greatest(h, all); v.Kind != Exhausted || len(s.GaveUp()) == 0 {
		t.Errorf("%v, gave up %v", v, s.GaveUp())
	}
	if _, err := s.FindWitness(h, all, 0); !errors.Is(err, ErrExhausted) {
		t.Errorf("witness: %v", err)
	}
	e.budget = DefaultBudget
	if v := e.Solve(Question{Weights: []int64{1, 0}}).Greatest(h, all); v.Kind != Finite {
		t.Errorf("with budget: %v", v)
	}
}

// Taking rules out of a solution is the same as asking anew.
func TestWithout(t *testing.T) {
	changed := 0
	for seed := range uint64(600) {
		r := rand.New(rand.NewPCG(seed, 5))
		sys := randomSystem(r, int(seed%4))
		q := questions(r)[seed%3]
		q.AnyMoment = seed%2 == 0
		e := New(sys, 0)
		base := e.Solve(q)
		heads := sys.Heads()
		if seed%3 == 0 {
			base.Greatest(heads[0], all)
		}
		s := base
		off := map[RuleRef]bool{}
		for range 2 {
			h := heads[r.IntN(len(heads))]
			ref := RuleRef{h, r.IntN(len(sys.Rules(h, nil)))}
			off[ref] = true
			s = s.Without([]RuleRef{ref})
			q2 := q
			q2.Off = func(h pds.Head, rule int) bool { return off[RuleRef{h, rule}] }
			anew := New(sys, 0).Solve(q2)
			for _, h := range heads {
				got, want := s.Greatest(h, all), anew.Greatest(h, all)
				if got.String() != want.String() {
					t.Fatalf("seed %d, %v without %v: %v, asked anew %v\n%s", seed, h, off, got, want, sys)
				}
				if got.String() != base.Greatest(h, all).String() {
					changed++
				}
				p1, err1 := s.FindWitness(h, all, 0)
				p2, err2 := anew.FindWitness(h, all, 0)
				if fmt.Sprint(p1, err1) != fmt.Sprint(p2, err2) {
					t.Fatalf("seed %d, %v without %v: witness %v %v, asked anew %v %v\n%s", seed, h, off, p1, err1, p2, err2, sys)
				}
			}
			if err := s.Sanity(); err != nil {
				t.Fatal(err)
			}
		}
	}
	if changed < 100 {
		t.Errorf("only %d answers changed", changed)
	}
}

func BenchmarkWithout(b *testing.B) {
	e := New(loops(20000), 0)
	h := pds.Head{State: 1, Symbol: 1}
	base := e.Solve(Question{Weights: []int64{1, 0}})
	base.Greatest(h, all)
	for b.Loop() {
		// The loop that is taken out is near the start: nearly all is kept.
		if v := base.Without([]RuleRef{{pds.Head{State: 1, Symbol: 401}, 0}}).Greatest(h, all); v.Kind != Finite {
			b.Fatal(v)
		}
	}
}
