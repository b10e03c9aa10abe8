package effects

// This file compares summaries with runs: random programs over linked objects
// are printed as Go, summarised, and run by a small interpreter. What a run does
// must be allowed by the summary.

import (
	"fmt"
	"go/types"
	"math/rand/v2"
	"strings"
	"testing"

	"golang.org/x/tools/go/ssa"
)

const (
	numVars   = 5 // v0..v4; the first numArgs are the parameters
	numArgs   = 3
	numFields = 2
)

// rstmt is a statement; x, y, z name variables, f a field, fn a function.
type rstmt struct {
	op         string
	x, y, z, f int
	fn         int
	body, alt  []rstmt
}

type rfunc struct {
	name string
	body []rstmt
	ret  int
}

func genBody(r *rand.Rand, fns, depth, n int) []rstmt {
	var out []rstmt
	for range n {
		s := rstmt{x: r.IntN(numVars), y: r.IntN(numVars), z: r.IntN(numVars), f: r.IntN(numFields)}
		ops := []string{"copy", "load", "store", "store", "new", "gset", "gget", "load", "nil", "addr"}
		if fns > 0 {
			ops = append(ops, "call", "call", "dyn")
			s.fn = r.IntN(fns)
		}
		if depth < 2 {
			ops = append(ops, "ifnil", "ifeq", "closure", "closurevar", "defer")
		}
		if depth > 0 {
			ops = append(ops, "panic", "recover")
		}
		s.op = ops[r.IntN(len(ops))]
		switch s.op {
		case "ifnil", "ifeq":
			s.body = genBody(r, fns, depth+1, 1+r.IntN(3))
			s.alt = genBody(r, fns, depth+1, r.IntN(2))
		case "closure", "closurevar", "defer":
			s.body = genBody(r, fns, depth+1, 1+r.IntN(3))
		}
		// Rare ones would otherwise empty the heap.
		if s.op == "nil" && r.IntN(3) > 0 {
			s.op = "new"
		}
		out = append(out, s)
	}
	return out
}

func (s rstmt) print(b *strings.Builder, fns []rfunc, ind string) {
	block := func(body []rstmt) {
		for _, s := range body {
			s.print(b, fns, ind+"\t")
		}
	}
	w := func(format string, a ...any) { fmt.Fprintf(b, ind+format+"\n", a...) }
	switch s.op {
	case "copy":
		w("v%d = v%d", s.x, s.y)
	case "load":
		w("v%d = v%d.f%d", s.x, s.y, s.f)
	case "store":
		w("v%d.f%d = v%d", s.x, s.f, s.y)
	case "addr":
		w("put(&v%d.f%d, v%d)", s.x, s.f, s.y)
	case "new":
		w("v%d = new(N)", s.x)
	case "nil":
		w("v%d = nil", s.x)
	case "gset":
		w("g = v%d", s.x)
	case "gget":
		w("v%d = g", s.x)
	case "call":
		w("v%d = %s(v%d, v%d, v%d)", s.x, fns[s.fn].name, s.y, s.z, s.x)
	case "dyn":
		w("v%d = apply(%s, v%d, v%d, v%d)", s.x, fns[s.fn].name, s.y, s.z, s.x)
	case "panic":
		w("panic(v%d)", s.x)
	case "recover":
		w("if r, ok := recover().(*N); ok {\n%s\tv%d = r\n%s}", ind, s.x, ind)
	case "ifnil":
		w("if v%d == nil {", s.x)
		block(s.body)
		w("} else {")
		block(s.alt)
		w("}")
	case "ifeq":
		w("if v%d == v%d {", s.x, s.y)
		block(s.body)
		w("} else {")
		block(s.alt)
		w("}")
	case "closure":
		w("func() {")
		block(s.body)
		w("}()")
	case "defer":
		w("defer func() {")
		block(s.body)
		w("}()")
	case "closurevar":
		w("run(func() {")
		block(s.body)
		w("})")
	default:
		panic(s.op)
	}
}

// robj is an object; origin is the root it belonged to before the call, -1 for
// none, -2 for what the package variable reached.
type robj struct {
	f      [numFields]*robj
	origin int
}

type nilDeref struct{}

type machine struct {
	fns    []rfunc
	g      *robj
	gset   bool
	writes map[*robj]*[numFields]bool
}

func (m *machine) field(o *robj, f int) **robj {
	if o == nil {
		panic(nilDeref{})
	}
	return &o.f[f]
}

func (m *machine) store(o *robj, f int, v *robj) {
	*m.field(o, f) = v
	if m.writes[o] == nil {
		m.writes[o] = new([numFields]bool)
	}
	m.writes[o][f] = true
}

// thrown is an explicit panic.
type thrown struct{ val *robj }

// frame is one activation of a function or closure.
type frame struct {
	m        *machine
	v        *[numVars]*robj
	deferred [][]rstmt
	unwinds  **thrown // the panic that recover stops: this call is deferred by its frame
}

func (m *machine) call(fn int, a [numArgs]*robj) (res *robj) {
	var v [numVars]*robj
	copy(v[:], a[:])
	// Results are evaluated before deferred calls run; after a panic that was
	// stopped they are zero.
	m.activate(&v, nil, m.fns[fn].body, func() { res = v[m.fns[fn].ret] })
	return res
}

// activate runs a body, done if it comes to its end, and then what it deferred.
func (m *machine) activate(v *[numVars]*robj, unwinds **thrown, body []rstmt, done func()) {
	f := &frame{m: m, v: v, unwinds: unwinds}
	try := func(run func()) (th *thrown) {
		defer func() {
			if p := recover(); p != nil {
				var ok bool
				if th, ok = p.(*thrown); !ok {
					panic(p)
				}
			}
		}()
		run()
		return nil
	}
	th := try(func() { f.run(body); done() })
	for i := len(f.deferred) - 1; i >= 0; i-- {
		if again := try(func() { m.activate(v, &th, f.deferred[i], func() {}) }); again != nil {
			th = again
		}
	}
	if th != nil {
		panic(th)
	}
}

func (fr *frame) run(body []rstmt) {
	m, v := fr.m, fr.v
	for _, s := range body {
		switch s.op {
		case "copy":
			v[s.x] = v[s.y]
		case "load":
			v[s.x] = *m.field(v[s.y], s.f)
		case "store", "addr":
			m.store(v[s.x], s.f, v[s.y])
		case "new":
			v[s.x] = &robj{origin: -1}
		case "nil":
			v[s.x] = nil
		case "gset":
			m.g, m.gset = v[s.x], true
		case "gget":
			v[s.x] = m.g
		case "panic":
			panic(&thrown{v[s.x]})
		case "recover":
			if fr.unwinds != nil && *fr.unwinds != nil {
				v[s.x] = (*fr.unwinds).val
				*fr.unwinds = nil
			}
		case "call", "dyn":
			v[s.x] = m.call(s.fn, [numArgs]*robj{v[s.y], v[s.z], v[s.x]})
		case "ifnil":
			if v[s.x] == nil {
				fr.run(s.body)
			} else {
				fr.run(s.alt)
			}
		case "ifeq":
			if v[s.x] == v[s.y] {
				fr.run(s.body)
			} else {
				fr.run(s.alt)
			}
		case "closure", "closurevar":
			m.activate(v, nil, s.body, func() {})
		case "defer":
			fr.deferred = append(fr.deferred, s.body)
		default:
			panic(s.op)
		}
	}
}

// reachable adds the origins of what o reaches.
func reachable(o *robj, seen map[*robj]bool) map[*robj]bool {
	if o != nil && !seen[o] {
		seen[o] = true
		for _, n := range o.f {
			reachable(n, seen)
		}
	}
	return seen
}

// heap builds a tree of depth 3 for each root, with nils here and there.
func heap(r *rand.Rand, origin, depth int) *robj {
	if depth == 0 || r.IntN(6) == 0 && depth < 3 {
		return nil
	}
	o := &robj{origin: origin}
	for f := range o.f {
		o.f[f] = heap(r, origin, depth-1)
	}
	return o
}

func TestRandomPrograms(t *testing.T) {
	programs := 150
	runs := 30
	ran := 0
	for seed := range programs {
		r := rand.New(rand.NewPCG(uint64(seed), 7))
		var fns []rfunc
		for i := range 5 {
			fns = append(fns, rfunc{fmt.Sprintf("fn%d", i), genBody(r, i, 0, 2+r.IntN(6)), r.IntN(numVars)})
		}
		var src strings.Builder
		src.WriteString("package t\n\ntype N struct{ f0, f1 *N }\n\nvar g *N\n\nfunc run(f func()) { f() }\n\nfunc put(p **N, n *N) { *p = n }\n\n")
		src.WriteString("func apply(f func(a, b, c *N) *N, a, b, c *N) *N { return f(a, b, c) }\n")
		for _, f := range fns {
			fmt.Fprintf(&src, "\nfunc %s(v0, v1, v2 *N) *N {\n\tvar v3, v4 *N\n", f.name)
			for _, s := range f.body {
				s.print(&src, fns, "\t")
			}
			fmt.Fprintf(&src, "\t_, _ = v3, v4\n\treturn v%d\n}\n", f.ret)
		}
		b := build(t, "random.go", src.String())
		for i := range fns {
			fn := b.find(fns[i].name)
			for range runs {
				if checkRun(t, r, b, fns, i, fn) {
					ran++
				}
				if t.Failed() {
					t.Fatalf("seed %d, %s:\n%s\n%s", seed, fn, b.table.Of(fn), src.String())
				}
			}
		}
	}
	if ran < 20*programs {
		t.Errorf("only %d runs came to an end", ran)
	}
	t.Logf("%d runs", ran)
}

// checkRun runs a function on a random heap; it says no if nil was followed.
func checkRun(t *testing.T, r *rand.Rand, b *built, fns []rfunc, i int, fn *ssa.Function) (ended bool) {
	defer func() {
		if p := recover(); p != nil {
			if _, ok := p.(nilDeref); !ok {
				panic(p)
			}
			ended = false
		}
	}()
	m := &machine{fns: fns, writes: map[*robj]*[numFields]bool{}}
	var args [numArgs]*robj
	for k := range args {
		args[k] = heap(r, k, 3)
	}
	m.g = heap(r, -2, 3)
	g := m.g
	before := args
	var at [numArgs][numFields][1 + numFields]*robj
	for k, a := range args {
		for f, o := range a.f {
			at[k][f][0] = o
			if o != nil {
				copy(at[k][f][1:], o.f[:])
			}
		}
	}
	var res *robj
	var panicked *thrown
	func() {
		defer func() {
			if p := recover(); p != nil {
				var ok bool
				if panicked, ok = p.(*thrown); !ok {
					panic(p)
				}
			}
		}()
		res = m.call(i, args)
	}()
	s := b.table.Of(fn)
	n := b.pkg.Pkg.Scope().Lookup("N").Type().Underlying().(*types.Struct)

	// Overwrites.
	changed := m.gset
	if m.gset && !s.MayOverwriteGlobal(b.pkg.Var("g")) {
		t.Error("the variable was stored to")
	}
	for o, w := range m.writes {
		if o.origin == -1 {
			continue
		}
		changed = true
		for f, did := range w {
			if did && !s.MayOverwriteField(n.Field(f)) {
				t.Errorf("field %d was stored to", f)
			}
			for k := range args {
				if did && o == before[k] && !s.OverwritesParamField(k, n.Field(f)) {
					t.Errorf("field %d of parameter %d was stored to", f, k)
				}
				if did && o == before[k] && !s.MayOverwriteParam(k) {
					t.Errorf("parameter %d was stored to", k)
				}
			}
		}
	}
	if changed && s.PureGetter() {
		t.Error("a pure getter changed something")
	}
	switch {
	case panicked != nil && !s.MayPanic():
		t.Error("it panicked")
	case panicked == nil && s.NeverReturns():
		t.Error("it returned")
	}

	// Flows into memory.
	for k, a := range args {
		for o := range reachable(a, map[*robj]bool{}) {
			if o.origin >= 0 && o.origin != k && !s.Flow(o.origin).ToRoot(k) {
				t.Errorf("parameter %d is in the memory of parameter %d", o.origin, k)
			}
		}
	}
	for _, top := range []*robj{g, m.g} {
		for o := range reachable(top, map[*robj]bool{}) {
			if o.origin >= 0 && !s.Flow(o.origin).Global {
				t.Errorf("parameter %d is in a package variable", o.origin)
			}
		}
	}
	if panicked != nil {
		for o := range reachable(panicked.val, map[*robj]bool{}) {
			if o.origin >= 0 && !s.Flow(o.origin).Kept {
				t.Errorf("parameter %d is in a panic", o.origin)
			}
		}
		return true
	}

	// Results.
	rs := s.Result(0)
	if res == nil && rs.Nil&IsNil == 0 || res != nil && rs.Nil&NonNil == 0 {
		t.Errorf("result nil: %v, said to be %q", res == nil, rs)
	}
	if rs.Param >= 0 {
		want := before[rs.Param]
		for k, st := range rs.Path {
			if st.Field == nil {
				continue
			}
			f := 0
			if st.Field == n.Field(1) {
				f = 1
			}
			switch k {
			case 0:
				want = at[rs.Param][f][0]
			default:
				if len(rs.Path) > 4 || want == nil {
					return true // deeper than noted
				}
				first := 0
				if rs.Path[0].Field == n.Field(1) {
					first = 1
				}
				want = at[rs.Param][first][1+f]
			}
		}
		if res != want {
			t.Errorf("result is not %q", rs)
		}
	}
	if rs.NilIff >= 0 && (res == nil) != (before[rs.NilIff] == nil) {
		t.Errorf("result is not %q", rs)
	}

	// Flows into the result.
	for o := range reachable(res, map[*robj]bool{}) {
		if o.origin >= 0 && !s.Flow(o.origin).ToResult(0) {
			t.Errorf("parameter %d is in the result", o.origin)
		}
	}
	return true
}
