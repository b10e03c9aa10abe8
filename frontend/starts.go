package frontend

import (
	"go/types"
	"strings"

	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/load"
	"pathtally/properties"
)

// rootKind says why paths start at fn; "" if they do not.
func (m *Model) rootKind(fn *ssa.Function) string {
	pkg := m.sh.prog.PackageOfFunction(fn)
	if pkg == nil || !pkg.Named || fn.Synthetic != "" && fn.Name() != "init" && fn.Origin() == nil {
		return ""
	}
	name := fn.Name()
	switch {
	case fn.Parent() == nil && name == "main" && pkg.Name == "main" && fn.Signature.Recv() == nil:
		return "main"
	case fn.Parent() == nil && fn.Signature.Recv() == nil && (name == "init" || strings.HasPrefix(name, "init#")):
		return "init"
	case m.sh.spawned[fn]:
		return "goroutine"
	case isHandler(fn) && (m.sh.taken[fn] || fn.Signature.Recv() != nil):
		return "handler"
	case fn.Parent() != nil:
		return "" // closures are reached where they run, or by the covering rule
	case m.sh.taken[fn]:
		return "callback"
	}
	obj := funcObject(fn)
	if obj == nil {
		return ""
	}
	if isTest(fn, m.sh.prog.Position) {
		return "test"
	}
	if !obj.Exported() {
		return ""
	}
	if load.ImportableByOthers(pkg) {
		return "exported"
	}
	for _, c := range m.sh.callers[fn] {
		if c.fn != fn {
			return ""
		}
	}
	return "exported"
}

func isTest(fn *ssa.Function, pos posFunc) bool {
	file, _, _ := pos(fn.Pos())
	if !strings.HasSuffix(file, "_test.go") || fn.Signature.Recv() != nil {
		return false
	}
	for _, p := range []string{"Test", "Benchmark", "Fuzz", "Example"} {
		if strings.HasPrefix(fn.Name(), p) {
			return true
		}
	}
	return false
}

// existingMatters: can an instance that exists before the root break a claim
// at all? Not if every count that could tip a claim over comes from births.
func (m *Model) existingMatters() bool {
	if !m.eventBirths {
		return true
	}
	for _, c := range m.rule.Claims {
		if !c.Linear {
			return true
		}
		for _, q := range c.Questions {
			for i, w := range q.Weights {
				if w <= 0 {
					continue
				}
				for _, e := range m.rule.Events {
					if e.Count == i && !givesInstance(&e) {
						return true
					}
				}
			}
			if q.Bound < 0 {
				return true
			}
		}
	}
	return false
}

func givesInstance(e *properties.EventMatch) bool {
	for _, g := range e.Giving {
		switch g.(type) {
		case properties.PatInstance:
			return true
		case properties.PatName:
			if len(e.Where) > 0 {
				return true
			}
		}
	}
	return false
}

// Coverage counts the functions that have an event, and those of them that the
// starts answer for: a start was made for the function itself, or no count of
// the rule can be tipped over by what it does (a Close of what was opened
// elsewhere is followed from where it was opened). The two must be equal once
// Next has answered false.
func (m *Model) Coverage() (events, answered int) {
	own := map[*fnInfo]bool{}
	for _, u := range m.units.all {
		own[u.fn] = true
	}
	existing := m.existingMatters()
	for _, fi := range m.fns {
		if !fi.events || m.isEventFunc(fi.fn) {
			continue
		}
		events++
		if own[fi] || m.rule.Each == nil || !existing && !fi.direct {
			answered++
		}
	}
	return events, answered
}

// WithEvents implements properties.Ledger: the functions of the judged packages
// that hold an event.
func (m *Model) WithEvents() []properties.Func {
	var out []properties.Func
	for _, fn := range m.sh.fns {
		if fi, ok := m.fnOf[fn]; ok && fi.events && !m.isEventFunc(fn) && m.named(fn) {
			out = append(out, m.funcOf(fn))
		}
	}
	return out
}

// typeOf is the type of e's value in the frame of fn, nil if it is not known.
func (m *Model) typeOf(fn *ssa.Function, e Expr) types.Type {
	n := m.x.nodes[e]
	switch n.kind {
	case kParam:
		if int(n.n) < len(fn.Params) {
			return fn.Params[n.n].Type()
		}
	case kFree:
		if int(n.n) < len(fn.FreeVars) {
			return fn.FreeVars[n.n].Type()
		}
	case kGlobal:
		return n.ref.(*ssa.Global).Type()
	case kReg:
		return n.ref.(ssa.Value).Type()
	case kRes:
		if t, ok := n.ref.(ssa.Value).Type().(*types.Tuple); ok && int(n.n) < t.Len() {
			return t.At(int(n.n)).Type()
		}
	case kField:
		return types.NewPointer(n.ref.(*types.Var).Type())
	case kFieldVal:
		return n.ref.(*types.Var).Type()
	case kIndex:
		// A map has values, everything else addresses of elements.
		if t := m.typeOf(fn, n.x); t != nil {
			elem := elemOf(t)
			if _, ok := t.Underlying().(*types.Map); ok || elem == nil {
				return elem
			}
			return types.NewPointer(elem)
		}
	case kLoad:
		if t := m.typeOf(fn, n.x); t != nil {
			if p, ok := t.Underlying().(*types.Pointer); ok {
				return p.Elem()
			}
		}
	}
	return nil
}

// home is the canonical place of an instance: the struct type that its path
// starts in and the fields from there, or the package variable.
func (m *Model) home(fn *ssa.Function, e Expr) string {
	var path []string
	for x := e; x != 0; {
		n := m.x.nodes[x]
		switch n.kind {
		case kField, kFieldVal:
			path = append(path, n.ref.(*types.Var).Name())
			if in := m.x.nodes[n.x]; in.kind != kField && in.kind != kFieldVal && (in.kind != kLoad || !m.fieldBelow(n.x)) {
				t := m.typeOf(fn, n.x)
				if t != nil {
					if p, ok := t.Underlying().(*types.Pointer); ok {
						t = p.Elem()
					}
					if nt, ok := types.Unalias(t).(*types.Named); ok {
						t = nt.Origin()
					}
					path = append(path, types.TypeString(t, nil))
				}
				x = m.x.root[x]
				if g := m.x.nodes[x]; g.kind == kGlobal {
					path = append(path, "global "+g.ref.(*ssa.Global).String())
				}
				x = 0
				continue
			}
			x = n.x
		case kGlobal:
			path = append(path, "global "+n.ref.(*ssa.Global).String())
			x = 0
		case kIndex:
			path = append(path, "[]")
			x = n.x
		case kLoad, kCap, kHeld, kMaybe:
			x = n.x
		default:
			if t := m.typeOf(fn, x); t != nil {
				path = append(path, types.TypeString(t, nil))
			}
			x = 0
		}
	}
	for i, j := 0, len(path)-1; i < j; i, j = i+1, j-1 {
		path[i], path[j] = path[j], path[i]
	}
	return strings.Join(path, ".")
}

func (m *Model) fieldBelow(e Expr) bool {
	for e != 0 {
		n := m.x.nodes[e]
		if n.kind == kField || n.kind == kFieldVal {
			return true
		}
		if !m.x.isSel(e) {
			return false
		}
		e = n.x
	}
	return false
}

// sourceName writes a name as the source of fn would.
func (m *Model) sourceName(fn *ssa.Function, e Expr) string {
	n := m.x.nodes[e]
	switch n.kind {
	case kParam:
		if int(n.n) < len(fn.Params) {
			if s := fn.Params[n.n].Name(); s != "" && s != "_" {
				return s
			}
		}
		return "its argument"
	case kFree:
		if int(n.n) < len(fn.FreeVars) {
			return fn.FreeVars[n.n].Name()
		}
	case kGlobal:
		return n.ref.(*ssa.Global).Name()
	case kReg:
		if a, ok := n.ref.(*ssa.Alloc); ok && a.Comment != "" {
			return a.Comment
		}
		if p, ok := n.ref.(*ssa.Phi); ok && p.Comment != "" {
			return p.Comment
		}
	case kField, kFieldVal:
		f := n.ref.(*types.Var)
		if in := m.sourceName(fn, n.x); in != "" {
			if f.Embedded() {
				return in + "." + f.Name()
			}
			return in + "." + f.Name()
		}
		return f.Name()
	case kLoad, kCap, kHeld, kMaybe:
		return m.sourceName(fn, n.x)
	case kIndex:
		if in := m.sourceName(fn, n.x); in != "" {
			k := m.sourceName(fn, n.y)
			if kn := m.x.nodes[n.y]; kn.kind == kConst {
				k = kn.ref.(string)
			}
			if k == "" {
				k = "…"
			}
			return in + "[" + k + "]"
		}
	}
	return ""
}
