package frontend

// This file starts goroutines.

import (
	"golang.org/x/tools/go/ssa"

	"pathtally/pds"
)

// spawn starts a goroutine. Its counts belong to the spawner's claim if it does
// something to the instance that is handed to it.
func (m *Model) spawn(fr *frame, g *ssa.Go, dst []pds.Rule) ([]pds.Rule, bool) {
	if b, ok := g.Call.Value.(*ssa.Builtin); ok {
		_ = b
		return nil, false
	}
	s, targets, closure := m.resolve(fr, g)
	if fr.ns.phase == unborn {
		return nil, false // the body is a starting point of its own
	}
	if ms := m.matchEvents(s); len(ms) > 0 {
		live, _ := m.concerned(fr.ns, ms)
		if len(live) > 0 {
			fr.i++
			fr.ns.touched = fr.ns.phase == born
			r := m.goTo(fr, m.label(label{kind: lblSpawn, instr: g}))
			r.Effect = m.effect(m.tally(live, outcomeOf{}))
			return append(dst, r), true
		}
	}
	var heads []pds.Head
	sum := m.sh.effectsAt(g)
	for _, t := range targets {
		l := m.linkOf(g, t, closure)
		if t.Blocks == nil || m.isEventFunc(t) || !m.bears(fr, l) {
			continue
		}
		ns := m.toCallee(fr.ns, l)
		own := false
		for _, e := range ns.names {
			own = own || l.fi.subjects[e] && !m.foldable(l.fi, e)
		}
		if own {
			continue // the body is a starting point of its own for it
		}
		heads = append(heads, pds.Head{State: runState, Symbol: m.symbol(symbol{kind: symSpawned, fn: int32(l.fi.id),
			ns: m.t.nset(ns), fs: m.t.factset(m.factsToCallee(fr, l, fr.b))})})
	}
	if len(heads) == 0 {
		m.pass(fr, g, sum)
	}
	m.kill(fr, g)
	if len(heads) == 0 {
		return nil, false
	}
	fr.i++
	fr.ns.touched = fr.ns.phase == born
	if len(heads) == 1 {
		r := m.goTo(fr, m.label(label{kind: lblSpawn, instr: g}))
		r.Spawn = heads
		return append(dst, r), true
	}
	for _, h := range heads {
		r := m.goTo(fr.clone(), m.label(label{kind: lblSpawn, instr: g}))
		r.Spawn = []pds.Head{h}
		dst = append(dst, r)
	}
	return dst, true
}
