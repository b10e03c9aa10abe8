package effects

// This file says what a call of a function without body may do, from the types
// of its arguments and from models.

import (
	"go/types"

	"golang.org/x/tools/go/ssa"
)

// extern is what a call of a function without body may overwrite.
type extern struct {
	direct []*set // by argument: places of the object itself
	deep   *set   // places of objects reached from the arguments
}

// reach is what code of one package may write through a value of one type.
type reach struct{ direct, deep *set }

type reachKey struct {
	pkg *types.Package
	typ int32
}

// externCall fills st.ext and adds sites for what the callee may call back.
func (s *scanner) externCall(st *site, fn *ssa.Function) {
	st.ext = &extern{direct: make([]*set, len(st.args))}
	model := s.t.nodes[st.target].model
	pkg := packageOf(fn)
	for k, a := range st.args {
		dyn := a
		if mi, ok := a.(*ssa.MakeInterface); ok {
			dyn = mi.X
			if iface, ok := a.Type().Underlying().(*types.Interface); ok && !model.noCalls {
				s.callbackMethods(st, a, mi.X.Type(), iface)
			}
		}
		if _, ok := a.Type().Underlying().(*types.Signature); ok && !model.noCalls {
			if cb, _ := calleeOf(a); cb != nil {
				s.n.sites = append(s.n.sites, site{instr: st.instr, callback: true, target: s.t.nodeOf(cb), handed: a, args: st.args})
			}
		}
		if model.noWrites {
			continue
		}
		r := s.t.reachOf(pkg, dyn.Type())
		st.ext.direct[k] = r.direct
		st.ext.deep = s.t.sets.union(st.ext.deep, r.deep)
	}
}

// openCall fills st.ext for a dynamic call that may reach code without body.
func (s *scanner) openCall(st *site) {
	st.ext = &extern{direct: make([]*set, len(st.args))}
	c := st.instr.Common()
	var pkg *types.Package
	if c.IsInvoke() {
		if pkg = c.Method.Pkg(); pkg == nil {
			return // error.Error tells, it changes nothing
		}
	}
	for k, a := range st.args {
		r := s.t.reachOf(pkg, a.Type())
		st.ext.direct[k] = r.direct
		st.ext.deep = s.t.sets.union(st.ext.deep, r.deep)
	}
}

// callbackMethods adds the methods of a value that code out of sight gets as an
// interface.
func (s *scanner) callbackMethods(st *site, handed ssa.Value, typ types.Type, iface *types.Interface) {
	for m := range iface.Methods() {
		sel := s.t.prog.MethodSets.MethodSet(typ).Lookup(m.Pkg(), m.Name())
		if sel == nil {
			continue
		}
		if fn := s.t.prog.MethodValue(sel); fn != nil && !isBodyless(fn) {
			s.n.sites = append(s.n.sites, site{instr: st.instr, callback: true, target: s.t.nodeOf(fn), handed: handed, args: st.args})
		}
	}
}

// reachOf returns what code of pkg may write through a value of type typ, as far
// as loaded bodies can tell: what is reached over exported fields. Unexported
// fields of packages without bodies are nobody's business here (no loaded body
// can name them), and those of packages with bodies only their own code writes.
// That something is written at all shows in the cell of the object.
func (t *Table) reachOf(pkg *types.Package, typ types.Type) reach {
	key := reachKey{pkg, t.places.typeID(typ)}
	if r, ok := t.reaches[key]; ok {
		return r
	}
	var direct, deep []placeID
	seen := map[int32]bool{}
	var walk func(typ types.Type, depth int)
	var pointee func(typ types.Type, depth int)
	writable := func(f *types.Var) bool {
		return f.Exported() || f.Pkg() == pkg && t.bodies[pkg]
	}
	add := func(p placeID, depth int) {
		if depth <= 1 {
			direct = append(direct, p)
		} else {
			deep = append(deep, p)
		}
	}
	// walk follows a value; pointee adds the places of a memory object.
	walk = func(typ types.Type, depth int) {
		switch u := typ.Underlying().(type) {
		case *types.Pointer:
			add(t.places.cellID(u.Elem()), depth+1)
			pointee(u.Elem(), depth+1)
		case *types.Slice:
			add(t.places.elemID(u.Elem()), depth+1)
			pointee(u.Elem(), depth+1)
		case *types.Map:
			add(t.places.elemID(u.Elem()), depth+1)
			pointee(u.Elem(), depth+1)
			pointee(u.Key(), depth+2)
		case *types.Chan:
			pointee(u.Elem(), depth+2)
		case *types.Struct:
			if depth > 0 {
				break // pointee did it
			}
			for f := range u.Fields() {
				if writable(f) {
					walk(f.Type(), depth)
				}
			}
		case *types.Array:
			walk(u.Elem(), depth)
		}
	}
	pointee = func(typ types.Type, depth int) {
		id := t.places.typeID(typ)
		if depth > 1 {
			if seen[id] {
				return
			}
			seen[id] = true
		}
		switch u := typ.Underlying().(type) {
		case *types.Struct:
			for f := range u.Fields() {
				if writable(f) {
					add(t.places.seeField(f), depth)
					pointee(f.Type(), depth)
				}
			}
		case *types.Array:
			add(t.places.elemID(u.Elem()), depth)
			pointee(u.Elem(), depth)
		default:
			walk(typ, depth)
		}
	}
	walk(typ, 0)
	r := reach{t.sets.of(direct...), t.sets.of(deep...)}
	t.reaches[key] = r
	return r
}

func packageOf(fn *ssa.Function) *types.Package {
	if obj := fn.Object(); obj != nil {
		return obj.Pkg()
	}
	return nil
}

// blindWrites fills the local part of a function without body from the types of
// its parameters. Static calls of it say more: see externCall.
func (t *Table) blindWrites(n *node) {
	n.localRel = make([]*set, n.roots)
	if n.model.noWrites {
		return
	}
	sig := n.fn.Signature
	i := 0
	add := func(typ types.Type) {
		if _, ok := typ.(*types.TypeParam); ok {
			typ = types.NewInterfaceType(nil, nil)
		}
		r := t.reachOf(packageOf(n.fn), typ)
		n.localRel[i] = r.direct
		n.local = t.sets.union(n.local, r.deep)
		i++
	}
	if sig.Recv() != nil {
		add(sig.Recv().Type())
	}
	for p := range sig.Params().Variables() {
		add(p.Type())
	}
}
