package frontend

// This file follows functions that are handed to code out of sight.

import (
	"go/types"

	"golang.org/x/tools/go/ssa"

	"pathtally/pds"
)

// callbackLink is the link of a function value that the callee of site calls.
func (m *Model) callbackLink(site ssa.CallInstruction, arg ssa.Value, g *ssa.Function) *link {
	l := &link{fi: m.info(g), site: site, callback: true}
	if mc := closureOf(arg); mc != nil {
		l.made = mc
	} else {
		l.closure = m.x.name(arg)
	}
	return l
}

// callbacks handles functions handed to code without a body, or out of sight,
// that a model says calls them.
func (m *Model) callbacks(fr *frame, c *ssa.Call, targets []*ssa.Function, dst []pds.Rule) ([]pds.Rule, bool) {
	for _, v := range c.Call.Args {
		if _, ok := v.Type().Underlying().(*types.Signature); !ok {
			continue
		}
		fn, mc := m.funcValue(fr, v)
		if fn == nil {
			continue
		}
		l := m.callbackLink(c, v, fn)
		if mc != nil {
			l.made, l.closure = mc, 0
		}
		if !m.bears(fr, l) || m.isEventFunc(fn) {
			continue
		}
		how := m.callbackModel(c, targets, fn)
		if how == cbNone {
			// It may be called later: it has the instance now.
			m.note(c, "callback", "the function handed to "+m.calleeText(c)+" is taken to be called later")
			if fr.ns.phase == born && m.rule.Moves {
				fr.ns.outside = true
			}
			continue
		}
		return m.callbackRules(fr, c, v, l, how, dst), true
	}
	return nil, false
}

// callbackRules: the callee may call the function, and come back.
func (m *Model) callbackRules(fr *frame, c *ssa.Call, v ssa.Value, l *link, how callbackHow, dst []pds.Rule) []pds.Rule {
	if how != cbExactly {
		skip := fr.clone()
		m.kill(skip, c)
		m.define(skip, c)
		skip.i++
		dst = append(dst, m.goTo(skip, 0))
	}
	in := fr.clone()
	ns := m.lend(m.toCallee(in.ns, l))
	fs := m.factsToCallee(in, l, in.b)
	m.kill(in, c)
	return append(dst, pds.Rule{Kind: pds.Push, State: runState,
		Top: m.entry(l.fi, ns, fs, recNo),
		Below: m.symbol(symbol{kind: symCont, fn: int32(fr.fi.id), blk: int32(fr.b.Index), idx: int32(fr.i),
			ns: m.t.nset(in.ns), fs: m.t.factset(in.fs),
			aux: m.cont(contRef{callee: int32(l.fi.id), closure: l.closure, bound: l.made, rec: fr.rec, callback: v, again: how == cbMany})}),
		Label: m.label(label{kind: lblCallback, instr: c, fn: l.fi.fn})})
}

type callbackHow uint8

const (
	cbNone    callbackHow = iota
	cbOnce                // at most once
	cbExactly             // exactly once
	cbMany                // any number of times
)

// callbackModel says how code out of sight calls a function it is handed.
// Source: the documentation of the standard library.
func (m *Model) callbackModel(c *ssa.Call, targets []*ssa.Function, fn *ssa.Function) callbackHow {
	if fn.Synthetic == "range-over-func yield" {
		return cbMany
	}
	var obj *types.Func
	if c.Call.IsInvoke() {
		obj = c.Call.Method
	} else if g := c.Call.StaticCallee(); g != nil {
		obj = funcObject(g)
	}
	if obj == nil {
		return cbNone
	}
	return callbackTable[obj.FullName()]
}

var callbackTable = map[string]callbackHow{
	"(*sync.Once).Do":                 cbOnce,
	"sort.Slice":                      cbMany,
	"sort.SliceStable":                cbMany,
	"sort.Search":                     cbMany,
	"slices.SortFunc":                 cbMany,
	"slices.SortStableFunc":           cbMany,
	"slices.ContainsFunc":             cbMany,
	"slices.IndexFunc":                cbMany,
	"slices.DeleteFunc":               cbMany,
	"strings.Map":                     cbMany,
	"strings.FieldsFunc":              cbMany,
	"strings.IndexFunc":               cbMany,
	"bytes.Map":                       cbMany,
	"path/filepath.Walk":              cbMany,
	"path/filepath.WalkDir":           cbMany,
	"io/fs.WalkDir":                   cbMany,
	"(*sync.Map).Range":               cbMany,
	"(*testing.T).Run":                cbExactly,
	"(*testing.B).Run":                cbMany,
	"(*sync.Pool).Get":                cbNone,
	"(*container/ring.Ring).Do":       cbMany,
	"go/ast.Inspect":                  cbMany,
	"(*go/token.FileSet).Iterate":     cbMany,
	"(reflect.Value).FieldByNameFunc": cbMany,
	"runtime/pprof.Do":                cbExactly,
	"(*flag.FlagSet).VisitAll":        cbMany,
	"(*flag.FlagSet).Visit":           cbMany,
	"flag.VisitAll":                   cbMany,
	"flag.Visit":                      cbMany,
}
