package frontend

import (
	"fmt"
	"strings"

	"pathtally/pds"
	"pathtally/properties"
)

var symNames = [...]string{"none", "entry", "at", "back", "leave", "deferred", "deferback", "spawned"}

// SymbolString prints a stack symbol: kind, function, block.instruction, names, facts.
func (m *Model) SymbolString(g pds.SymbolID) string {
	s := m.symbols[g]
	return fmt.Sprintf("%s %s:%d.%d %s%s", symNames[s.kind], m.fns[s.fn].fn.String(), s.blk, s.idx, m.nsetString(m.t.nsets[s.ns]), m.factsString(m.t.facts[s.fs]))
}

// StateString prints a control state.
func (m *Model) StateString(q pds.StateID) string {
	s := m.states[q]
	switch s.kind {
	case stRun:
		return "run"
	case stExit:
		return fmt.Sprintf("exit%d/%d %s%s", s.exit, s.outcome, m.nsetString(m.t.nsets[s.ns]), m.factsString(m.t.facts[s.fs]))
	case stUnwind:
		return fmt.Sprintf("unwind%d %d.%d %s%s", s.exit, s.blk, s.idx, m.nsetString(m.t.nsets[s.ns]), m.factsString(m.t.facts[s.fs]))
	}
	return "none"
}

func (m *Model) nsetString(s nset) string {
	var b strings.Builder
	switch s.phase {
	case unborn:
		b.WriteString("{unborn}")
		return b.String()
	case anyInst:
		b.WriteString("{any}")
		return b.String()
	}
	b.WriteString("{")
	for i, e := range s.names {
		if i > 0 {
			b.WriteString(" ")
		}
		b.WriteString(m.x.String(e))
	}
	if s.outside {
		b.WriteString(" outside")
	}
	b.WriteString("}")
	return b.String()
}

func (m *Model) factsString(f factset) string {
	if len(f) == 0 {
		return ""
	}
	var b strings.Builder
	b.WriteString("[")
	for i, x := range f {
		if i > 0 {
			b.WriteString(", ")
		}
		b.WriteString(m.x.String(x.key) + " " + m.absString(x.val))
	}
	b.WriteString("]")
	return b.String()
}

func (m *Model) absString(a Abs) string {
	v := m.t.abs[a]
	switch v.kind {
	case aNil:
		return "nil"
	case aNon:
		return "non-nil"
	case aBool:
		return fmt.Sprint(v.lo == 1)
	case aInt:
		lo, hi := fmt.Sprint(v.lo), fmt.Sprint(v.hi)
		if v.lo == minInt {
			lo = ""
		}
		if v.hi == maxInt {
			hi = ""
		}
		return "in " + lo + ".." + hi
	case aEq:
		return "= " + v.c
	case aNe:
		return "!= " + v.c
	case aType:
		return "is " + v.typ.String()
	case aFunc:
		return "is " + v.fn.Name()
	}
	return "?"
}

var _ properties.Model = (*Model)(nil)
