package t

import (
	"os"
	"sync"
)

type N struct {
	next *N
	f    *os.File
	n    int
}

var root *N

// want id flow p0: r0
func id(n *N) *N { return n }

// want link flow p1: p0
func link(a, b *N) { a.next = b }

// want viaLink flow p0: p1
func viaLink(a, b *N) { link(b, a) }

// want global flow p0: global
func global(n *N) { root = n }

// want send flow p0: kept
func send(n *N) { c := make(chan *N, 1); c <- n }

// want spawned flow p0: kept
func spawned(n *N) { go id(n) }

// want wrapped flow p0: r0
func wrapped(f *os.File) *N { return &N{f: f} }

// want local !flow
func local(n *N) int {
	m := &N{}
	link(m, n)
	return m.n
}

// want closure flow p0: r0
func closure(n *N) func() *N { return func() *N { return n } }

// want indirect flow p0: r0
func indirect(n *N) *N {
	m := &N{}
	k := m
	link(k, n)
	return m
}

// want borrow !flow
func borrow(f *os.File) { f.Close() }

// want pool flow p1: p0
func pool(p *sync.Pool, n *N) { p.Put(n) }

// want number !flow
func number(n *N) int { return n.n }

// want loopLink flow p1: p0
func loopLink(a, b *N) {
	for a.next != nil {
		a = a.next
	}
	a.next = b
}

// want captured flow p0: r0
func captured(n *N) *N {
	var out *N
	set := func(x *N) { out = x }
	set(n)
	return out
}

// want pan flow p0: kept
func pan(n *N) { panic(n) }
