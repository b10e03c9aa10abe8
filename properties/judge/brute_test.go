package judge

import (
	"fmt"
	"math/rand"
	"testing"

	"pathtally/pds"
	"pathtally/properties"
)

// brute lists configurations of a small system one by one. It shares nothing
// with package summary.
type brute struct {
	m     *fake
	limit int
}

type bruteConfig struct {
	state  pds.StateID
	stack  []pds.SymbolID
	counts []int64
}

func (c bruteConfig) key() string { return fmt.Sprint(c.state, c.stack, c.counts) }

// breaks says that some path of at most limit configurations breaks the
// question; complete, that every path was walked.
func (b brute) breaks(from bruteConfig, a ask, bound int64) (broken, complete bool, least int64, ends bool) {
	queue := []bruteConfig{from}
	seen := map[string]bool{from.key(): true}
	for i := 0; i < len(queue); i++ {
		if i >= b.limit {
			return broken, false, least, ends
		}
		c := queue[i]
		w := dot(a.weights, c.counts)
		end := a.moment
		var rules []pds.Rule
		if len(c.stack) == 0 {
			end = end || (a.accept != nil && a.accept(c.state))
		} else {
			rules = b.m.Rules(pds.Head{State: c.state, Symbol: c.stack[len(c.stack)-1]}, nil)
			for _, r := range rules {
				end = end || r.Mark&a.stops != 0
			}
		}
		if end {
			broken = broken || w > bound
			if !ends || w < least {
				least, ends = w, true
			}
		}
		for _, r := range rules {
			next := bruteConfig{state: r.State, counts: append([]int64(nil), c.counts...)}
			for k, d := range b.m.Vector(r.Effect) {
				next.counts[k] += d
			}
			if r.Kind == pds.Stop {
				if a.moment {
					broken = broken || dot(a.weights, next.counts) > bound
				}
				continue
			}
			next.stack = apply(c.stack, r)
			if len(next.stack) > 7 {
				continue
			}
			if k := next.key(); !seen[k] {
				seen[k] = true
				queue = append(queue, next)
			}
		}
	}
	return broken, true, least, ends
}

// random makes a small system; roughly half of them break something.
func random(t *testing.T, r *rand.Rand) *fake {
	b := pds.NewBuilder("taken", "released")
	s := start(b, "s0", "x", "")
	states := []string{"run", "ok", "err"}
	var symbols []string
	for i := range 2 + r.Intn(4) {
		symbols = append(symbols, fmt.Sprintf("s%d", i))
	}
	any := func(l []string) string { return l[r.Intn(len(l))] }
	line := 1
	for range 4 + r.Intn(8) {
		line++
		opts := []pds.Option{pds.Labelled(fmt.Sprintf("event %d x", line))}
		switch r.Intn(4) {
		case 0:
			opts = append(opts, pds.Adds("taken", 1))
		case 1:
			opts = append(opts, pds.Adds("released", 1))
		}
		switch q, g, p := any(states), any(symbols), any(states); r.Intn(8) {
		case 0, 1, 2:
			b.Pop(q, g, p, opts...)
		case 3, 4:
			b.Step(q, g, p, any(symbols), opts...)
		case 5, 6:
			b.Push(q, g, p, any(symbols), any(symbols), opts...)
		default:
			b.Stop(q, g, append(opts, pds.Marked("loss"))...)
		}
	}
	return newFake(t, b, s)
}

// Against brute force: nothing that holds is broken by a path that was walked,
// and everything is decided. A broken verdict needs no check here: it was
// replayed.
func TestAgainstBruteForce(t *testing.T) {
	const seed = 20260301
	r := rand.New(rand.NewSource(seed))
	broken, held, sides := 0, 0, 0
	for n := range 600 {
		m := random(t, r)
		rule := mutex()
		j := newJudge(rule, m, newEngine(m, DefaultSteps), Options{})
		bf := brute{m, 4000}
		s := &j.starts[0]
		from := bruteConfig{s.Head.State, []pds.SymbolID{s.Head.Symbol}, make([]int64, 2)}
		for ci := range rule.Claims {
			c := &rule.Claims[ci]
			for qi := range c.Questions {
				a := j.asks(s, c, c.Questions[qi].Weights)
				bound := c.Questions[qi].Bound
				got, complete, _, _ := bf.breaks(from, a, bound)
				most, stop := j.s.greatest(a)
				if stop != nil {
					t.Fatalf("seed %d, system %d: %v", seed, n, stop.reason)
				}
				if got && !most.over(bound) || complete && !got && most.over(bound) && !deep(m, s.Head) {
					t.Fatalf("seed %d, system %d, %s: broken by brute force %v (complete %v), by the judge %v\n%s", seed, n, c.Name, got, complete, most, m.Table)
				}
				if !most.over(bound) {
					held++
					continue
				}
				broken++
				choices, stop := j.s.witness(a, bound)
				if stop != nil || choices == nil {
					t.Fatalf("seed %d, system %d, %s: no witness", seed, n, c.Name)
				}
				tr, _ := j.confirm(s, c, a, bound, choices)
				if sides += besideAgainstBrute(t, j, bf, a, tr, seed, n); t.Failed() {
					return
				}
			}
		}
		// The whole judge on the same system: no bug, and the tally adds up.
		judgeOne(t, rule, m)
	}
	if broken < 200 || held < 200 || sides < 200 {
		t.Errorf("%d broken, %d held, %d ways beside: the generator shows too little", broken, held, sides)
	}
}

// deep says that stacks of the system can grow past what brute force follows.
func deep(m *fake, h pds.Head) bool {
	_, complete := depth(m, h)
	return !complete
}

func depth(m *fake, h pds.Head) (int, bool) {
	type config struct {
		state pds.StateID
		stack string
	}
	seen := map[config]bool{}
	most := 0
	var walk func(q pds.StateID, stack []pds.SymbolID) bool
	walk = func(q pds.StateID, stack []pds.SymbolID) bool {
		k := config{q, fmt.Sprint(stack)}
		if seen[k] || len(stack) == 0 {
			return true
		}
		if len(stack) > 7 || len(seen) > 4000 {
			return false
		}
		seen[k] = true
		most = max(most, len(stack))
		for _, r := range m.Rules(pds.Head{State: q, Symbol: stack[len(stack)-1]}, nil) {
			if r.Kind != pds.Stop && !walk(r.State, apply(stack, r)) {
				return false
			}
		}
		return true
	}
	return most, walk(h.State, []pds.SymbolID{h.Symbol})
}

// besideAgainstBrute compares the least weight beside each step of a path.
func besideAgainstBrute(t *testing.T, j *judge, bf brute, a ask, tr *trace, seed, n int) (compared int) {
	stack := []pds.SymbolID{tr.moves[0].head.Symbol}
	counts := make([]int64, 2)
	for i := range tr.moves {
		for k, rule := range j.m.Rules(tr.moves[i].head, nil) {
			if rule.Kind == pds.Stop {
				continue
			}
			got, stop := j.s.beside(a, tr, i, k)
			if stop != nil {
				t.Fatalf("seed %d, system %d: %s", seed, n, stop.reason)
			}
			from := bruteConfig{state: rule.State, stack: apply(stack, rule), counts: append([]int64(nil), counts...)}
			for c, d := range j.m.Vector(rule.Effect) {
				from.counts[c] += d
			}
			_, complete, least, ends := bf.breaks(from, a, 0)
			switch {
			case ends && (got.none || !got.infinite && got.n > least):
				t.Errorf("seed %d, system %d, step %d, rule %d: least %+v, and brute force has %d\n%s", seed, n, i, k, got, least, bf.m.Table)
			case complete && ends && !got.infinite && got.n == least, complete && !ends && got.none:
				compared++
			}
			if t.Failed() {
				return compared
			}
		}
		for c, d := range tr.moves[i].delta {
			counts[c] += d
		}
		if tr.moves[i].rule.Kind == pds.Stop {
			break
		}
		stack = apply(stack, tr.moves[i].rule)
	}
	return compared
}

var _ properties.Model = (*fake)(nil)
