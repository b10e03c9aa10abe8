package effects

// This file names the places of memory that a store may change and says which
// of them overlap.

import (
	"fmt"
	"go/types"
	"slices"
	"sync"

	"golang.org/x/tools/go/ssa"
	"golang.org/x/tools/go/types/typeutil"
)

// placeID is a dense name of a place; unknownPlace stands for all of them.
type placeID int32

const unknownPlace placeID = 0

type placeKind uint8

const (
	anyPlace    placeKind = iota // unknownPlace only
	fieldPlace                   // a struct field, in every object of the struct
	globalPlace                  // a package variable
	elemPlace                    // the elements of all arrays, slices and maps of one element type
	cellPlace                    // what a pointer of unknown origin points to, by type: captured variables, *p
)

// place is one row of the place table. Printed form: ".f", "p.g", "elem T",
// "cell T".
type place struct {
	kind   placeKind
	field  *types.Var  // fieldPlace: the origin of the field
	global *ssa.Global // globalPlace
	typ    types.Type  // elemPlace, cellPlace
}

func (p place) String() string {
	switch p.kind {
	case anyPlace:
		return "unknown"
	case fieldPlace:
		return "." + p.field.Name()
	case globalPlace:
		return p.global.String()
	case elemPlace:
		return "elem " + p.typ.String()
	case cellPlace:
		return "cell " + p.typ.String()
	}
	panic(fmt.Sprintf("effects: place of kind %d", p.kind))
}

// exposure is a field whose address is used for more than a load or a store,
// seen at one (instantiated) type.
type exposure struct {
	place placeID
	typ   int32
}

// places interns places and types. It is filled while Compute runs; afterwards
// only queries with new types add to it, under mu.
type places struct {
	mu       sync.Mutex
	list     []place
	fields   map[*types.Var]placeID
	globals  map[*ssa.Global]placeID
	elems    map[int32]placeID // by type ID
	cells    map[int32]placeID // by type ID
	typeIDs  typeutil.Map      // identical types have one ID
	typeMemo map[types.Type]int32
	types    []types.Type // by type ID

	contents map[int32][]placeID // by type ID: the places inside a value of the type

	exposed   map[exposure]bool
	byCell    map[int32][]placeID      // type ID -> exposed places of that type
	byField   map[placeID][]int32      // exposed place -> type IDs
	conflicts map[placeID][]placeID    // memo of overlap
	pointers  map[types.Type]bool      // memo of hasPointers
	fieldSeen map[placeID][]types.Type // generic fields: the types seen in code
}

func newPlaces() *places {
	return &places{
		list:      []place{{kind: anyPlace}},
		fields:    map[*types.Var]placeID{},
		globals:   map[*ssa.Global]placeID{},
		elems:     map[int32]placeID{},
		cells:     map[int32]placeID{},
		typeMemo:  map[types.Type]int32{},
		contents:  map[int32][]placeID{},
		exposed:   map[exposure]bool{},
		byCell:    map[int32][]placeID{},
		byField:   map[placeID][]int32{},
		conflicts: map[placeID][]placeID{},
		pointers:  map[types.Type]bool{},
		fieldSeen: map[placeID][]types.Type{},
	}
}

func (ps *places) typeID(t types.Type) int32 {
	if id, ok := ps.typeMemo[t]; ok {
		return id
	}
	id, ok := ps.typeIDs.At(t).(int32)
	if !ok {
		id = int32(len(ps.types))
		ps.types = append(ps.types, t)
		ps.typeIDs.Set(t, id)
	}
	ps.typeMemo[t] = id
	return id
}

func (ps *places) add(p place) placeID {
	ps.list = append(ps.list, p)
	return placeID(len(ps.list) - 1)
}

func (ps *places) fieldID(v *types.Var) placeID {
	v = v.Origin()
	id, ok := ps.fields[v]
	if !ok {
		id = ps.add(place{kind: fieldPlace, field: v})
		ps.fields[v] = id
	}
	return id
}

func (ps *places) globalID(g *ssa.Global) placeID {
	id, ok := ps.globals[g]
	if !ok {
		id = ps.add(place{kind: globalPlace, global: g})
		ps.globals[g] = id
	}
	return id
}

func (ps *places) elemID(t types.Type) placeID {
	tid := ps.typeID(t)
	id, ok := ps.elems[tid]
	if !ok {
		id = ps.add(place{kind: elemPlace, typ: ps.types[tid]})
		ps.elems[tid] = id
	}
	return id
}

func (ps *places) cellID(t types.Type) placeID {
	tid := ps.typeID(t)
	id, ok := ps.cells[tid]
	if !ok {
		id = ps.add(place{kind: cellPlace, typ: ps.types[tid]})
		ps.cells[tid] = id
	}
	return id
}

// seeField notes the type at which a field of a generic struct is used.
func (ps *places) seeField(v *types.Var) placeID {
	id := ps.fieldID(v)
	if v.Origin() != v && !slices.ContainsFunc(ps.fieldSeen[id], func(t types.Type) bool { return types.Identical(t, v.Type()) }) {
		ps.fieldSeen[id] = append(ps.fieldSeen[id], v.Type())
	}
	return id
}

// inside returns the places that a value of type t consists of: the fields of
// a struct and the elements of an array, at every depth. A store of the whole
// value is a store to each.
func (ps *places) inside(t types.Type) []placeID {
	tid := ps.typeID(t)
	if c, ok := ps.contents[tid]; ok {
		return c
	}
	var c []placeID
	switch u := t.Underlying().(type) {
	case *types.Struct:
		for f := range u.Fields() {
			c = append(c, ps.seeField(f))
			c = append(c, ps.inside(f.Type())...)
		}
	case *types.Array:
		c = append(c, ps.elemID(u.Elem()))
		c = append(c, ps.inside(u.Elem())...)
	}
	slices.Sort(c)
	c = slices.Compact(c)
	ps.contents[tid] = c
	return c
}

// expose notes that the address of a place of type t is used for more than a
// load or a store: a store through an unrelated *t may then hit it.
func (ps *places) expose(p placeID, t types.Type) {
	e := exposure{p, ps.typeID(t)}
	if ps.exposed[e] {
		return
	}
	ps.exposed[e] = true
	ps.byCell[e.typ] = append(ps.byCell[e.typ], p)
	ps.byField[p] = append(ps.byField[p], e.typ)
}

// overlap returns the places a store to which may change what a load of p
// yields. Precondition: no more exposures are coming.
func (ps *places) overlap(p placeID) []placeID {
	if c, ok := ps.conflicts[p]; ok {
		return c
	}
	c := []placeID{unknownPlace, p}
	addType := func(t types.Type) {
		for _, q := range ps.inside(t) {
			c = append(c, q)
			for _, tid := range ps.byField[q] {
				c = append(c, ps.cellID(ps.types[tid]))
			}
		}
	}
	pl := ps.list[p]
	switch pl.kind {
	case fieldPlace:
		addType(pl.field.Type())
		for _, t := range ps.fieldSeen[p] {
			addType(t)
		}
	case globalPlace:
		addType(deref(pl.global.Type()))
	case elemPlace:
		addType(pl.typ)
	case cellPlace:
		addType(pl.typ)
		c = append(c, ps.byCell[ps.typeID(pl.typ)]...)
	}
	for _, tid := range ps.byField[p] {
		c = append(c, ps.cellID(ps.types[tid]))
	}
	slices.Sort(c)
	c = slices.Compact(c)
	ps.conflicts[p] = c
	return c
}

// hasPointers says whether a value of type t can refer to memory that somebody
// could change: strings and numbers cannot.
func (ps *places) hasPointers(t types.Type) bool {
	if b, ok := ps.pointers[t]; ok {
		return b
	}
	b := true
	switch u := t.Underlying().(type) {
	case *types.Basic:
		b = u.Kind() == types.UnsafePointer || u.Kind() == types.UntypedNil
	case *types.Struct:
		b = false
		for f := range u.Fields() {
			if ps.hasPointers(f.Type()) {
				b = true
				break
			}
		}
	case *types.Array:
		b = ps.hasPointers(u.Elem())
	case *types.Tuple:
		b = false
		for v := range u.Variables() {
			if ps.hasPointers(v.Type()) {
				b = true
				break
			}
		}
	}
	ps.pointers[t] = b
	return b
}

// deref returns what a pointer type points to, or t itself.
func deref(t types.Type) types.Type {
	if p, ok := t.Underlying().(*types.Pointer); ok {
		return p.Elem()
	}
	return t
}
