package judge

import (
	"errors"
	"fmt"
	"slices"
	"strconv"

	"pathtally/pds"
	"pathtally/properties"
	"pathtally/summary"
)

// engine is the searcher that the program uses: greatest weights on the
// grammar of runs, package summary.
type engine struct {
	m      properties.Model
	e      *summary.Engine
	budget int64
	// solved keeps questions that switch nothing off: starts share their answers.
	solved map[string]*summary.Solution
	// spent lists heads whose saturation ran out, so that it is not tried again.
	spent map[pds.Head]summary.Answer
	// masked names the last solution with something switched off.
	masked         string
	maskedSolution *summary.Solution
	// labels: per head, the labels of its rules; filled where labels are switched off.
	labels map[pds.Head][]pds.LabelID
}

func newEngine(m properties.Model, budget int64) *engine {
	return &engine{m: m, e: summary.New(m, budget), budget: budget, solved: map[string]*summary.Solution{}, spent: map[pds.Head]summary.Answer{}, labels: map[pds.Head][]pds.LabelID{}}
}

// saturate spends the budget of a start, once.
func (g *engine) saturate(h pds.Head) *stopped {
	a, ok := g.spent[h]
	if !ok {
		a = g.e.Saturate(h, g.budget)
		if a.Exhausted {
			g.spent[h] = a
		}
	}
	if !a.Exhausted {
		return nil
	}
	return &stopped{reason: fmt.Sprintf("steps, %s for one start", grouped(a.Budget)), steps: a.Budget}
}

// grouped prints a number with commas.
func grouped(n int64) string {
	s := strconv.FormatInt(n, 10)
	for i := len(s) - 3; i > 0; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	return s
}

func (g *engine) solution(a ask) *summary.Solution {
	q := summary.Question{Weights: a.weights, StopMarks: a.stops, AnyMoment: a.moment, TakeDoubts: a.mend, FearDoubts: a.fear}
	if len(a.off)+len(a.offLabels) > 0 {
		// Starts that are asked with the causes found so far switched off share
		// the solution, as long as no cause is new.
		masked := fmt.Sprint(a.weights, a.stops, a.moment, a.mend, a.off, a.offLabels)
		if masked == g.masked {
			return g.maskedSolution
		}
		defer func() { g.masked = masked }()
		off := make(map[ruleAt]bool, len(a.off))
		for _, r := range a.off {
			off[r] = true
		}
		q.Off = func(h pds.Head, rule int) bool {
			return off[ruleAt{h, rule}] || len(a.offLabels) > 0 && slices.Contains(a.offLabels, g.labelsOf(h)[rule])
		}
		g.maskedSolution = g.e.Solve(q)
		return g.maskedSolution
	}
	key := fmt.Sprint(a.weights, a.stops, a.moment, a.mend, a.fear)
	s, ok := g.solved[key]
	if !ok {
		s = g.e.Solve(q)
		g.solved[key] = s
	}
	return s
}

// labelsOf lists the labels of a head's rules.
func (g *engine) labelsOf(h pds.Head) []pds.LabelID {
	l, ok := g.labels[h]
	if !ok {
		for _, r := range g.m.Rules(h, nil) {
			l = append(l, r.Label)
		}
		g.labels[h] = l
	}
	return l
}

// accepting is what a question calls an end; at any moment every end is one.
func accepting(a ask) func(pds.StateID) bool {
	if a.moment {
		return func(pds.StateID) bool { return true }
	}
	return a.accept
}

func (g *engine) greatest(a ask) (greatestWeight, *stopped) {
	if stop := g.saturate(a.start); stop != nil {
		return greatestWeight{}, stop
	}
	return g.weight(g.solution(a).Greatest(a.start, accepting(a)))
}

func (g *engine) weight(v summary.Value) (greatestWeight, *stopped) {
	switch v.Kind {
	case summary.NoPath:
		return greatestWeight{none: true}, nil
	case summary.Unbounded:
		return greatestWeight{infinite: true}, nil
	case summary.Finite:
		n, ok := v.Int64()
		if !ok {
			return greatestWeight{}, &stopped{reason: "a count past 64 bits"}
		}
		return greatestWeight{n: n}, nil
	}
	return greatestWeight{}, &stopped{reason: fmt.Sprintf("steps, %s for one start", grouped(g.budget)), steps: g.budget}
}

func (g *engine) witness(a ask, bound int64) ([]pds.Choice, *stopped) {
	if stop := g.saturate(a.start); stop != nil {
		return nil, stop
	}
	p, err := g.solution(a).FindWitness(a.start, accepting(a), bound)
	switch {
	case err == nil:
		c := p.Choices()
		if c == nil {
			c = []pds.Choice{} // a path without steps is a path
		}
		return c, nil
	case errors.Is(err, summary.ErrNoWitness):
		return nil, nil
	case errors.Is(err, summary.ErrExhausted):
		return nil, &stopped{reason: fmt.Sprintf("steps, %s for one start", grouped(g.budget)), steps: g.budget}
	}
	return nil, &stopped{reason: "the search for a path: " + err.Error()}
}

// A level is a stack, shared with the stacks that it was built on.
type level struct {
	symbol pds.SymbolID
	below  *level
	rest   map[pds.StateID]rest
}

// rest is the least weight from a state and a level to an accepted end.
type rest struct {
	w    greatestWeight
	stop *stopped
}

func (g *engine) beside(a ask, t *trace, step, rule int) (greatestWeight, *stopped) {
	// Least weights are greatest weights under negated weights. Rules that are
	// switched off for the search are still right ways for a reader.
	b := a
	b.weights, b.off, b.offLabels, b.mend = negated(a.weights), nil, nil, false
	s := g.solution(b)
	under := t.levels()[step].below
	r := g.m.Rules(t.moves[step].head, nil)[rule]
	if r.Kind == pds.Stop {
		return greatestWeight{none: true}, nil
	}
	switch r.Kind {
	case pds.Step:
		under = &level{symbol: r.Top, below: under}
	case pds.Push:
		under = &level{symbol: r.Top, below: &level{symbol: r.Below, below: under}}
	}
	w, stop := g.restOf(s, b, r.State, under)
	if stop != nil || w.none {
		return w, stop
	}
	if w.infinite {
		return w, nil
	}
	var before int64
	if step > 0 {
		before = dot(a.weights, t.moves[step-1].after)
	}
	return greatestWeight{n: before + dot(a.weights, g.m.Vector(r.Effect)) - w.n}, nil
}

// restOf gives the greatest weight (of the negated question) from state q with
// the stack l.
func (g *engine) restOf(s *summary.Solution, a ask, q pds.StateID, l *level) (greatestWeight, *stopped) {
	if l == nil {
		return greatestWeight{none: !(a.moment || (a.accept != nil && a.accept(q)))}, nil
	}
	if r, ok := l.rest[q]; ok {
		return r.w, r.stop
	}
	h := pds.Head{State: q, Symbol: l.symbol}
	best := greatestWeight{none: true}
	take := func(w greatestWeight) {
		switch {
		case w.none || best.infinite:
		case best.none || w.infinite || w.n > best.n:
			best = w
		}
	}
	stop := g.saturate(h)
	if stop == nil {
		var w greatestWeight
		if w, stop = g.weight(s.Open(h)); stop == nil {
			take(w)
			exits, _ := g.e.Exits(h)
			for _, x := range exits {
				var first, then greatestWeight
				if first, stop = g.weight(s.Closed(h, x)); stop != nil {
					break
				}
				if first.none {
					continue
				}
				if then, stop = g.restOf(s, a, x, l.below); stop != nil {
					break
				}
				if !then.none {
					take(greatestWeight{infinite: first.infinite || then.infinite, n: first.n + then.n})
				}
			}
		}
	}
	if l.rest == nil {
		l.rest = map[pds.StateID]rest{}
	}
	l.rest[q] = rest{best, stop}
	return best, stop
}

// levels gives the stack before each move. What is known of a stack (level.rest)
// belongs to one question, and so does a trace.
func (t *trace) levels() []*level {
	if t.stacks != nil || len(t.moves) == 0 {
		return t.stacks
	}
	cur := &level{symbol: t.moves[0].head.Symbol}
	for i := range t.moves {
		t.stacks = append(t.stacks, cur)
		r := t.moves[i].rule
		switch r.Kind {
		case pds.Pop:
			cur = cur.below
		case pds.Step:
			cur = &level{symbol: r.Top, below: cur.below}
		case pds.Push:
			cur = &level{symbol: r.Top, below: &level{symbol: r.Below, below: cur.below}}
		}
	}
	return t.stacks
}
