package frontend

import (
	"go/constant"
	"go/types"

	"golang.org/x/tools/go/ssa"

	"pathtally/properties"
)

// shape is a call as a rule sees it: which method or function, on what, with
// what. It is the same for a plain, deferred or spawned call, a call through an
// interface, and the call of a bound method.
type shape struct {
	obj    *types.Func // the function's or interface method's origin; nil for a call of a function value
	invoke bool        // through an interface
	recvT  types.Type  // type of the receiver; nil if there is none
	recv   Expr        // receiver; 0 if none
	args   []Expr      // without receiver
	vals   []ssa.Value // args as SSA values; entries may be nil
	fn     Expr        // the function value of a dynamic call; 0 otherwise
	fnT    types.Type
	site   ssa.CallInstruction
}

// match is an event line that fits a call, up to what only the path knows.
type match struct {
	ev      *properties.EventMatch
	subject Expr // must be the instance; 0: no such condition
	birth   int  // this result is the instance; -1: none
	path    []*types.Var
	conds   []resultCond // the results must be these constants
}

type resultCond struct {
	res int
	con properties.PatConst
}

// matchEvents lists the event lines of the rule that fit the call: for each
// count the first line only, since the lines of one count are a union.
// Lines whose fit depends on the subject or on results are kept side by side.
func (m *Model) matchEvents(s *shape) []match {
	var out []match
	for _, e := range m.eventsOf(s) {
		if mt, ok := m.fits(e, s); ok {
			out = append(out, mt)
		}
	}
	return out
}

// eventsOf lists the event lines whose callee fits, before arguments are looked at.
func (m *Model) eventsOf(s *shape) []*properties.EventMatch {
	if s.obj == nil {
		if s.fn == 0 {
			return nil
		}
		var out []*properties.EventMatch
		for i := range m.rule.Events {
			e := &m.rule.Events[i]
			if e.CallsInstance && m.isInstanceFunc(s.fnT) {
				out = append(out, e)
			}
		}
		return out
	}
	key := calleeKey{s.obj, s.recvT, s.invoke}
	if es, ok := m.byCallee[key]; ok {
		return es
	}
	var out []*properties.EventMatch
	for i := range m.rule.Events {
		e := &m.rule.Events[i]
		for _, c := range e.Callees {
			if m.calleeFits(c, e, s) {
				out = append(out, e)
				break
			}
		}
	}
	m.byCallee[key] = out
	return out
}

type calleeKey struct {
	obj    *types.Func
	recvT  types.Type
	invoke bool
}

func (m *Model) isInstanceFunc(t types.Type) bool {
	if t == nil || m.rule.Each == nil {
		return false
	}
	for _, want := range m.rule.Each.Types {
		if types.Identical(t.Underlying(), want.Underlying()) {
			return true
		}
	}
	return false
}

func (m *Model) calleeFits(c properties.Callee, e *properties.EventMatch, s *shape) bool {
	if c.Obj == s.obj {
		return true
	}
	if c.Obj.Name() != s.obj.Name() || s.recvT == nil {
		return false
	}
	want, _ := c.Obj.Type().(*types.Signature)
	if want == nil || want.Recv() == nil {
		return false
	}
	if c.Interface {
		// Naming an interface method: every type that implements it.
		iface, ok := want.Recv().Type().Underlying().(*types.Interface)
		return ok && implements(s.recvT, iface)
	}
	if s.invoke && e.On != nil {
		// A concrete method called through an interface: it is an event if the
		// receiver turns out to be the instance, whose type is known.
		iface, ok := s.recvT.Underlying().(*types.Interface)
		return ok && implements(want.Recv().Type(), iface)
	}
	return false
}

func implements(t types.Type, iface *types.Interface) bool {
	if types.Implements(t, iface) {
		return true
	}
	if _, ok := t.Underlying().(*types.Interface); ok {
		return false
	}
	if _, ok := t.(*types.Pointer); ok {
		return false
	}
	return types.Implements(types.NewPointer(t), iface)
}

// fits looks at arguments and results as far as they are known without a path.
func (m *Model) fits(e *properties.EventMatch, s *shape) (match, bool) {
	mt := match{ev: e, birth: -1}
	if !m.mayCall(e, s) {
		return mt, false
	}
	if e.CallsInstance {
		mt.subject = s.fn
	}
	subject := func(p properties.Pat, x Expr, v ssa.Value) bool {
		switch p := p.(type) {
		case properties.PatInstance:
			mt.subject = x
			return x != 0
		case properties.PatConst:
			c, ok := v.(*ssa.Const)
			if !ok {
				return true // unknown: taken as fitting (an assumption)
			}
			return constFits(c, p)
		}
		return true
	}
	if e.On != nil && !subject(e.On, s.recv, nil) {
		return mt, false
	}
	if e.With != nil {
		if e.WithAll && len(e.With) != len(s.args) || len(e.With) > len(s.args) {
			return mt, false
		}
		for i, p := range e.With {
			if !subject(p, s.args[i], s.vals[i]) {
				return mt, false
			}
		}
	}
	for i, p := range e.Giving {
		switch p := p.(type) {
		case properties.PatInstance:
			mt.birth = i
		case properties.PatConst:
			mt.conds = append(mt.conds, resultCond{i, p})
		case properties.PatName:
			for _, w := range e.Where {
				if w.Name == p.Name {
					mt.birth = i
					mt.path = m.fieldPath(e, s, i, w.Fields)
				}
			}
		}
	}
	if s.site != nil && len(e.Giving) > 0 {
		if res := s.site.Common().Signature().Results().Len(); res != len(e.Giving) {
			return mt, false
		}
	}
	return mt, true
}

func constFits(c *ssa.Const, p properties.PatConst) bool {
	if p.Nil {
		return c.Value == nil
	}
	if c.Value == nil {
		return false
	}
	switch v := p.Value.(type) {
	case bool:
		return c.Value.Kind() == constant.Bool && constant.BoolVal(c.Value) == v
	case int64:
		n, ok := constant.Int64Val(constant.ToInt(c.Value))
		return ok && n == v
	case string:
		return c.Value.Kind() == constant.String && constant.StringVal(c.Value) == v
	}
	return true
}

// fieldPath resolves the selectors of a `where r.Body == b`.
func (m *Model) fieldPath(e *properties.EventMatch, s *shape, res int, names []string) []*types.Var {
	t := s.site.Common().Signature().Results().At(res).Type()
	var out []*types.Var
	for _, n := range names {
		if p, ok := t.Underlying().(*types.Pointer); ok {
			t = p.Elem()
		}
		st, ok := t.Underlying().(*types.Struct)
		if !ok {
			return nil
		}
		found := false
		for f := range st.Fields() {
			if f.Name() == n {
				out = append(out, f)
				t, found = f.Type(), true
				break
			}
		}
		if !found {
			return nil
		}
	}
	return out
}

// birthName is the name of the instance among the results of a call: result
// res, or what the fields of path lead to from there.
func (m *Model) birthName(res Expr, path []*types.Var) Expr {
	e := res
	for _, f := range path {
		e = m.x.load(m.x.field(e, f))
	}
	return e
}

// resultName is the name of result i of a call.
func (m *Model) resultName(call ssa.Value, i int) Expr {
	if call == nil {
		return 0
	}
	if t, ok := call.Type().(*types.Tuple); ok {
		if i >= t.Len() {
			return 0
		}
		return m.x.res(call, i)
	}
	return m.x.reg(call)
}

// siteShape is the shape of the call at a site as its source says it; bound
// methods known by facts are handled by boundShape.
func (m *Model) siteShape(site ssa.CallInstruction) *shape {
	if s, ok := m.shapes[site]; ok {
		return s
	}
	c := site.Common()
	s := &shape{site: site}
	args := c.Args
	switch {
	case c.IsInvoke():
		s.obj, s.invoke = c.Method.Origin(), true
		s.recvT, s.recv = c.Value.Type(), m.x.name(c.Value)
	default:
		fn := c.StaticCallee()
		if fn == nil {
			if _, ok := c.Value.(*ssa.Builtin); !ok {
				s.fn, s.fnT = m.x.name(c.Value), c.Value.Type()
			}
			break
		}
		s.obj = funcObject(fn)
		if mc, ok := c.Value.(*ssa.MakeClosure); ok && isBound(fn) {
			s.recv, s.recvT = m.x.name(mc.Bindings[0]), mc.Bindings[0].Type()
			if _, ok := s.recvT.Underlying().(*types.Interface); ok {
				s.invoke = true
			}
			break
		}
		if s.obj != nil {
			if sig := s.obj.Type().(*types.Signature); sig.Recv() != nil && len(args) > 0 {
				s.recv, s.recvT = m.x.name(args[0]), args[0].Type()
				args = args[1:]
			}
		}
	}
	for _, a := range args {
		s.args = append(s.args, m.x.name(a))
		s.vals = append(s.vals, a)
	}
	m.shapes[site] = s
	return s
}

// funcObject is the declared function or method that fn is, wraps or binds.
func funcObject(fn *ssa.Function) *types.Func {
	obj, _ := fn.Object().(*types.Func)
	if obj == nil {
		if o := fn.Origin(); o != nil {
			obj, _ = o.Object().(*types.Func)
		}
	}
	if obj == nil {
		return nil
	}
	return obj.Origin()
}

// isBound tells whether fn is the wrapper of a method value (x.M): its only
// captured variable is the receiver.
func isBound(fn *ssa.Function) bool {
	return fn.Synthetic != "" && len(fn.FreeVars) == 1 && fn.Parent() == nil && fn.Object() != nil
}
