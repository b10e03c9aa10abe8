package judge

import (
	"fmt"
	"strings"
	"testing"

	"pathtally/pds"
	"pathtally/properties"
)

// fake is a model over a table written by hand. Names carry the meaning:
//
//	symbol  "Book" is the entry of Book, "Book:43" a point in it, "Book~settle" a
//	        pending deferred call of it
//	state   a state that empties the stack: words of ok, err, yes, no, panic,
//	        goexit, outside, unborn, joined by "+"; any other state means nothing
//	label   "kind line text", in the function of the head's symbol
type fake struct {
	*pds.Table
	starts []properties.Start
	funcs  map[string]int
	labels map[pds.LabelID]string
}

func newFake(t *testing.T, b *pds.Builder, starts ...properties.Start) *fake {
	t.Helper()
	f := &fake{Table: b.Table(), starts: starts, funcs: map[string]int{}}
	for _, h := range f.Heads() {
		f.fn(h.Symbol)
	}
	return f
}

// start makes a starting point with an instance that exists before the root.
func start(b *pds.Builder, fn, instance, home string) properties.Start {
	b.Start("run", fn)
	return properties.Start{Head: b.Head("run", fn), Kind: "exported", Instance: instance, Home: home, Exported: true,
		Root: properties.Func{ID: len(fn)*1000 + int(fn[0]), Name: fn, Package: "example/berth", Place: properties.Place{File: "berth/desk.go", Line: 1, Column: 1}}}
}

func (f *fake) fn(s pds.SymbolID) properties.Func {
	name := f.SymbolName(s)
	name, _, _ = strings.Cut(name, ":")
	name, _, _ = strings.Cut(name, "~")
	id, ok := f.funcs[name]
	if !ok {
		id = len(f.funcs)
		f.funcs[name] = id
	}
	return properties.Func{ID: id, Name: name, Package: "example/berth", Place: properties.Place{File: "berth/desk.go", Line: 1, Column: 1}, End: properties.Place{File: "berth/desk.go", Line: 99, Column: 1}}
}

func (f *fake) Starts() []properties.Start { return f.starts }

func (f *fake) Exit(q pds.StateID) properties.Exit {
	var e properties.Exit
	e.Outcome = properties.Success
	for _, w := range strings.Split(f.StateName(q), "+") {
		switch w {
		case "err":
			e.Outcome = properties.Failure
		case "maybe":
			e.Outcome = properties.OutcomeUnknown
		case "yes":
			e.True = true
		case "no":
			e.False = true
		case "panic":
			e.Kind = properties.ExitPanic
		case "goexit":
			e.Kind = properties.ExitGoexit
		case "outside":
			e.Outside = true
		case "unborn":
			e.Unborn = true
		}
	}
	return e
}

func (f *fake) Step(l pds.LabelID) properties.Step {
	parts := strings.SplitN(f.LabelText(l), " ", 3)
	var line int
	fmt.Sscan(parts[1], &line)
	return properties.Step{Kind: properties.StepKind(parts[0]), Place: properties.Place{File: "berth/desk.go", Line: line, Column: 2}, Text: parts[2]}
}

func (f *fake) Frame(h pds.Head) properties.Frame {
	name := f.SymbolName(h.Symbol)
	return properties.Frame{Func: f.fn(h.Symbol), Entry: !strings.ContainsAny(name, ":~"), Deferred: strings.Contains(name, "~")}
}

func (f *fake) Doubt(d pds.DoubtID) properties.Note {
	return properties.Note{Kind: "alias", Place: properties.Place{File: "berth/desk.go", Line: 77, Column: 1}, Text: fmt.Sprintf("doubt %d", d)}
}

func (f *fake) Assumptions() []properties.Note { return nil }

// mutex is the rule that most tests use.
func mutex() *properties.ResolvedRule {
	return &properties.ResolvedRule{
		Name: "mutex", Stays: true, Each: &properties.EachParam{Name: "m"}, Counts: []string{"taken", "released"},
		Claims: []properties.Claim{
			{Name: "balanced", Point: properties.AtEnd, Text: "taken == released", Linear: true, Questions: []properties.Question{
				{Weights: []int64{1, -1}, Text: "taken == released"}, {Weights: []int64{-1, 1}, Text: "taken == released"}}},
			{Name: "not-early", Point: properties.Always, Text: "released <= taken", Linear: true, Questions: []properties.Question{
				{Weights: []int64{-1, 1}, Text: "released <= taken"}}},
			{Name: "not-twice", Point: properties.Always, Text: "taken - released <= 1", Linear: true, Questions: []properties.Question{
				{Weights: []int64{1, -1}, Bound: 1, Text: "taken - released <= 1"}}},
		},
	}
}

var (
	taken    = func(line int) []pds.Option { return counts("taken", line, "d.mu.Lock()") }
	released = func(line int) []pds.Option { return counts("released", line, "d.mu.Unlock()") }
)

func counts(count string, line int, text string) []pds.Option {
	return []pds.Option{pds.Adds(count, 1), pds.Labelled(fmt.Sprintf("event %d %s", line, text))}
}

func label(kind string, line int, text string) pds.Option {
	return pds.Labelled(fmt.Sprintf("%s %d %s", kind, line, text))
}

// book is the walkthrough: Book locks, and its deferred settle unlocks only if
// it is not urgent.
func book() (*pds.Builder, properties.Start) {
	b := pds.NewBuilder("taken", "released")
	s := start(b, "Book", "d.mu", "berth.Desk.mu")
	b.Step("run", "Book", "run", "Book:43", taken(42)...)
	b.Push("run", "Book:43", "run", "Book:44", "Book~settle", label("defer", 43, "defer d.settle(urgent)"))
	b.Pop("run", "Book:44", "ok", label("return", 46, "return err"))
	b.Step("ok", "Book~settle", "run", "settle", label("call", 43, "the deferred call runs"))
	b.Step("run", "settle", "run", "settle:57", label("branch", 55, "urgent is true"))
	b.Step("run", "settle", "run", "settle:59", label("branch", 55, "urgent is false"))
	b.Pop("run", "settle:57", "ok", label("return", 57, "return"))
	b.Pop("run", "settle:59", "ok", released(59)...)
	return b, s
}

// verdicts writes each question as "root claim verdict".
func verdicts(r *Result) map[string]Verdict {
	out := map[string]Verdict{}
	for _, q := range r.Questions {
		out[q.Root.Name+" "+q.Claim] = q.Verdict
	}
	return out
}

func judgeOne(t *testing.T, rule *properties.ResolvedRule, m properties.Model) *Result {
	t.Helper()
	r := Merge([]*RuleResult{Judge(rule, m, Options{})})
	if r.Tally.Questions != r.Tally.Holds+r.Tally.Broken+r.Tally.Undecided || r.Tally.Questions != len(r.Questions) {
		t.Errorf("the tally does not add up: %+v", r.Tally)
	}
	return r
}

func want(t *testing.T, r *Result, lines ...string) {
	t.Helper()
	got := verdicts(r)
	for _, l := range lines {
		i := strings.LastIndexByte(l, ' ')
		v, ok := got[l[:i]]
		if !ok {
			t.Errorf("%s: not asked", l[:i])
		} else if v.String() != l[i+1:] {
			t.Errorf("%s: %s, want %s", l[:i], v, l[i+1:])
		}
	}
}
