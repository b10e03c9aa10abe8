package frontend

// This file handles calls that fit event lines of the rule.

import (
	"slices"

	"golang.org/x/tools/go/ssa"

	"pathtally/pds"
	"pathtally/properties"
)

// event handles a call that fits event lines of the rule. done is false if it
// concerns neither this instance nor the birth of one.
func (m *Model) event(fr *frame, c *ssa.Call, s *shape, ms []match, dst []pds.Rule) ([]pds.Rule, bool) {
	live, doubtful := m.concerned(fr.ns, ms)
	if len(live) == 0 && len(doubtful) == 0 {
		return nil, false
	}
	for _, o := range outcomes(live, doubtful) {
		sure, unsure, mark := m.tally(live, o), m.tally(doubtful, o), m.marks(live, o)
		var births []*match // a call may give several instances: os.Pipe
		for i := range live {
			if live[i].birth >= 0 && o.has(&live[i]) && fr.ns.phase == unborn {
				births = append(births, &live[i])
			}
		}
		base := fr.clone()
		m.define(base, c)
		m.applyOutcome(base, c, o)
		base.i++
		if len(births) > 0 {
			dst = append(dst, m.goTo(base.clone(), 0))
			for _, b := range births {
				this := base.clone()
				this.ns = nset{phase: born, touched: true}
				this.ns.add(m.birthName(m.resultName(c, b.birth), b.path))
				for _, b := range births {
					m.setFact(this, m.resultName(c, b.birth), m.nonNil())
				}
				// Each is an instance of its own: its lines alone count for it.
				own := slices.DeleteFunc(slices.Clone(live), func(mt match) bool {
					return mt.birth >= 0 && mt.birth != b.birth
				})
				r := m.goTo(this, m.label(label{kind: lblEvent, instr: c}))
				r.Effect, r.Mark = m.effect(m.tally(own, o)), mark
				dst = append(dst, r)
			}
			continue
		}
		if fr.ns.phase == born {
			base.ns.touched = true
		}
		r := m.goTo(base, m.label(label{kind: lblEvent, instr: c}))
		if fr.ns.phase == unborn {
			r.Label = 0
		} else {
			r.Effect, r.Mark = m.effect(sure), mark
			if len(doubtful) > 0 {
				r.DoubtEffect = m.effect(unsure)
				r.Doubt = m.doubt(c, "may be another object than the one asked about")
			}
		}
		dst = append(dst, r)
	}
	return dst, true
}

// concerned splits the matches into those that are about the instance (or in
// which it may be born) and those that may be.
func (m *Model) concerned(ns nset, ms []match) (live, doubtful []match) {
	counted := map[int]bool{}
	for _, mt := range ms {
		switch {
		case ns.phase == anyInst:
		case ns.phase == unborn:
			if mt.birth < 0 {
				continue
			}
		case mt.birth >= 0 && mt.subject == 0:
			continue // another instance's birth
		case mt.subject == 0:
		case ns.has(mt.subject):
		case ns.has(m.x.maybe(mt.subject)):
			doubtful = append(doubtful, mt)
			continue
		default:
			continue
		}
		// The lines of one count are a union: the first that fits counts,
		// unless it hangs on results.
		if mt.ev.Count >= 0 && len(mt.conds) == 0 && mt.birth < 0 {
			if counted[mt.ev.Count] {
				continue
			}
			counted[mt.ev.Count] = true
		}
		live = append(live, mt)
	}
	return live, doubtful
}

// outcomeOf is one combination of results that the event lines tell apart.
type outcomeOf struct {
	conds []resultCond // hold; nil: no line with conditions applies
	other []resultCond // the single condition that fails, if that is all there is to it
}

func (o outcomeOf) has(mt *match) bool {
	return len(mt.conds) == 0 || sameConds(mt.conds, o.conds)
}

func sameConds(a, b []resultCond) bool {
	if len(a) != len(b) {
		return false
	}
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

func outcomes(lists ...[]match) []outcomeOf {
	var out []outcomeOf
	for _, ms := range lists {
		for _, mt := range ms {
			if len(mt.conds) == 0 {
				continue
			}
			known := false
			for _, o := range out {
				known = known || sameConds(o.conds, mt.conds)
			}
			if !known {
				out = append(out, outcomeOf{conds: mt.conds})
			}
		}
	}
	rest := outcomeOf{}
	if len(out) == 1 && len(out[0].conds) == 1 {
		rest.other = out[0].conds
	}
	return append(out, rest)
}

func (m *Model) tally(ms []match, o outcomeOf) []int64 {
	v := make([]int64, len(m.rule.Counts))
	counted := map[int]bool{}
	for i := range ms {
		if e := ms[i].ev; e.Count >= 0 && o.has(&ms[i]) && !counted[e.Count] {
			counted[e.Count] = true
			v[e.Count] += e.Weight
		}
	}
	return v
}

func (m *Model) marks(ms []match, o outcomeOf) pds.Mark {
	var k pds.Mark
	for i := range ms {
		if o.has(&ms[i]) {
			k |= ms[i].ev.Mark
		}
	}
	return k
}

// applyOutcome records what the outcome says of the results.
func (m *Model) applyOutcome(fr *frame, call ssa.Value, o outcomeOf) {
	for _, c := range o.conds {
		m.setFact(fr, m.resultName(call, c.res), m.patAbs(c.con, true))
	}
	for _, c := range o.other {
		m.setFact(fr, m.resultName(call, c.res), m.patAbs(c.con, false))
	}
}

func (m *Model) patAbs(p properties.PatConst, holds bool) Abs {
	if p.Nil {
		if holds {
			return m.t.absOf(absVal{kind: aNil})
		}
		return m.nonNil()
	}
	switch v := p.Value.(type) {
	case bool:
		return m.boolAbs(v == holds)
	case int64:
		if holds {
			return m.intAbs(v, v)
		}
	}
	return 0
}
