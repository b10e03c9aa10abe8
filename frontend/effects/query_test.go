package effects

import (
	"go/types"
	"math/rand/v2"
	"slices"
	"sync"
	"testing"

	"golang.org/x/tools/go/ssa"
)

const querySource = `package t

import (
	"errors"
	"io"
	"os"
	"sort"
)

type S struct {
	a, b int
	in   In
	next *S
}

type In struct{ x int }

type W struct{ n int }

func (w *W) Write(p []byte) (int, error) { w.n++; return len(p), nil }

var ErrX = errors.New("x")
var ErrY error
var limit = 10
var table = []int{1}
var cfg = S{a: 1}
var late error
var leaked int
var other int

func init() { late = errors.New("late") }

func setErrY(e error) { ErrY = e }
func leak() *int      { return &leaked }
func setOther()       { other = 1 }
func read() int       { return cfg.a + limit }

func store(p *int)       { *p = 1 }
func expose(s *S) *int   { return &s.a }
func setX(s *S)          { s.in.x = 1 }
func setIn(s *S)         { s.in = In{} }
func setNext(s *S)       { s.next.b = 1 }
func getB(s *S) int      { return s.b }
func setB(s *S)          { s.b = 3 }
func setMap(m map[string]*S) { m["x"] = nil }

func sorting(xs []int) (calls int) {
	sort.Slice(xs, func(i, j int) bool { calls++; return xs[i] < xs[j] })
	return calls
}

func copying(r io.Reader) int {
	w := &W{}
	io.Copy(w, r)
	return w.n
}

func opens(f *os.File) { f.Close() }

func joins(e error) error   { return errors.Join(e, ErrX) }
func joinsAny(e error) error { return errors.Join(e) }

func dyn(f func(*S), s *S) { f(s) }
func use()               { dyn(setB, &S{}) }
`

func fieldOf(t *testing.T, b *built, typ, name string) *types.Var {
	t.Helper()
	st := b.pkg.Pkg.Scope().Lookup(typ).Type().Underlying().(*types.Struct)
	for f := range st.Fields() {
		if f.Name() == name {
			return f
		}
	}
	t.Fatalf("no field %s.%s", typ, name)
	return nil
}

// callIn returns the first call in a function that is no builtin.
func callIn(t *testing.T, fn *ssa.Function) ssa.CallInstruction {
	t.Helper()
	for _, b := range fn.Blocks {
		for _, i := range b.Instrs {
			if c, ok := i.(ssa.CallInstruction); ok {
				if _, ok := c.Common().Value.(*ssa.Builtin); !ok {
					return c
				}
			}
		}
	}
	t.Fatalf("no call in %s", fn)
	return nil
}

func TestQueries(t *testing.T) {
	b := build(t, "query.go", querySource)
	of := func(name string) *Summary { return b.table.Of(b.find(name)) }
	call := func(name string) *Summary { return b.table.OfCall(callIn(t, b.find(name))) }
	a, fb, in, x, next, n := fieldOf(t, b, "S", "a"), fieldOf(t, b, "S", "b"), fieldOf(t, b, "S", "in"), fieldOf(t, b, "In", "x"), fieldOf(t, b, "S", "next"), fieldOf(t, b, "W", "n")
	intT := types.Typ[types.Int]
	for _, c := range []struct {
		what string
		got  bool
		want bool
	}{
		{"a store through *int may hit a field whose address is taken", of("store").MayOverwriteField(a), true},
		{"but not one whose address stays at home", of("store").MayOverwriteField(fb), false},
		{"nor a variable whose address stays at home", of("store").MayOverwriteGlobal(b.pkg.Var("other")), false},
		{"it may hit a variable whose address is taken", of("store").MayOverwriteGlobal(b.pkg.Var("leaked")), true},
		{"it may hit an int cell", of("store").MayOverwriteCell(intT), true},
		{"no slice of ints: no element has its address taken", of("store").MayOverwriteElem(intT), false},
		{"a store to a part changes the whole", of("setX").MayOverwriteField(in), true},
		{"a store of the whole changes the parts", of("setIn").MayOverwriteField(x), true},
		{"and nothing beside it", of("setIn").MayOverwriteField(next), false},
		{"setB stores to its parameter", of("setB").OverwritesParamField(0, fb), true},
		{"and nowhere else", of("setB").MayOverwriteFieldElsewhere(fb), false},
		{"setNext stores elsewhere", of("setNext").MayOverwriteFieldElsewhere(fb), true},
		{"a map of pointers has elements", of("setMap").MayOverwriteElem(types.NewPointer(b.pkg.Type("S").Type())), true},
		{"a getter is pure", of("getB").PureGetter(), true},
		{"what it reads changes", of("getB").ReadsOverwritten(of("setB")), true},
		{"or does not", of("getB").ReadsOverwritten(of("setX")), false},
		{"reading variables is pure", of("read").PureGetter(), true},
		{"sort.Slice may run the closure", call("sorting").MayOverwriteCell(intT), true},
		{"and write the elements", call("sorting").MayOverwriteElem(intT), true},
		{"but no other field", call("sorting").MayOverwriteField(fb), false},
		{"io.Copy may call Write", call("copying").MayOverwriteField(n), true},
		{"which is in scope of nothing else", call("copying").MayOverwriteField(a), false},
		{"Close may change the file", call("opens").Writes(), true},
		{"and only that", call("opens").MayOverwriteField(a), false},
		{"a dynamic call does what its candidates do", call("dyn").OverwritesParamField(0, fb), true},
		{"and keeps the root apart", call("dyn").MayOverwriteFieldElsewhere(fb), false},
		{"a sentinel is joined", call("joins").Result(0).NeverNil(), true},
		{"nothing is known of what is joined", call("joinsAny").Result(0).Known(), false},
		{"a joined parameter decides", of("joinsAny").Result(0).NilIff == 0, true},
		{"ErrX is a sentinel", b.table.GlobalNonNil(b.pkg.Var("ErrX")), true},
		{"ErrY is assigned to", b.table.GlobalNonNil(b.pkg.Var("ErrY")), false},
		{"late is nil at first", b.table.GlobalNonNil(b.pkg.Var("late")), false},
		{"but only initialisation stores to it", b.table.InitOnlyGlobal(b.pkg.Var("late")), true},
		{"ErrY is not of initialisation only", b.table.InitOnlyGlobal(b.pkg.Var("ErrY")), false},
		{"leaked has its address taken", b.table.InitOnlyGlobal(b.pkg.Var("leaked")), false},
		{"cfg is set by parts", b.table.InitOnlyGlobal(b.pkg.Var("cfg")), true},
		{"other is stored to", b.table.InitOnlyGlobal(b.pkg.Var("other")), false},
	} {
		if c.got != c.want {
			t.Errorf("%s: got %v", c.what, c.got)
		}
	}
	if c := b.table.GlobalConst(b.pkg.Var("limit")); c == nil || c.ExactString() != "10" {
		t.Errorf("limit is %v", c)
	}
	if c := b.table.GlobalConst(b.pkg.Var("other")); c != nil {
		t.Errorf("other is %v", c)
	}
}

// TestWithoutResolver: no resolver means that dynamic calls may do anything.
func TestWithoutResolver(t *testing.T) {
	b := build(t, "query.go", querySource)
	tab := Compute(b.prog, b.fns, Options{})
	s := tab.Of(b.find("dyn"))
	if !s.WritesUnknown() || !s.MayOverwriteField(fieldOf(t, b, "S", "next")) || s.Exits()&CallsOpaque == 0 || s.PureGetter() {
		t.Errorf("a call of an unknown function is said to be tame:\n%s", s)
	}
	if !s.Flow(1).Kept {
		t.Error("the argument of an unknown function may be kept")
	}
}

// TestOrder: the order of the functions given does not show in any summary, and
// questions from several goroutines get the answers of one.
func TestOrder(t *testing.T) {
	b := build(t, "query.go", querySource)
	want := map[*ssa.Function]string{}
	for _, fn := range b.fns {
		want[fn] = b.table.Of(fn).String()
	}
	rng := rand.New(rand.NewPCG(1, 2))
	for range 5 {
		fns := slices.Clone(b.fns)
		rng.Shuffle(len(fns), func(i, j int) { fns[i], fns[j] = fns[j], fns[i] })
		tab := Compute(b.prog, fns, Options{Callees: NewTypeResolver(b.prog, fns).Callees})
		var wg sync.WaitGroup
		for range 4 {
			wg.Go(func() {
				for _, fn := range fns {
					if got := tab.Of(fn).String(); got != want[fn] {
						t.Errorf("%s: order matters:\n%s\nwant\n%s", fn, got, want[fn])
					}
				}
			})
		}
		wg.Wait()
	}
}

// TestLateFunction: a function that Compute never saw is summarised from its
// types.
func TestLateFunction(t *testing.T) {
	b := build(t, "query.go", querySource)
	// getB tells that the package has bodies.
	tab := Compute(b.prog, []*ssa.Function{b.find("getB")}, Options{})
	s := tab.Of(b.find("setB"))
	if !s.OverwritesParamField(0, fieldOf(t, b, "S", "b")) || s.Exits()&CallsBlind == 0 || s.NeverReturns() {
		t.Errorf("unseen function:\n%s", s)
	}
	if s != tab.Of(b.find("setB")) {
		t.Error("two answers for one function")
	}
}

func TestResolver(t *testing.T) {
	b := build(t, "resolver.go", `package t
import "io"
type I interface { M() }
type A struct{}
type B struct{}
type C struct{}
type E struct{ *A }
func (*A) M() {}
func (B) M() {}
func (*C) M() {}
func use(i I) { i.M() }
func conv() { use(&A{}); use(B{}); var x any = E{}; _ = x }
func write(w io.Writer) { w.Write(nil) }
func f1(int) {}
func f2(int) {}
func f3(int) {}
func f4(string) {}
func dyn(f func(int)) { f(1) }
func take() { dyn(f1); dyn(f2); f3(1); g := f4; g("") }
`)
	names := func(fns []*ssa.Function) (out []string) {
		for _, fn := range fns {
			out = append(out, fn.RelString(b.pkg.Pkg))
		}
		return out
	}
	r := NewTypeResolver(b.prog, b.fns)
	fns, complete := r.Callees(callIn(t, b.find("use")))
	if got := names(fns); !slices.Equal(got, []string{"(*A).M", "(B).M", "(E).M"}) || !complete {
		t.Errorf("i.M() may call %v, %v", got, complete)
	}
	fns, _ = r.Callees(callIn(t, b.find("dyn")))
	if got := names(fns); !slices.Equal(got, []string{"f1", "f2"}) {
		t.Errorf("f(1) may call %v", got)
	}
	if fns, complete = r.Callees(callIn(t, b.find("write"))); len(fns) != 0 || !complete {
		t.Errorf("Write has %v, %v", names(fns), complete)
	}
	r.Strict = true
	if _, complete = r.Callees(callIn(t, b.find("write"))); complete {
		t.Error("io.Writer has implementations out of sight")
	}
	if _, complete = r.Callees(callIn(t, b.find("use"))); !complete {
		t.Error("I is ours")
	}
}
