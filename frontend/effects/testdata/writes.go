package t

type S struct {
	a, b int
	p    *S
	in   In
}

type In struct{ x, y int }

var g int
var gs S

// want setA writes: p0{.a}
func setA(s *S) { s.a = 1 }

// want viaP writes: .a
func viaP(s *S) { s.p.a = 1 }

// want inner writes: p0{.x}
func inner(s *S) { s.in.x = 1 }

// want whole writes: p0{.a .b .in .p .x .y cell t.S}
func whole(s *S) { *s = S{} }

// want setG writes: t.g
func setG() { g = 1 }

// want fresh !writes
func fresh() *S {
	s := new(S)
	s.a = 1
	setA(s)
	return s
}

// want through writes: p1{.a}
func through(x, y *S) { setA(y) }

// want deep writes: .a
func deep(x *S) { setA(x.p) }

// want elems writes: p0{elem int}
func elems(xs []int) { xs[0] = 1 }

// want maps writes: p0{elem int}
func maps(m map[string]int) { m["a"] = 1 }

// want del writes: p0{elem int}
func del(m map[string]int) { delete(m, "a") }

// want app writes: p0{elem int}
func app(xs []int) []int { return append(xs, 1) }

// want ptr writes: p0{cell int}
func ptr(p *int) { *p = 1 }

// want either writes: p0{.a}; p1{.a}
func either(x, y *S, c bool) {
	z := x
	if c {
		z = y
	}
	z.a = 2
}

// want count$1 writes: f0{cell int}
// want count !writes
func count() int {
	n := 0
	add := func() { n++ }
	add()
	add()
	return n
}

// want counter !writes
func counter() func() int {
	n := 0
	return func() int { n++; return n }
}

type iface interface{ set() }
type A struct{ v int }
type B struct{ w int }
type C struct{ c int }

func (a *A) set() { a.v = 1 }
func (b *B) set() { b.w = 1 }
func (c *C) set() { c.c = 1 } // never converted

// want dyn writes: p0{.v .w}
func dyn(i iface) { i.set() }

// want conv !flow
func conv() { dyn(&A{}); dyn(&B{}) }

// want callF writes: .v
func callF(f func(*A)) { f(&A{}); f(ga) }

var ga = &A{}

func setV(a *A) { a.v = 3 }

// want passes writes: .v
func passes() { callF(setV) }

// want rec writes: p0{.a}; p1{.a}
func rec(x, y *S, n int) {
	if n > 0 {
		x.a = 1
		rec(y, x, n-1)
	}
}

// want gen[int] writes: p0{.item}
type Box[T any] struct{ item T }

func gen[T any](b *Box[T], v T) { b.item = v }

// want useGen writes: p0{.item}
func useGen(b *Box[int]) { gen(b, 1) }

// want clr writes: p0{.a .b .in .p .x .y elem t.S}
func clr(m map[int]S) { delete(m, 1) }

// want later writes: t.g
func later() { defer setG() }

// want async writes: t.g
func async() { go setG() }
