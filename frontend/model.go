package frontend

import (
	"encoding/binary"
	"go/types"

	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/effects"
	"pathtally/pds"
	"pathtally/properties"
)

// Model is the pushdown system of one rule over one program, explored on
// demand. It implements properties.Model. It is not safe for use from several
// goroutines at once: asking for rules interns symbols.
type Model struct {
	sh   *Shared
	rule *properties.ResolvedRule
	x    *exprs
	t    *tables

	// Static, filled by Lower.
	byCallee       map[calleeKey][]*properties.EventMatch
	shapes         map[ssa.CallInstruction]*shape
	eventFunc      map[*types.Func]bool
	fnOf           map[*ssa.Function]*fnInfo
	fns            []*fnInfo
	eventBirths    bool // instances come into being at events (os.Open), not by being met
	carry          map[types.Type]bool
	askedFields    map[*types.Var]bool // fields that facts or names of the cone read
	askedFieldList []*types.Var
	panicMatters   map[*ssa.Function]bool // a panic that leaves it may be recovered, or ends a root that recovers

	starts []properties.Start

	symbols []symbol
	symID   map[symbol]pds.SymbolID
	states  []state
	stateID map[state]pds.StateID
	vectors [][]int64
	vecID   map[string]pds.EffectID
	labels  []label
	labelID map[label]pds.LabelID
	conts   []contRef
	contID  map[contRef]int32
	doubts  []properties.Note
	doubtID map[doubtKey]pds.DoubtID
	notes   noteSet

	units       unitQueue
	exits       map[exitKey]state // what the ways out of a function were reduced to
	exitSeen    map[exitKey]bool
	exitCount   map[int]int
	writes      map[writeKey]bool
	askedWrites map[*effects.Summary]bool
	keyOf       map[valueAt]Expr
	upOf        map[upKeyOf][]Expr
	reduced     map[symbol]pds.SymbolID // what symbols were reduced to, themselves included
	factsets    map[symbol]int          // symbols by everything but their facts
	visited     map[*ssa.Function]bool  // functions whose code the exploration entered
	funcIDs     map[*ssa.Function]int
}

type symKind uint8

const (
	symNone     symKind = iota
	symEntry            // a function is entered
	symPoint            // running at an instruction
	symCont             // waiting for a call to come back
	symLeave            // bottom of a function that defers
	symDeferred         // a pending deferred call
	symDeferRet         // waiting for a deferred call to come back
	symSpawned          // bottom of a goroutine whose counts belong to its spawner
)

// symbol is a stack symbol: a point of a function with what the frame knows.
type symbol struct {
	kind     symKind
	fn       int32 // index into Model.fns
	blk, idx int32 // block and instruction
	ns, fs   int32 // interned nset and factset
	aux      int32 // symEntry, symPoint: how the frame was called (rec*); symCont, symDeferRet: index into Model.conts
}

type stateKind uint8

const (
	stNone   stateKind = iota
	stRun              // the top symbol runs
	stExit             // a function has been left
	stUnwind           // a function that defers is being left: deferred calls run
)

// How a frame was called, as far as recover is concerned.
const (
	recNo   = 0 // not by a panicking unwinding
	recCan  = 1 // directly by one: recover stops the panic
	recDone = 2 // it has stopped it
)

// state is a control state. Exits carry what the caller learns; unwinding
// carries what the frame knows.
type state struct {
	kind     stateKind
	exit     properties.ExitKind
	outcome  properties.Outcome
	last     int8 // last result, if bool: 1 true, -1 false
	rec      int8
	fn       int32 // stUnwind
	blk, idx int32 // stUnwind: the RunDefers that is under way
	ns, fs   int32
}

// contRef is what a waiting symbol remembers besides its frame.
type contRef struct {
	callee     int32 // index into Model.fns
	closure    Expr  // the function value that was called, for captured variables; 0 for a static callee
	bound      *ssa.MakeClosure
	rec        int8
	mode       properties.ExitKind // symDeferRet: how the frame is being left
	again      bool                // symCont: the callback may be called once more
	callback   ssa.Value           // the argument that the callee out of sight calls; nil otherwise
	ublk, uidx int32               // symDeferRet: the RunDefers that is under way
}

type doubtKey struct {
	instr ssa.Instruction
	text  string
}

// Lower builds the model of a rule.
func (sh *Shared) Lower(rule *properties.ResolvedRule) properties.Model { return sh.lower(rule) }

// lower builds the model. Everything that does not depend on a path
// is computed here; the system itself is explored by asking for rules.
func (sh *Shared) lower(rule *properties.ResolvedRule) *Model {
	m := &Model{
		sh: sh, rule: rule, x: newExprs(), t: newTables(),
		byCallee:    map[calleeKey][]*properties.EventMatch{},
		shapes:      map[ssa.CallInstruction]*shape{},
		eventFunc:   map[*types.Func]bool{},
		fnOf:        map[*ssa.Function]*fnInfo{},
		carry:       map[types.Type]bool{},
		askedFields: map[*types.Var]bool{},
		symID:       map[symbol]pds.SymbolID{},
		stateID:     map[state]pds.StateID{},
		vecID:       map[string]pds.EffectID{},
		labelID:     map[label]pds.LabelID{},
		contID:      map[contRef]int32{},
		doubtID:     map[doubtKey]pds.DoubtID{},
		visited:     map[*ssa.Function]bool{},
		factsets:    map[symbol]int{},
		reduced:     map[symbol]pds.SymbolID{},
		keyOf:       map[valueAt]Expr{},
		upOf:        map[upKeyOf][]Expr{},
		exits:       map[exitKey]state{},
		exitSeen:    map[exitKey]bool{},
		exitCount:   map[int]int{},
		writes:      map[writeKey]bool{},
		askedWrites: map[*effects.Summary]bool{},
		funcIDs:     map[*ssa.Function]int{},
	}
	m.symbols = append(m.symbols, symbol{})
	m.states = append(m.states, state{})
	m.labels = append(m.labels, label{})
	m.doubts = append(m.doubts, properties.Note{})
	m.effect(make([]int64, len(rule.Counts)))
	m.state(state{kind: stRun})
	for i := range rule.Events {
		for _, g := range rule.Events[i].Giving {
			switch g.(type) {
			case properties.PatInstance:
				m.eventBirths = true
			case properties.PatName:
				if len(rule.Events[i].Where) > 0 {
					m.eventBirths = true
				}
			}
		}
	}
	m.buildCone()
	m.findAskedFields()
	m.findPanicMatters()
	m.buildFlows()
	m.findStarts()
	return m
}

const runState pds.StateID = 1

func (m *Model) symbol(s symbol) pds.SymbolID {
	if id, ok := m.symID[s]; ok {
		return id
	}
	id := pds.SymbolID(len(m.symbols))
	m.symbols = append(m.symbols, s)
	m.symID[s] = id
	return id
}

func (m *Model) state(s state) pds.StateID {
	if id, ok := m.stateID[s]; ok {
		return id
	}
	id := pds.StateID(len(m.states))
	m.states = append(m.states, s)
	m.stateID[s] = id
	return id
}

func (m *Model) cont(c contRef) int32 {
	if id, ok := m.contID[c]; ok {
		return id
	}
	id := int32(len(m.conts))
	m.conts = append(m.conts, c)
	m.contID[c] = id
	return id
}

func (m *Model) effect(v []int64) pds.EffectID {
	var b []byte
	for _, n := range v {
		b = binary.LittleEndian.AppendUint64(b, uint64(n))
	}
	if id, ok := m.vecID[string(b)]; ok {
		return id
	}
	id := pds.EffectID(len(m.vectors))
	m.vectors = append(m.vectors, v)
	m.vecID[string(b)] = id
	return id
}

// Vector implements pds.System.
func (m *Model) Vector(e pds.EffectID) []int64 { return m.vectors[e] }

// NumCounts implements pds.System.
func (m *Model) NumCounts() int { return len(m.rule.Counts) }

// Starts implements properties.Model.
func (m *Model) Starts() []properties.Start { return m.starts }

// Exit implements properties.Model.
func (m *Model) Exit(q pds.StateID) properties.Exit {
	s := m.states[q]
	ns := m.t.nsets[s.ns]
	e := properties.Exit{
		Kind: s.exit, Outcome: s.outcome,
		Unborn: ns.phase == unborn,
		True:   s.last > 0, False: s.last < 0,
	}
	e.Outside = ns.outside
	e.Named = len(ns.names) > 0
	for _, n := range ns.names {
		e.Armed = e.Armed || m.armed(n, true) || m.renamed(n)
		switch m.x.rootKind(n) {
		case kResult:
			if s.exit == properties.ExitReturn && s.outcome != properties.Failure {
				e.Outside = true
			}
		case kParam, kFree, kGlobal:
			if m.x.loads[n] > 0 {
				e.Outside = true
			}
		}
	}
	return e
}

// findAskedFields collects the fields that conditions and subjects of the cone
// read: a store to any other field bears on nothing.
func (m *Model) findAskedFields() {
	add := func(v *types.Var) {
		v = v.Origin()
		if !m.askedFields[v] {
			m.askedFields[v] = true
			m.askedFieldList = append(m.askedFieldList, v)
		}
	}
	var fields func(v ssa.Value, depth int)
	fields = func(v ssa.Value, depth int) {
		if depth > 6 {
			return
		}
		switch v := v.(type) {
		case *ssa.BinOp:
			fields(v.X, depth+1)
			fields(v.Y, depth+1)
		case *ssa.UnOp:
			fields(v.X, depth+1)
		case *ssa.FieldAddr:
			add(structField(v.X.Type(), v.Field))
			fields(v.X, depth+1)
		case *ssa.Field:
			add(structField(v.X.Type(), v.Field))
			fields(v.X, depth+1)
		case *ssa.ChangeType:
			fields(v.X, depth+1)
		case *ssa.ChangeInterface:
			fields(v.X, depth+1)
		case *ssa.Call:
			// What a pure getter reads.
			if fn := v.Call.StaticCallee(); fn != nil && fn.Blocks != nil && m.sh.eff.Of(fn).PureGetter() {
				for _, b := range fn.Blocks {
					for _, i := range b.Instrs {
						switch i := i.(type) {
						case *ssa.FieldAddr:
							add(structField(i.X.Type(), i.Field))
						case *ssa.Call:
							fields(i, depth+1)
						}
					}
				}
			}
		case *ssa.Extract:
			fields(v.Tuple, depth+1)
			if ta, ok := v.Tuple.(*ssa.TypeAssert); ok {
				fields(ta.X, depth+1)
			}
		}
	}
	for _, fi := range m.fns {
		if !fi.cone {
			continue
		}
		for _, b := range fi.fn.Blocks {
			if len(b.Instrs) == 0 {
				continue
			}
			if iff, ok := b.Instrs[len(b.Instrs)-1].(*ssa.If); ok {
				fields(iff.Cond, 0)
			}
		}
		for _, s := range fi.subjList {
			for e := s; m.x.isSel(e); e = m.x.nodes[e].x {
				if n := m.x.nodes[e]; n.kind == kLoad {
					if in := m.x.nodes[n.x]; in.kind == kField {
						add(in.ref.(*types.Var))
					}
				}
			}
		}
	}
}

// findPanicMatters marks the functions whose panics somebody on the way out
// recovers: those that defer something that recovers, handlers of net/http, and
// what these call by name in their own package. Further away a panic is taken
// to end the process: an assumption, without which every panic inside fmt's or
// a server's callees would be a path.
func (m *Model) findPanicMatters() {
	m.panicMatters = map[*ssa.Function]bool{}
	var work []*ssa.Function
	mark := func(fn *ssa.Function) {
		if !m.panicMatters[fn] {
			m.panicMatters[fn] = true
			work = append(work, fn)
		}
	}
	for _, fi := range m.fns {
		if !fi.cone {
			continue
		}
		if m.recovers(fi.fn) || isHandler(fi.fn) {
			mark(fi.fn)
		}
	}
	for len(work) > 0 {
		fn := work[len(work)-1]
		work = work[:len(work)-1]
		pkg := m.sh.prog.PackageOfFunction(fn)
		for _, b := range fn.Blocks {
			for _, i := range b.Instrs {
				c, ok := i.(ssa.CallInstruction)
				if !ok || c.Common().IsInvoke() {
					continue
				}
				if _, ok := i.(*ssa.Go); ok {
					continue
				}
				for _, g := range m.sh.targets[c] {
					if gi, ok := m.fnOf[g]; ok && gi.cone && m.sh.prog.PackageOfFunction(g) == pkg {
						mark(g)
					}
				}
			}
		}
	}
}

// recovers tells whether fn defers a function that calls recover.
func (m *Model) recovers(fn *ssa.Function) bool {
	for _, b := range fn.Blocks {
		for _, i := range b.Instrs {
			d, ok := i.(*ssa.Defer)
			if !ok {
				continue
			}
			for _, g := range m.sh.targets[d] {
				for _, b := range g.Blocks {
					for _, i := range b.Instrs {
						if c, ok := i.(*ssa.Call); ok {
							if bi, ok := c.Call.Value.(*ssa.Builtin); ok && bi.Name() == "recover" {
								return true
							}
						}
					}
				}
			}
			if b, ok := d.Call.Value.(*ssa.Builtin); ok && b.Name() == "recover" {
				continue // recover called directly by the unwinding does nothing
			}
		}
	}
	return false
}

// isHandler: func(http.ResponseWriter, *http.Request), whose panics the server recovers.
func isHandler(fn *ssa.Function) bool {
	ps := fn.Signature.Params()
	return ps.Len() == 2 && ps.At(0).Type().String() == "net/http.ResponseWriter" && ps.At(1).Type().String() == "*net/http.Request"
}
