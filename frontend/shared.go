package frontend

import (
	"go/ast"
	"go/token"
	"go/types"
	"slices"
	"sync"

	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/effects"
	"pathtally/frontend/load"
	"pathtally/properties"
)

// Shared is what the models of all rules have in common: the call graph and
// the effect summaries of one loaded program.
type Shared struct {
	prog     *load.Program
	fns      []*ssa.Function
	index    map[*ssa.Function]int // position in fns: a fixed order
	resolver *effects.TypeResolver
	eff      *effects.Table
	analysed int // functions before this position have summaries of their own

	callers    map[*ssa.Function][]caller
	targets    map[ssa.CallInstruction][]*ssa.Function
	byName     map[string][]ssa.CallInstruction // sites by the name of the method or function called
	bound      map[string][]*ssa.MakeClosure    // method values by the method's name
	dynamic    []ssa.CallInstruction            // calls of function values
	taken      map[*ssa.Function]bool           // its value is used other than by being called
	spawned    map[*ssa.Function]bool           // started by a go statement that names it
	goexits    map[*ssa.Function]bool           // may end its goroutine
	events     map[*types.Func]bool             // functions that are events of the rules judged together
	syntaxOnce sync.Once
	syntax     map[string]*ast.File // by absolute file name
}

// Limits on calls that the source does not name. A call with more candidates
// is not followed: its candidates are judged on their own, and the verdicts of
// the caller rest on an assumption.
const (
	maxInvokeTargets = 8
	maxValueTargets  = 3
)

// caller is a place from which a function is called or made into a closure.
type caller struct {
	fn   *ssa.Function
	site ssa.CallInstruction // nil for a closure that is made, not called
	made *ssa.MakeClosure
}

// arg is the value of the callee's parameter i.
func (c caller) arg(callee *ssa.Function, i int) ssa.Value {
	if c.site == nil {
		return nil
	}
	com := c.site.Common()
	if com.IsInvoke() {
		if i == 0 {
			return com.Value
		}
		i--
	}
	if i < len(com.Args) {
		return com.Args[i]
	}
	return nil
}

// free is the value that the callee's captured variable i was made with.
func (c caller) free(callee *ssa.Function, i int) ssa.Value {
	if c.made != nil && i < len(c.made.Bindings) {
		return c.made.Bindings[i]
	}
	return nil
}

// Analyze prepares a loaded program for lowering: call graph, effects. With
// paths only the functions of these packages are seen, as if nothing else had
// been loaded with bodies.
func Analyze(prog *load.Program, paths ...string) *Shared {
	sh := &Shared{
		prog:    prog,
		fns:     functionsOf(prog, paths),
		index:   map[*ssa.Function]int{},
		callers: map[*ssa.Function][]caller{},
		targets: map[ssa.CallInstruction][]*ssa.Function{},
		byName:  map[string][]ssa.CallInstruction{},
		bound:   map[string][]*ssa.MakeClosure{},
		taken:   map[*ssa.Function]bool{},
		spawned: map[*ssa.Function]bool{},
	}

	for i, fn := range sh.fns {
		sh.index[fn] = i
	}
	sh.resolver = effects.NewTypeResolver(prog.SSA, sh.fns)
	sh.analysed = len(sh.fns)
	sh.eff = effects.Compute(prog.SSA, sh.fns, effects.Options{Callees: sh.resolver.Callees})
	for i := 0; i < len(sh.fns); i++ { // grows by wrappers that calls name
		sh.scan(sh.fns[i])
	}
	sh.findGoexits()
	return sh
}

// findGoexits marks the functions that may end their goroutine: they call, by
// name, one of which nothing else is known, or one that may. What only a candidate of a
// call by value or through an interface does is taken not to happen, or nearly
// every such call would have this way out.
func (sh *Shared) findGoexits() {
	sh.goexits = map[*ssa.Function]bool{}
	var work []*ssa.Function
	for g := range sh.callers {
		if ex := sh.eff.Of(g).Exits(); ex&^effects.Blocks == effects.Goexits {
			work = append(work, g)
		}
	}
	for len(work) > 0 {
		g := work[len(work)-1]
		work = work[:len(work)-1]
		if sh.goexits[g] {
			continue
		}
		sh.goexits[g] = true
		for _, c := range sh.callers[g] {
			if c.site == nil || c.site.Common().StaticCallee() == nil {
				continue
			}
			if _, ok := c.site.(*ssa.Go); !ok {
				work = append(work, c.fn)
			}
		}
	}
}

// know adds a function that nobody listed (a wrapper).
func (sh *Shared) know(fn *ssa.Function) {
	if _, ok := sh.index[fn]; !ok && fn.Blocks != nil {
		sh.index[fn] = len(sh.fns)
		sh.fns = append(sh.fns, fn)
	}
}

func (sh *Shared) scan(fn *ssa.Function) {
	for _, b := range fn.Blocks {
		for _, instr := range b.Instrs {
			switch i := instr.(type) {
			case *ssa.MakeClosure:
				g := i.Fn.(*ssa.Function)
				sh.know(g)
				sh.callers[g] = append(sh.callers[g], caller{fn: fn, made: i})
				if isBound(g) {
					n := funcObject(g).Name()
					sh.bound[n] = append(sh.bound[n], i)
				}
				if valueUsed(i) {
					sh.taken[g] = true
				}
			case ssa.CallInstruction:
				sh.scanCall(fn, i)
			}
			for _, op := range instr.Operands(nil) {
				if g, ok := (*op).(*ssa.Function); ok && !calledBy(instr, g, op) {
					sh.taken[g] = true
				}
			}
		}
	}
}

// calledBy tells whether the operand op of instr is the callee position.
func calledBy(instr ssa.Instruction, g *ssa.Function, op *ssa.Value) bool {
	switch i := instr.(type) {
	case *ssa.MakeClosure:
		return i.Fn == g
	case ssa.CallInstruction:
		return op == &i.Common().Value
	}
	return false
}

// valueUsed tells whether a closure is used other than by being called, spawned or deferred.
func valueUsed(v *ssa.MakeClosure) bool {
	for _, r := range *v.Referrers() {
		if c, ok := r.(ssa.CallInstruction); ok && c.Common().Value == v && !slices.Contains(c.Common().Args, ssa.Value(v)) {
			continue
		}
		if _, ok := r.(*ssa.DebugRef); ok {
			continue
		}
		return true
	}
	return false
}

func (sh *Shared) scanCall(fn *ssa.Function, site ssa.CallInstruction) {
	c := site.Common()
	if _, ok := c.Value.(*ssa.Builtin); ok {
		return
	}
	var ts []*ssa.Function
	switch {
	case c.IsInvoke():
		sh.byName[c.Method.Name()] = append(sh.byName[c.Method.Name()], site)
		all, _ := sh.resolver.Callees(site)
		if len(all) <= maxInvokeTargets {
			ts = all
		}
	case c.StaticCallee() != nil:
		g := c.StaticCallee()
		if obj := funcObject(g); obj != nil {
			sh.byName[obj.Name()] = append(sh.byName[obj.Name()], site)
		}
		ts = []*ssa.Function{g}
		if _, ok := site.(*ssa.Go); ok {
			sh.spawned[g] = true
		}
	default:
		sh.dynamic = append(sh.dynamic, site)
		if fs := localFuncs(c.Value, nil, 0); len(fs) > 0 {
			ts = fs
		} else if all, ok := sh.resolver.Callees(site); ok && len(all) <= maxValueTargets {
			ts = all
		}
	}
	sh.targets[site] = ts
	for _, g := range ts {
		sh.know(g)
		sh.callers[g] = append(sh.callers[g], caller{fn: fn, site: site})
	}
}

// localFuncs finds the functions that a function value can be, as far as the
// body it is called in (and the cells of its enclosing functions) shows; nil if
// something else may flow in.
func localFuncs(v ssa.Value, seen []ssa.Value, depth int) []*ssa.Function {
	if depth > 6 || slices.Contains(seen, v) {
		return nil
	}
	seen = append(seen, v)
	switch v := v.(type) {
	case *ssa.Function:
		return []*ssa.Function{v}
	case *ssa.MakeClosure:
		return []*ssa.Function{v.Fn.(*ssa.Function)}
	case *ssa.ChangeType:
		return localFuncs(v.X, seen, depth+1)
	case *ssa.UnOp:
		if v.Op != token.MUL {
			return nil
		}
		return cellFuncs(homeOf(v.X), seen, depth)
	}
	return nil
}

// homeOf is the variable that a captured variable is in the function around it.
func homeOf(v ssa.Value) ssa.Value {
	for {
		fv, ok := v.(*ssa.FreeVar)
		if !ok || fv.Parent().Parent() == nil {
			return v
		}
		var bound ssa.Value
		for _, b := range fv.Parent().Parent().Blocks {
			for _, instr := range b.Instrs {
				if mc, ok := instr.(*ssa.MakeClosure); ok && mc.Fn == fv.Parent() {
					bound = mc.Bindings[slices.Index(fv.Parent().FreeVars, fv)]
				}
			}
		}
		if bound == nil {
			return v
		}
		v = bound
	}
}

// cellFuncs lists the functions that are stored to a variable, in the function
// that has it and in the closures that capture it; nil if something else may be.
func cellFuncs(cell ssa.Value, seen []ssa.Value, depth int) []*ssa.Function {
	switch cell.(type) {
	case *ssa.Alloc, *ssa.FreeVar:
	default:
		return nil
	}
	var out []*ssa.Function
	for _, r := range *cell.Referrers() {
		switch r := r.(type) {
		case *ssa.Store:
			if r.Addr != cell {
				return nil
			}
			if c, ok := r.Val.(*ssa.Const); ok && c.Value == nil {
				continue
			}
			fs := localFuncs(r.Val, seen, depth+1)
			if fs == nil {
				return nil
			}
			for _, f := range fs {
				if !slices.Contains(out, f) {
					out = append(out, f)
				}
			}
		case *ssa.MakeClosure:
			for i, b := range r.Bindings {
				if b != cell {
					continue
				}
				fv := r.Fn.(*ssa.Function).FreeVars[i]
				if written(fv) {
					fs := cellFuncs(fv, seen, depth+1)
					if fs == nil {
						return nil
					}
					for _, f := range fs {
						if !slices.Contains(out, f) {
							out = append(out, f)
						}
					}
				}
			}
		case *ssa.UnOp, *ssa.DebugRef:
		default:
			return nil
		}
	}
	return out
}

// written tells whether a captured variable is more than read and called.
func written(fv *ssa.FreeVar) bool {
	for _, r := range *fv.Referrers() {
		switch r.(type) {
		case *ssa.UnOp, *ssa.DebugRef:
		default:
			return true
		}
	}
	return false
}

// candidateSites lists the calls whose callee's name, or whose kind, an event
// of the rule could fit, in a fixed order.
func (sh *Shared) candidateSites(rule *properties.ResolvedRule) []ssa.CallInstruction {
	names := map[string]bool{}
	var order []string
	var out []ssa.CallInstruction
	dynamic := false
	for i := range rule.Events {
		e := &rule.Events[i]
		dynamic = dynamic || e.CallsInstance
		for _, c := range e.Callees {
			if n := c.Obj.Name(); !names[n] {
				names[n] = true
				order = append(order, n)
			}
		}
	}
	for _, n := range order {
		out = append(out, sh.byName[n]...)
	}
	if dynamic {
		out = append(out, sh.dynamic...)
	}
	return out
}

// boundEvents lists the method values whose methods are events of the rule, in
// a fixed order.
func (sh *Shared) boundEvents(rule *properties.ResolvedRule) []*ssa.MakeClosure {
	var out []*ssa.MakeClosure
	seen := map[*types.Func]bool{}
	for i := range rule.Events {
		e := &rule.Events[i]
		if _, ok := e.On.(properties.PatInstance); !ok {
			continue
		}
		for _, c := range e.Callees {
			if seen[c.Obj] {
				continue
			}
			seen[c.Obj] = true
			for _, mc := range sh.bound[c.Obj.Name()] {
				if funcObject(mc.Fn.(*ssa.Function)) == c.Obj {
					out = append(out, mc)
				}
			}
		}
	}
	return out
}

// resultPath says that result res of the call is what `path` leads to from an
// argument (nil path: the argument itself; a nil step is a load, else a field).
func (sh *Shared) resultPath(c *ssa.Call, res int) (arg ssa.Value, path []*types.Var, ok bool) {
	fn := c.Common().StaticCallee()
	if fn == nil {
		return nil, nil, false
	}
	sum := sh.eff.Of(fn)
	r := sum.Result(res)
	i, path, ok := resultAccess(r)
	if !ok {
		return nil, nil, false
	}
	cl := caller{fn: c.Parent(), site: c}
	if mc, isClosure := c.Common().Value.(*ssa.MakeClosure); isClosure {
		cl.made = mc
	}
	if i < len(fn.Params) {
		arg = cl.arg(fn, i)
	} else {
		arg = cl.free(fn, i-len(fn.Params))
	}
	return arg, path, arg != nil
}

// functionsOf lists the functions to lower. Generic functions that nothing
// instantiates are left out: the effects of their calls are not known.
func functionsOf(prog *load.Program, paths []string) []*ssa.Function {
	var out []*ssa.Function
	add := func(fns []*ssa.Function) {
		for _, fn := range fns {
			if prog.Uninstantiated(fn) {
				continue
			}
			if len(paths) > 0 {
				if p := prog.PackageOfFunction(fn); p == nil || !slices.Contains(paths, p.Path) {
					continue
				}
			}
			out = append(out, fn)
		}
	}
	add(prog.Functions())
	add(prog.Wrappers())
	return out
}

// effectsAt is what a call may do. A wrapper that was made after the analysis
// (a promoted method that only a known dynamic type calls) has no summary of
// its own sites: there the summary of the callee has to do.
func (sh *Shared) effectsAt(site ssa.CallInstruction) *effects.Summary {
	if i, ok := sh.index[site.Parent()]; ok && i < sh.analysed {
		return sh.eff.OfCall(site)
	}
	if fn := site.Common().StaticCallee(); fn != nil {
		return sh.eff.Of(fn)
	}
	if ts := sh.targets[site]; len(ts) > 0 {
		return sh.eff.Of(ts[0])
	}
	return sh.eff.Of(site.Parent())
}

// Judge tells which rules are judged together. A function that is an event of
// one of them by name is a boundary for the others: RWMutex.Lock takes an inner
// Mutex, but what its callers do is counted by the rule for read-write locks.
// It is called before Lower, from one goroutine.
func (sh *Shared) Judge(rules []*properties.ResolvedRule) {
	sh.events = map[*types.Func]bool{}
	for _, r := range rules {
		for i := range r.Events {
			for _, c := range r.Events[i].Callees {
				if !c.Interface {
					sh.events[c.Obj] = true
				}
			}
		}
	}
}

func (sh *Shared) boundary(fn *ssa.Function) bool {
	if fn.Parent() != nil {
		return false
	}
	obj := funcObject(fn)
	return obj != nil && sh.events[obj]
}

// exitsAt is how a call may go on. One of which nobody in sight is a candidate
// runs code out of sight: it comes back.
func (sh *Shared) exitsAt(site ssa.CallInstruction) effects.Exit {
	ex := sh.effectsAt(site).Exits()
	if ex&effects.Returns == 0 && site.Common().StaticCallee() == nil {
		if all, _ := sh.resolver.Callees(site); len(all) == 0 {
			ex |= effects.Returns
		}
	}
	return ex
}

// sameCapture finds, for a closure that calls g by a variable that both of them
// were made beside (a recursive closure calls itself so), the captured variable
// of the caller that is captured variable i of g; nil if there is none.
func (sh *Shared) sameCapture(site ssa.CallInstruction, g *ssa.Function, i int) *ssa.FreeVar {
	f := site.Parent()
	load, ok := site.Common().Value.(*ssa.UnOp)
	if !ok || f.Parent() == nil || g.Parent() != f.Parent() {
		return nil
	}
	fv, ok := load.X.(*ssa.FreeVar)
	if !ok {
		return nil
	}
	mf, mg := sh.madeOnce(f), sh.madeOnce(g)
	k := slices.Index(f.FreeVars, fv)
	if mf == nil || mg == nil || k < 0 || i >= len(mg.Bindings) {
		return nil
	}
	// The variable holds nothing but g.
	cell, ok := mf.Bindings[k].(*ssa.Alloc)
	if !ok {
		return nil
	}
	for _, r := range *cell.Referrers() {
		if st, ok := r.(*ssa.Store); ok && st.Addr == cell && st.Val != mg {
			return nil
		}
	}
	if j := slices.Index(mf.Bindings, mg.Bindings[i]); j >= 0 {
		return f.FreeVars[j]
	}
	return nil
}

// madeOnce is the only place that makes a closure of fn; nil if there are several.
func (sh *Shared) madeOnce(fn *ssa.Function) *ssa.MakeClosure {
	var made *ssa.MakeClosure
	for _, c := range sh.callers[fn] {
		if c.site != nil || c.made == nil || c.made == made {
			continue
		}
		if made != nil {
			return nil
		}
		made = c.made
	}
	return made
}

// together tells whether two functions are close enough for one to decide a
// branch of the other by an argument: of one package, or of the judged module's.
// Facts that are not passed on only add paths.
func (sh *Shared) together(a, b *ssa.Function) bool {
	p, q := sh.prog.PackageOfFunction(a), sh.prog.PackageOfFunction(b)
	return p == q || p != nil && q != nil && p.Main && q.Main && !p.Standard && !q.Standard
}

// handles lists the packages in which a plain function value may be an instance
// of a rule whose instances are function values: those that import the package
// of the instance's type, or convert such a value to a plain one. nil: the
// rule is of another kind.
func (sh *Shared) handles(rule *properties.ResolvedRule) map[*load.Package]bool {
	if rule.Each == nil {
		return nil
	}
	named := map[types.Type]bool{}
	homes := map[string]bool{}
	for _, t := range rule.Each.Types {
		n, ok := types.Unalias(t).(*types.Named)
		if !ok || n.Obj().Pkg() == nil {
			return nil
		}
		if _, ok := t.Underlying().(*types.Signature); !ok {
			return nil
		}
		named[n] = true
		homes[n.Obj().Pkg().Path()] = true
	}
	out := map[*load.Package]bool{}
	for _, p := range sh.prog.Packages {
		for _, imp := range p.Imports {
			if homes[imp] {
				out[p] = true
			}
		}
	}
	for _, fn := range sh.fns {
		p := sh.prog.PackageOfFunction(fn)
		if out[p] {
			continue
		}
		for _, b := range fn.Blocks {
			for _, i := range b.Instrs {
				if c, ok := i.(*ssa.ChangeType); ok && named[types.Unalias(c.X.Type())] {
					out[p] = true
				}
			}
		}
	}
	return out
}
