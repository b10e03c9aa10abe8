package summary

import (
	"fmt"
	"math/rand/v2"
	"sort"
	"strings"
	"testing"

	"pathtally/pds"
)

// The oracle: runs enumerated one by one with explicit stacks. It shares nothing
// with the engine.

type outcome struct {
	exit   pds.StateID // 0: stopped on the way
	weight int64
}

type oracle struct {
	sys     pds.System
	w       []int64
	q       Question
	endless map[pds.Head]bool // spawned heads that can never end
	memoEnd map[string]map[outcome]int
}

// lostWork stands for an exit in outcomes of runs that stop before a loss.
const lostWork pds.StateID = -1

type oracleMode int

const (
	ended  oracleMode = iota // spawned work has ended
	anyCut                   // stopped anywhere, spawned work too
)

// naiveExits iterates the definition of exits to the fixpoint.
func naiveExits(t *pds.Table) map[pds.Head]map[pds.StateID]bool {
	ex := map[pds.Head]map[pds.StateID]bool{}
	get := func(h pds.Head) map[pds.StateID]bool {
		if ex[h] == nil {
			ex[h] = map[pds.StateID]bool{}
		}
		return ex[h]
	}
	for changed := true; changed; {
		changed = false
		add := func(h pds.Head, q pds.StateID) {
			if !get(h)[q] {
				get(h)[q] = true
				changed = true
			}
		}
		for _, h := range t.Heads() {
			for _, r := range t.Rules(h, nil) {
				switch r.Kind {
				case pds.Pop:
					add(h, r.State)
				case pds.Step:
					for q := range get(pds.Head{State: r.State, Symbol: r.Top}) {
						add(h, q)
					}
				case pds.Push:
					for s := range get(pds.Head{State: r.State, Symbol: r.Top}) {
						for q := range get(pds.Head{State: s, Symbol: r.Below}) {
							add(h, q)
						}
					}
				}
			}
		}
	}
	return ex
}

// naiveEndless iterates the definition: which work can end if what it spawns can
// end or is endless; of the rest, that which leads to no other such work that does
// not lead back is endless; again.
func naiveEndless(t *pds.Table, exits map[pds.Head]map[pds.StateID]bool) map[pds.Head]bool {
	endless := map[pds.Head]bool{}
	spawns := map[pds.Head]bool{}
	next := map[pds.Head][]pds.Head{}
	for _, h := range t.Heads() {
		for _, r := range t.Rules(h, nil) {
			for _, s := range r.Spawn {
				spawns[s] = true
				next[h] = append(next[h], s)
			}
			if r.Kind == pds.Step || r.Kind == pds.Push {
				top := pds.Head{State: r.State, Symbol: r.Top}
				next[h] = append(next[h], top)
				if r.Kind == pds.Push {
					for q := range exits[top] {
						next[h] = append(next[h], pds.Head{State: q, Symbol: r.Below})
					}
				}
			}
		}
	}
	reach := func(h pds.Head) map[pds.Head]bool {
		seen := map[pds.Head]bool{h: true}
		work := []pds.Head{h}
		for len(work) > 0 {
			h := work[0]
			work = work[1:]
			for _, k := range next[h] {
				if !seen[k] {
					seen[k] = true
					work = append(work, k)
				}
			}
		}
		return seen
	}
	for {
		type end struct {
			h pds.Head
			q pds.StateID
		}
		can := map[end]bool{}
		ends := func(h pds.Head) bool {
			if endless[h] || can[end{h, lostWork}] {
				return true
			}
			for q := range exits[h] {
				if can[end{h, q}] {
					return true
				}
			}
			return false
		}
		for changed := true; changed; {
			changed = false
			for _, h := range t.Heads() {
				put := func(q pds.StateID) {
					if !can[end{h, q}] {
						can[end{h, q}] = true
						changed = true
					}
				}
				for _, r := range t.Rules(h, nil) {
					if r.Mark&pds.MarkLoss != 0 {
						put(lostWork)
					}
					ok := true
					for _, s := range r.Spawn {
						ok = ok && ends(s)
					}
					if !ok {
						continue
					}
					top := pds.Head{State: r.State, Symbol: r.Top}
					for q := lostWork; q < 10; q++ {
						switch {
						case r.Kind == pds.Pop && q == r.State:
							put(q)
						case (r.Kind == pds.Step || r.Kind == pds.Push && q == lostWork) && can[end{top, q}]:
							put(q)
						}
						if r.Kind == pds.Push {
							for s := range exits[top] {
								if can[end{top, s}] && can[end{pds.Head{State: s, Symbol: r.Below}, q}] {
									put(q)
								}
							}
						}
					}
				}
			}
		}
		var stuck []pds.Head
		for h := range spawns {
			if !ends(h) {
				stuck = append(stuck, h)
			}
		}
		if len(stuck) == 0 {
			return endless
		}
		for _, h := range stuck {
			bottom := true
			mine := reach(h)
			for _, k := range stuck {
				if mine[k] && !reach(k)[h] {
					bottom = false
				}
			}
			if bottom {
				endless[h] = true
			}
		}
	}
}

func (o *oracle) weigh(v []int64) (sum int64) {
	for i, x := range v {
		sum += x * o.w[i]
	}
	return sum
}

// runs gives all outcomes of at most limit steps, spawned work included, with
// the least number of steps of each. Outcomes with exit 0 are runs stopped on the
// way: anywhere (AnyMoment, or mode anyCut), or before a mark.
func (o *oracle) runs(h pds.Head, limit int, mode oracleMode) map[outcome]int {
	key := fmt.Sprint(h, limit, mode)
	if m, ok := o.memoEnd[key]; ok {
		return m
	}
	type config struct {
		state  pds.StateID
		stack  string // symbols as runes, top last
		weight int64
	}
	levels := make([]map[config]bool, limit+1)
	for i := range levels {
		levels[i] = map[config]bool{}
	}
	levels[0][config{h.State, string(rune(h.Symbol)), 0}] = true
	out := map[outcome]int{}
	put := func(x outcome, n int) {
		if old, ok := out[x]; !ok || n < old {
			out[x] = n
		}
	}
	for l, level := range levels {
		for c := range level {
			stack := []rune(c.stack)
			if len(stack) == 0 {
				put(outcome{c.state, c.weight}, l)
				continue
			}
			if o.q.AnyMoment || mode == anyCut {
				put(outcome{0, c.weight}, l)
			}
			head := pds.Head{State: c.state, Symbol: pds.SymbolID(stack[len(stack)-1])}
			for _, r := range o.sys.Rules(head, nil) {
				if mode == ended && r.Mark&o.q.StopMarks != 0 {
					put(outcome{0, c.weight}, l)
				}
				if r.Mark&pds.MarkLoss != 0 {
					put(outcome{lostWork, c.weight}, l)
				}
				if l == limit {
					continue
				}
				w := o.weigh(o.sys.Vector(r.Effect))
				if r.Doubt != 0 && o.q.TakeDoubts {
					w = min(w, o.weigh(o.sys.Vector(r.DoubtEffect)))
				}
				totals := map[outcome]int{{0, w}: 1}
				for _, s := range r.Spawn {
					next := map[outcome]int{}
					for x, n := range totals {
						if n+l > limit {
							continue
						}
						sub := mode
						if o.endless[s] || o.q.Prefixes {
							sub = anyCut
						}
						for y, m := range o.runs(s, limit-l-n, sub) {
							if sub == ended && y.exit == 0 {
								continue
							}
							if y.exit == lostWork {
								if sub != ended {
									continue
								}
							}
							z := outcome{0, x.weight + y.weight}
							if old, ok := next[z]; !ok || n+m < old {
								next[z] = n + m
							}
						}
					}
					totals = next
				}
				for x, n := range totals {
					if l+n > limit {
						continue
					}
					d := config{r.State, "", c.weight + x.weight}
					rest := stack[:len(stack)-1]
					switch r.Kind {
					case pds.Stop:
						if o.q.AnyMoment || mode == anyCut {
							put(outcome{0, d.weight}, l+n)
						}
						continue
					case pds.Pop:
						d.stack = string(rest)
					case pds.Step:
						d.stack = string(rest) + string(rune(r.Top))
					case pds.Push:
						d.stack = string(rest) + string(rune(r.Below)) + string(rune(r.Top))
					}
					levels[l+n][d] = true
				}
			}
		}
	}
	o.memoEnd[key] = out
	return out
}

// randomSystem makes a small system. spawns: how many rules in ten spawn.
func randomSystem(r *rand.Rand, spawns int) *pds.Table {
	states, symbols := 1+r.IntN(3), 1+r.IntN(3)
	b := pds.NewBuilder("c", "d")
	q := func() string { return string(rune('p' + r.IntN(states))) }
	g := func() string { return string(rune('a' + r.IntN(symbols))) }
	for i := range states {
		b.State(string(rune('p' + i)))
	}
	for i := range symbols {
		b.Symbol(string(rune('a' + i)))
	}
	for range 2 + r.IntN(7) {
		var opts []pds.Option
		if r.IntN(2) == 0 {
			opts = append(opts, pds.Adds("c", int64(r.IntN(5)-2)))
		}
		if r.IntN(4) == 0 {
			opts = append(opts, pds.Adds("d", int64(r.IntN(3)-1)))
		}
		if r.IntN(6) == 0 {
			opts = append(opts, pds.Doubts("x"), pds.DoubtAdds("c", int64(r.IntN(3)-1)))
		}
		if r.IntN(6) == 0 {
			opts = append(opts, pds.Marked("here"))
		}
		if r.IntN(10) < spawns {
			opts = append(opts, pds.Spawns(q(), g()))
			if r.IntN(4) == 0 {
				opts = append(opts, pds.Spawns(q(), g()))
			}
		}
		switch k := r.IntN(12); {
		case k == 0:
			if r.IntN(2) == 0 {
				opts = append(opts, pds.Marked(pds.LossMark))
			}
			b.Stop(q(), g(), opts...)
		case k < 5:
			b.Pop(q(), g(), q(), opts...)
		case k < 8:
			b.Step(q(), g(), q(), g(), opts...)
		default:
			b.Push(q(), g(), q(), g(), g(), opts...)
		}
	}
	b.Start("p", "a")
	return b.Table()
}

// check compares one question on one system with the oracle. It reports what was
// met, so that the caller can require every kind of answer.
func check(t *testing.T, sys *pds.Table, q Question, limit int, wide bool) Value {
	t.Helper()
	if wide {
		defer func(old []int64) { windows = old }(windows)
		windows = []int64{64}
	}
	e := New(sys, 0)
	h := sys.Starts()[0]
	if a := e.Saturate(h, 0); a.Exhausted {
		t.Fatalf("exhausted: %v", a)
	}
	if err := e.Sanity(); err != nil {
		t.Fatalf("sanity: %v\n%s", err, sys)
	}
	naive := naiveExits(sys)
	for i := range e.nodes {
		head := e.nodes[i].head
		got, complete := e.Exits(head)
		var want []pds.StateID
		for q := range naive[head] {
			want = append(want, q)
		}
		sort.Slice(want, func(i, j int) bool { return want[i] < want[j] })
		if !complete || fmt.Sprint(got) != fmt.Sprint(want) {
			t.Fatalf("exits of %+v: %v, want %v\n%s", head, got, want, sys)
		}
	}
	accept := func(q pds.StateID) bool { return q != 2 }
	s := e.Solve(q)
	v := s.Greatest(h, accept)
	o := &oracle{sys: sys, w: q.Weights, q: q, endless: naiveEndless(sys, naive), memoEnd: map[string]map[outcome]int{}}
	shortest := map[int64]int{} // weight → steps
	for x, n := range o.runs(h, limit, ended) {
		if x.exit == 0 || x.exit != lostWork && accept(x.exit) {
			if old, ok := shortest[x.weight]; !ok || n < old {
				shortest[x.weight] = n
			}
		}
	}
	fail := func(format string, args ...any) {
		t.Helper()
		t.Fatalf("%s\nquestion %+v\n%s", fmt.Sprintf(format, args...), q, sys)
	}
	bounds := []int64{-3, -1, 0, 1, 2, 5}
	if n, ok := v.Int64(); ok {
		bounds = append(bounds, n-1, n)
	}
	for w := range shortest {
		if above, _ := v.Above(w - 1); !above {
			fail("greatest weight %v, but a run weighs %d", v, w)
		}
	}
	for _, bound := range bounds {
		above, known := v.Above(bound)
		if !known {
			fail("not known")
		}
		p, err := s.FindWitness(h, accept, bound)
		if above != (err == nil) {
			fail("greatest weight %v, bound %d: %v", v, bound, err)
		}
		if err != nil {
			continue
		}
		run, err := pds.Replay(sys, h, p.Choices())
		if err != nil {
			fail("replay: %v", err)
		}
		if w := o.weigh(run.Total); w <= bound {
			fail("bound %d, the witness weighs %d: %+v", bound, w, p)
		}
		if run.End != p.End || run.State != p.Last.State || run.Configs[len(run.Configs)-1].Head.Symbol != p.Last.Symbol {
			fail("the path says it ends %v at %+v, replay %v in %d", p.End, p.Last, run.End, run.State)
		}
		switch {
		case run.End == pds.EndEmpty && !accept(run.State):
			fail("witness ends in %d", run.State)
		case run.End == pds.EndStop && !q.AnyMoment:
			fail("witness ends at a stop")
		case run.End == pds.EndMiddle && !q.AnyMoment:
			if p.Before < 0 || sys.Rules(p.Last, nil)[p.Before].Mark&q.StopMarks == 0 {
				fail("witness stops at no mark: %+v", p)
			}
		}
		least := -1
		for w, n := range shortest {
			if w > bound && (least < 0 || n < least) {
				least = n
			}
		}
		// The window is wide enough for runs this short.
		if wide && least >= 0 && p.Len() != least {
			fail("bound %d: witness of %d steps, shortest %d: %+v", bound, p.Len(), least, p)
		}
		checkAlong(s, p, accept, v, o, fail)
	}
	if err := s.Sanity(); err != nil {
		fail("sanity: %v", err)
	}
	return v
}

func questions(r *rand.Rand) []Question {
	w := []int64{int64(r.IntN(5) - 2), int64(r.IntN(3) - 1)}
	return []Question{
		{Weights: w},
		{Weights: w, TakeDoubts: true},
		{Weights: w, StopMarks: pds.MarkLoss},
	}
}

func TestAgainstEnumeration(t *testing.T) {
	kinds := map[ValueKind]int{}
	for seed := range uint64(700) {
		r := rand.New(rand.NewPCG(seed, 1))
		sys := randomSystem(r, 0)
		qs := questions(r)
		qs = append(qs, Question{Weights: qs[0].Weights, AnyMoment: true}, Question{Weights: qs[0].Weights, StopMarks: 2 | pds.MarkLoss})
		for i, q := range qs {
			if ok := t.Run(fmt.Sprintf("seed %d, question %d", seed, i), func(t *testing.T) { kinds[check(t, sys, q, 7, seed%2 == 0).Kind]++ }); !ok {
				return
			}
		}
	}
	for _, k := range []ValueKind{NoPath, Finite, Unbounded} {
		if kinds[k] < 100 {
			t.Errorf("only %d answers of kind %d", kinds[k], k)
		}
	}
}

func TestSpawnedAgainstEnumeration(t *testing.T) {
	kinds := map[ValueKind]int{}
	for seed := range uint64(500) {
		r := rand.New(rand.NewPCG(seed, 2))
		sys := randomSystem(r, 3)
		if !strings.Contains(sys.String(), "spawn") {
			continue
		}
		qs := questions(r)
		qs = append(qs, Question{Weights: qs[0].Weights, Prefixes: true}, Question{Weights: qs[0].Weights, AnyMoment: true, Prefixes: true},
			Question{Weights: qs[0].Weights, StopMarks: 2, Prefixes: true, TakeDoubts: true})
		for i, q := range qs {
			if ok := t.Run(fmt.Sprintf("seed %d, question %d", seed, i), func(t *testing.T) { kinds[check(t, sys, q, 6, seed%2 == 0).Kind]++ }); !ok {
				return
			}
		}
	}
	for _, k := range []ValueKind{NoPath, Finite, Unbounded} {
		if kinds[k] < 30 {
			t.Errorf("only %d answers of kind %d", kinds[k], k)
		}
	}
}

// checkAlong checks that values along a path hang together: the first is the
// greatest of all, every one is the best of its ways out (or of stopping here),
// and the way taken is worth what is worth behind it.
func checkAlong(s *Solution, p Path, accept func(pds.StateID) bool, v Value, o *oracle, fail func(string, ...any)) {
	forks := s.AlongPath(p, accept)
	if len(forks) != len(p.Steps)+1 {
		fail("%d forks for %d steps", len(forks), len(p.Steps))
	}
	if got := forks[0].Here; got.String() != v.String() {
		fail("along the path: %v at the start, greatest %v", got, v)
	}
	past := FiniteValue(0)
	for i, f := range forks {
		here := Value{Kind: NoPath}
		if s.q.AnyMoment {
			here = past
		}
		for _, w := range f.Ways {
			here = best(here, w)
		}
		stopped := p.End == pds.EndStop && i == len(p.Steps)
		if !stopped && (i < len(p.Steps) || p.Last.Symbol != 0) && here.String() != f.Here.String() {
			fail("step %d: %v, but the best way is worth %v: %+v", i, f.Here, here, p)
		}
		if i < len(p.Steps) {
			st := &p.Steps[i]
			if len(f.Ways) != len(o.sys.Rules(st.Head, nil)) {
				fail("step %d: %d ways", i, len(f.Ways))
			}
			next := forks[i+1].Here
			if st.Rule.Mark&s.q.StopMarks != 0 {
				next = best(next, past)
			}
			if f.Ways[st.Index].String() != next.String() {
				fail("step %d: the way taken is worth %v, then %v", i, f.Ways[st.Index], next)
			}
			c := completer{s: s}
			n := s.e.nodeOf[st.Head]
			past = plus(past, c.stepValue(s.e.nodes[n].ruleStart+int32(st.Index)))
		}
	}
}
