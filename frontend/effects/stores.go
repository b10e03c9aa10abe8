package effects

// This file reads the instructions of one body: its stores, loads and calls.

import (
	"fmt"
	"go/token"
	"go/types"

	"golang.org/x/tools/go/ssa"
)

// scanner is the state of one body's scan; its buffers are used again.
type scanner struct {
	t       *Table
	n       *node
	fn      *ssa.Function
	origin  map[ssa.Value]mask
	params  map[ssa.Value]int
	visited map[ssa.Value]bool
	todo    []ssa.Value

	any   []placeID
	rel   [][]placeID
	loads []placeID
	ops   []*ssa.Value
}

// scanBody fills the local part of n. The switch below is the table of doc.go.
func (t *Table) scanBody(n *node) {
	s := &t.scan
	fn := n.fn
	s.t, s.n, s.fn = t, n, fn
	s.origin = emptied(s.origin)
	s.params = emptied(s.params)
	s.any, s.loads = s.any[:0], s.loads[:0]
	s.rel = s.rel[:0]
	for i, p := range fn.Params {
		s.params[p] = i
		s.rel = append(s.rel, nil)
	}
	for i, f := range fn.FreeVars {
		s.params[f] = len(fn.Params) + i
		s.rel = append(s.rel, nil)
	}
	for _, b := range fn.Blocks {
		for _, instr := range b.Instrs {
			s.instr(instr)
		}
	}
	n.recovers = ownRecovery(fn)
	n.local = t.sets.of(s.any...)
	n.localRel = make([]*set, len(s.rel))
	for i, r := range s.rel {
		n.localRel[i] = t.sets.of(r...)
	}
	n.reads = t.sets.of(s.loads...)
}

func (s *scanner) instr(instr ssa.Instruction) {
	ps := s.t.places
	switch i := instr.(type) {
	case *ssa.Store:
		s.store(i.Addr)
		s.useGlobal(i.Addr, i, true)
		s.useGlobal(i.Val, i, false)
		return
	case *ssa.MapUpdate:
		s.write(ps.elemID(i.Map.Type().Underlying().(*types.Map).Elem()), s.originOf(i.Map))
	case *ssa.UnOp:
		switch i.Op {
		case token.MUL:
			s.load(i.X)
			if g, ok := i.X.(*ssa.Global); ok && hasNil(i.Type()) {
				s.n.globals = append(s.n.globals, g)
			}
			s.useGlobal(i.X, i, true)
			return
		case token.ARROW:
			s.n.impure = true // a receive changes the channel
		}
	case *ssa.FieldAddr:
		st := deref(i.X.Type()).Underlying().(*types.Struct)
		f := st.Field(i.Field)
		id := ps.seeField(f)
		if addressTaken(i) {
			ps.expose(id, f.Type())
		}
		if g, ok := i.X.(*ssa.Global); ok && !addressTaken(i) && s.partOfGlobal(g, i) {
			return
		}
	case *ssa.IndexAddr:
		et := deref(i.Type())
		if addressTaken(i) {
			ps.expose(ps.elemID(et), et)
		}
		if g, ok := i.X.(*ssa.Global); ok && !addressTaken(i) && s.partOfGlobal(g, i) {
			return
		}
	case *ssa.Index:
		// An array value is no memory; a string never changes.
	case *ssa.Lookup:
		if m, ok := i.X.Type().Underlying().(*types.Map); ok {
			s.loads = append(s.loads, ps.elemID(m.Elem()))
		}
	case *ssa.Range:
		if _, ok := i.X.Type().Underlying().(*types.Map); ok {
			s.n.impure = true // the order is random
		}
	case *ssa.Call:
		s.call(i)
	case *ssa.Defer:
		s.n.impure = true
		s.call(i)
	case *ssa.Go:
		s.n.impure = true
		s.call(i)
	case *ssa.Send, *ssa.Select:
		s.n.impure = true
	case *ssa.Panic:
		s.n.impure = true
	case *ssa.Alloc:
		if i.Heap {
			s.n.impure = true // two calls yield two objects
		}
	case *ssa.MakeChan, *ssa.MakeMap, *ssa.MakeSlice, *ssa.MakeClosure:
		s.n.impure = true
	case *ssa.Convert:
		if _, ok := i.Type().Underlying().(*types.Slice); ok {
			s.n.impure = true
		}
	case *ssa.BinOp, *ssa.ChangeInterface, *ssa.ChangeType, *ssa.DebugRef, *ssa.Extract, *ssa.Field,
		*ssa.If, *ssa.Jump, *ssa.MakeInterface, *ssa.Next, *ssa.Phi, *ssa.Return, *ssa.RunDefers,
		*ssa.Slice, *ssa.SliceToArrayPointer, *ssa.TypeAssert:
		// Registers and control only.
	case *ssa.MultiConvert:
		// Only in bodies over type parameters, which are not scanned.
		panic(fmt.Sprintf("effects: %s: conversion of a type parameter", s.fn))
	default:
		panic(fmt.Sprintf("effects: %s: unknown instruction %T", s.fn, instr))
	}
	// A package variable used in any other way has its address taken.
	s.ops = instr.Operands(s.ops[:0])
	for _, op := range s.ops {
		s.useGlobal(*op, instr, false)
	}
}

// useGlobal notes a use of v, if it is a package variable, for InitOnlyGlobal
// and for exposure.
func (s *scanner) useGlobal(v ssa.Value, at ssa.Instruction, plain bool) {
	g, ok := v.(*ssa.Global)
	if !ok {
		return
	}
	if _, ok := at.(*ssa.DebugRef); ok {
		return
	}
	u := s.t.global(g)
	st, isStore := at.(*ssa.Store)
	switch {
	case !plain:
		switch at.(type) {
		case *ssa.FieldAddr, *ssa.IndexAddr:
			// Part of it is stored to or has its address taken; the part
			// is exposed, not the whole.
		default:
			s.t.places.expose(s.t.places.globalID(g), deref(g.Type()))
		}
		u.leaks = true
	case isStore && s.fn.Pkg == g.Pkg && s.fn.Name() == "init" && s.fn.Synthetic != "":
		u.inits = append(u.inits, st)
	case isStore && s.fn.Pkg == g.Pkg && isInit(s.fn):
		u.late = true
	case isStore:
		u.leaks = true
	}
}

// partOfGlobal notes the use of a part of g whose address is not taken; it says
// no if the part is stored to outside of the initialisation.
func (s *scanner) partOfGlobal(g *ssa.Global, part ssa.Value) bool {
	if !storedTo(part) {
		s.useGlobal(g, part.(ssa.Instruction), true)
		return true
	}
	if s.fn.Pkg == g.Pkg && (s.fn.Name() == "init" && s.fn.Synthetic != "" || isInit(s.fn)) {
		s.t.global(g).late = true
		return true
	}
	return false
}

// isInit says whether fn is a declared func init.
func isInit(fn *ssa.Function) bool {
	return fn.Parent() == nil && fn.Signature.Recv() == nil && len(fn.Name()) > 5 && fn.Name()[:5] == "init#"
}

// addressTaken says whether an address is used for more than loading, storing
// and stepping further into the same object.
func addressTaken(addr ssa.Value) bool {
	for _, ref := range *addr.Referrers() {
		switch r := ref.(type) {
		case *ssa.UnOp, *ssa.DebugRef:
		case *ssa.Store:
			if r.Val == addr {
				return true
			}
		case *ssa.FieldAddr, *ssa.IndexAddr:
			if addressTaken(ref.(ssa.Value)) {
				return true
			}
		default:
			return true
		}
	}
	return false
}

// storedTo says whether a store goes through an address whose address is not taken.
func storedTo(addr ssa.Value) bool {
	for _, ref := range *addr.Referrers() {
		switch r := ref.(type) {
		case *ssa.Store:
			return true
		case *ssa.FieldAddr:
			if storedTo(r) {
				return true
			}
		case *ssa.IndexAddr:
			if storedTo(r) {
				return true
			}
		}
	}
	return false
}

// basePlace names the place at an address.
func (t *Table) basePlace(addr ssa.Value) placeID {
	switch a := addr.(type) {
	case *ssa.FieldAddr:
		return t.places.fieldID(deref(a.X.Type()).Underlying().(*types.Struct).Field(a.Field))
	case *ssa.IndexAddr:
		return t.places.elemID(deref(a.Type()))
	case *ssa.Global:
		return t.places.globalID(a)
	}
	return t.places.cellID(deref(addr.Type()))
}

func (s *scanner) store(addr ssa.Value) {
	m := s.originOf(addr)
	s.write(s.t.basePlace(addr), m)
	for _, p := range s.t.places.inside(deref(addr.Type())) {
		s.write(p, m)
	}
}

// write notes a store to a place of an object with the given roots.
func (s *scanner) write(p placeID, m mask) {
	if m&unknownRoot != 0 {
		s.any = append(s.any, p)
	}
	if m&^unknownRoot == 0 {
		return
	}
	for i := range s.rel {
		if i < maxRoots && m>>uint(i)&1 != 0 {
			s.rel[i] = append(s.rel[i], p)
		}
	}
}

func (s *scanner) load(addr ssa.Value) {
	if a, ok := addr.(*ssa.Alloc); ok && !a.Heap {
		return
	}
	s.loads = append(s.loads, s.t.basePlace(addr))
	s.loads = append(s.loads, s.t.places.inside(deref(addr.Type()))...)
}

// originOf returns the roots of the object that v points into.
func (s *scanner) originOf(v ssa.Value) mask {
	if m, ok := s.origin[v]; ok {
		return m
	}
	var m mask
	s.visited = emptied(s.visited)
	s.todo = append(s.todo[:0], v)
	push := func(v ssa.Value) {
		if !s.visited[v] {
			s.visited[v] = true
			s.todo = append(s.todo, v)
		}
	}
	for len(s.todo) > 0 {
		x := s.todo[len(s.todo)-1]
		s.todo = s.todo[:len(s.todo)-1]
		switch x := x.(type) {
		case *ssa.Parameter, *ssa.FreeVar:
			m |= rootMask(s.params[x])
		case *ssa.Alloc, *ssa.MakeMap, *ssa.MakeSlice, *ssa.MakeChan, *ssa.MakeClosure, *ssa.Const, *ssa.Function, *ssa.Builtin:
		case *ssa.FieldAddr:
			push(x.X)
		case *ssa.IndexAddr:
			push(x.X)
		case *ssa.Slice:
			push(x.X)
		case *ssa.SliceToArrayPointer:
			push(x.X)
		case *ssa.ChangeType:
			push(x.X)
		case *ssa.ChangeInterface:
			push(x.X)
		case *ssa.MakeInterface:
			push(x.X)
		case *ssa.TypeAssert:
			push(x.X)
		case *ssa.Convert:
			switch u := x.X.Type().Underlying().(type) {
			case *types.Pointer:
				push(x.X)
			case *types.Basic:
				if u.Kind() == types.UnsafePointer {
					push(x.X)
				} else if u.Info()&types.IsString == 0 {
					m |= unknownRoot
				}
			default:
				m |= unknownRoot
			}
		case *ssa.Phi:
			for _, e := range x.Edges {
				push(e)
			}
		case *ssa.Extract:
			if ta, ok := x.Tuple.(*ssa.TypeAssert); ok && x.Index == 0 {
				push(ta.X)
			} else {
				m |= unknownRoot
			}
		case *ssa.Call:
			b, ok := x.Call.Value.(*ssa.Builtin)
			if !ok {
				m |= unknownRoot
				break
			}
			switch b.Name() {
			case "append", "ssa:wrapnilchk", "Add", "Slice", "SliceData", "StringData", "min", "max":
				push(x.Call.Args[0])
			default:
				m |= unknownRoot
			}
		case *ssa.UnOp:
			cell, ok := x.X.(*ssa.Alloc)
			if x.Op != token.MUL || !ok {
				m |= unknownRoot
				break
			}
			// A closure's stored values belong to another frame.
			vals, ok := cellStores(cell)
			for _, v := range vals {
				ok = ok && sameFrame(v, s.fn)
			}
			if !ok {
				m |= unknownRoot
				break
			}
			for _, v := range vals {
				push(v)
			}
		default: // *ssa.Global and values out of memory
			m |= unknownRoot
		}
	}
	s.origin[v] = m
	return m
}

func sameFrame(v ssa.Value, fn *ssa.Function) bool {
	switch v.(type) {
	case *ssa.Const, *ssa.Function, *ssa.Global, *ssa.Builtin:
		return true
	}
	return v.Parent() == fn
}

// call notes a call, go or defer.
func (s *scanner) call(instr ssa.CallInstruction) {
	c := instr.Common()
	if b, ok := c.Value.(*ssa.Builtin); ok && !c.IsInvoke() {
		s.builtin(instr, b)
		return
	}
	st := site{instr: instr, target: noNode, args: callArgs(c)}
	var fn *ssa.Function
	if !c.IsInvoke() {
		fn, st.bound = calleeOf(c.Value)
	}
	if fn != nil {
		st.target = s.t.nodeOf(fn)
	} else {
		s.resolve(&st)
	}
	for _, a := range st.args {
		st.origins = append(st.origins, s.originOf(a))
	}
	if fn != nil {
		// Unknown parameters of another frame's closure stay unknown.
		for range numParams(fn) - len(st.args) {
			st.origins = append(st.origins, unknownRoot)
		}
		for k := range fn.FreeVars {
			switch {
			case st.bound != nil:
				st.origins = append(st.origins, s.originOf(st.bound[k]))
			default:
				st.origins = append(st.origins, unknownRoot)
			}
		}
		if isBodyless(fn) {
			s.externCall(&st, fn)
		}
	}
	s.n.sites = append(s.n.sites, st)
}

func (s *scanner) resolve(st *site) {
	c := st.instr.Common()
	if s.t.opts.Callees == nil {
		st.target = s.t.groupOf(nil, false, false)
		return
	}
	fns, complete := s.t.opts.Callees(st.instr)
	open := s.t.isOpen(c)
	st.target = s.t.groupOf(fns, complete, open)
	if open {
		s.openCall(st)
	}
}

func (s *scanner) builtin(instr ssa.CallInstruction, b *ssa.Builtin) {
	args := instr.Common().Args
	ps := s.t.places
	elem := func(v ssa.Value) {
		var et types.Type
		switch u := v.Type().Underlying().(type) {
		case *types.Slice:
			et = u.Elem()
		case *types.Map:
			et = u.Elem()
		default:
			panic(fmt.Sprintf("effects: %s: %s of %s", s.fn, b.Name(), v.Type()))
		}
		m := s.originOf(v)
		s.write(ps.elemID(et), m)
		for _, p := range ps.inside(et) {
			s.write(p, m)
		}
	}
	switch b.Name() {
	case "append", "copy", "clear", "delete":
		s.n.impure = true
		elem(args[0])
	case "close", "print", "println", "panic", "recover":
		s.n.impure = true
	case "len", "cap":
		// The length of a map or channel is memory; slices and strings carry theirs.
		switch args[0].Type().Underlying().(type) {
		case *types.Map:
			s.loads = append(s.loads, ps.elemID(args[0].Type().Underlying().(*types.Map).Elem()))
		case *types.Chan:
			s.n.impure = true
		}
	case "complex", "imag", "max", "min", "real", "ssa:wrapnilchk", "ssa:deferstack",
		"Add", "Slice", "SliceData", "String", "StringData", "Sizeof", "Alignof", "Offsetof":
	default:
		panic(fmt.Sprintf("effects: %s: unknown builtin %s", s.fn, b.Name()))
	}
}

// emptied returns an empty map: m again unless it is large, since emptying costs
// as much as m has ever held.
func emptied[K comparable, V any](m map[K]V) map[K]V {
	if len(m) > 256 {
		return map[K]V{}
	}
	clear(m)
	return m
}
