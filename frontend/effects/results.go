package effects

// This file finds what holds of a function's results at every return.

import (
	"fmt"
	"go/constant"
	"go/token"
	"go/types"
	"math/bits"
	"slices"
	"strings"

	"golang.org/x/tools/go/ssa"
)

// Nilness is the set of what a value may be; 0 is no value at all (no return).
type Nilness uint8

const (
	IsNil  Nilness = 1 << iota // may be nil
	NonNil                     // may be non-nil
)

// Step is one step of an access path: a field of the object or value (Field !=
// nil) or a load.
type Step struct {
	Field *types.Var // nil: a load
}

func (s Step) String() string {
	if s.Field == nil {
		return "*"
	}
	return "." + s.Field.Name()
}

// Result is what holds of one result at every normal return. Printed form:
// "never nil", "p0.f*", "= 3", "nil iff p1".
type Result struct {
	Nil   Nilness
	Const constant.Value // the result is always this constant; nil: unknown

	// Param is the root of the access path that the result equals, -1 if
	// none. Without steps the result is the parameter itself, perhaps
	// converted to or from an interface. Places on the path are not stored to
	// by the function: the path means the same before and after the call.
	Param int
	Path  []Step

	// NilIff is a parameter that is nil exactly if the result is; -1 if none.
	NilIff int

	// The last result of a function is its outcome if it is an error (nil:
	// success) or a bool (true: success). NonNilIfOK: on success this result
	// is not nil; NilIfFailed: otherwise it is nil.
	NonNilIfOK  bool
	NilIfFailed bool

	nilIff uint64 // all candidates for NilIff
	bottom bool   // no return seen yet
}

var bottomResult = Result{Param: -1, NilIff: -1, bottom: true, NonNilIfOK: true, NilIfFailed: true}

// NeverNil says that the result is a non-nil value of a type that has nil.
func (r Result) NeverNil() bool { return r.Nil == NonNil }

// AlwaysNil says that the result is nil on every return.
func (r Result) AlwaysNil() bool { return r.Nil == IsNil }

// EqualsParam returns the parameter that the result is, or -1.
func (r Result) EqualsParam() int {
	if r.Param >= 0 && len(r.Path) == 0 {
		return r.Param
	}
	return -1
}

// Known says whether anything is known.
func (r Result) Known() bool {
	return r.Nil == NonNil || r.Nil == IsNil || r.Const != nil || r.Param >= 0 || r.NilIff >= 0
}

func (r Result) String() string {
	var out []string
	switch r.Nil {
	case NonNil:
		out = append(out, "never nil")
	case IsNil:
		out = append(out, "always nil")
	case 0:
		if r.bottom {
			out = append(out, "no return")
		}
	}
	if r.Const != nil {
		out = append(out, "= "+r.Const.ExactString())
	}
	if r.Param >= 0 {
		s := fmt.Sprintf("p%d", r.Param)
		for _, st := range r.Path {
			s += st.String()
		}
		out = append(out, s)
	}
	if r.NilIff >= 0 && r.EqualsParam() != r.NilIff {
		out = append(out, fmt.Sprintf("nil iff p%d", r.NilIff))
	}
	if r.NonNilIfOK && !r.bottom && r.Nil == NonNil|IsNil {
		out = append(out, "non-nil if ok")
	}
	if r.NilIfFailed && !r.bottom && r.Nil == NonNil|IsNil {
		out = append(out, "nil if failed")
	}
	if len(out) == 0 {
		return "?"
	}
	return strings.Join(out, ", ")
}

func sameConst(a, b constant.Value) bool {
	return a != nil && b != nil && a.Kind() == b.Kind() && constant.Compare(a, token.EQL, b)
}

// join is the least that covers both.
func join(a, b Result) Result {
	switch {
	case a.bottom:
		return b
	case b.bottom:
		return a
	}
	r := Result{Nil: a.Nil | b.Nil, Param: -1, NilIff: -1,
		NonNilIfOK: a.NonNilIfOK && b.NonNilIfOK, NilIfFailed: a.NilIfFailed && b.NilIfFailed}
	if sameConst(a.Const, b.Const) {
		r.Const = a.Const
	}
	if a.Param == b.Param && slices.Equal(a.Path, b.Path) {
		r.Param, r.Path = a.Param, a.Path
	}
	r.nilIff = a.nilIff & b.nilIff
	return r
}

func equalResult(a, b Result) bool {
	return a.Nil == b.Nil && a.Param == b.Param && slices.Equal(a.Path, b.Path) && a.nilIff == b.nilIff &&
		a.bottom == b.bottom && (a.Const == nil && b.Const == nil || sameConst(a.Const, b.Const)) &&
		a.NonNilIfOK == b.NonNilIfOK && a.NilIfFailed == b.NilIfFailed
}

// unknownResult is any value of a type.
func unknownResult(typ types.Type) Result {
	r := Result{Param: -1, NilIff: -1}
	if hasNil(typ) {
		r.Nil = IsNil | NonNil
	}
	return r
}

func hasNil(typ types.Type) bool {
	switch u := typ.Underlying().(type) {
	case *types.Pointer, *types.Slice, *types.Map, *types.Chan, *types.Signature, *types.Interface:
		return true
	case *types.Basic:
		return u.Kind() == types.UnsafePointer || u.Kind() == types.UntypedNil
	}
	return false
}

func nonNilResult() Result { return Result{Nil: NonNil, Param: -1, NilIff: -1} }

// stepResults is a stage.
func (t *Table) stepResults(n *node) bool {
	if len(n.sum.results) == 0 {
		return false
	}
	var rs []Result
	switch {
	case n.fn == nil:
		rs = t.groupResults(n)
	default:
		rs = t.resultsOf(n)
	}
	changed := false
	for j := range rs {
		// Joining with the old value keeps the iteration going one way.
		r := join(n.sum.results[j], rs[j])
		r.NilIff = -1
		if r.nilIff != 0 {
			r.NilIff = bits.TrailingZeros64(r.nilIff)
		}
		if !equalResult(r, n.sum.results[j]) {
			n.sum.results[j] = r
			changed = true
		}
	}
	return changed
}

func (t *Table) groupResults(n *node) []Result {
	rs := make([]Result, len(n.sum.results))
	for j := range rs {
		rs[j] = bottomResult
		for _, m := range n.members {
			mn := t.nodes[m]
			if j >= len(mn.sum.results) {
				continue
			}
			r := mn.sum.results[j]
			if p := numParams(mn.fn); r.Param >= p {
				r.Param, r.Path = -1, nil
			} else if p < 64 {
				r.nilIff &= 1<<uint(p) - 1
			}
			rs[j] = join(rs[j], r)
		}
		if n.partial || n.open {
			r := Result{Nil: IsNil | NonNil, Param: -1, NilIff: -1}
			rs[j] = join(rs[j], r)
		}
	}
	return rs
}

func (t *Table) resultsOf(n *node) []Result {
	fn := n.fn
	res := fn.Signature.Results()
	rs := make([]Result, res.Len())
	m := n.model
	if n.bodyless() || m.joinsNil {
		for j := range rs {
			rs[j] = unknownResult(res.At(j).Type())
			if j < len(m.nilness) && m.nilness[j] != 0 {
				rs[j].Nil = m.nilness[j]
			}
			if j < len(m.nilIff) && m.nilIff[j] != 0 {
				rs[j].nilIff = 1 << uint(m.nilIff[j]-1)
			}
		}
		return rs
	}
	for j := range rs {
		rs[j] = bottomResult
	}
	g := t.reach(n)
	ev := evaluator{t: t, n: n}
	for bi, b := range fn.Blocks {
		if !g.reached[bi] || g.cut[bi] < len(b.Instrs) {
			continue
		}
		ret, ok := b.Instrs[len(b.Instrs)-1].(*ssa.Return)
		if !ok {
			continue
		}
		ev.params = 0
		vals := make([]Result, len(ret.Results))
		for j, v := range ret.Results {
			vals[j] = ev.eval(v, b, 0)
			ev.relate(&vals[j], b)
		}
		ev.outcome(ret, vals, b)
		for j := range vals {
			rs[j] = join(rs[j], vals[j])
		}
	}
	for j := range rs {
		// A path must mean the same before and after the call.
		if rs[j].Param >= 0 && !t.pathKept(n, rs[j].Path) {
			rs[j].Param, rs[j].Path = -1, nil
		}
	}
	return rs
}

// pathKept says whether the function stores to none of the places that a path
// loads.
func (t *Table) pathKept(n *node, path []Step) bool {
	var last *types.Var
	for _, st := range path {
		if st.Field != nil {
			last = st.Field
			continue
		}
		if last == nil {
			// A load of *p itself.
			if n.sum.Writes() {
				return false
			}
			continue
		}
		if n.sum.touches(t.places.fieldID(last)) {
			return false
		}
		last = nil
	}
	return true
}

// evaluator finds what is known of values of one function.
type evaluator struct {
	t      *Table
	n      *node
	params uint64
	phis   []*ssa.Phi // being evaluated
}

const maxEvalDepth = 24

// eval returns what is known of v where control is in block b.
func (ev *evaluator) eval(v ssa.Value, b *ssa.BasicBlock, depth int) Result {
	r := ev.evalValue(v, b, depth)
	if r.Nil == IsNil|NonNil && b != nil {
		if isNil, ok := nilFact(v, b); ok {
			if isNil {
				r.Nil = IsNil
			} else {
				r.Nil = NonNil
			}
		}
	}
	return r
}

func (ev *evaluator) evalValue(v ssa.Value, b *ssa.BasicBlock, depth int) Result {
	unknown := unknownResult(v.Type())
	if depth > maxEvalDepth {
		return unknown
	}
	depth++
	switch x := v.(type) {
	case *ssa.Const:
		if x.Value == nil {
			if hasNil(x.Type()) {
				return Result{Nil: IsNil, Param: -1, NilIff: -1}
			}
			return unknown
		}
		return Result{Const: x.Value, Param: -1, NilIff: -1}
	case *ssa.Parameter, *ssa.FreeVar:
		i := ev.rootOf(x)
		unknown.Param = i
		if i < maxRoots && unknown.Nil != 0 {
			unknown.nilIff = 1 << uint(i)
		}
		return unknown
	case *ssa.Alloc, *ssa.MakeClosure, *ssa.MakeMap, *ssa.MakeChan, *ssa.MakeSlice, *ssa.Function, *ssa.Global, *ssa.IndexAddr:
		return nonNilResult()
	case *ssa.FieldAddr:
		// The address of a field of nil panics.
		r := ev.step(x.X, deref(x.X.Type()).Underlying().(*types.Struct).Field(x.Field), b, depth)
		r.Nil = NonNil
		return r
	case *ssa.Field:
		r := ev.step(x.X, x.X.Type().Underlying().(*types.Struct).Field(x.Field), b, depth)
		r.Nil = unknown.Nil
		return r
	case *ssa.MakeInterface:
		r := ev.eval(x.X, b, depth)
		if r.bottom {
			return r
		}
		r.Nil, r.Const, r.nilIff = NonNil, nil, 0
		return r
	case *ssa.ChangeInterface:
		return ev.eval(x.X, b, depth)
	case *ssa.ChangeType:
		return ev.eval(x.X, b, depth)
	case *ssa.TypeAssert:
		if x.CommaOk {
			return unknown
		}
		r := ev.eval(x.X, b, depth)
		if r.bottom {
			return r
		}
		r.nilIff = 0
		r.Nil = unknown.Nil
		if types.IsInterface(x.AssertedType) {
			r.Nil = NonNil
		}
		return r
	case *ssa.Slice:
		if _, ok := x.X.Type().Underlying().(*types.Pointer); ok {
			return nonNilResult() // of an array
		}
		return unknown
	case *ssa.Phi:
		if slices.Contains(ev.phis, x) {
			return bottomResult
		}
		ev.phis = append(ev.phis, x)
		r := bottomResult
		for i, e := range x.Edges {
			r = join(r, ev.evalEdge(e, x.Block().Preds[i], x.Block(), depth))
		}
		ev.phis = ev.phis[:len(ev.phis)-1]
		r.NonNilIfOK, r.NilIfFailed = false, false
		return r
	case *ssa.UnOp:
		if x.Op == token.MUL {
			return ev.evalLoad(x, b, depth)
		}
		return unknown
	case *ssa.Call:
		return ev.evalCall(x, 0, b, depth)
	case *ssa.Extract:
		switch c := x.Tuple.(type) {
		case *ssa.Call:
			return ev.evalCall(c, x.Index, b, depth)
		case *ssa.TypeAssert:
			if x.Index == 0 {
				r := ev.eval(c.X, b, depth)
				// On failure the result is the zero value.
				r.Nil, r.Const, r.Param, r.Path, r.nilIff = unknown.Nil, nil, -1, nil, 0
				return r
			}
		}
		return unknown
	}
	return unknown
}

// evalEdge evaluates a phi operand on the edge from pred to b.
func (ev *evaluator) evalEdge(v ssa.Value, pred, b *ssa.BasicBlock, depth int) Result {
	r := ev.eval(v, pred, depth)
	if r.Nil == IsNil|NonNil && len(pred.Succs) == 2 && pred.Succs[0] != pred.Succs[1] {
		if isNil, ok := ifFact(v, pred, pred.Succs[0] == b); ok {
			if isNil {
				r.Nil = IsNil
			} else {
				r.Nil = NonNil
			}
		}
	}
	return r
}

func (ev *evaluator) rootOf(v ssa.Value) int {
	for i, p := range ev.n.fn.Params {
		if ssa.Value(p) == v {
			return i
		}
	}
	for k, f := range ev.n.fn.FreeVars {
		if ssa.Value(f) == v {
			return len(ev.n.fn.Params) + k
		}
	}
	return -1
}

const maxPath = 6 // steps of an access path

// step extends the access path of x by a field.
func (ev *evaluator) step(x ssa.Value, f *types.Var, b *ssa.BasicBlock, depth int) Result {
	r := ev.eval(x, b, depth)
	out := Result{Param: -1, NilIff: -1}
	if !r.bottom && r.Param >= 0 && len(r.Path) < maxPath {
		out.Param = r.Param
		out.Path = append(slices.Clip(r.Path), Step{Field: f.Origin()})
	}
	return out
}

func (ev *evaluator) evalLoad(x *ssa.UnOp, b *ssa.BasicBlock, depth int) Result {
	unknown := unknownResult(x.Type())
	switch a := x.X.(type) {
	case *ssa.Global:
		if ev.t.globalNonNil(a, depth) {
			unknown.Nil = NonNil
		}
		if c := ev.t.globalConst(a); c != nil {
			unknown.Const = c
		}
		return unknown
	case *ssa.Alloc:
		if v, at := lastStore(x, a); v != nil {
			return ev.eval(v, at, depth)
		}
		return unknown
	case *ssa.FieldAddr, *ssa.Parameter, *ssa.FreeVar:
		r := ev.eval(a, b, depth)
		if r.Param >= 0 && len(r.Path) < maxPath {
			unknown.Param = r.Param
			unknown.Path = append(slices.Clip(r.Path), Step{})
		}
	}
	return unknown
}

// lastStore returns the value that a load of a local variable sees and the block
// of the store, if that is the same on all ways to it. Closures may read the
// variable but not store to it.
func lastStore(load *ssa.UnOp, cell *ssa.Alloc) (ssa.Value, *ssa.BasicBlock) {
	if !ownStoresOnly(cell, cell.Parent(), 0) {
		return nil, nil
	}
	b := load.Block()
	i := slices.Index(b.Instrs, ssa.Instruction(load)) - 1
	for range 64 {
		for ; i >= 0; i-- {
			switch in := b.Instrs[i].(type) {
			case *ssa.Store:
				if in.Addr == cell {
					return in.Val, b
				}
			case *ssa.Alloc:
				if in == cell {
					return zeroOf(deref(cell.Type())), b
				}
			}
		}
		if len(b.Preds) != 1 {
			return nil, nil
		}
		b = b.Preds[0]
		i = len(b.Instrs) - 1
	}
	return nil, nil
}

func zeroOf(typ types.Type) ssa.Value {
	switch typ.Underlying().(type) {
	case *types.Struct, *types.Array, *types.TypeParam, *types.Tuple:
		return nil
	}
	return ssa.NewConst(zeroConst(typ), typ)
}

func zeroConst(typ types.Type) constant.Value {
	if b, ok := typ.Underlying().(*types.Basic); ok {
		switch {
		case b.Info()&types.IsBoolean != 0:
			return constant.MakeBool(false)
		case b.Info()&types.IsString != 0:
			return constant.MakeString("")
		case b.Info()&types.IsNumeric != 0:
			return constant.MakeInt64(0)
		}
	}
	return nil
}

// ownStoresOnly says whether only fn itself stores to a variable of it.
func ownStoresOnly(addr ssa.Value, fn *ssa.Function, depth int) bool {
	if depth > 4 {
		return false
	}
	for _, ref := range *addr.Referrers() {
		switch r := ref.(type) {
		case *ssa.DebugRef, *ssa.UnOp:
		case *ssa.Store:
			if r.Addr != addr || r.Val == addr || r.Parent() != fn {
				return false
			}
		case *ssa.MakeClosure:
			c := r.Fn.(*ssa.Function)
			for k, b := range r.Bindings {
				if b == addr && !ownStoresOnly(c.FreeVars[k], fn, depth+1) {
					return false
				}
			}
		default:
			return false
		}
	}
	return true
}

// evalCall evaluates result j of a call.
func (ev *evaluator) evalCall(c *ssa.Call, j int, b *ssa.BasicBlock, depth int) Result {
	res := c.Call.Signature().Results()
	if bl, ok := c.Call.Value.(*ssa.Builtin); ok && !c.Call.IsInvoke() {
		switch bl.Name() {
		case "ssa:wrapnilchk":
			r := ev.eval(c.Call.Args[0], b, depth)
			if !r.bottom {
				r.Nil, r.nilIff = NonNil, 0
			}
			return r
		}
		return unknownResult(c.Type())
	}
	typ := res.At(j).Type()
	unknown := unknownResult(typ)
	s := ev.n.siteOf(c)
	if s == nil || s.target == noNode {
		return unknown
	}
	callee := ev.t.nodes[s.target]
	if j >= len(callee.sum.results) {
		return unknown
	}
	r := callee.sum.results[j]
	if callee.fn == nil && len(callee.members) == 0 {
		return unknown
	}
	if r.bottom {
		return r
	}
	out := Result{Nil: r.Nil, Const: r.Const, Param: -1, NilIff: -1}
	if unknown.Nil == 0 {
		out.Nil = 0
	}
	args := s.args
	arg := func(i int) ssa.Value {
		if i < len(args) {
			return args[i]
		}
		if i -= len(args); s.bound != nil && i < len(s.bound) {
			return s.bound[i]
		}
		return nil
	}
	if callee.model.joinsNil {
		return ev.evalJoin(c, unknown, b, depth)
	}
	if r.Param >= 0 {
		if a := arg(r.Param); a != nil {
			ar := ev.eval(a, b, depth)
			if ar.bottom {
				return ar
			}
			if ar.Param >= 0 && len(ar.Path)+len(r.Path) <= maxPath {
				out.Param = ar.Param
				out.Path = append(slices.Clip(ar.Path), r.Path...)
			}
			if len(r.Path) == 0 && sameKind(a.Type(), typ) {
				if ar.Const != nil {
					out.Const = ar.Const
				}
			}
		}
	}
	for m := r.nilIff; m != 0; m &= m - 1 {
		if a := arg(bits.TrailingZeros64(m)); a != nil {
			ar := ev.eval(a, b, depth)
			if ar.bottom {
				return ar
			}
			out.nilIff |= ar.nilIff
			if ar.Nil != 0 && out.Nil&ar.Nil != 0 {
				out.Nil &= ar.Nil
			}
		}
	}
	// v, err := f(): the outcome that the way here has tested.
	if b != nil && out.Nil == IsNil|NonNil && (r.NonNilIfOK || r.NilIfFailed) && res.Len() > 1 && j < res.Len()-1 {
		if ok, known := outcomeFact(c, res.Len()-1, b); known {
			if ok && r.NonNilIfOK {
				out.Nil = NonNil
			} else if !ok && r.NilIfFailed {
				out.Nil = IsNil
			}
		}
	}
	return out
}

func sameKind(a, b types.Type) bool { return types.IsInterface(a) == types.IsInterface(b) }

// evalJoin evaluates errors.Join: nil iff every element of its variadic slice is.
func (ev *evaluator) evalJoin(c *ssa.Call, unknown Result, b *ssa.BasicBlock, depth int) Result {
	elems, ok := sliceElems(c.Call.Args[0])
	if !ok {
		return unknown
	}
	unknown.Nil = IsNil
	for _, e := range elems {
		r := ev.eval(e, b, depth)
		switch {
		case r.bottom:
			return r
		case r.Nil == NonNil:
			unknown.Nil = NonNil
			return unknown
		case r.Nil&NonNil != 0:
			unknown.Nil |= NonNil
		}
	}
	if len(elems) == 1 {
		unknown.nilIff = ev.eval(elems[0], b, depth).nilIff
	}
	return unknown
}

// sliceElems returns the values of the slice that a variadic call builds.
func sliceElems(v ssa.Value) ([]ssa.Value, bool) {
	if c, ok := v.(*ssa.Const); ok && c.Value == nil {
		return nil, true
	}
	sl, ok := v.(*ssa.Slice)
	if !ok {
		return nil, false
	}
	arr, ok := sl.X.(*ssa.Alloc)
	if !ok {
		return nil, false
	}
	var elems []ssa.Value
	for _, ref := range *arr.Referrers() {
		switch r := ref.(type) {
		case *ssa.IndexAddr:
			for _, ref := range *r.Referrers() {
				st, ok := ref.(*ssa.Store)
				if !ok || st.Addr != ssa.Value(r) {
					return nil, false
				}
				elems = append(elems, st.Val)
			}
		case *ssa.Slice, *ssa.DebugRef:
		default:
			return nil, false
		}
	}
	if at, ok := deref(arr.Type()).Underlying().(*types.Array); !ok || at.Len() != int64(len(elems)) {
		return nil, false
	}
	return elems, true
}

// relate adds the parameters whose nilness is that of the value on the way to b.
func (ev *evaluator) relate(r *Result, b *ssa.BasicBlock) {
	if r.bottom || r.Nil == IsNil|NonNil || r.Nil == 0 {
		return
	}
	for i, p := range ev.n.fn.Params {
		if i >= maxRoots || !hasNil(p.Type()) {
			continue
		}
		if isNil, ok := nilFact(p, b); ok && isNil == (r.Nil == IsNil) {
			r.nilIff |= 1 << uint(i)
		}
	}
}

// outcome fills NonNilIfOK and NilIfFailed of the values of one return.
func (ev *evaluator) outcome(ret *ssa.Return, vals []Result, b *ssa.BasicBlock) {
	last := len(vals) - 1
	if last < 1 || !isOutcome(ret.Results[last].Type()) {
		return
	}
	ok, known := false, false
	switch o := vals[last]; {
	case o.bottom:
		for j := range vals[:last] {
			vals[j].NonNilIfOK, vals[j].NilIfFailed = true, true
		}
		return
	case o.Nil == IsNil:
		ok, known = true, true
	case o.Nil == NonNil:
		ok, known = false, true
	case o.Const != nil && o.Const.Kind() == constant.Bool:
		ok, known = constant.BoolVal(o.Const), true
	}
	// return f(): the same call gives value and outcome.
	var tail *node
	tailIndex := func(v ssa.Value) int { return -1 }
	if e, isEx := ret.Results[last].(*ssa.Extract); isEx {
		if c, isCall := e.Tuple.(*ssa.Call); isCall {
			if s := ev.n.siteOf(c); s != nil && s.target != noNode && e.Index == len(ev.t.nodes[s.target].sum.results)-1 {
				tail = ev.t.nodes[s.target]
				tailIndex = func(v ssa.Value) int {
					if x, ok := v.(*ssa.Extract); ok && x.Tuple == e.Tuple {
						return x.Index
					}
					return -1
				}
			}
		}
	}
	for j := range vals[:last] {
		v := &vals[j]
		if v.bottom || v.Nil == 0 {
			continue
		}
		v.NonNilIfOK = v.Nil == NonNil || known && !ok
		v.NilIfFailed = v.Nil == IsNil || known && ok
		if k := tailIndex(ret.Results[j]); k >= 0 {
			v.NonNilIfOK = v.NonNilIfOK || tail.sum.results[k].NonNilIfOK
			v.NilIfFailed = v.NilIfFailed || tail.sum.results[k].NilIfFailed
		}
	}
}

func isOutcome(typ types.Type) bool {
	if b, ok := typ.Underlying().(*types.Basic); ok {
		return b.Info()&types.IsBoolean != 0
	}
	return types.Identical(typ, types.Universe.Lookup("error").Type())
}

// nilFact returns whether v is known to be nil or not where control is in b,
// from the tests that dominate b.
func nilFact(v ssa.Value, b *ssa.BasicBlock) (isNil, ok bool) {
	if refs := v.Referrers(); refs == nil || len(*refs) < 2 {
		return false, false // nobody tests it
	}
	for d := b.Idom(); d != nil; d = d.Idom() {
		if len(d.Succs) != 2 || d.Succs[0] == d.Succs[1] {
			continue
		}
		for k, s := range d.Succs {
			if len(s.Preds) == 1 && s.Dominates(b) {
				if isNil, ok := ifFact(v, d, k == 0); ok {
					return isNil, true
				}
			}
		}
	}
	return false, false
}

// ifFact returns what the If at the end of d says about v on one side.
func ifFact(v ssa.Value, d *ssa.BasicBlock, side bool) (isNil, ok bool) {
	i, isIf := d.Instrs[len(d.Instrs)-1].(*ssa.If)
	if !isIf {
		return false, false
	}
	c, isBin := i.Cond.(*ssa.BinOp)
	if !isBin || c.Op != token.EQL && c.Op != token.NEQ {
		return false, false
	}
	if !(c.X == v && isNilConst(c.Y) || c.Y == v && isNilConst(c.X)) {
		return false, false
	}
	return (c.Op == token.EQL) == side, true
}

func isNilConst(v ssa.Value) bool {
	c, ok := v.(*ssa.Const)
	return ok && c.IsNil()
}

// outcomeFact returns whether the call c is known to have succeeded where
// control is in b, from a test of result k.
func outcomeFact(c *ssa.Call, k int, b *ssa.BasicBlock) (success, known bool) {
	for _, ref := range *c.Referrers() {
		e, ok := ref.(*ssa.Extract)
		if !ok || e.Index != k {
			continue
		}
		if isNil, ok := nilFact(e, b); ok {
			return isNil, true
		}
		for d := b.Idom(); d != nil; d = d.Idom() {
			i, ok := d.Instrs[len(d.Instrs)-1].(*ssa.If)
			if !ok || i.Cond != ssa.Value(e) || d.Succs[0] == d.Succs[1] {
				continue
			}
			for side, s := range d.Succs {
				if len(s.Preds) == 1 && s.Dominates(b) {
					return side == 0, true
				}
			}
		}
	}
	return false, false
}
