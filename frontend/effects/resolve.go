package effects

// This file is the default resolver of calls that the source does not name: an
// index of types and functions by what they are, not by where they flow.

import (
	"go/types"
	"sync"

	"golang.org/x/tools/go/ssa"
	"golang.org/x/tools/go/types/typeutil"
)

// Resolver says which functions a dynamic or interface call may run. complete
// is false if code out of sight may be run too. It is never asked about static
// calls and builtins. The answer must not be changed afterwards; the same slice
// (not a copy) for the same set of candidates makes Compute much cheaper.
type Resolver func(site ssa.CallInstruction) (fns []*ssa.Function, complete bool)

// TypeResolver resolves by types. An interface call may run the method of every
// type that is converted to some interface in a loaded body and implements the
// interface; a call of a function value may run every function of its signature
// whose value is taken somewhere. The index is built at the first question; all
// methods may be called from several goroutines. The order of candidates is
// that of fns and of the instructions in them.
type TypeResolver struct {
	// Strict makes a call incomplete if its interface is declared in a package
	// without loaded bodies (or is the predeclared error): such code may
	// convert types that no loaded body converts.
	Strict bool

	prog *ssa.Program
	fns  []*ssa.Function

	once    sync.Once
	mu      sync.Mutex
	methods map[string][]*types.Selection // method id -> methods of converted types
	values  typeutil.Map                  // signature -> *candidates
	ifaces  map[*types.Func]*ifaceMemo
	bodies  map[*types.Package]bool
}

type candidates struct{ fns []*ssa.Function }

type ifaceMemo struct{ byType typeutil.Map } // interface type -> *candidates

// NewTypeResolver returns a resolver over the bodies of fns.
func NewTypeResolver(prog *ssa.Program, fns []*ssa.Function) *TypeResolver {
	return &TypeResolver{prog: prog, fns: fns}
}

// Callees is the Resolver.
func (r *TypeResolver) Callees(site ssa.CallInstruction) ([]*ssa.Function, bool) {
	r.once.Do(r.index)
	r.mu.Lock()
	defer r.mu.Unlock()
	c := site.Common()
	if !c.IsInvoke() {
		if v, ok := r.values.At(c.Signature()).(*candidates); ok {
			return v.fns, true
		}
		return nil, true
	}
	complete := !r.Strict || c.Method.Pkg() != nil && r.bodies[c.Method.Pkg()]
	memo := r.ifaces[c.Method]
	if memo == nil {
		memo = &ifaceMemo{}
		r.ifaces[c.Method] = memo
	}
	iface := c.Value.Type()
	if v, ok := memo.byType.At(iface).(*candidates); ok {
		return v.fns, complete
	}
	v := &candidates{}
	it := iface.Underlying().(*types.Interface)
	for _, sel := range r.methods[c.Method.Id()] {
		if types.Implements(sel.Recv(), it) {
			if fn := r.prog.MethodValue(sel); fn != nil {
				v.fns = append(v.fns, fn)
			}
		}
	}
	memo.byType.Set(iface, v)
	return v.fns, complete
}

func (r *TypeResolver) index() {
	r.methods = map[string][]*types.Selection{}
	r.ifaces = map[*types.Func]*ifaceMemo{}
	r.bodies = map[*types.Package]bool{}
	var seen typeutil.Map
	memo := map[types.Type]bool{}
	taken := map[*ssa.Function]bool{}
	var msets typeutil.MethodSetCache
	takeFn := func(fn *ssa.Function) {
		if taken[fn] {
			return
		}
		taken[fn] = true
		v, ok := r.values.At(fn.Signature).(*candidates)
		if !ok {
			v = &candidates{}
			// The signature of a method has a receiver, which identity of
			// signatures ignores: only functions are ever taken as values.
			r.values.Set(fn.Signature, v)
		}
		v.fns = append(v.fns, fn)
	}
	takeType := func(t types.Type) {
		if memo[t] {
			return
		}
		memo[t] = true
		if types.IsInterface(t) || seen.At(t) != nil {
			return
		}
		seen.Set(t, true)
		ms := msets.MethodSet(t)
		for sel := range ms.Methods() {
			id := sel.Obj().Id()
			r.methods[id] = append(r.methods[id], sel)
		}
	}
	var ops []*ssa.Value
	for _, fn := range r.fns {
		if fn.Blocks == nil || isGenericOriginal(fn) {
			continue
		}
		if fn.Pkg != nil {
			r.bodies[fn.Pkg.Pkg] = true
		}
		for _, b := range fn.Blocks {
			for _, instr := range b.Instrs {
				var callee ssa.Value
				switch i := instr.(type) {
				case *ssa.DebugRef:
					continue
				case *ssa.MakeInterface:
					takeType(i.X.Type())
				case ssa.CallInstruction:
					if !i.Common().IsInvoke() {
						callee = i.Common().Value
					}
				}
				ops = instr.Operands(ops[:0])
				for k, op := range ops {
					fn, ok := (*op).(*ssa.Function)
					if !ok {
						continue
					}
					// Operand 0 of a call is the function called.
					if k == 0 && callee == ssa.Value(fn) {
						continue
					}
					takeFn(fn)
				}
			}
		}
	}
}

// isGenericOriginal says whether fn is a generic function itself, not an
// instance: its body speaks about type parameters and is never run.
func isGenericOriginal(fn *ssa.Function) bool {
	for f := fn; f != nil; f = f.Parent() {
		if f.TypeParams().Len() > len(f.TypeArgs()) {
			return true
		}
	}
	return false
}
