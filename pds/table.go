// A system listed in full, and its builder by names.

package pds

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"strings"
)

// A Table is a pushdown system listed in full. It implements [System] and never
// changes; [Builder.Table] and [Read] make tables.
type Table struct {
	counts  []string // index = count
	states  []string // index = StateID; [0] unused
	symbols []string // index = SymbolID; [0] unused
	labels  []string // index = LabelID; [0] unused
	doubts  []string // index = DoubtID; [0] unused
	marks   []string // index = bit of Mark; [0] is "loss"
	vectors [][]int64
	starts  []Head
	heads   []Head // heads with rules, in the order in which they first got one
	rules   map[Head][]Rule
	data    *Data             // nil if the system has no parameters, events and predicates
	guards  map[Head][]*Guard // index as in rules; may be shorter
}

// LossMark is the name of [MarkLoss] in text.
const LossMark = "loss"

// Rules implements [System].
func (t *Table) Rules(h Head, dst []Rule) []Rule { return append(dst, t.rules[h]...) }

// Vector implements [System].
func (t *Table) Vector(e EffectID) []int64 { return t.vectors[e] }

// NumCounts implements [System].
func (t *Table) NumCounts() int { return len(t.counts) }

// Counts gives the names of the counts; the caller must not change it.
func (t *Table) Counts() []string { return t.counts }

// Starts lists the heads where runs start; the caller must not change it.
func (t *Table) Starts() []Head { return t.starts }

// Heads lists the heads that have rules; the caller must not change it.
func (t *Table) Heads() []Head { return t.heads }

// NumStates is the highest StateID.
func (t *Table) NumStates() int { return len(t.states) - 1 }

// NumSymbols is the highest SymbolID.
func (t *Table) NumSymbols() int { return len(t.symbols) - 1 }

// StateName names a state; an unknown one reads q7.
func (t *Table) StateName(q StateID) string { return nameOf(t.states, int(q), "q") }

// SymbolName names a symbol; an unknown one reads g7.
func (t *Table) SymbolName(g SymbolID) string { return nameOf(t.symbols, int(g), "g") }

// LabelText is the text of a label, "" for 0.
func (t *Table) LabelText(l LabelID) string {
	if l == 0 {
		return ""
	}
	return nameOf(t.labels, int(l), "label")
}

// State finds a state by name; 0 if there is none.
func (t *Table) State(name string) StateID { return StateID(max(0, slices.Index(t.states, name))) }

// Symbol finds a symbol by name; 0 if there is none.
func (t *Table) Symbol(name string) SymbolID {
	return SymbolID(max(0, slices.Index(t.symbols, name)))
}

// Head finds a head by names; a name that does not exist gives 0 in its place.
func (t *Table) Head(state, symbol string) Head { return Head{t.State(state), t.Symbol(symbol)} }

func nameOf(names []string, i int, prefix string) string {
	if i <= 0 || i >= len(names) {
		return fmt.Sprintf("%s%d", prefix, i)
	}
	return names[i]
}

// String lists the rules, one a line, in the order of Heads.
func (t *Table) String() string {
	var b strings.Builder
	for _, h := range t.heads {
		for i, r := range t.rules[h] {
			fmt.Fprintf(&b, "%s %s -> %s", t.StateName(h.State), t.SymbolName(h.Symbol), t.target(r))
			b.WriteString(t.guardText(h, i))
			if e := t.effectText(r.Effect); e != "" {
				fmt.Fprintf(&b, " [%s]", e)
			}
			if r.Doubt != 0 {
				fmt.Fprintf(&b, " doubt %s [%s]", nameOf(t.doubts, int(r.Doubt), "doubt"), t.effectText(r.DoubtEffect))
			}
			for _, m := range t.markNames(r.Mark) {
				fmt.Fprintf(&b, " !%s", m)
			}
			for _, s := range r.Spawn {
				fmt.Fprintf(&b, " spawn %s %s", t.StateName(s.State), t.SymbolName(s.Symbol))
			}
			b.WriteByte('\n')
		}
	}
	return b.String()
}

func (t *Table) target(r Rule) string {
	switch r.Kind {
	case Stop:
		return "stop"
	case Pop:
		return t.StateName(r.State)
	case Step:
		return t.StateName(r.State) + " " + t.SymbolName(r.Top)
	case Push:
		return t.StateName(r.State) + " " + t.SymbolName(r.Top) + ", " + t.SymbolName(r.Below)
	}
	return r.Kind.String()
}

func (t *Table) effectText(e EffectID) string {
	var parts []string
	for i, n := range t.vectors[e] {
		if n != 0 {
			parts = append(parts, fmt.Sprintf("%s %d", t.counts[i], n))
		}
	}
	return strings.Join(parts, ", ")
}

func (t *Table) markNames(m Mark) []string {
	var names []string
	for i, name := range t.marks {
		if m&(1<<i) != 0 {
			names = append(names, name)
		}
	}
	return names
}

var kindNames = [...]string{Stop: "stop", Pop: "pop", Step: "step", Push: "push"}

// String gives stop, pop, step or push.
func (k Kind) String() string {
	if int(k) < len(kindNames) {
		return kindNames[k]
	}
	return fmt.Sprintf("kind(%d)", uint8(k))
}

// A Builder makes a [Table] by names. Names are declared by their first use.
// The zero value is not usable; see [NewBuilder].
type Builder struct {
	t       *Table
	states  map[string]int
	symbols map[string]int
	labels  map[string]int
	doubts  map[string]int
	effects map[string]EffectID
}

// NewBuilder starts a system with the named counts.
func NewBuilder(counts ...string) *Builder {
	t := &Table{counts: slices.Clone(counts), states: []string{""}, symbols: []string{""}, labels: []string{""}, doubts: []string{""},
		marks: []string{LossMark}, vectors: [][]int64{make([]int64, len(counts))}, rules: map[Head][]Rule{}, guards: map[Head][]*Guard{}}
	b := &Builder{t: t, states: map[string]int{}, symbols: map[string]int{}, labels: map[string]int{}, doubts: map[string]int{}, effects: map[string]EffectID{}}
	b.effects[fmt.Sprint(t.vectors[0])] = 0
	return b
}

func intern(list *[]string, index map[string]int, name string) int {
	if i, ok := index[name]; ok {
		return i
	}
	if len(*list) == math.MaxInt32 {
		panic("pds: more than 2^31 names")
	}
	i := len(*list)
	*list = append(*list, name)
	index[name] = i
	return i
}

// State gives the id of a state, declaring it.
func (b *Builder) State(name string) StateID {
	return StateID(intern(&b.t.states, b.states, name))
}

// Symbol gives the id of a symbol, declaring it.
func (b *Builder) Symbol(name string) SymbolID {
	return SymbolID(intern(&b.t.symbols, b.symbols, name))
}

// Head gives a head by names, declaring them.
func (b *Builder) Head(state, symbol string) Head { return Head{b.State(state), b.Symbol(symbol)} }

// Start adds a head where runs start.
func (b *Builder) Start(state, symbol string) *Builder {
	b.t.starts = append(b.t.starts, b.Head(state, symbol))
	return b
}

// Effect gives the id of a vector; len(vector) must be the number of counts.
func (b *Builder) Effect(vector []int64) EffectID {
	if len(vector) != len(b.t.counts) {
		panic(fmt.Sprintf("pds: vector of %d numbers in a system of %d counts", len(vector), len(b.t.counts)))
	}
	key := fmt.Sprint(vector)
	if e, ok := b.effects[key]; ok {
		return e
	}
	e := EffectID(len(b.t.vectors))
	b.t.vectors = append(b.t.vectors, slices.Clone(vector))
	b.effects[key] = e
	return e
}

// Mark gives the bit of a named point of interest, declaring it. ok is false if
// all bits are taken.
func (b *Builder) Mark(name string) (m Mark, ok bool) {
	i := slices.Index(b.t.marks, name)
	if i < 0 {
		if len(b.t.marks) == 32 {
			return 0, false
		}
		i = len(b.t.marks)
		b.t.marks = append(b.t.marks, name)
	}
	return 1 << i, true
}

// An Option says more about a rule.
type Option func(*Builder, *Rule)

// Adds: the step adds n to a count. Options for several counts add up.
func Adds(count string, n int64) Option {
	return func(b *Builder, r *Rule) { r.Effect = b.with(r.Effect, count, n) }
}

// Doubts: the step carries a doubt; if it is taken, the step counts what
// DoubtAdds says instead (nothing without one).
func Doubts(name string) Option {
	return func(b *Builder, r *Rule) { r.Doubt = DoubtID(intern(&b.t.doubts, b.doubts, name)) }
}

// DoubtAdds: if the doubt is taken, the step adds n to a count.
func DoubtAdds(count string, n int64) Option {
	return func(b *Builder, r *Rule) { r.DoubtEffect = b.with(r.DoubtEffect, count, n) }
}

// Labelled: the step's text.
func Labelled(text string) Option {
	return func(b *Builder, r *Rule) { r.Label = LabelID(intern(&b.t.labels, b.labels, text)) }
}

// Marked: the point before the step is of interest. It panics if there are more
// than 32 marks.
func Marked(name string) Option {
	return func(b *Builder, r *Rule) {
		m, ok := b.Mark(name)
		if !ok {
			panic("pds: more than 32 marks")
		}
		r.Mark |= m
	}
}

// Spawns: the step starts work of its own at a head.
func Spawns(state, symbol string) Option {
	return func(b *Builder, r *Rule) { r.Spawn = append(r.Spawn, b.Head(state, symbol)) }
}

func (b *Builder) with(e EffectID, count string, n int64) EffectID {
	i := slices.Index(b.t.counts, count)
	if i < 0 {
		panic(fmt.Sprintf("pds: no count %q", count))
	}
	v := slices.Clone(b.t.vectors[e])
	s, ok := safeAdd(v[i], n)
	if !ok {
		panic(fmt.Sprintf("pds: count %q passes 64 bits", count))
	}
	v[i] = s
	return b.Effect(v)
}

// Add adds a rule as it is, in ids of this builder.
func (b *Builder) Add(h Head, r Rule, options ...Option) *Builder {
	for _, o := range options {
		o(b, &r)
	}
	if _, ok := b.t.rules[h]; !ok {
		b.t.heads = append(b.t.heads, h)
	}
	b.t.rules[h] = append(b.t.rules[h], r)
	return b
}

// Parametric gives the system parameters, events and predicates. Rules with guards
// are added after it.
func (b *Builder) Parametric(d Data) *Builder {
	b.t.data = &d
	return b
}

// Guarded gives the rule that was added last to h an event ("" for none) and a
// condition over the parameters and the event's data ("" for true). It panics if
// they are not declared or do not parse.
func (b *Builder) Guarded(h Head, event, cond string) *Builder {
	g := &Guard{Event: -1}
	var data []Variable
	if event != "" {
		g.Event = slices.IndexFunc(b.t.data.Events, func(e Event) bool { return e.Name == event })
		if g.Event < 0 {
			panic(fmt.Sprintf("pds: no event %q", event))
		}
		data = b.t.data.Events[g.Event].Data
	}
	if cond != "" {
		e, err := ParseGuard(cond, b.t.data.Parameters, data)
		if err != nil {
			panic(fmt.Sprintf("pds: guard %q: %v", cond, err))
		}
		g.Cond = e
	}
	return b.guard(h, g)
}

// guard gives the rule that was added last to a head what it says of data.
func (b *Builder) guard(h Head, g *Guard) *Builder {
	list := b.t.guards[h]
	for len(list) < len(b.t.rules[h]) {
		list = append(list, nil)
	}
	list[len(list)-1] = g
	b.t.guards[h] = list
	return b
}

// Stop adds ⟨q, g⟩ → the end of the run.
func (b *Builder) Stop(q, g string, options ...Option) *Builder {
	return b.Add(b.Head(q, g), Rule{Kind: Stop}, options...)
}

// Pop adds ⟨q, g⟩ → ⟨q2, ε⟩.
func (b *Builder) Pop(q, g, q2 string, options ...Option) *Builder {
	return b.Add(b.Head(q, g), Rule{Kind: Pop, State: b.State(q2)}, options...)
}

// Step adds ⟨q, g⟩ → ⟨q2, top⟩.
func (b *Builder) Step(q, g, q2, top string, options ...Option) *Builder {
	return b.Add(b.Head(q, g), Rule{Kind: Step, State: b.State(q2), Top: b.Symbol(top)}, options...)
}

// Push adds ⟨q, g⟩ → ⟨q2, top below⟩.
func (b *Builder) Push(q, g, q2, top, below string, options ...Option) *Builder {
	return b.Add(b.Head(q, g), Rule{Kind: Push, State: b.State(q2), Top: b.Symbol(top), Below: b.Symbol(below)}, options...)
}

// Table gives the finished system. The builder must not be used after.
func (b *Builder) Table() *Table {
	t := b.t
	b.t = nil
	return t
}

// Explore lists what can be reached from starts in any system, see [List]. It
// over-approximates: any state that a pop leads to is taken to meet any symbol that
// was pushed below. limit bounds the number of heads; ok is false if it was passed.
func Explore(sys System, starts []Head, limit int) (t *Table, ok bool) {
	// Any state that a pop leads to may meet any symbol that was ever pushed
	// below: closed under both until nothing new appears.
	var popped []StateID
	var below []SymbolID
	seenPop, seenBelow := map[StateID]bool{}, map[SymbolID]bool{}
	var work []Head
	seen := map[Head]bool{}
	meet := func(h Head) {
		if !seen[h] {
			seen[h] = true
			work = append(work, h)
		}
	}
	for _, h := range starts {
		meet(h)
	}
	for i := 0; i < len(work); i++ {
		if len(work) > limit {
			return nil, false
		}
		h := work[i]
		for _, r := range sys.Rules(h, nil) {
			switch r.Kind {
			case Pop:
				if !seenPop[r.State] {
					seenPop[r.State] = true
					popped = append(popped, r.State)
					for _, g := range below {
						meet(Head{r.State, g})
					}
				}
			case Step:
				meet(Head{r.State, r.Top})
			case Push:
				meet(Head{r.State, r.Top})
				if !seenBelow[r.Below] {
					seenBelow[r.Below] = true
					below = append(below, r.Below)
					for _, q := range popped {
						meet(Head{q, r.Below})
					}
				}
			}
			for _, s := range r.Spawn {
				meet(s)
			}
		}
	}
	return List(sys, starts, work), true
}

// List makes a table of some heads of any system, with made-up names (c0, q1, g1,
// label1, ...); ids of states, symbols, labels, doubts and marks are kept. Heads
// are put in order; they must be different.
func List(sys System, starts, heads []Head) *Table {
	counts := make([]string, sys.NumCounts())
	for i := range counts {
		counts[i] = fmt.Sprintf("c%d", i)
	}
	b := NewBuilder(counts...)
	heads = slices.Clone(heads)
	sort.Slice(heads, func(i, j int) bool {
		if heads[i].State != heads[j].State {
			return heads[i].State < heads[j].State
		}
		return heads[i].Symbol < heads[j].Symbol
	})
	found := make([][]Rule, len(heads))
	var maxState, maxSymbol, maxLabel, maxDoubt int
	var marks Mark
	for _, h := range starts {
		maxState, maxSymbol = max(maxState, int(h.State)), max(maxSymbol, int(h.Symbol))
	}
	for i, h := range heads {
		found[i] = sys.Rules(h, nil)
		maxState, maxSymbol = max(maxState, int(h.State)), max(maxSymbol, int(h.Symbol))
		for _, r := range found[i] {
			for _, s := range r.Spawn {
				maxState, maxSymbol = max(maxState, int(s.State)), max(maxSymbol, int(s.Symbol))
			}
			maxState, maxSymbol = max(maxState, int(r.State)), max(maxSymbol, int(r.Top), int(r.Below))
			maxLabel, maxDoubt = max(maxLabel, int(r.Label)), max(maxDoubt, int(r.Doubt))
			marks |= r.Mark
		}
	}
	for i := 1; i <= maxState; i++ {
		b.State(fmt.Sprintf("q%d", i))
	}
	for i := 1; i <= maxSymbol; i++ {
		b.Symbol(fmt.Sprintf("g%d", i))
	}
	for i := 1; i <= maxLabel; i++ {
		intern(&b.t.labels, b.labels, fmt.Sprintf("label%d", i))
	}
	for i := 1; i <= maxDoubt; i++ {
		intern(&b.t.doubts, b.doubts, fmt.Sprintf("doubt%d", i))
	}
	for i := 1; i < 32 && marks>>i != 0; i++ {
		b.Mark(fmt.Sprintf("mark%d", i))
	}
	for i, h := range heads {
		for _, r := range found[i] {
			r.Effect = b.Effect(sys.Vector(r.Effect))
			if r.Doubt != 0 {
				r.DoubtEffect = b.Effect(sys.Vector(r.DoubtEffect))
			} else {
				r.DoubtEffect = 0
			}
			b.Add(h, r)
		}
	}
	b.t.starts = slices.Clone(starts)
	return b.Table()
}

// safeAdd adds; ok is false if the sum passes 64 bits.
func safeAdd(a, b int64) (sum int64, ok bool) {
	s := a + b
	return s, (s > a) == (b > 0)
}
