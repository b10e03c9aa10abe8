package properties

// Rule files to resolved rules: names and sorts, then names and types of the build.

import (
	"fmt"
	"go/types"
	"sort"
	"strings"

	"pathtally/pds"
	"pathtally/properties/syntax"
)

// A RuleBook is what the rule files of a run say together.
type RuleBook struct {
	// Rules are all applicable rules, built-in ones first, in the order of the
	// files and inside them. Switches decide where they are on.
	Rules []*ResolvedRule
	// Skipped are built-in rules whose packages are not in the build.
	Skipped []SkippedRule
	// Switches in the order in which they act: outer files first. State reads them.
	Switches []Switch
	// Roots and NoRoots say what is a root and what is not.
	Roots, NoRoots []RootSetting
	// Models of code out of sight, for all rules.
	Models []CallModel
}

// SkippedRule is a built-in rule that has no meaning in this build.
type SkippedRule struct {
	Set, Name string
	Missing   string // import path, or name of a package, that is not in the build
}

// RootSetting is a `root` or `noroot` line.
type RootSetting struct {
	Callees []Callee
	Dir     string // as RuleFile.Dir
	Pos     string
}

// Options of Resolve.
type Options struct {
	// FollowModels: the frontend obeys ResolvedRule.Models and RuleBook.Models.
	// Without it a model is an error ("not judged yet"), since a line without
	// effect would be worse.
	FollowModels bool
}

// Resolve looks up the names of rule files in the packages of a build. Files
// are given built-in ones first, then outer folders before inner ones. A rule
// of a built-in file whose packages are not in the build is skipped. The error
// is a syntax.Errors, at most one per clause; the book is nil then.
func Resolve(files []*RuleFile, u Universe, opt Options) (*RuleBook, error) {
	r := &resolver{u: u, opt: opt, book: &RuleBook{}}
	r.declare(files)
	for _, f := range files {
		r.file = f
		r.errs = append(r.errs, f.Errs...)
		r.importsOf(f)
		for _, d := range f.Tree.Decls {
			switch d := d.(type) {
			case *syntax.Rule:
				r.rule(d)
			case *syntax.Model:
				r.clause(func() { r.book.Models = append(r.book.Models, r.model(d)) })
			case *syntax.Setting:
				r.clause(func() { r.setting(d) })
			}
		}
	}
	if err := r.errs.Err(); err != nil {
		return nil, err
	}
	return r.book, nil
}

// bail unwinds to the clause in which an error was found.
type bail struct{}

// resolver is the state of Resolve; the second group belongs to one rule.
type resolver struct {
	u           Universe
	opt         Options
	book        *RuleBook
	errs        syntax.Errors
	file        *RuleFile
	imports     map[string]*imported
	importNames []string // sorted
	declared    []declaredRule

	out        *ResolvedRule
	inst       *syntax.Each // nil: the rule has no instance
	instTypes  []types.Type // nil: any type
	counts     map[string]int
	countNames []string // by index
	phases     map[string]bool
	broken     map[string]bool // names that a clause with an error declares
	marks      map[string]pds.Mark
}

// declaredRule is a rule of some file, applicable or not.
type declaredRule struct {
	file   *RuleFile
	rule   *syntax.Rule
	claims []string
}

// fail records an error and leaves the clause.
func (r *resolver) fail(s syntax.Stage, at syntax.Node, hint, format string, args ...any) {
	r.failWith(r.file.Tree.Errorf(s, at, hint, format, args...))
}

func (r *resolver) failWith(e *syntax.Error) {
	r.errs = append(r.errs, e)
	panic(bail{})
}

// clause runs f; the first error ends it.
func (r *resolver) clause(f func()) (ok bool) {
	defer func() {
		if p := recover(); p != nil {
			if _, mine := p.(bail); !mine {
				panic(p)
			}
		}
	}()
	f()
	return true
}

// declare collects the names of all rules, which must differ along each chain of folders.
func (r *resolver) declare(files []*RuleFile) {
	for _, f := range files {
		r.file = f
		for _, d := range f.Tree.Decls {
			rule, ok := d.(*syntax.Rule)
			if !ok {
				continue
			}
			r.clause(func() {
				for _, o := range r.declared {
					if o.rule.Name.Text == rule.Name.Text && (within(f.Dir, o.file.Dir) || within(o.file.Dir, f.Dir)) {
						r.fail(syntax.Naming, rule.Name, "the other one is at "+o.file.Tree.Place(o.rule), "there are two rules %s", rule.Name.Text)
					}
				}
				dr := declaredRule{file: f, rule: rule}
				for _, c := range rule.Clauses {
					if c, ok := c.(*syntax.Claim); ok {
						dr.claims = append(dr.claims, c.Name.Text)
					}
				}
				r.declared = append(r.declared, dr)
			})
		}
	}
}

// within reports whether folder dir is outer or below it.
func within(dir, outer string) bool {
	return outer == "." || dir == outer || strings.HasPrefix(dir, outer+"/")
}

// rule resolves one rule, phase by phase; the order of its clauses does not matter.
func (r *resolver) rule(d *syntax.Rule) {
	defer func() {
		if p := recover(); p != nil {
			na, ok := p.(notApplicable)
			if !ok {
				panic(p)
			}
			r.book.Skipped = append(r.book.Skipped, SkippedRule{Set: r.file.Set(), Name: d.Name.Text, Missing: na.path})
		}
	}()
	r.out = &ResolvedRule{Set: r.file.Set(), Name: d.Name.Text, Doc: d.Doc, Pos: r.file.Tree.Place(d),
		BuiltIn: r.file.BuiltIn, Dir: r.file.Dir, decl: d, file: r.file}
	r.inst, r.instTypes = nil, nil
	r.counts, r.countNames = map[string]int{}, nil
	r.phases, r.broken, r.marks = map[string]bool{}, map[string]bool{}, map[string]pds.Mark{}
	before := len(r.errs)
	bad := false

	// step runs f on a clause, unless an earlier step found an error in it.
	failed := map[syntax.Clause]bool{}
	step := func(c syntax.Clause, f func()) {
		if !failed[c] && !r.clause(f) {
			failed[c] = true
		}
	}
	for _, c := range d.Clauses {
		_, isBad := c.(*syntax.Bad)
		bad = bad || isBad
		step(c, func() { r.name(c) })
	}
	for _, c := range d.Clauses {
		if e, ok := c.(*syntax.Each); ok && e == r.inst {
			step(c, func() { r.each(e) })
			if failed[c] {
				r.instTypes = nil // the events are still checked, with any type
			}
		}
	}
	for _, c := range d.Clauses {
		step(c, func() { r.events(c) })
	}
	nonneg := make([]bool, len(r.countNames))
	for i := range nonneg {
		nonneg[i] = true
	}
	for _, e := range r.out.Events {
		if e.Count >= 0 && e.Weight < 0 {
			nonneg[e.Count] = false
		}
	}
	claims := 0
	for _, c := range d.Clauses {
		switch c := c.(type) {
		case *syntax.Claim:
			claims++
			step(c, func() { r.claim(c, nonneg) })
		case *syntax.Example:
			step(c, func() { r.example(c) })
		case *syntax.Model:
			step(c, func() { r.out.Models = append(r.out.Models, r.model(c)) })
		}
	}
	if claims == 0 && len(r.errs) == before && !bad {
		r.clause(func() {
			r.fail(syntax.Naming, d.Name, "add one: claim even at end: taken == released", "the rule %s claims nothing", d.Name.Text)
		})
	}
	r.out.Counts = r.countNames
	if len(r.errs) == before {
		r.book.Rules = append(r.book.Rules, r.out)
	}
}

// name declares the names of a clause and refuses what is not judged yet.
func (r *resolver) name(c syntax.Clause) {
	notYet := func(at syntax.Node, what string) { r.fail(syntax.Naming, at, "", "not judged yet: %s", what) }
	clash := func(n *syntax.Ident) {
		what := ""
		switch {
		case r.inst != nil && r.inst.Name.Text == n.Text:
			what = "the instance"
		case r.phases[n.Text]:
			what = "a phase"
		}
		if _, ok := r.counts[n.Text]; ok {
			what = "a count"
		}
		if what != "" {
			r.fail(syntax.Naming, n, "choose another name", "%s is %s already", n.Text, what)
		}
	}
	switch c := c.(type) {
	case *syntax.Bad:
		if c.Declares != nil && !c.Claim {
			r.broken[c.Declares.Text] = true
		}
	case *syntax.Each:
		if r.inst != nil {
			r.broken[c.Name.Text] = true
			notYet(c.Name, "more than one each")
		}
		clash(c.Name)
		r.inst = c
	case *syntax.Count:
		if _, ok := r.counts[c.Name.Text]; !ok {
			clash(c.Name)
			r.counts[c.Name.Text] = len(r.countNames)
			r.countNames = append(r.countNames, c.Name.Text)
		}
		if c.Since != nil {
			notYet(c.Since, "since")
		}
	case *syntax.Phase:
		clash(c.Name)
		r.phases[c.Name.Text] = true
		notYet(c, "phases")
	case *syntax.Scope:
		if c.Across {
			notYet(c, "across goroutines")
		}
	}
}

// each resolves the instance parameter.
func (r *resolver) each(e *syntax.Each) {
	if len(e.In) > 0 {
		r.fail(syntax.Naming, e.In[0], "", "not judged yet: instances picked by their place")
	}
	if e.Where != nil {
		r.fail(syntax.Naming, e.Where, "", "not judged yet: a condition on instances")
	}
	p := &EachParam{Name: e.Name.Text}
	for _, te := range e.Types {
		var t types.Type
		if !r.unlessAbsent(func() { t = r.typ(te) }) {
			continue
		}
		if t == nil {
			if len(e.Types) > 1 {
				r.fail(syntax.Naming, te, "", "_ is any type already and stands alone")
			}
			continue
		}
		switch t.Underlying().(type) {
		case *types.Pointer, *types.Chan, *types.Map, *types.Signature, *types.Slice, *types.Interface:
		default:
			if n, ok := types.Unalias(t).(*types.Named); ok && n.NumMethods() > 0 {
				r.fail(syntax.Typing, te, "an instance is an object, so: *"+r.file.Tree.Text(te), "not judged yet: each value of %s", types.TypeString(t, qualifier))
			}
			r.fail(syntax.Naming, te, "instances are pointers, interfaces, channels, maps or functions", "not judged yet: each value of %s", types.TypeString(t, qualifier))
		}
		p.Types = append(p.Types, t)
	}
	if n := len(r.out.Absent); n > 0 && len(p.Types) == 0 {
		panic(notApplicable{r.out.Absent[n-1]})
	}
	if e.Hand == nil {
		r.fail(syntax.Naming, e.Name, "stays: handing it on settles nothing (a lock); moves: whoever gets it must settle (a file)", "say whether %s stays or moves", e.Name.Text)
	}
	r.out.Stays, r.out.Moves = e.Hand.Text == "stays", e.Hand.Text == "moves"
	r.out.Each = p
	r.instTypes = p.Types
}

// events resolves the events of counts and of checkpoints, in source order.
func (r *resolver) events(c syntax.Clause) {
	switch c := c.(type) {
	case *syntax.Count:
		weight := int64(1)
		if c.By != nil {
			weight = r.weight(c.By)
		}
		m := r.event(c.Event, "count")
		if len(m.Callees) == 0 && !m.CallsInstance {
			return // absent, all of them
		}
		m.Count, m.Weight = r.counts[c.Name.Text], weight
		m.Pos, m.Text = r.file.Tree.Place(c), r.file.Tree.Text(c)
		r.out.Events = append(r.out.Events, m)
	case *syntax.Claim:
		if c.Point.Event == nil {
			return
		}
		text := r.file.Tree.Text(c.Point.Event)
		if r.marks[text] != 0 {
			return
		}
		m := r.event(c.Point.Event, "checkpoint")
		if len(m.Callees) == 0 && !m.CallsInstance {
			panic(bail{}) // absent, all of them; the claim goes too
		}
		n := len(r.marks) + 1 // bit 0 is pds.MarkLoss
		if n > 31 {
			r.fail(syntax.Naming, c.Point, "", "a rule has at most 31 different events as checkpoints")
		}
		r.marks[text] = pds.Mark(1) << n
		m.Count, m.Mark = -1, r.marks[text]
		m.Pos, m.Text = r.file.Tree.Place(c.Point.Event), text
		r.out.Events = append(r.out.Events, m)
	}
}

// weight gives the constant of `by`.
func (r *resolver) weight(f syntax.Formula) int64 {
	var names func(f syntax.Formula)
	names = func(f syntax.Formula) {
		switch f := f.(type) {
		case *syntax.Subject:
			r.fail(syntax.Naming, f, "by takes a number", "not judged yet: by with a value of the program")
		case *syntax.Size:
			r.fail(syntax.Naming, f, "by takes a number", "not judged yet: by with a value of the program")
		case *syntax.Binary:
			names(f.X)
			names(f.Y)
		case *syntax.Unary:
			names(f.X)
		case *syntax.Paren:
			names(f.X)
		}
	}
	names(f)
	n := r.int64(f, r.term(f).k)
	if n == 0 {
		r.fail(syntax.Naming, f, "", "an event that adds 0 counts nothing")
	}
	return n
}

// eventScope is what one event binds.
type eventScope struct {
	bound    []*syntax.Ident // in order
	used     map[string]bool
	at       map[string]binding
	instance bool // the instance is mentioned
}

// binding says which value of the callee a name stands for.
type binding struct {
	giving bool // a result, else an argument
	index  int
}

// event resolves one event; what says for messages where it stands. Without
// callees and CallsInstance, a built-in rule names only what the build does not have.
func (r *resolver) event(e *syntax.Event, what string) EventMatch {
	notYet := func(at syntax.Node, what string) { r.fail(syntax.Naming, at, "", "not judged yet: %s", what) }
	if e.Act != "call" {
		notYet(e, "the event "+e.Act)
	}
	if len(e.Within) > 0 {
		notYet(e.Within[0], "inside and outside of phases")
	}
	m := EventMatch{}
	sc := &eventScope{used: map[string]bool{}, at: map[string]binding{}}

	// Names and sorts first.
	if e.On != nil {
		m.On = r.onPattern(e.On, sc)
	}
	if e.With != nil {
		m.With, m.WithAll = r.patterns(e.With, false, sc)
	}
	if e.Giving != nil {
		var all bool
		m.Giving, all = r.patterns(e.Giving, true, sc)
		if !all {
			notYet(e.Giving.List[len(e.Giving.List)-1], "... among results")
		}
	}
	type cond struct {
		at   *syntax.Subject
		path WherePath
	}
	var conds []cond
	for _, w := range e.Where {
		for _, s := range r.where(w, sc) {
			p := WherePath{Name: s.Parts[0].Text}
			for _, f := range s.Parts[1:] {
				p.Fields = append(p.Fields, f.Text)
			}
			conds = append(conds, cond{s, p})
			m.Where = append(m.Where, p)
		}
	}
	if len(e.Callees) == 1 && !e.Callees[0].Recv && len(e.Callees[0].Subject.Parts) == 1 && r.inst != nil &&
		e.Callees[0].Subject.Parts[0].Text == r.inst.Name.Text {
		m.CallsInstance, sc.instance = true, true
	}
	for _, b := range sc.bound {
		if !sc.used[b.Text] {
			hint := "write _ where any value may stand"
			if r.inst != nil {
				hint = "the instance is " + r.inst.Name.Text + "; write _ where any value may stand"
			}
			r.fail(syntax.Naming, b, hint, "nothing uses the name %s", b.Text)
		}
	}
	if r.inst != nil && !sc.instance {
		r.fail(syntax.Naming, e, "say where it is: on "+r.inst.Name.Text+", with "+r.inst.Name.Text+" or returning "+r.inst.Name.Text,
			"this %s never mentions the instance %s", what, r.inst.Name.Text)
	}

	// Then the build.
	if m.CallsInstance {
		r.callsInstance(e, &m)
		return m
	}
	for _, c := range e.Callees {
		var found []Callee
		if !r.unlessAbsent(func() {
			found = r.callees(c, func(f *types.Func, recv types.Type) *syntax.Error { return r.fits(e, c, f, recv, &m) })
		}) {
			continue
		}
		for _, f := range found {
			for _, w := range conds {
				r.walk(w.at, sc.at[w.path.Name], f.Obj)
			}
		}
		m.Callees = append(m.Callees, found...)
	}
	return m
}

func (r *resolver) callsInstance(e *syntax.Event, m *EventMatch) {
	c := e.Callees[0]
	if c.Prefix || len(c.Args) > 0 {
		r.fail(syntax.Naming, c, "", "the instance %s is called as it is", c.Subject)
	}
	if e.On != nil {
		r.fail(syntax.Naming, e.On, "", "a function value has no receiver")
	}
	if e.With != nil || e.Giving != nil {
		r.fail(syntax.Naming, e, "", "not judged yet: arguments and results of the instance's own call")
	}
	for _, t := range r.instTypes {
		if _, ok := t.Underlying().(*types.Signature); !ok {
			r.fail(syntax.Typing, c, "", "%s is %s, not a function", c.Subject, types.TypeString(t, qualifier))
		}
	}
}

// isInstance reports whether a name is the instance.
func (r *resolver) isInstance(name string) bool { return r.inst != nil && r.inst.Name.Text == name }

// onPattern is the receiver's pattern.
func (r *resolver) onPattern(s *syntax.Subject, sc *eventScope) Pat {
	name := s.Parts[0].Text
	if len(s.Parts) > 1 {
		r.fail(syntax.Naming, s, "", "not judged yet: a receiver given by a field")
	}
	if r.isInstance(name) {
		sc.instance = true
		return PatInstance{}
	}
	r.freeName(s.Parts[0])
	hint := "the rule has no instance; leave `on` out"
	if r.inst != nil {
		hint = "the instance is " + r.inst.Name.Text
	}
	r.fail(syntax.Naming, s, hint, "nothing is called %s", name)
	return nil
}

// freeName fails if a name that an event would bind has a meaning in the rule already.
func (r *resolver) freeName(id *syntax.Ident) {
	if _, ok := r.counts[id.Text]; ok {
		r.fail(syntax.Naming, id, "", "%s is a count; it cannot stand for a value", id.Text)
	}
	if r.phases[id.Text] {
		r.fail(syntax.Naming, id, "", "%s is a phase; it cannot stand for a value", id.Text)
	}
	if r.broken[id.Text] {
		panic(bail{})
	}
}

// patterns resolves a list; all is false if it ends in "...".
func (r *resolver) patterns(ps *syntax.Patterns, giving bool, sc *eventScope) (out []Pat, all bool) {
	out, all = []Pat{}, true
	for i, p := range ps.List {
		switch p.Kind {
		case "...":
			if i != len(ps.List)-1 {
				r.fail(syntax.Naming, p, "", "... stands for the rest, so it stands last")
			}
			return out, false
		case "_":
			out = append(out, nil)
		case "nil":
			out = append(out, PatConst{Nil: true})
		case "true", "false":
			out = append(out, PatConst{Value: p.Kind == "true"})
		case "int":
			out = append(out, PatConst{Value: r.int64(p, p.Int)})
		case "string":
			out = append(out, PatConst{Value: p.String})
		default:
			id := p.Subject.Parts[0]
			switch {
			case len(p.Subject.Parts) > 1:
				r.fail(syntax.Naming, p, "bind a name and use where: returning (r, nil) where r.Body == b", "not judged yet: fields and constants of packages in a pattern")
			case r.isInstance(id.Text):
				sc.instance = true
				out = append(out, PatInstance{})
			default:
				r.freeName(id)
				if _, twice := sc.at[id.Text]; twice {
					r.fail(syntax.Naming, id, "", "not judged yet: two values under the name %s", id.Text)
				}
				sc.at[id.Text] = binding{giving, i}
				sc.bound = append(sc.bound, id)
				out = append(out, PatName{Name: id.Text})
			}
		}
	}
	return out, true
}

// where reads a condition of an event: equalities of a path and the instance.
func (r *resolver) where(f syntax.Formula, sc *eventScope) []*syntax.Subject {
	switch f := f.(type) {
	case *syntax.Paren:
		return r.where(f.X, sc)
	case *syntax.Binary:
		if f.Op == "&&" {
			return append(r.where(f.X, sc), r.where(f.Y, sc)...)
		}
	case *syntax.Chain:
		x, okX := f.Terms[0].(*syntax.Subject)
		y, okY := f.Terms[1].(*syntax.Subject)
		if len(f.Ops) != 1 || f.Ops[0].Text != "==" || !okX || !okY {
			break
		}
		if len(x.Parts) == 1 && r.isInstance(x.Parts[0].Text) {
			x, y = y, x
		}
		for _, s := range []*syntax.Subject{x, y} {
			name := s.Parts[0].Text
			if _, ok := sc.at[name]; !ok && !r.isInstance(name) {
				var names []string
				for _, b := range sc.bound {
					names = append(names, b.Text)
				}
				hint := "a name is bound by with or returning"
				if n := syntax.Near(name, names); n != "" {
					hint = "there is " + n
				} else if len(names) > 0 {
					hint = thereIs(names)
				}
				if r.broken[name] {
					panic(bail{}) // its own clause has the error
				}
				r.fail(syntax.Naming, s, hint, "the event binds no name %s", name)
			}
			sc.used[name] = true
		}
		if len(y.Parts) != 1 || !r.isInstance(y.Parts[0].Text) {
			break
		}
		if r.isInstance(x.Parts[0].Text) {
			r.fail(syntax.Naming, x, "", "not judged yet: a condition on the instance's own fields")
		}
		if len(x.Parts) == 1 {
			r.fail(syntax.Naming, x, "write "+y.Parts[0].Text+" in the pattern itself", "%s and the instance %s are one value", x, y)
		}
		sc.instance = true
		return []*syntax.Subject{x}
	}
	r.fail(syntax.Naming, f, "judged are equalities of a field and the instance: where r.Body == b", "not judged yet: a condition on values")
	return nil
}

// walk checks the fields of a where path on one callee.
func (r *resolver) walk(s *syntax.Subject, b binding, f *types.Func) {
	sig := f.Signature()
	tuple := sig.Params()
	if b.giving {
		tuple = sig.Results()
	}
	if b.index >= tuple.Len() {
		panic(bail{}) // fits said so
	}
	t := tuple.At(b.index).Type()
	for _, id := range s.Parts[1:] {
		o, _, _ := types.LookupFieldOrMethod(t, true, f.Pkg(), id.Text)
		v, ok := o.(*types.Var)
		if !ok {
			r.fail(syntax.Typing, id, has(id.Text, fieldsOf(t)), "%s has no field %s", types.TypeString(t, qualifier), id.Text)
		}
		t = v.Type()
	}
	if !r.instanceFits(t) {
		r.fail(syntax.Typing, s, r.instanceIs(), "%s is %s, which is no instance", s, types.TypeString(t, qualifier))
	}
}

func fieldsOf(t types.Type) []string {
	if p, ok := t.Underlying().(*types.Pointer); ok {
		t = p.Elem()
	}
	st, ok := t.Underlying().(*types.Struct)
	if !ok {
		return nil
	}
	var names []string
	for i := range st.NumFields() {
		if f := st.Field(i); f.Exported() {
			names = append(names, f.Name())
		}
	}
	sort.Strings(names)
	return names
}

func (r *resolver) instanceFits(t types.Type) bool {
	if len(r.instTypes) == 0 {
		return true
	}
	for _, p := range r.instTypes {
		if TypeFits(p, t) {
			return true
		}
	}
	return false
}

func (r *resolver) instanceIs() string {
	var names []string
	for _, t := range r.instTypes {
		names = append(names, types.TypeString(t, qualifier))
	}
	return fmt.Sprintf("the instance %s is %s", r.inst.Name.Text, syntax.Enumerate(names, "or"))
}

// fits says why a function cannot be what an event means, nil if it can.
func (r *resolver) fits(e *syntax.Event, c *syntax.Callee, f *types.Func, recv types.Type, m *EventMatch) *syntax.Error {
	sig := f.Signature()
	shown := f.Name()
	if recv != nil {
		shown = "(" + types.TypeString(recv, qualifier) + ")." + shown
	} else if f.Pkg() != nil {
		shown = f.Pkg().Name() + "." + shown
	}
	bad := func(at syntax.Node, hint, format string, args ...any) *syntax.Error {
		return r.file.Tree.Errorf(syntax.Typing, at, hint, format, args...)
	}
	if e.On != nil {
		if recv == nil {
			return bad(e.On, "a method is written with its receiver's type: (*os.File).Close", "%s has no receiver", shown)
		}
		if !r.instanceFits(recv) {
			return bad(e.On, r.instanceIs(), "the receiver of %s is no instance", shown)
		}
	}
	list := func(ps *syntax.Patterns, pats []Pat, all bool, tuple *types.Tuple, variadic bool, what string) *syntax.Error {
		n := tuple.Len()
		fixed := n
		if variadic {
			fixed--
		}
		if len(pats) > n || all && len(pats) < fixed {
			return bad(ps, "the signature is func"+strings.TrimPrefix(types.TypeString(types.NewSignatureType(nil, nil, nil, sig.Params(), sig.Results(), sig.Variadic()), qualifier), "func"),
				"%s has %s, not %d", shown, plural(n, what), len(pats))
		}
		for i, p := range pats {
			at := ps.List[i]
			if p != nil && i >= fixed {
				return bad(at, "write _ or ...", "not judged yet: a pattern for the last, variadic argument of %s", shown)
			}
			t := tuple.At(i).Type()
			name := types.TypeString(t, qualifier)
			switch p := p.(type) {
			case PatInstance:
				if !r.instanceFits(t) {
					return bad(at, r.instanceIs(), "%s %d of %s is %s, which is no instance", what, i+1, shown, name)
				}
			case PatConst:
				if !constFits(p, t) {
					return bad(at, "", "%s %d of %s is %s and never equals %s", what, i+1, shown, name, r.file.Tree.Text(at))
				}
			}
		}
		return nil
	}
	if e.With != nil {
		if err := list(e.With, m.With, m.WithAll, sig.Params(), sig.Variadic(), "argument"); err != nil {
			return err
		}
	}
	if e.Giving != nil {
		if err := list(e.Giving, m.Giving, true, sig.Results(), false, "result"); err != nil {
			return err
		}
	}
	return nil
}

// constFits reports whether a value of type t can equal a constant.
func constFits(c PatConst, t types.Type) bool {
	if types.IsInterface(t) { // type parameters too
		return true
	}
	if c.Nil {
		switch t.Underlying().(type) {
		case *types.Pointer, *types.Slice, *types.Map, *types.Chan, *types.Signature:
			return true
		}
		return false
	}
	b, ok := t.Underlying().(*types.Basic)
	if !ok {
		return false
	}
	switch c.Value.(type) {
	case bool:
		return b.Info()&types.IsBoolean != 0
	case int64:
		return b.Info()&types.IsInteger != 0
	default:
		return b.Info()&types.IsString != 0
	}
}

// claim resolves a claim.
func (r *resolver) claim(c *syntax.Claim, nonneg []bool) {
	for _, o := range r.out.Claims {
		if o.Name == c.Name.Text {
			r.fail(syntax.Naming, c.Name, "the other one is at "+o.Pos, "there are two claims %s", c.Name.Text)
		}
	}
	out := Claim{Name: c.Name.Text, Advice: c.Advice, Text: r.file.Tree.Text(c.Formula), Pos: r.file.Tree.Place(c)}
	if c.Reason != nil {
		out.Reason = c.Reason.Value
	}
	switch c.Point.Word {
	case "always":
		out.Point = Always
	case "return":
		out.Point = AtReturn
	case "success":
		out.Point = AtSuccess
	case "failure":
		out.Point = AtFailure
	case "panic":
		out.Point = AtPanic
	case "end":
		out.Point = AtEnd
	case "before", "after":
		out.Point = Before
		if c.Point.Word == "after" {
			out.Point = After
		}
		out.Mark = r.marks[r.file.Tree.Text(c.Point.Event)]
		if out.Mark == 0 {
			panic(bail{}) // the event has an error
		}
	}
	r.question(&out, c.Formula, nonneg)
	r.out.Claims = append(r.out.Claims, out)
}

// example checks the names of an example and that its code is Go.
func (r *resolver) example(c *syntax.Example) {
	var claims []string
	for _, d := range r.out.decl.Clauses {
		switch d := d.(type) {
		case *syntax.Claim:
			claims = append(claims, d.Name.Text)
		case *syntax.Bad:
			if d.Claim && d.Declares != nil {
				claims = append(claims, d.Declares.Text)
			}
		}
	}
next:
	for _, b := range c.Broken {
		for _, n := range claims {
			if n == b.Text {
				continue next
			}
		}
		r.fail(syntax.Naming, b, has(b.Text, claims), "the rule %s has no claim %s", r.out.Name, b.Text)
	}
	if _, err := exampleSource(r.file, c); err != nil {
		r.failWith(err)
	}
}

// model resolves a model.
func (r *resolver) model(m *syntax.Model) CallModel {
	if m.Effect == "repeats" || !r.opt.FollowModels {
		r.fail(syntax.Naming, m, "", "not judged yet: models that say %s", m.Effect)
	}
	out := CallModel{Pos: r.file.Tree.Place(m), Text: r.file.Tree.Text(m)}
	switch m.Effect {
	case "calls":
		out.Effect = Calls
	case "spawns":
		out.Effect = Spawns
	case "keeps":
		out.Effect = Keeps
	case "yields":
		out.Effect = Yields
	case "never returns":
		out.Effect = NeverReturns
	}
	if m.Arg != nil {
		out.Arg = int(min(r.int64(m.Arg, m.Arg.Value), 1<<20))
	}
	for _, c := range m.Callees {
		out.Callees = append(out.Callees, r.callees(c, func(f *types.Func, recv types.Type) *syntax.Error {
			if m.Arg == nil {
				return nil
			}
			sig := f.Signature()
			if out.Arg == 0 && recv == nil || out.Arg > sig.Params().Len() {
				return r.file.Tree.Errorf(syntax.Typing, m.Arg, "0 is the receiver, arguments count from 1", "%s has %s", f.Name(), plural(sig.Params().Len(), "argument"))
			}
			if out.Effect == Calls || out.Effect == Spawns {
				t := recv
				if out.Arg > 0 {
					t = sig.Params().At(out.Arg - 1).Type()
				}
				switch t.Underlying().(type) {
				case *types.Signature, *types.Interface:
				default:
					return r.file.Tree.Errorf(syntax.Typing, m.Arg, "", "argument %d of %s is %s, not a function", out.Arg, f.Name(), types.TypeString(t, qualifier))
				}
			}
			return nil
		})...)
	}
	return out
}
