package lia

import "context"

// Core returns the indices of assertions that together have no model, such that
// each can no longer be left out (as far as the budgets could tell: minimal is
// false when some question ended in Unknown). It asks fresh solvers, with this
// solver's options, about subsets of the assertions as the caller wrote them, so
// it does not trust the refutation it explains; lemmas from OnModel count as
// assertions. Assertion indices follow the order of Assert calls and lemmas, and
// AssertionName gives the names. Nil when the assertions are not refuted again.
func (s *Solver) Core(ctx context.Context) (core []int, minimal bool) {
	all := make([]int, len(s.asserts))
	for i := range all {
		all[i] = i
	}
	if s.refute(ctx, all) != Unsat {
		return nil, false
	}
	core, minimal = all, true
	// Drop blocks of halving size, then single ones (in the manner of delta
	// debugging: Zeller and Hildebrandt, 2002).
	size := len(core) / 2
	for {
		size = max(size, 1)
		for i := 0; i < len(core); {
			sub := append(append([]int(nil), core[:i]...), core[min(i+size, len(core)):]...)
			switch s.refute(ctx, sub) {
			case Unsat:
				core = sub
				continue
			case Unknown:
				minimal = false
			}
			i += size
		}
		if size == 1 {
			return core, minimal
		}
		size /= 2
	}
}

// AssertionName is the name of assertion i; "" for lemmas.
func (s *Solver) AssertionName(i int) string { return s.asserts[i].name }

// refute asks a fresh solver about some of the assertions.
func (s *Solver) refute(ctx context.Context, which []int) Status {
	f := s.fresh()
	for _, i := range which {
		f.Assert(s.asserts[i].name, s.asserts[i].f)
	}
	r, err := f.Check(ctx)
	if err != nil {
		s.fail("core: %v", err) // there is no callback to fail
	}
	return r.Status
}

// fresh is a solver with the same variables and no assertions.
func (s *Solver) fresh() *Solver {
	f := New(s.opt)
	for x := 1; x < len(s.names); x++ {
		f.newVar(s.names[x], s.declLo[x], s.declHi[x])
	}
	for b := 1; b < len(s.boolNames); b++ {
		f.NewBool(s.boolNames[b])
	}
	return f
}
