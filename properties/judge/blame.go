package judge

import (
	"fmt"

	"pathtally/pds"
	"pathtally/properties"
)

// maxLook bounds the search for what stands on the way not taken, in
// configurations. It only feeds a sentence.
const maxLook = 2000

// blamed says where a finding stands.
type blamed struct {
	act     int // index into trace.acts of the function to blame
	opening int // index into trace.moves of the event that opens it; -1 if none
	opened  Spot
	cause   Spot
	kind    properties.StepKind // of the cause
	passed  *Spot               // the event that the way not taken has
	other   string              // the way not taken
	byFork  bool                // the cause stands behind a fork
	fork    Spot                // that fork
	mask    []ruleAt            // switched off before asking again
	label   pds.LabelID         // switched off if that brings the same finding again; 0 if none
}

// maskMove makes move i what is switched off next.
func (b *blamed) maskMove(t *trace, i int) {
	b.mask, b.label = []ruleAt{{t.moves[i].head, t.choices[i].Rule}}, t.moves[i].rule.Label
}

// event is the text of the event that breaks a claim about moments.
func (b *blamed) event() string {
	if b.passed != nil {
		return b.passed.Text
	}
	return b.cause.Text
}

// blame finds the frame and the step that lose the instance.
func (j *judge) blame(s *properties.Start, a ask, bound int64, t *trace, by leaving) (*blamed, *stopped) {
	w := a.weights
	b := &blamed{opening: t.opening(w, bound)}
	if b.opening >= 0 {
		b.opened = j.spot(t, b.opening)
	}
	act, stop := j.frame(s, a, bound, t, b.opening, by)
	if stop != nil {
		return nil, stop
	}
	b.act = act
	if by == byMoment {
		j.causeAtMoment(a, t, b)
		// The event may stand in a callee that is right on its own: then the step
		// of the blamed function that leads to it is the one to change.
		last := len(t.moves) - 1
		if a.stops == 0 && b.opening >= 0 {
			last = b.opening
		}
		if j.endsIn(a, t, b) != b.act {
			if k := j.anchor(t, b.act, last); k >= 0 {
				event := b.cause
				b.passed, b.cause, b.kind = &event, j.spot(t, k), properties.StepCall
				b.label = t.moves[k].rule.Label
			}
		}
		return b, nil
	}
	from := b.opening + 1
	if !opens(w) {
		from = 0 // one too many: any fork before it may be to blame
	}
	for i := len(t.moves) - 1; i >= from; i-- {
		mv := &t.moves[i]
		rules := j.m.Rules(mv.head, nil)
		if len(rules) < 2 {
			continue
		}
		mine, stop := j.decides(s, a, bound, t, mv.act, b.act, b.opening, by)
		if stop != nil {
			return nil, stop
		}
		if !mine {
			continue
		}
		for r := range rules {
			if r == t.choices[i].Rule {
				continue
			}
			least, stop := j.s.beside(a, t, i, r)
			if stop != nil {
				return nil, stop
			}
			if !least.none && (least.infinite || least.n <= bound) {
				j.causeAtFork(w, t, i, r, b)
				return b, nil
			}
		}
	}
	if found, stop := j.causeInSpawned(s, a, bound, t, b); stop != nil || found {
		return b, stop
	}
	if !opens(w) && b.opening >= 0 {
		b.cause, b.kind = b.opened, properties.StepEvent
	} else {
		b.cause, b.kind = j.leaving(t, b.act)
	}
	switch {
	case b.opening >= 0:
		b.maskMove(t, b.opening)
	case len(t.moves) > 0:
		last := len(t.moves) - 1
		b.maskMove(t, last)
	}
	return b, nil
}

// causeInSpawned blames a fork in work that the blamed function (or a call of
// it) spawned, if the other side had made the counts right.
func (j *judge) causeInSpawned(s *properties.Start, a ask, bound int64, t *trace, b *blamed) (found bool, stop *stopped) {
	w := a.weights
	for i := len(t.moves) - 1; i >= 0; i-- {
		mv := &t.moves[i]
		if len(mv.spawned) == 0 || !t.inside(mv.act, b.act) {
			continue
		}
		for k, head := range mv.rule.Spawn {
			sub, err := replay(j.m, head, t.choices[i].Spawned[k])
			if err != nil {
				j.bug("replaying spawned work", s, err.Error())
			}
			inner := ask{start: head, weights: w, stops: pds.MarkLoss, mend: a.mend, accept: func(pds.StateID) bool { return true }}
			// What the rest of the path leaves for this piece of work.
			room := bound - (dot(w, t.total()) - dot(w, sub.total()))
			for at := len(sub.moves) - 1; at >= 0; at-- {
				rules := j.m.Rules(sub.moves[at].head, nil)
				for r := range rules {
					if r == sub.choices[at].Rule {
						continue
					}
					least, stop := j.s.beside(inner, sub, at, r)
					if stop != nil {
						return false, stop
					}
					if !least.none && (least.infinite || least.n <= room) {
						j.causeAtFork(w, sub, at, r, b)
						return true, nil
					}
				}
			}
		}
	}
	return false, nil
}

// decides says whether a fork of activation act can be what loses the instance
// for the blamed one: it stands in it or below it, and not in a call that
// returned as usual and either opened the instance and is right on its own or
// keeps a contract, or leaves the counts as they are whatever it does, or tells
// its caller by its error what it left.
func (j *judge) decides(s *properties.Start, a ask, bound int64, t *trace, act, blamed, opening int, by leaving) (bool, *stopped) {
	if !t.inside(act, blamed) {
		return false, nil
	}
	for ; act != blamed; act = t.acts[act].parent {
		if !j.returned(t, act) {
			continue
		}
		if opening >= 0 && t.inside(t.moves[opening].act, act) {
			right, contract, stop := j.alone(s, a, bound, t, act, by)
			if stop != nil || right || contract {
				return false, stop
			}
			continue
		}
		own, stop := j.surplusOf(t.acts[act].entry, s.Born, direction(a.weights))
		if stop != nil || own.told {
			return false, stop
		}
		all, stop := j.span(t.acts[act].entry, a.weights, func(properties.Exit) bool { return true })
		if stop != nil || all.is(0) {
			return false, stop
		}
	}
	return true, nil
}

// returned says that an activation was left by a normal return on the path.
func (j *judge) returned(t *trace, act int) bool {
	base := t.acts[act].base
	entered := false
	for i := range t.moves {
		mv := &t.moves[i]
		entered = entered || mv.act == act
		if entered && mv.rule.Kind == pds.Pop && mv.height == base && t.inside(mv.act, act) {
			return j.m.Exit(mv.rule.State).Kind == properties.ExitReturn
		}
	}
	return false
}

// frame climbs from the function of the opening event (for a claim about
// moments: of the event that breaks it) while a function, judged alone, is
// right or keeps a contract.
func (j *judge) frame(s *properties.Start, a ask, bound int64, t *trace, opening int, by leaving) (int, *stopped) {
	act := 0
	switch {
	case by == byMoment && a.stops != 0:
		act = j.actAtEnd(t)
	case opening < 0:
		return 0, nil
	default:
		act = t.moves[opening].act
	}
	lent := -1 // innermost function that was passed for its contract
	for act > 0 {
		right, contract, stop := j.alone(s, a, bound, t, act, by)
		if stop != nil {
			return 0, stop
		}
		if !right && !contract {
			return act, nil
		}
		if contract && lent < 0 {
			lent = act
		}
		act = t.acts[act].parent
	}
	if lent >= 0 && by != byMoment {
		// Everybody up to the root is uniform: then nobody on this path settles, and
		// the innermost one is the place to look at, unless a settler is known.
		u := direction(a.weights)
		own, stop := j.surplusOf(s.Head, s.Born, u)
		if stop != nil {
			return 0, stop
		}
		if own.uniform && own.always != 0 && !j.settled(s, u) {
			return lent, nil
		}
	}
	return 0, nil
}

// settled says that some start of the instance's place gives back.
func (j *judge) settled(s *properties.Start, u []int64) bool {
	if s.Home == "" {
		return false
	}
	for _, ti := range j.homes[s.Home] {
		gives, stop := j.surplusOf(j.starts[ti].Head, j.starts[ti].Born, u)
		if stop == nil && gives.uniform && gives.always < 0 {
			return true
		}
	}
	return false
}

// alone judges an activation from its entry head: right if it leaves nothing
// or hands all on (for a claim about moments: if it keeps the claim); a contract
// if it counts once and returns with the same surplus, or with it exactly on
// success.
func (j *judge) alone(s *properties.Start, a ask, bound int64, t *trace, act int, by leaving) (right, contract bool, stop *stopped) {
	w := a.weights
	head := t.acts[act].entry
	inner := ask{start: head, weights: w, stops: a.stops, moment: a.moment}
	most, stop := j.s.greatest(inner)
	if stop != nil {
		return false, false, stop
	}
	if by == byMoment {
		if !most.over(bound) {
			return true, false, nil
		}
	} else {
		if most.over(0) {
			return false, false, nil // it loses the instance itself
		}
		all, stop := j.span(head, w, func(properties.Exit) bool { return true })
		if stop != nil || all.none {
			return false, false, stop
		}
		rest, stop := j.span(head, w, func(e properties.Exit) bool {
			return !(s.Born && e.Unborn) && !(j.rule.Moves && e.Outside)
		})
		if stop != nil {
			return false, false, stop
		}
		if rest.none || rest.is(0) {
			return true, false, nil
		}
	}
	// What was born and may move is handed on or lost; nobody lends it nameless.
	if t.within(act, w) != 1 || (s.Born && j.rule.Moves) {
		return false, false, nil
	}
	own, stop := j.surplusOf(head, s.Born, direction(w))
	if stop != nil {
		return false, false, stop
	}
	return false, own.lends() > 0 || (own.uniform && own.always < 0) || (own.split && own.success < 0), nil
}

// anchor is the move of the blamed function that move i is, or that leads to
// it through calls; -1 if it shows none.
func (j *judge) anchor(t *trace, act, i int) int {
	for k := min(i, len(t.moves)-1); k >= 0; k-- {
		if l := t.moves[k].rule.Label; t.moves[k].act == act && l != 0 {
			if j.m.Step(l).Place.Line == 0 {
				return -1
			}
			return k
		}
	}
	return -1
}

// spot describes the step of a move.
func (j *judge) spot(t *trace, i int) Spot {
	mv := &t.moves[i]
	fn := t.acts[mv.act].fn
	if mv.rule.Label == 0 {
		return Spot{Place: fn.Place, Function: fn.Name}
	}
	st := j.m.Step(mv.rule.Label)
	name := st.Func.Name
	if name == "" {
		name = fn.Name
	}
	return Spot{Place: st.Place, Function: name, Text: st.Text}
}

// causeAtMoment blames the event itself: for `always` the one that was counted
// last, for `before` the one that the path stands before.
func (j *judge) causeAtMoment(a ask, t *trace, b *blamed) {
	b.kind = properties.StepEvent
	if a.stops != 0 && t.end.Symbol != 0 {
		for i, r := range j.m.Rules(t.end, nil) {
			if r.Mark&a.stops == 0 {
				continue
			}
			b.mask = append(b.mask, ruleAt{t.end, i})
			b.label = r.Label
			if b.cause.Place.Line == 0 && r.Label != 0 {
				st := j.m.Step(r.Label)
				b.cause = Spot{Place: st.Place, Function: st.Func.Name, Text: st.Text}
			}
		}
		if len(b.mask) > 0 {
			if b.cause.Place.Line == 0 {
				fn := j.m.Frame(t.end).Func
				b.cause = Spot{Place: fn.Place, Function: fn.Name}
			}
			return
		}
	}
	i := b.opening
	if i < 0 {
		i = len(t.moves) - 1
	}
	if i < 0 {
		fn := t.acts[0].fn
		b.cause = Spot{Place: fn.Place, Function: fn.Name}
		return
	}
	b.cause = j.spot(t, i)
	b.maskMove(t, i)
}

// endsIn is the activation of the event that breaks a claim about moments.
func (j *judge) endsIn(a ask, t *trace, b *blamed) int {
	if a.stops != 0 {
		return j.actAtEnd(t)
	}
	if b.opening >= 0 {
		return t.moves[b.opening].act
	}
	return b.act
}

// actAtEnd is the activation in which the path stopped.
func (j *judge) actAtEnd(t *trace) int {
	h := 0
	if n := len(t.run.Configs); n > 0 {
		h = t.run.Configs[n-1].Depth
	}
	for i := len(t.acts) - 1; i > 0; i-- {
		if t.acts[i].base <= h && t.acts[i].fn.ID == j.m.Frame(t.end).Func.ID {
			return i
		}
	}
	return 0
}

// causeAtFork blames the step behind the last fork whose other side still had
// a right way out. A fork at which the path leaves its line (a call that
// panics) is itself that step.
func (j *judge) causeAtFork(w []int64, t *trace, i, other int, b *blamed) {
	b.byFork, b.fork = true, j.spot(t, i)
	b.maskMove(t, i)
	at := i
	kind := properties.StepKind("")
	if l := t.moves[i].rule.Label; l != 0 {
		kind = j.m.Step(l).Kind
	}
	if kind == properties.StepBranch || kind == "" {
		for k := i + 1; k < len(t.moves); k++ {
			l := t.moves[k].rule.Label
			if l == 0 {
				continue
			}
			// A step of a caller is no longer what this fork leads to.
			// Nor is the next fork: then this one is all there is to show.
			st := j.m.Step(l)
			if st.Place.Line > 0 && (kind == "" || t.inside(t.moves[k].act, t.moves[i].act) && st.Kind != properties.StepBranch) {
				at, kind = k, st.Kind
			}
			break
		}
	}
	b.cause = j.spot(t, at)
	b.kind = kind
	rule := j.m.Rules(t.moves[i].head, nil)[other]
	if rule.Label != 0 {
		st := j.m.Step(rule.Label)
		if st.Kind == properties.StepBranch && st.Text != "" {
			b.other = fmt.Sprintf("%s, in line %d", st.Text, st.Place.Line)
		}
	}
	b.passed = j.look(w, t, i, rule)
}

// look finds the nearest event that lowers w on the way not taken.
func (j *judge) look(w []int64, t *trace, i int, other pds.Rule) *Spot {
	type config struct {
		state pds.StateID
		stack []pds.SymbolID
	}
	// The stack before move i, by executing the moves up to there again.
	stack := []pds.SymbolID{t.moves[0].head.Symbol}
	for k := range i {
		stack = apply(stack, t.moves[k].rule)
	}
	lowers := func(r pds.Rule) *Spot {
		if dot(w, j.m.Vector(r.Effect)) >= 0 || r.Label == 0 {
			return nil
		}
		st := j.m.Step(r.Label)
		if st.Place.Line == 0 {
			return nil
		}
		return &Spot{Place: st.Place, Function: st.Func.Name, Text: st.Text}
	}
	if s := lowers(other); s != nil {
		return s
	}
	type key struct {
		head   pds.Head
		height int
	}
	if other.Kind == pds.Stop {
		return nil
	}
	queue := []config{{other.State, apply(stack, other)}}
	seen := map[key]bool{}
	for n := 0; n < len(queue) && n < maxLook; n++ {
		c := queue[n]
		if len(c.stack) == 0 {
			continue
		}
		h := pds.Head{State: c.state, Symbol: c.stack[len(c.stack)-1]}
		k := key{h, len(c.stack)}
		if seen[k] {
			continue
		}
		seen[k] = true
		for _, r := range j.m.Rules(h, nil) {
			if s := lowers(r); s != nil {
				return s
			}
			if r.Kind != pds.Stop {
				queue = append(queue, config{r.State, apply(c.stack, r)})
			}
		}
	}
	return nil
}

// apply gives the stack behind a rule, leaving the given one as it is.
func apply(stack []pds.SymbolID, r pds.Rule) []pds.SymbolID {
	next := append(make([]pds.SymbolID, 0, len(stack)+1), stack[:len(stack)-1]...)
	switch r.Kind {
	case pds.Step:
		next = append(next, r.Top)
	case pds.Push:
		next = append(next, r.Below, r.Top)
	}
	return next
}

// leaving is the last step that the blamed function shows: its return, or its
// closing brace.
func (j *judge) leaving(t *trace, act int) (Spot, properties.StepKind) {
	for i := len(t.moves) - 1; i >= 0; i-- {
		mv := &t.moves[i]
		if mv.act != act || mv.rule.Label == 0 {
			continue
		}
		st := j.m.Step(mv.rule.Label)
		if st.Place.Line > 0 && (st.Kind == properties.StepReturn || st.Kind == properties.StepPanic || st.Kind == properties.StepEnd) {
			return j.spot(t, i), st.Kind
		}
	}
	fn := t.acts[act].fn
	if fn.End.Line > 0 {
		return Spot{Place: fn.End, Function: fn.Name, Text: "}"}, properties.StepEnd
	}
	return Spot{Place: fn.Place, Function: fn.Name}, properties.StepEnd
}
