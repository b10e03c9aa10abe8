// Systems with data: what guards and predicates add to the image of the runs.

package parikh

import (
	"context"
	"fmt"
	"math/big"
	"slices"
	"strings"

	"pathtally/parikh/lia"
	"pathtally/pds"
	"pathtally/summary"
)

// SystemOptions says which runs of a table are meant, and how overlapping
// predicates are decided.
type SystemOptions struct {
	Options
	Question summary.Question // moments, marks; Weights may be nil
	// Accept says in which states a run may empty its stack; nil: in all.
	Accept func(pds.StateID) bool
	// MaxCells is how many outcomes of one group of predicates are enumerated before
	// columns on demand or slots take over; default 64, -1: at once.
	MaxCells int
	Slots    bool  // slots, not columns, also where no parameter occurs; for tests
	Budget   int64 // rule steps of the saturation; 0: the default of package summary
}

// DataError says why a system's data cannot be decided exactly. Place is a path of
// the JSON form, such as predicates[2].by.
type DataError struct{ Place, Text string }

func (e *DataError) Error() string { return e.Place + ": " + e.Text }

// Value is the value of a parameter or datum, as text.
type Value struct{ Name, Text string }

// Choice says that Times events of a kind had data with these values; groups of
// data that no formula connects are listed by themselves.
type Choice struct {
	Event  string // "" for a condition on parameters
	Guard  string
	Times  *big.Int
	Values []Value
}

// System is a table together with the image of its runs.
type System struct {
	*Image
	Table   *pds.Table
	Start   pds.Head
	Summary *summary.Grammar // production i of Image.Grammar is its production i; nil if there is no run
}

// NewSystem makes the image of the runs of a table from a head. Errors are
// *DataError and summary.ErrExhausted.
func NewSystem(t *pds.Table, start pds.Head, opt SystemOptions) (*System, error) {
	accept := opt.Accept
	if accept == nil {
		accept = func(pds.StateID) bool { return true }
	}
	s := &System{Table: t, Start: start}
	sg, err := summary.New(t, opt.Budget).Grammar(start, accept, opt.Question)
	if err != nil && err != summary.ErrNoWitness {
		return nil, err
	}
	if err == summary.ErrNoWitness {
		g := &Grammar{Counts: t.Counts(), Names: []string{"start"}}
		s.Image = New(g, opt.Options)
		return s, nil
	}
	s.Summary = sg
	var classes []class
	index := map[string]int32{}
	counts := slices.Clone(t.Counts())
	g := FromSummary(sg, nil, func(p summary.Production) []int64 { return t.Vector(p.Effect) }, func(p summary.Production) []Amount {
		if p.Rule == (summary.RuleRef{}) || p.Before {
			return nil
		}
		guard := t.Guard(p.Rule.Head, p.Rule.Index)
		if guard == nil {
			return nil
		}
		src := ""
		if guard.Cond != nil {
			src = guard.Cond.Src
		}
		key := fmt.Sprint(guard.Event, " ", src)
		i, ok := index[key]
		if !ok {
			i = int32(len(counts))
			index[key] = i
			counts = append(counts, "class "+key)
			classes = append(classes, class{guard: guard, count: int(i)})
		}
		return []Amount{{i, 1}}
	})
	g.Counts = counts
	s.Image = New(g, opt.Options)
	if len(classes) == 0 {
		return s, nil
	}
	if opt.MaxCells == 0 {
		opt.MaxCells = 64
	}
	d := &dataLayer{t: t, opt: opt, base: len(t.Counts())}
	for _, c := range classes {
		if err := d.split(&c); err != nil {
			return nil, err
		}
		d.classes = append(d.classes, c)
	}
	if err := d.prepare(); err != nil {
		return nil, err
	}
	s.names = t.Counts()
	s.data = d
	d.params = d.variables(s.s, t.Data().Parameters)
	s.counts = d.cells(s.flow, s.counts)
	return s, nil
}

// class is all rules with one event and guard; its multiplicity is a count of the
// grammar.
type class struct {
	guard  *pds.Guard
	count  int
	conds  []*pds.Expr // on parameters alone
	groups []*group
}

// group is data of one event that formulas connect, with the part of the guard and
// the predicates about them. Groups of one class are independent once the
// parameters are chosen, so the sums of their contributions are too.
type group struct {
	class   *class
	data    []int // of the event
	conds   []*pds.Expr
	preds   []int         // into Data.Predicates
	weights []weight      // data that a predicate adds
	params  bool          // a parameter occurs
	cells   []cell        // all outcomes, unless slotted
	slots   *slotSystem   // if cells are incomplete and a parameter occurs
	priced  *pricedSystem // if cells are incomplete and none occurs
}

// weight is a datum that predicates add, with cut points between which no formula
// tells values apart.
type weight struct {
	datum int
	cuts  []*big.Int // ascending; intervals (-inf, cuts[0]-1], [cuts[0], cuts[1]-1], ...
}

func (w weight) interval(i int) (lo, hi *big.Int) {
	if i > 0 {
		lo = w.cuts[i-1]
	}
	if i < len(w.cuts) {
		hi = new(big.Int).Sub(w.cuts[i], bigOne)
	}
	return lo, hi
}

// cell is an outcome: which predicates hold, and in which interval each weight is.
type cell struct {
	holds  []bool // by group.preds
	where  []int  // by group.weights
	sample []Value
	env    map[int]dataVar // with parameters: the copy of the data
	times  lia.Var
}

// dataLayer is the parametric part of an image.
type dataLayer struct {
	t       *pds.Table
	opt     SystemOptions
	base    int // counts of the table
	classes []class
	strings stringTypes
	params  []dataVar // in the image's solver
	// undecided lists the groups whose outcomes are not listed.
	undecided []undecided
}

// dataVar is a parameter or datum in a solver. Strings are a type and a number
// within it.
type dataVar struct {
	sort pds.Sort
	x    lia.Var
	typ  lia.Var
	b    lia.Bool
}

// split finds the groups of a class.
func (d *dataLayer) split(c *class) error {
	data := d.t.Data()
	var conj []*pds.Expr
	var flat func(e *pds.Expr)
	flat = func(e *pds.Expr) {
		if e.Op == pds.OpAnd {
			for _, a := range e.Args {
				flat(a)
			}
			return
		}
		conj = append(conj, e)
	}
	if c.guard.Cond != nil {
		flat(c.guard.Cond)
	}
	if c.guard.Event < 0 {
		c.conds = conj
		return nil
	}
	event := data.Events[c.guard.Event]
	root := make([]int, len(event.Data))
	for i := range root {
		root[i] = i
	}
	var find func(i int) int
	find = func(i int) int {
		if root[i] != i {
			root[i] = find(root[i])
		}
		return root[i]
	}
	join := func(vs []int) {
		for _, v := range vs {
			root[find(v)] = find(vs[0])
		}
	}
	for _, e := range conj {
		vs, _ := mentions(e)
		join(vs)
	}
	vars := func(p pds.Predicate) []int {
		vs, _ := mentions(p.Where)
		if p.By >= 0 {
			vs = append(vs, p.By)
		}
		return vs
	}
	for _, p := range data.Predicates {
		if p.Event == c.guard.Event {
			join(vars(p))
		}
	}
	at := map[int]*group{}
	get := func(v int) *group {
		r := find(v)
		if at[r] == nil {
			at[r] = &group{class: c}
			c.groups = append(c.groups, at[r])
		}
		return at[r]
	}
	for v := range event.Data {
		g := get(v)
		g.data = append(g.data, v)
	}
	for _, e := range conj {
		vs, param := mentions(e)
		if len(vs) == 0 {
			c.conds = append(c.conds, e)
			continue
		}
		g := get(vs[0])
		g.conds = append(g.conds, e)
		g.params = g.params || param
	}
	for i, p := range data.Predicates {
		if p.Event != c.guard.Event {
			continue
		}
		_, param := mentions(p.Where)
		var g *group
		if vs := vars(p); len(vs) > 0 {
			g = get(vs[0])
		} else {
			g = &group{class: c} // about parameters alone, or always
			c.groups = append(c.groups, g)
		}
		g.preds = append(g.preds, i)
		g.params = g.params || param
		if p.By >= 0 && !slices.ContainsFunc(g.weights, func(w weight) bool { return w.datum == p.By }) {
			w := weight{datum: p.By}
			place := fmt.Sprintf("predicates[%d].by", i)
			all := slices.Clone(conj)
			for _, q := range data.Predicates {
				if q.Event == p.Event && q.Where != nil {
					all = append(all, q.Where)
				}
			}
			for _, e := range all {
				if err := w.cut(e, place, event.Data[p.By].Name); err != nil {
					return err
				}
			}
			slices.SortFunc(w.cuts, (*big.Int).Cmp)
			w.cuts = slices.CompactFunc(w.cuts, func(a, b *big.Int) bool { return a.Cmp(b) == 0 })
			g.weights = append(g.weights, w)
		}
	}
	return nil
}

// cut adds the points at which atoms about the weight change. An atom that
// connects it with anything but numbers would make a product of a count and a
// value.
func (w *weight) cut(e *pds.Expr, place, name string) error {
	vs, param := mentions(e)
	if !slices.Contains(vs, w.datum) {
		return nil
	}
	switch e.Op {
	case pds.OpEq, pds.OpLess, pds.OpLessEq:
		if e.Args[0].Sort != pds.Int {
			break
		}
		only := !param && !slices.ContainsFunc(vs, func(v int) bool { return v != w.datum })
		a, k, ok := affine(&pds.Expr{Op: pds.OpAdd, Args: []*pds.Expr{e.Args[0], {Op: pds.OpScale, Int: big.NewInt(-1), Args: []*pds.Expr{e.Args[1]}}}})
		if !only || !ok {
			return &DataError{place, fmt.Sprintf("%q is added to a count and compared with more than a number: counts would be multiplied by values", name)}
		}
		if a.Sign() != 0 {
			// a n + k changes sign about -k/a.
			f := new(big.Int).Neg(k)
			if a.Sign() < 0 {
				a, f = new(big.Int).Neg(a), new(big.Int).Neg(f)
			}
			f.Div(f, a) // floor, since a > 0
			w.cuts = append(w.cuts, f, new(big.Int).Add(f, bigOne))
		}
		return nil
	}
	for _, x := range e.Args {
		if err := w.cut(x, place, name); err != nil {
			return err
		}
	}
	return nil
}

// affine gives e as a·n + k if it has no remainders; variables are not told apart.
func affine(e *pds.Expr) (a, k *big.Int, ok bool) {
	switch e.Op {
	case pds.OpVar:
		return big.NewInt(1), new(big.Int), true
	case pds.OpInt:
		return new(big.Int), new(big.Int).Set(e.Int), true
	case pds.OpScale:
		a, k, ok = affine(e.Args[0])
		if ok {
			a.Mul(a, e.Int)
			k.Mul(k, e.Int)
		}
		return a, k, ok
	case pds.OpAdd:
		a, k = new(big.Int), new(big.Int)
		for _, x := range e.Args {
			b, l, ok := affine(x)
			if !ok {
				return nil, nil, false
			}
			a.Add(a, b)
			k.Add(k, l)
		}
		return a, k, true
	}
	return nil, nil, false
}

// mentions lists the data of an expression, once each, and whether a parameter
// occurs.
func mentions(e *pds.Expr) (data []int, param bool) {
	if e == nil {
		return nil, false
	}
	if e.Op == pds.OpVar {
		if e.Param {
			return nil, true
		}
		return []int{e.Var}, false
	}
	for _, a := range e.Args {
		vs, p := mentions(a)
		param = param || p
		for _, v := range vs {
			if !slices.Contains(data, v) {
				data = append(data, v)
			}
		}
	}
	return data, param
}

// collect registers the string tests of an expression.
func (d *dataLayer) collect(e *pds.Expr) {
	if e == nil {
		return
	}
	switch e.Op {
	case pds.OpPrefix, pds.OpSuffix, pds.OpMatches, pds.OpString:
		d.strings.test(e.Op, e.Text)
	}
	for _, a := range e.Args {
		d.collect(a)
	}
}

// prepare sorts strings and enumerates the outcomes of all groups.
func (d *dataLayer) prepare() error {
	data := d.t.Data()
	for _, c := range d.classes {
		d.collect(c.guard.Cond)
	}
	for _, p := range data.Predicates {
		d.collect(p.Where)
	}
	if err := d.strings.build(); err != nil {
		return &DataError{"guards and predicates", err.Error()}
	}
	for ci := range d.classes {
		for _, g := range d.classes[ci].groups {
			if err := d.enumerate(g); err != nil {
				return err
			}
		}
	}
	return nil
}

// variables makes parameters or data in a solver.
func (d *dataLayer) variables(s *lia.Solver, vs []pds.Variable) []dataVar {
	out := make([]dataVar, len(vs))
	for i, v := range vs {
		out[i] = d.variable(s, v)
	}
	return out
}

func (d *dataLayer) variable(s *lia.Solver, v pds.Variable) dataVar {
	x := dataVar{sort: v.Sort}
	switch v.Sort {
	case pds.Bool:
		x.b = s.NewBool(v.Name)
	case pds.Int:
		x.x = s.NewFree(v.Name)
	case pds.Ref:
		x.x = s.NewVar(v.Name) // 0 is nil
	case pds.String:
		x.x = s.NewVar(v.Name)
		x.typ = s.NewBounded("type of "+v.Name, new(big.Int), big.NewInt(int64(len(d.strings.types)-1)))
		for i, t := range d.strings.types {
			if t.size >= 0 && t.size < stringSamples {
				s.Assert("string", lia.Or(lia.NE(lia.V(x.typ), lia.Const(int64(i))), lia.LE(lia.V(x.x), lia.Const(int64(t.size-1)))))
			}
		}
	}
	return x
}

// copies makes a copy of a group's data.
func (d *dataLayer) copies(s *lia.Solver, g *group) map[int]dataVar {
	env := map[int]dataVar{}
	if len(g.data) > 0 {
		event := d.t.Data().Events[g.class.guard.Event]
		for _, v := range g.data {
			env[v] = d.variable(s, event.Data[v])
		}
	}
	return env
}

// translation turns formulas over data into those of a solver.
type translation struct {
	d      *dataLayer
	params []dataVar
	env    map[int]dataVar
}

func (t translation) lookup(e *pds.Expr) dataVar {
	if e.Param {
		return t.params[e.Var]
	}
	return t.env[e.Var]
}

func (t translation) lin(e *pds.Expr) lia.Lin {
	switch e.Op {
	case pds.OpVar:
		return lia.V(t.lookup(e).x)
	case pds.OpInt:
		return lia.ConstBig(e.Int)
	case pds.OpNil:
		return lia.Const(0)
	case pds.OpScale:
		return t.lin(e.Args[0]).ScaleBig(e.Int)
	case pds.OpMod:
		return t.lin(e.Args[0]).ModBig(e.Int)
	case pds.OpAdd:
		var parts []lia.Lin
		for _, a := range e.Args {
			parts = append(parts, t.lin(a))
		}
		return lia.Sum(parts...)
	}
	panic(fmt.Sprintf("parikh: operator %d is no term", e.Op))
}

// passes: the string x passes a test.
func (t translation) passes(x dataVar, test int) lia.Formula {
	var any []lia.Formula
	for i, ty := range t.d.strings.types {
		if ty.pass[test] {
			any = append(any, lia.EQ(lia.V(x.typ), lia.Const(int64(i))))
		}
	}
	return lia.Or(any...)
}

func (t translation) formula(e *pds.Expr) lia.Formula {
	if e == nil {
		return lia.True()
	}
	args := func() []lia.Formula {
		var out []lia.Formula
		for _, a := range e.Args {
			out = append(out, t.formula(a))
		}
		return out
	}
	switch e.Op {
	case pds.OpTrue:
		return lia.True()
	case pds.OpFalse:
		return lia.False()
	case pds.OpVar:
		return lia.IsBool(t.lookup(e).b)
	case pds.OpNot:
		return lia.Not(t.formula(e.Args[0]))
	case pds.OpAnd:
		return lia.And(args()...)
	case pds.OpOr:
		return lia.Or(args()...)
	case pds.OpLess:
		return lia.LT(t.lin(e.Args[0]), t.lin(e.Args[1]))
	case pds.OpLessEq:
		return lia.LE(t.lin(e.Args[0]), t.lin(e.Args[1]))
	case pds.OpPrefix, pds.OpSuffix, pds.OpMatches:
		if e.Args[0].Op == pds.OpString {
			return t.literal(e.Args[0].Text, e)
		}
		return t.passes(t.lookup(e.Args[0]), t.d.strings.test(e.Op, e.Text))
	case pds.OpEq:
		a, b := e.Args[0], e.Args[1]
		switch a.Sort {
		case pds.Bool:
			return lia.Iff(t.formula(a), t.formula(b))
		case pds.String:
			if a.Op == pds.OpString {
				a, b = b, a
			}
			switch {
			case a.Op == pds.OpString && a.Text == b.Text:
				return lia.True()
			case a.Op == pds.OpString:
				return lia.False()
			case b.Op == pds.OpString:
				return t.passes(t.lookup(a), t.d.strings.test(pds.OpString, b.Text))
			}
			x, y := t.lookup(a), t.lookup(b)
			return lia.And(lia.EQ(lia.V(x.typ), lia.V(y.typ)), lia.EQ(lia.V(x.x), lia.V(y.x)))
		}
		return lia.EQ(t.lin(a), t.lin(b))
	}
	panic(fmt.Sprintf("parikh: operator %d is no formula", e.Op))
}

// literal decides a test of a literal: its type is the one that is equal to it.
func (t translation) literal(text string, e *pds.Expr) lia.Formula {
	same := t.d.strings.test(pds.OpString, text)
	test := t.d.strings.test(e.Op, e.Text)
	for _, ty := range t.d.strings.types {
		if ty.pass[same] {
			if ty.pass[test] {
				return lia.True()
			}
			return lia.False()
		}
	}
	panic("parikh: a literal without a type")
}

// possible is the formula "the group's data are as the guard wants".
func (g *group) possible(t translation) lia.Formula {
	var all []lia.Formula
	for _, e := range g.conds {
		all = append(all, t.formula(e))
	}
	return lia.And(all...)
}

// is is the formula "the data have this outcome".
func (g *group) is(t translation, c *cell) lia.Formula {
	var all []lia.Formula
	preds := t.d.t.Data().Predicates
	for i, p := range g.preds {
		f := t.formula(preds[p].Where)
		if !c.holds[i] {
			f = lia.Not(f)
		}
		all = append(all, f)
	}
	for i, w := range g.weights {
		lo, hi := w.interval(c.where[i])
		n := lia.V(t.env[w.datum].x)
		if lo != nil {
			all = append(all, lia.GE(n, lia.ConstBig(lo)))
		}
		if hi != nil {
			all = append(all, lia.LE(n, lia.ConstBig(hi)))
		}
	}
	return lia.And(all...)
}

// enumerate lists the outcomes of a group for any values of the parameters, or
// leaves it to slots if there are many.
func (d *dataLayer) enumerate(g *group) error {
	limit := d.opt.MaxCells
	if len(g.weights) > 0 {
		limit = max(limit, 4096)
	}
	s := lia.New(d.opt.Solver)
	t := translation{d, d.variables(s, d.t.Data().Parameters), d.copies(s, g)}
	s.Assert("guard", g.possible(t))
	preds := d.t.Data().Predicates
	var holds []lia.Formula
	for _, p := range g.preds {
		holds = append(holds, t.formula(preds[p].Where))
	}
	for {
		r, err := s.Check(context.Background())
		if err != nil {
			panic(fmt.Sprintf("parikh: enumerate: %v", err))
		}
		if r.Status == lia.Unsat {
			return nil
		}
		if r.Status == lia.Unknown || len(g.cells) >= limit {
			if len(g.weights) > 0 {
				return &DataError{fmt.Sprintf("predicates[%d].by", g.preds[0]), fmt.Sprintf("more than %d outcomes of predicates that share data with it", limit)}
			}
			g.cells = nil
			if g.params || d.opt.Slots {
				g.slots = &slotSystem{g: g}
			} else {
				g.priced = &pricedSystem{g: g}
			}
			return nil
		}
		c := cell{sample: d.sample(r.Model, g, t.env)}
		for _, h := range holds {
			c.holds = append(c.holds, r.Model.Holds(h))
		}
		for _, w := range g.weights {
			n := r.Model.Int(t.env[w.datum].x)
			at := 0
			for at < len(w.cuts) && w.cuts[at].Cmp(n) <= 0 {
				at++
			}
			c.where = append(c.where, at)
		}
		g.cells = append(g.cells, c)
		s.Assert("new", lia.Not(g.is(t, &c)))
	}
}

// fixed: the outcomes do not depend on parameters, so more of the same can always
// be added.
func (d *dataLayer) fixed() bool {
	for _, c := range d.classes {
		for _, g := range c.groups {
			if g.params || g.slots != nil || g.priced != nil {
				return false
			}
		}
	}
	return true
}

// weights lists a lower end of each weight that matters; -1 if it may be negative.
func (d *dataLayer) weights() (out []int) {
	if d == nil {
		return nil
	}
	for _, c := range d.classes {
		for _, g := range c.groups {
			for _, x := range g.cells {
				for i, w := range g.weights {
					if lo, _ := w.interval(x.where[i]); lo == nil || lo.Sign() < 0 {
						out = append(out, -1)
					}
				}
			}
		}
	}
	return out
}

// cells adds the data layer to a system in which counts are those of the grammar,
// and gives the counts of the table. For circulations (no parameters then) the
// conditions on data are left out.
func (d *dataLayer) cells(f *flow, counts []lia.Var) []lia.Var {
	s := f.s
	derive := f.roots != nil
	extra := make([][]lia.Lin, d.base)
	preds := d.t.Data().Predicates
	for ci := range d.classes {
		c := &d.classes[ci]
		m := lia.V(counts[c.count])
		if derive {
			t := translation{d: d, params: d.params}
			for _, e := range c.conds {
				s.Assert("guard", lia.Or(lia.LE(m, lia.Const(0)), t.formula(e)))
			}
		}
		for _, g := range c.groups {
			if g.slots != nil {
				g.slots.m = m
				d.addSlots(s, g.slots, extra)
				continue
			}
			if g.priced != nil {
				g.priced.m = m
				d.addPriced(s, g.priced, extra)
				continue
			}
			var sum []lia.Lin
			for i := range g.cells {
				x := &g.cells[i]
				times := s.NewVar("times")
				sum = append(sum, lia.V(times))
				if derive {
					x.times = times
					if g.params {
						x.env = d.copies(s, g)
						t := translation{d, d.params, x.env}
						s.Assert("cell", lia.Or(lia.LE(lia.V(times), lia.Const(0)), lia.And(g.possible(t), g.is(t, x))))
					}
				}
				totals := map[int]lia.Var{}
				for j, w := range g.weights {
					lo, hi := w.interval(x.where[j])
					n := s.NewFree("sum of weights")
					totals[w.datum] = n
					if lo != nil {
						s.Assert("weight", lia.GE(lia.V(n), lia.V(times).ScaleBig(lo)))
					}
					if hi != nil {
						s.Assert("weight", lia.LE(lia.V(n), lia.V(times).ScaleBig(hi)))
					}
					if lo == nil || hi == nil {
						s.Assert("weight", lia.Or(lia.GE(lia.V(times), lia.Const(1)), lia.EQ(lia.V(n), lia.Const(0))))
					}
				}
				for j, p := range g.preds {
					if !x.holds[j] {
						continue
					}
					if by := preds[p].By; by >= 0 {
						extra[preds[p].Count] = append(extra[preds[p].Count], lia.V(totals[by]))
					} else {
						extra[preds[p].Count] = append(extra[preds[p].Count], lia.V(times))
					}
				}
			}
			s.Assert("cells", lia.EQ(lia.Sum(sum...), m))
		}
	}
	out := make([]lia.Var, d.base)
	for i := range out {
		out[i] = s.NewFree(d.t.Counts()[i])
		s.Assert("count", lia.EQ(lia.V(out[i]), lia.Sum(append(extra[i], lia.V(counts[i]))...)))
	}
	return out
}

// text prints a value of a model.
func (d *dataLayer) text(m lia.Model, x dataVar) string {
	switch x.sort {
	case pds.Bool:
		return fmt.Sprint(m.Bool(x.b))
	case pds.Ref:
		if n := m.Int(x.x); n.Sign() > 0 {
			return "object " + n.String()
		}
		return "nil"
	case pds.String:
		t := d.strings.types[m.Int(x.typ).Int64()]
		n := m.Int(x.x)
		if n.IsInt64() && n.Int64() < int64(len(t.some)) {
			return fmt.Sprintf("%q", t.some[n.Int64()])
		}
		return fmt.Sprintf("string %v like %q", n, t.some[0])
	}
	return m.Int(x.x).String()
}

func (d *dataLayer) sample(m lia.Model, g *group, env map[int]dataVar) []Value {
	var out []Value
	for _, v := range g.data {
		out = append(out, Value{d.t.Data().Events[g.class.guard.Event].Data[v].Name, d.text(m, env[v])})
	}
	return out
}

// values reads parameters and data from a model.
func (d *dataLayer) values(m lia.Model) (params []Value, choices []Choice) {
	for i, p := range d.t.Data().Parameters {
		params = append(params, Value{p.Name, d.text(m, d.params[i])})
	}
	for ci := range d.classes {
		c := &d.classes[ci]
		for _, g := range c.groups {
			add := func(times lia.Var, values []Value) {
				if n := m.Int(times); n.Sign() > 0 && len(values) > 0 {
					ch := Choice{Event: d.t.Data().Events[c.guard.Event].Name, Times: n, Values: values}
					if c.guard.Cond != nil {
						ch.Guard = c.guard.Cond.Src
					}
					choices = append(choices, ch)
				}
			}
			for i := range g.cells {
				x := &g.cells[i]
				if x.env != nil {
					add(x.times, d.sample(m, g, x.env))
				} else {
					add(x.times, x.sample)
				}
			}
			if g.priced != nil {
				for _, x := range g.priced.columns {
					add(x.times, x.sample)
				}
			}
			if g.slots != nil {
				for _, sl := range g.slots.slots {
					add(sl.times, d.sample(m, g, sl.env))
				}
			}
		}
	}
	return params, choices
}

// String prints n=3 key="a".
func (c Choice) String() string {
	var parts []string
	for _, v := range c.Values {
		parts = append(parts, v.Name+"="+v.Text)
	}
	return fmt.Sprintf("%v x %s %s", c.Times, c.Event, strings.Join(parts, " "))
}
