package summary

import (
	"fmt"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"pathtally/pds"
)

func replayed(t *testing.T, sys pds.System, p Path) pds.Run {
	t.Helper()
	run, err := pds.Replay(sys, p.Start, p.Choices())
	if err != nil {
		t.Fatal(err)
	}
	return run
}

// A loop that takes: past a far bound the path is the loop as often as needed,
// and says so.
func TestPumpedLoop(t *testing.T) {
	b := pds.NewBuilder("taken")
	b.Start("run", "top")
	b.Step("run", "top", "run", "body")
	b.Pop("run", "top", "back")
	b.Step("run", "body", "run", "top", pds.Adds("taken", 3))
	sys := b.Table()
	s := New(sys, 0).Solve(Question{Weights: []int64{1}})
	h := sys.Starts()[0]
	p, ok := s.Witness(h, all, 1000)
	if !ok {
		t.Fatal("no witness")
	}
	run := replayed(t, sys, p)
	if got := run.Total[0]; got != 1002 {
		t.Errorf("taken %d, want 1002, the first multiple of 3 past 1000", got)
	}
	if len(p.Steps) != 2*334+1 {
		t.Errorf("%d steps", len(p.Steps))
	}
	if want := []Repeat{{0, 2, 334}}; !reflect.DeepEqual(p.Repeats, want) {
		t.Errorf("repeats %v, want %v", p.Repeats, want)
	}
	// Once is enough for a near bound, and then nothing is pumped.
	if p, _ := s.Witness(h, all, 1); len(p.Steps) != 3 || p.Repeats != nil {
		t.Errorf("near bound: %d steps, %v", len(p.Steps), p.Repeats)
	}
	if _, err := s.FindWitness(h, all, 1<<40); err != ErrTooLong {
		t.Errorf("bound 2^40: %v", err)
	}
}

// A recursion that takes on the way down and again on the way up: two blocks.
func TestPumpedRecursion(t *testing.T) {
	b := pds.NewBuilder("taken")
	b.Start("run", "f")
	b.Push("run", "f", "run", "f", "up", pds.Adds("taken", 1))
	b.Pop("run", "f", "back")
	b.Step("back", "up", "run", "up2", pds.Adds("taken", 1))
	b.Pop("run", "up2", "back")
	sys := b.Table()
	s := New(sys, 0).Solve(Question{Weights: []int64{1}})
	p, ok := s.Witness(sys.Starts()[0], all, 199)
	if !ok {
		t.Fatal("no witness")
	}
	if run := replayed(t, sys, p); run.Total[0] != 200 || run.End != pds.EndEmpty {
		t.Errorf("taken %d, %v", run.Total[0], run.End)
	}
	if want := []Repeat{{0, 1, 100}, {101, 2, 100}}; !reflect.DeepEqual(p.Repeats, want) {
		t.Errorf("repeats %v, want %v", p.Repeats, want)
	}
	for _, r := range p.Repeats {
		for i := range r.Len * (r.Times - 1) {
			if a, b := p.Steps[r.From+i], p.Steps[r.From+i+r.Len]; a.Head != b.Head || a.Index != b.Index {
				t.Fatalf("%v: steps %d and %d differ", r, r.From+i, r.From+i+r.Len)
			}
		}
	}
}

// serve: for { mu.Lock() }. No run ends; every moment counts.
func TestNeverEnds(t *testing.T) {
	b := pds.NewBuilder("taken")
	b.Start("run", "loop")
	b.Step("run", "loop", "run", "loop", pds.Adds("taken", 1))
	sys := b.Table()
	h := sys.Starts()[0]
	e := New(sys, 0)
	if v := e.Solve(Question{Weights: []int64{1}}).Greatest(h, all); v.Kind != NoPath {
		t.Errorf("at the end: %v", v)
	}
	s := e.Solve(Question{Weights: []int64{1}, AnyMoment: true})
	p, ok := s.Witness(h, all, 1)
	if !ok || len(p.Steps) != 2 || p.End != pds.EndMiddle {
		t.Errorf("at some moment: %v, %+v", ok, p)
	}
}

// A claim about moments counts spawned work at the moment that keeps it.
func TestSpawnedAtMoments(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	b.Start("run", "main")
	b.Step("run", "main", "run", "next", pds.Adds("taken", 1), pds.Spawns("run", "work"))
	b.Step("run", "next", "run", "last", pds.Adds("taken", 1))
	b.Pop("run", "last", "back", pds.Marked("here"))
	// The work takes once more and then releases twice.
	b.Step("run", "work", "run", "w2", pds.Adds("taken", 1))
	b.Pop("run", "w2", "back", pds.Adds("released", 2))
	sys := b.Table()
	e := New(sys, 0)
	h := sys.Starts()[0]
	none := func(pds.StateID) bool { return false }
	for _, c := range []struct {
		q    Question
		want string
	}{
		{Question{Weights: []int64{1, -1}, AnyMoment: true}, "1"},
		{Question{Weights: []int64{1, -1}, StopMarks: 2}, "1"},
		{Question{Weights: []int64{-1, 1}, AnyMoment: true}, "0"},
		{Question{Weights: []int64{-1, 1}, StopMarks: 2}, "-3"},
		{Question{Weights: []int64{1, 0}, StopMarks: 2}, "2"},
	} {
		s := e.Solve(c.q)
		v := s.Greatest(h, none)
		if v.String() != c.want {
			t.Errorf("%+v: %v, want %s", c.q, v, c.want)
		}
		n, _ := v.Int64()
		p, ok := s.Witness(h, none, n-1)
		if !ok {
			t.Fatal("no witness")
		}
		run := replayed(t, sys, p)
		if got := run.Total[0]*c.q.Weights[0] + run.Total[1]*c.q.Weights[1]; got != n {
			t.Errorf("%+v: witness weighs %d, want %d", c.q, got, n)
		}
	}
	// Spawned work that can release for ever keeps any upper bound on taken.
	b = pds.NewBuilder("taken", "released")
	b.Start("run", "main")
	b.Step("run", "main", "run", "next", pds.Spawns("run", "work"))
	b.Pop("run", "next", "back", pds.Adds("taken", 5))
	b.Step("run", "work", "run", "work", pds.Adds("released", 1))
	sys = b.Table()
	s := New(sys, 0).Solve(Question{Weights: []int64{1, -1}, AnyMoment: true})
	if v := s.Greatest(sys.Starts()[0], all); v.String() != "0" {
		t.Errorf("released for ever: %v, want 0 (before the work was spawned)", v)
	}
}

// S -> spawn(A) S | eps, A -> a b: at the quiet end {(n, n)}, at any moment b <= a
// (an instance of the model of Ganty, Majumdar, Algorithmic verification of
// asynchronous programs, 2012).
func TestShuffleFreeSpawning(t *testing.T) {
	b := pds.NewBuilder("a", "b")
	b.Start("q", "S")
	b.Step("q", "S", "q", "S", pds.Spawns("q", "A"))
	b.Pop("q", "S", "q")
	b.Step("q", "A", "q", "B", pds.Adds("a", 1))
	b.Pop("q", "B", "q", pds.Adds("b", 1))
	sys := b.Table()
	e := New(sys, 0)
	for _, c := range []struct {
		q    Question
		want string
	}{
		{Question{Weights: []int64{1, -1}}, "0"},
		{Question{Weights: []int64{-1, 1}}, "0"},
		{Question{Weights: []int64{1, 1}}, "inf"},
		{Question{Weights: []int64{1, -1}, AnyMoment: true, Prefixes: true}, "inf"},
		{Question{Weights: []int64{-1, 1}, AnyMoment: true, Prefixes: true}, "0"},
		{Question{Weights: []int64{1, 1}, AnyMoment: true}, "0"},
	} {
		s := e.Solve(c.q)
		if v := s.Greatest(sys.Starts()[0], all); v.String() != c.want {
			t.Errorf("%+v: %v, want %s", c.q, v, c.want)
		}
		if c.want == "inf" {
			// The pump runs through spawned work or beside it.
			p, ok := s.Witness(sys.Starts()[0], all, 500)
			if !ok {
				t.Fatalf("%+v: no witness", c.q)
			}
			run := replayed(t, sys, p)
			if got := run.Total[0]*c.q.Weights[0] + run.Total[1]*c.q.Weights[1]; got <= 500 {
				t.Errorf("%+v: witness weighs %d", c.q, got)
			}
		}
	}
}

// Spawned work without an end counts at any moment of it at ends, and is listed.
func TestEndlessWork(t *testing.T) {
	b := pds.NewBuilder("added", "done")
	b.Start("run", "main")
	b.Step("run", "main", "run", "next", pds.Adds("added", 1), pds.Spawns("run", "serve"))
	b.Pop("run", "next", "back", pds.Spawns("run", "once"))
	b.Step("run", "serve", "run", "serve", pds.Adds("added", 1))
	b.Pop("run", "once", "back", pds.Adds("done", 1))
	sys := b.Table()
	e := New(sys, 0)
	h := sys.Starts()[0]
	s := e.Solve(Question{Weights: []int64{1, -1}})
	if v := s.Greatest(h, all); v.Kind != Unbounded {
		t.Errorf("added - done: %v", v)
	}
	if v := e.Solve(Question{Weights: []int64{-1, 1}}).Greatest(h, all); v.String() != "0" {
		t.Errorf("done - added: %v", v)
	}
	heads, ok := e.Endless(h)
	if want := []pds.Head{sys.Head("run", "serve")}; !ok || !reflect.DeepEqual(heads, want) {
		t.Errorf("endless %v, want %v", heads, want)
	}
	p, ok := s.Witness(h, all, 3)
	if !ok {
		t.Fatal("no witness")
	}
	if run := replayed(t, sys, p); run.Total[0]-run.Total[1] != 4 || !p.Steps[0].Spawned[0].Endless || p.Steps[1].Spawned[0].Endless {
		t.Errorf("%+v", p)
	}
}

// Work that starts itself anew never comes to rest, though every run of it ends;
// what starts it can end all the same. Work that ends in a loss has ended.
func TestWorkThatStartsItself(t *testing.T) {
	b := pds.NewBuilder("n")
	b.Start("run", "main")
	b.Pop("run", "main", "back", pds.Spawns("run", "outer"), pds.Spawns("run", "loses"))
	b.Pop("run", "outer", "back", pds.Adds("n", 10), pds.Spawns("run", "again"))
	b.Pop("run", "again", "back", pds.Adds("n", -1), pds.Spawns("run", "again"))
	b.Step("run", "loses", "run", "lost", pds.Adds("n", 100))
	b.Stop("run", "lost", pds.Marked(pds.LossMark))
	sys := b.Table()
	e := New(sys, 0)
	h := sys.Starts()[0]
	heads, _ := e.Endless(h)
	if want := []pds.Head{sys.Head("run", "again")}; !reflect.DeepEqual(heads, want) {
		t.Errorf("endless %v, want %v", heads, want)
	}
	s := e.Solve(Question{Weights: []int64{1}})
	if v := s.Greatest(h, all); v.String() != "110" {
		t.Errorf("greatest %v, want 110", v)
	}
	if v := e.Solve(Question{Weights: []int64{-1}}).Greatest(h, all); v.Kind != Unbounded {
		t.Errorf("least %v, want no bound", v)
	}
	g, err := e.Grammar(h, all, Question{})
	if err != nil || !reflect.DeepEqual(g.Endless, heads) {
		t.Errorf("%v: grammar lists %v", err, g.Endless)
	}
}

func TestAlongPathFindsCause(t *testing.T) {
	// Book and settle of the deferred unlock: after urgent nothing unlocks.
	b := pds.NewBuilder("taken", "released")
	b.Start("run", "42")
	b.Step("run", "42", "run", "43", pds.Adds("taken", 1))
	b.Push("run", "43", "run", "44", "settle")
	b.Pop("run", "44", "back")
	b.Step("back", "settle", "run", "55")
	b.Pop("run", "55", "back", pds.Labelled("urgent"))
	b.Step("run", "55", "run", "59", pds.Labelled("not urgent"))
	b.Pop("run", "59", "back", pds.Adds("released", 1))
	sys := b.Table()
	e := New(sys, 0)
	h := sys.Starts()[0]
	p, ok := e.Solve(Question{Weights: []int64{1, -1}}).Witness(h, all, 0)
	if !ok {
		t.Fatal("no witness")
	}
	// Least taken - released: greatest of its negation.
	var got []string
	for _, f := range e.Solve(Question{Weights: []int64{-1, 1}}).AlongPath(p, all) {
		got = append(got, fmt.Sprint(f.Here, f.Ways))
	}
	want := "0 [0]|0 [0]|0 [0]|0 [0]|0 [-1 0]|-1 []"
	if s := strings.Join(got, "|"); s != want {
		t.Errorf("got  %s\nwant %s", s, want)
	}
}

func TestGrammar(t *testing.T) {
	for _, c := range []struct {
		grammar string
		q       Question
	}{
		{"S -> a S T | b | D ; T -> eps ; D -> a D", Question{}},
	} {
		sys := grammarSystem(t, c.grammar)
		e := New(sys, 0)
		h := sys.Starts()[0]
		g, err := e.Grammar(h, all, c.q)
		if err != nil {
			t.Fatal(err)
		}
		// Every nonterminal has a production, every production stands in the
		// system, and the dead D is gone.
		has := make([]int, g.NumNT)
		for _, p := range g.Prods {
			has[p.Lhs]++
			if p.Lhs == g.Start {
				continue
			}
			rules := sys.Rules(p.Rule.Head, nil)
			if rules[p.Rule.Index].Effect != p.Effect {
				t.Errorf("%+v has another effect than its rule", p)
			}
			if g.Heads[p.Lhs] != p.Rule.Head {
				t.Errorf("%+v under %v", p, g.Heads[p.Lhs])
			}
		}
		for a, n := range has {
			if n == 0 {
				t.Errorf("%s has no production", g.Names[a])
			}
			if g.Heads[a] == sys.Head("q", "D") {
				t.Error("the dead nonterminal is there")
			}
		}
		if g.NumNT != 3 || len(g.Prods) != 4 {
			t.Errorf("%d nonterminals, %d productions: %+v", g.NumNT, len(g.Prods), g)
		}
		if _, err := e.Grammar(sys.Head("q", "D"), all, c.q); err != ErrNoWitness {
			t.Errorf("empty grammar: %v", err)
		}
		// At moments the dead part lives.
		g, err = e.Grammar(sys.Head("q", "D"), all, Question{AnyMoment: true})
		if err != nil || g.NumNT != 2 || len(g.Prods) != 3 {
			t.Errorf("moments of D: %v, %+v", err, g)
		}
	}
}

func TestGrammarText(t *testing.T) {
	b := pds.NewBuilder("n")
	b.Start("q", "S")
	b.Push("q", "S", "q", "A", "B", pds.Adds("n", 1), pds.Spawns("q", "A"))
	b.Pop("q", "A", "q")
	b.Stop("q", "B", pds.Marked(pds.LossMark))
	b.Pop("q", "B", "r", pds.Adds("n", 2))
	sys := b.Table()
	e := New(sys, 0)
	g, err := e.Grammar(sys.Starts()[0], all, Question{StopMarks: pds.MarkLoss})
	if err != nil {
		t.Fatal(err)
	}
	want := `start -> C[1 1 2]
start -> O[1 1]
C[1 1 2] -> e1 C[1 2 1] C[1 3 2] spawn S[1 2]
O[1 1] -> e1 C[1 2 1] O[1 3] spawn S[1 2]
C[1 2 1] ->
C[1 3 2] -> e2
S[1 2] -> C[1 2 1]
O[1 3] -> stop
`
	if got := g.String(); got != want {
		t.Errorf("got\n%swant\n%s", got, want)
	}
	if got := len(e.Heads()); got != 3 {
		t.Errorf("%d heads", got)
	}
	list := pds.List(sys, sys.Starts(), e.Heads())
	if err := list.Sanity(); err != nil || len(list.Heads()) != 3 {
		t.Errorf("%v\n%s", err, list)
	}
}

// Answers do not depend on what was asked before.
func TestOrderOfQuestions(t *testing.T) {
	sys := recursion(30)
	heads := []pds.Head{{State: 1, Symbol: 1}, {State: 1, Symbol: 41}, {State: 1, Symbol: 10}, {State: 1, Symbol: 78}}
	paths := map[pds.Head]string{}
	for round := range 3 {
		e := New(sys, 0)
		shared := e.Solve(Question{Weights: []int64{1, 0}, AnyMoment: true})
		for i := range heads {
			h := heads[i]
			if round == 1 {
				h = heads[len(heads)-1-i]
			}
			s := e.Solve(Question{Weights: []int64{1, 0}, AnyMoment: true})
			if round == 2 {
				s = shared
			}
			p, ok := s.Witness(h, all, 2)
			if !ok {
				t.Fatalf("%v: no witness", h)
			}
			text := fmt.Sprint(p)
			if old, seen := paths[h]; seen && old != text {
				t.Errorf("%v: %s, asked in other order %s", h, text, old)
			}
			paths[h] = text
		}
	}
}

// The exported grammar has the same greatest weights, by plain rounds.
func TestGrammarAgainstRounds(t *testing.T) {
	kinds := map[ValueKind]int{}
	for seed := range uint64(400) {
		r := rand.New(rand.NewPCG(seed, 3))
		sys := randomSystem(r, int(seed%3))
		q := questions(r)[seed%3]
		if seed%5 == 0 {
			q.AnyMoment, q.Prefixes = true, true
		}
		e := New(sys, 0)
		h := sys.Starts()[0]
		v := e.Solve(q).Greatest(h, all)
		kinds[v.Kind]++
		g, err := e.Grammar(h, all, q)
		if (err == ErrNoWitness) != (v.Kind == NoPath) {
			t.Fatalf("seed %d: %v, but greatest %v", seed, err, v)
		}
		if err != nil {
			continue
		}
		const far = 1 << 20
		val := make([]int64, g.NumNT)
		has := make([]bool, g.NumNT)
		for range 700 {
			for _, p := range g.Prods {
				w, ok := int64(0), true
				for i, x := range sys.Vector(p.Effect) {
					w += q.Weights[i] * x
				}
				for _, b := range p.Rhs {
					w += val[b]
					ok = ok && has[b]
				}
				if ok && (!has[p.Lhs] || w > val[p.Lhs]) {
					val[p.Lhs], has[p.Lhs] = min(w, far), true
				}
			}
		}
		for a := range has {
			if !has[a] {
				t.Fatalf("seed %d: %s has no run in a trimmed grammar", seed, g.Names[a])
			}
		}
		if v.Kind == Finite && v.String() != fmt.Sprint(val[0]) || v.Kind == Unbounded && val[0] < 100 {
			t.Fatalf("seed %d: greatest %v, by rounds %d", seed, v, val[0])
		}
	}
	for _, k := range []ValueKind{NoPath, Finite, Unbounded} {
		if kinds[k] < 20 {
			t.Errorf("only %d answers of kind %d", kinds[k], k)
		}
	}
}

// Without windows, every witness is a heaviest run or a pump: the second and third
// way of Witness, on random systems.
func TestFallbackWitnesses(t *testing.T) {
	defer func(old []int64) { windows = old }(windows)
	windows = nil
	pumped, repeats, heaviest := 0, 0, 0
	for seed := range uint64(1500) {
		r := rand.New(rand.NewPCG(seed, 4))
		sys := randomSystem(r, int(seed%4))
		q := questions(r)[seed%3]
		q.AnyMoment = seed%2 == 0
		q.Prefixes = seed%5 == 0
		e := New(sys, 0)
		h := sys.Starts()[0]
		s := e.Solve(q)
		if seed%7 == 0 {
			s.allowance = -1
		}
		v := s.Greatest(h, all)
		bound := int64(60)
		switch v.Kind {
		case Finite:
			n, _ := v.Int64()
			bound = n - 1
			heaviest++
		case NoPath:
			continue
		default:
			pumped++
		}
		p, err := s.FindWitness(h, all, bound)
		if err != nil {
			t.Fatalf("seed %d: %v, bound %d: %v\n%s", seed, v, bound, err, sys)
		}
		run := replayed(t, sys, p)
		if got := run.Total[0]*q.Weights[0] + run.Total[1]*q.Weights[1]; got <= bound {
			t.Fatalf("seed %d: %v, bound %d: witness weighs %d\n%s", seed, v, bound, got, sys)
		}
		for _, r := range p.Repeats {
			repeats++
			for i := range r.Len * (r.Times - 1) {
				if a, b := p.Steps[r.From+i], p.Steps[r.From+i+r.Len]; a.Head != b.Head || a.Index != b.Index {
					t.Fatalf("seed %d: %v: steps %d and %d differ", seed, r, r.From+i, r.From+i+r.Len)
				}
			}
		}
	}
	if pumped < 50 || heaviest < 50 || repeats < 50 {
		t.Errorf("only %d pumped, %d heaviest, %d repeats", pumped, heaviest, repeats)
	}
}
