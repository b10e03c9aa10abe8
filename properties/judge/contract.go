package judge

import (
	"fmt"

	"pathtally/pds"
	"pathtally/properties"
)

// A surplus is what a function leaves on a ledger (a difference of counts)
// when it returns normally.
type surplus struct {
	always  int64 // the same on every normal return; meaningful if uniform
	uniform bool
	success int64 // on exactly the returns that say success, none on the others; meaningful if split
	split   bool
	// told: it is not uniform, but what is left is the same on all returns whose
	// error is nil and on all others, and every return says which it is.
	told bool
	// onFailure: a return whose error is known not to be nil leaves it too.
	onFailure bool
}

// lends is the positive surplus that the contract of a lender leaves, 0 if
// the function keeps no such contract. What is kept on an error return is none:
// whoever is told of an error has nothing to give back.
func (s surplus) lends() int64 {
	switch {
	case s.uniform && s.always > 0 && !s.onFailure:
		return s.always
	case s.split && s.success > 0:
		return s.success
	}
	return 0
}

// says classes normal returns by what they tell the caller.
func says(e properties.Exit) (success, failure bool) {
	switch {
	case e.True:
		return true, false
	case e.False:
		return false, true
	case e.Outcome == properties.Success:
		return true, false
	case e.Outcome == properties.Failure:
		return false, true
	}
	return false, false
}

// span is the range of weights over the paths that end in accepted states.
type span struct {
	none bool
	ok   bool // both ends are finite
	lo   int64
	hi   int64
}

func (s span) is(n int64) bool { return !s.none && s.ok && s.lo == n && s.hi == n }

func (j *judge) span(head pds.Head, w []int64, accept func(properties.Exit) bool) (span, *stopped) {
	a := ask{start: head, weights: w, fear: true, accept: func(q pds.StateID) bool { return accept(j.m.Exit(q)) }}
	hi, stop := j.s.greatest(a)
	if stop != nil || hi.none {
		return span{none: stop == nil}, stop
	}
	a.weights = negated(w)
	lo, stop := j.s.greatest(a)
	if stop != nil {
		return span{}, stop
	}
	return span{ok: !hi.infinite && !lo.infinite, lo: -lo.n, hi: hi.n}, nil
}

// surplusOf judges a function alone, from its entry in one context.
func (j *judge) surplusOf(head pds.Head, born bool, u []int64) (surplus, *stopped) {
	key := fmt.Sprint(head, born, u)
	if s, ok := j.surpluses[key]; ok {
		return s, nil
	}
	normal := func(e properties.Exit) bool { return e.Kind == properties.ExitReturn && !(born && e.Unborn) }
	var s surplus
	all, stop := j.span(head, u, normal)
	if stop != nil {
		return s, stop
	}
	switch {
	case all.none || !all.ok:
	case all.lo == all.hi:
		s.uniform, s.always = true, all.lo
		bad, stop := j.span(head, u, func(e properties.Exit) bool { return normal(e) && e.Outcome == properties.Failure })
		if stop != nil {
			return s, stop
		}
		s.onFailure = !bad.none
	default:
		yes, stop := j.span(head, u, func(e properties.Exit) bool { y, _ := says(e); return normal(e) && y })
		if stop != nil {
			return s, stop
		}
		no, stop := j.span(head, u, func(e properties.Exit) bool { _, n := says(e); return normal(e) && n })
		if stop != nil {
			return s, stop
		}
		mute, stop := j.span(head, u, func(e properties.Exit) bool { y, n := says(e); return normal(e) && !y && !n })
		if stop != nil {
			return s, stop
		}
		if s.told, stop = j.tells(head, u, normal); stop != nil {
			return s, stop
		}
		if mute.none && no.is(0) && !yes.none && yes.ok && yes.lo == yes.hi {
			s.split, s.success = true, yes.lo
		}
	}
	j.surpluses[key] = s
	return s, nil
}

// tells says whether a function's error tells what it left on the ledger u.
func (j *judge) tells(head pds.Head, u []int64, normal func(properties.Exit) bool) (bool, *stopped) {
	for _, o := range []properties.Outcome{properties.Success, properties.Failure} {
		p, stop := j.span(head, u, func(e properties.Exit) bool { return normal(e) && e.Outcome == o })
		if stop != nil || p.none || !p.ok || p.lo != p.hi {
			return false, stop
		}
	}
	mute, stop := j.span(head, u, func(e properties.Exit) bool {
		return normal(e) && e.Outcome != properties.Success && e.Outcome != properties.Failure
	})
	return mute.none, stop
}

// An excuse is a contract that explains an answer.
type excuse struct {
	returns bool  // normal returns are even by contract
	credit  int64 // the caller holds that much: added to the bound
	note    properties.Note
}

// excuseOf looks for the contract under which a broken answer is right. It
// only ever speaks of an instance that exists before the root.
func (j *judge) excuseOf(si int, c *properties.Claim, q *properties.Question) (*excuse, *stopped) {
	s := &j.starts[si]
	if s.Instance == "" || s.Born {
		return nil, nil
	}
	u := direction(q.Weights)
	over := opens(q.Weights)
	if isEnd(c.Point) {
		if over {
			return j.lenderOf(si, u)
		}
		e, _, stop := j.settlerOf(si, u)
		return e, stop
	}
	if over || !hasBoth(q.Weights) {
		return nil, nil
	}
	// "Caller must hold": nothing is ever held beyond what the caller held.
	early, stop := j.s.greatest(ask{start: s.Head, weights: u, moment: true})
	if stop != nil || early.over(0) {
		return nil, stop
	}
	scale := content(q.Weights)
	own, stop := j.surplusOf(s.Head, s.Born, u)
	if stop != nil {
		return nil, stop
	}
	if own.uniform && own.always == 0 {
		return &excuse{credit: scale, note: properties.Note{Kind: "caller holds", Place: s.Root.Place,
			Text: fmt.Sprintf("whoever calls %s holds %s", s.Root.Name, s.Instance)}}, nil
	}
	e, k, stop := j.settlerOf(si, u)
	if stop != nil || e == nil {
		return nil, stop
	}
	return &excuse{credit: scale * k, note: e.note}, nil
}

func content(w []int64) int64 {
	var g int64
	for _, x := range w {
		g = gcd(g, x)
	}
	return g
}

func hasBoth(w []int64) bool {
	pos, neg := false, false
	for _, x := range w {
		pos, neg = pos || x > 0, neg || x < 0
	}
	return pos && neg
}

// lenderOf excuses a start that lends, if somebody settles.
func (j *judge) lenderOf(si int, u []int64) (*excuse, *stopped) {
	s := &j.starts[si]
	if s.Home == "" {
		return nil, nil
	}
	own, stop := j.surplusOf(s.Head, s.Born, u)
	k := own.lends()
	if stop != nil || k == 0 {
		return nil, stop
	}
	for _, ti := range j.homes[s.Home] {
		ok, stop := j.settles(ti, si, u, k)
		if stop != nil {
			return nil, stop
		}
		if ok {
			return &excuse{returns: true, note: j.pairNote(si, ti)}, nil
		}
	}
	return nil, nil
}

// settlerOf excuses a start that settles, if somebody lends; k is how much.
func (j *judge) settlerOf(si int, u []int64) (e *excuse, k int64, stop *stopped) {
	s := &j.starts[si]
	if s.Home == "" {
		return nil, 0, nil
	}
	own, stop := j.surplusOf(s.Head, s.Born, u)
	if stop != nil || !own.uniform || own.always >= 0 {
		return nil, 0, stop
	}
	k = -own.always
	for _, li := range j.homes[s.Home] {
		l := &j.starts[li]
		lent, stop := j.surplusOf(l.Head, l.Born, u)
		if stop != nil {
			return nil, 0, stop
		}
		if lent.lends() != k {
			continue
		}
		ok, stop := j.settles(si, li, u, k)
		if stop != nil {
			return nil, 0, stop
		}
		if ok {
			return &excuse{returns: true, note: j.pairNote(li, si)}, k, nil
		}
	}
	return nil, 0, nil
}

// settles says whether start ti gives back exactly what start li lends: it
// never takes, gives k back on every normal return, can be called by whoever
// can call the lender, and does not lend another object of the same place.
func (j *judge) settles(ti, li int, u []int64, k int64) (bool, *stopped) {
	t, l := &j.starts[ti], &j.starts[li]
	if t.Root.ID == l.Root.ID || t.Instance == "" || t.Born || (l.Exported && !t.Exported && t.Kind != "callback") {
		return false, nil
	}
	switch t.Kind {
	case "main", "init", "goroutine", "test":
		return false, nil // nobody calls these to settle
	}
	gives, stop := j.surplusOf(t.Head, t.Born, u)
	if stop != nil || !gives.uniform || gives.always != -k {
		return false, stop
	}
	takes, stop := j.s.greatest(ask{start: t.Head, weights: positive(u), moment: true})
	if stop != nil || takes.over(0) {
		return false, stop
	}
	for _, oi := range j.homes[t.Home] {
		o := &j.starts[oi]
		if oi == ti || o.Root.ID != t.Root.ID {
			continue
		}
		other, stop := j.surplusOf(o.Head, o.Born, u)
		if stop != nil || other.lends() > 0 {
			return false, stop
		}
	}
	return true, nil
}

func (j *judge) pairNote(li, ti int) properties.Note {
	l, t := &j.starts[li], &j.starts[ti]
	return properties.Note{Kind: "pair", Place: l.Root.Place, Text: fmt.Sprintf("%s and %s are called as a pair", l.Root.Name, t.Root.Name)}
}
