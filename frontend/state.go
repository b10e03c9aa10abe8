package frontend

import (
	"encoding/binary"
	"go/types"
	"slices"

	"golang.org/x/tools/go/ssa"
)

// phase tells how far a path is with its instance.
type phase uint8

const (
	unborn  phase = iota // no instance yet: nothing counts
	born                 // the instance exists; names say how it can be reached
	anyInst              // the rule has no instance: every event counts
)

// nset is what a frame knows of the instance.
type nset struct {
	phase   phase
	outside bool   // can be reached from out of sight for good (handed on)
	touched bool   // an event has happened to it on this path
	names   []Expr // sorted: expressions that equal the instance (kHeld, kMaybe: inexact ones)
}

func (s nset) has(e Expr) bool {
	_, ok := slices.BinarySearch(s.names, e)
	return ok
}

func (s *nset) add(e Expr) {
	if e == 0 {
		return
	}
	i, ok := slices.BinarySearch(s.names, e)
	if ok {
		return
	}
	// The old slice may be shared with an interned set.
	n := make([]Expr, 0, len(s.names)+1)
	n = append(n, s.names[:i]...)
	n = append(n, e)
	s.names = append(n, s.names[i:]...)
}

func (s *nset) filter(keep func(Expr) bool) {
	for i, e := range s.names {
		if keep(e) {
			continue
		}
		n := slices.Clone(s.names[:i])
		for _, e := range s.names[i+1:] {
			if keep(e) {
				n = append(n, e)
			}
		}
		s.names = n
		return
	}
}

// gone: the instance was born and nothing names it any more.
func (s nset) gone() bool { return s.phase == born && len(s.names) == 0 }

// Abs names an abstract value: what is known of an expression's value.
type Abs int32

type absKind uint8

const (
	aTop     absKind = iota // nothing known
	aNil                    // nil
	aNon                    // not nil
	aBool                   // lo = 0 false, 1 true
	aInt                    // lo <= value <= hi
	aEq                     // equals the constant c
	aNe                     // differs from the constant c
	aType                   // an interface with dynamic type typ (not nil)
	aFunc                   // the function fn, a closure of it, or a method bound to a receiver (not nil)
	aPending                // the deferred call with symbol lo
)

type absVal struct {
	kind   absKind
	lo, hi int64
	c      string
	typ    types.Type
	fn     *ssa.Function
}

const (
	minInt = -1 << 63
	maxInt = 1<<63 - 1
)

// fact: the value of key is val.
type fact struct {
	key Expr
	val Abs
}

type factset []fact // sorted by key

func (f factset) get(k Expr) Abs {
	i, ok := slices.BinarySearchFunc(f, k, func(x fact, k Expr) int { return int(x.key) - int(k) })
	if !ok {
		return 0
	}
	return f[i].val
}

// with returns f with key set to val (val 0 removes it); f is not changed.
func (f factset) with(k Expr, val Abs) factset {
	i, ok := slices.BinarySearchFunc(f, k, func(x fact, k Expr) int { return int(x.key) - int(k) })
	switch {
	case ok && f[i].val == val, !ok && val == 0:
		return f
	case ok && val == 0:
		n := slices.Clone(f[:i])
		return append(n, f[i+1:]...)
	case ok:
		n := slices.Clone(f)
		n[i].val = val
		return n
	}
	n := make(factset, 0, len(f)+1)
	n = append(n, f[:i]...)
	n = append(n, fact{k, val})
	return append(n, f[i:]...)
}

func (f factset) filter(keep func(Expr) bool) factset {
	for i, x := range f {
		if keep(x.key) {
			continue
		}
		n := slices.Clone(f[:i])
		for _, x := range f[i+1:] {
			if keep(x.key) {
				n = append(n, x)
			}
		}
		return n
	}
	return f
}

// tables intern the sets that symbols and states carry.
type tables struct {
	abs     []absVal
	absID   map[absVal]Abs
	nsets   []nset
	nsetID  map[string]int32
	facts   []factset
	factsID map[string]int32
	buf     []byte
}

func newTables() *tables {
	t := &tables{absID: map[absVal]Abs{}, nsetID: map[string]int32{}, factsID: map[string]int32{}}
	t.abs = append(t.abs, absVal{})
	t.absID[absVal{}] = 0
	t.nset(nset{})
	t.factset(nil)
	return t
}

func (t *tables) absOf(v absVal) Abs {
	if a, ok := t.absID[v]; ok {
		return a
	}
	a := Abs(len(t.abs))
	t.abs = append(t.abs, v)
	t.absID[v] = a
	return a
}

func (t *tables) nset(s nset) int32 {
	b := append(t.buf[:0], byte(s.phase))
	flags := byte(0)
	if s.outside {
		flags |= 1
	}
	if s.touched {
		flags |= 2
	}
	b = append(b, flags)
	for _, e := range s.names {
		b = binary.LittleEndian.AppendUint32(b, uint32(e))
	}
	t.buf = b
	if id, ok := t.nsetID[string(b)]; ok {
		return id
	}
	id := int32(len(t.nsets))
	t.nsets = append(t.nsets, s)
	t.nsetID[string(b)] = id
	return id
}

func (t *tables) factset(f factset) int32 {
	b := t.buf[:0]
	for _, x := range f {
		b = binary.LittleEndian.AppendUint32(b, uint32(x.key))
		b = binary.LittleEndian.AppendUint32(b, uint32(x.val))
	}
	t.buf = b
	if id, ok := t.factsID[string(b)]; ok {
		return id
	}
	id := int32(len(t.facts))
	t.facts = append(t.facts, f)
	t.factsID[string(b)] = id
	return id
}

func (f factset) only(keep func(fact) bool) factset {
	var n factset
	for _, x := range f {
		if keep(x) {
			n = append(n, x)
		}
	}
	return n
}
