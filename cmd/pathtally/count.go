package main

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"math/big"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"pathtally/frontend/load"
	"pathtally/parikh"
	"pathtally/parikh/lia"
	"pathtally/pds"
	"pathtally/properties"
	"pathtally/properties/syntax"
	"pathtally/summary"
)

const countHelp = `pathtally count FUNCTION [packages]   which counts can this function produce?
pathtally count --system FILE         the same of a system written by hand

  what      --rule RULE  --at end|return|success|failure|panic|always  --instance TEXT
            -C DIR  --deps  --tags LIST  --rules FILE  --steps N
  ask       --ask FORMULA    is there a path with such counts? and which
            --member VECTOR  is there a path with these? 1,0 or taken=1,released=0
  show      --counts LIST  --minimal  --rays  --grid N  --svg FILE
  answers   --format text|json

  pathtally count '(*Desk).Book' ./berth --rule mutex
  pathtally count '(*Desk).Book' ./berth --rule mutex --ask 'taken == 1 && released == 0'
  pathtally count --system machine.json --grid 12 --svg machine.svg

A formula has the counts, numbers, + - * %, comparisons, && || ! and =>.
exit  0 shown, or yes   1 no   2 could not run   3 a budget ran out before the answer
`

// countFlags are the flags of count.
type countFlags struct {
	checkFlags
	system   string
	rule     string
	at       string
	instance string
	counts   string
	ask      string
	member   string
	minimal  bool
	rays     bool
	grid     int
	svg      string
}

// limits of what is listed; they are numbers of things, so that every machine
// answers alike.
const (
	maxSets     = 12   // linear sets
	maxMinimal  = 12   // minimal vectors
	maxGrid     = 60   // cells from the origin
	defaultGrid = 10   // of --svg alone
	maxPathLen  = 2000 // steps of a path that is written out
)

// checkpoints are the values of --at.
var checkpoints = []string{"end", "return", "success", "failure", "panic", "always"}

var countFormats = []string{"text", "json"}

func countCommand(ctx context.Context, s streams) *cobra.Command {
	var f countFlags
	c := &cobra.Command{
		Use:  "count FUNCTION [packages]",
		RunE: func(_ *cobra.Command, args []string) error { return count(ctx, s, &f, args) },
	}
	fl := c.Flags()
	fl.StringVarP(&f.dir, "dir", "C", "", "run in this folder")
	fl.BoolVar(&f.deps, "deps", false, "bring in the bodies of dependencies")
	fl.StringVar(&f.tags, "tags", "", "build tags")
	fl.StringArrayVar(&f.rules, "rules", nil, "a further rule file")
	fl.Int64Var(&f.steps, "steps", 0, "budget of one start")
	fl.StringVar(&f.system, "system", "", "a system as JSON instead of a function")
	fl.StringVar(&f.rule, "rule", "", "the rule whose counts are meant")
	fl.StringVar(&f.at, "at", "end", "where a path is counted: "+syntax.Enumerate(checkpoints, "or"))
	fl.StringVar(&f.instance, "instance", "", "only this instance, as the function writes it")
	fl.StringVar(&f.counts, "counts", "", "show only these counts")
	fl.StringVar(&f.ask, "ask", "", "is there a path with such counts?")
	fl.StringVar(&f.member, "member", "", "is there a path with these counts?")
	fl.BoolVar(&f.minimal, "minimal", false, "list the minimal vectors")
	fl.BoolVar(&f.rays, "rays", false, "list the extreme rays")
	fl.IntVar(&f.grid, "grid", 0, "which pairs of the first two counts, 0 to N")
	fl.StringVar(&f.svg, "svg", "", "draw the grid into a file")
	fl.StringVar(&f.format, "format", "text", "text or json")
	completes(c, "format", func() []string { return countFormats })
	completes(c, "at", func() []string { return checkpoints })
	setHelp(c, countHelp)
	return c
}

func countUsage(format string, args ...any) error {
	m := fmt.Sprintf(format, args...)
	return &failure{stage: "usage", message: m, text: "pathtally: " + m + "\nSee: pathtally count --help"}
}

func (f *countFlags) validate(args []string) error {
	switch {
	case !slices.Contains(countFormats, f.format):
		return countUsage("--format %s: there are %s", f.format, syntax.Enumerate(countFormats, "and"))
	case !slices.Contains(checkpoints, f.at):
		return countUsage("--at %s: there are %s", f.at, syntax.Enumerate(checkpoints, "and"))
	case f.system == "" && (len(args) == 0 || args[0] == ""):
		return countUsage("count: which function? Or give a system with --system")
	case f.system != "" && len(args) > 0:
		return countUsage("--system with %s: a system has no functions", args[0])
	case f.system != "" && (f.rule != "" || f.instance != "" || f.deps || f.tags != "" || len(f.rules) > 0):
		return countUsage("--system takes no --rule, --instance, --deps, --tags or --rules")
	case f.system != "" && f.at != "end" && f.at != "always":
		return countUsage("--at %s: a system has only end and always", f.at)
	case f.ask != "" && f.member != "":
		return countUsage("--ask with --member: ask one question at a time")
	case f.grid < 0 || f.grid > maxGrid:
		return countUsage("--grid %d: 1 to %d", f.grid, maxGrid)
	case f.steps < 0:
		return countUsage("--steps %d: at least 1", f.steps)
	case slices.Contains(args, ""):
		return countUsage("a package pattern is empty: write ./... for all packages from here on down")
	}
	if f.svg != "" && f.grid == 0 {
		f.grid = defaultGrid
	}
	return nil
}

// A subject is something whose count image is asked for: a start of a model, or
// a system written by hand.
type subject struct {
	title string // "(*Desk).Book, rule mutex, d.mu"
	start properties.Start
	model properties.Model // nil for a system
	rule  *properties.ResolvedRule
	sys   *parikh.System
	opt   parikh.SystemOptions // that sys was made with
	both  int                  // steps whose effect is in doubt; both ways are in the image
}

func count(ctx context.Context, s streams, f *countFlags, args []string) error {
	if err := f.validate(args); err != nil {
		return err
	}
	var subjects []*subject
	var err error
	if f.system != "" {
		subjects, err = systemSubject(f)
	} else {
		subjects, err = functionSubjects(ctx, s, f, args[0], args[1:])
	}
	if err != nil {
		return err
	}
	out := &countResult{Schema: 1, Tool: countTool{"pathtally", version}, Function: "", System: filepath.ToSlash(f.system), At: f.at, Ask: f.ask}
	if f.system == "" {
		out.Function, out.Rule = subjects[0].start.Root.Name, subjects[0].rule.Name
	}
	for _, u := range subjects {
		im, err := examine(ctx, f, u)
		if err != nil {
			return err
		}
		out.Images = append(out.Images, im)
	}
	if f.svg != "" {
		if len(subjects) > 1 {
			return countUsage("--svg draws one image and there are %d: choose with --instance, one of %s", len(subjects), instances(subjects))
		}
		if err := replaceFile(f.svg, []byte(gridSVG(out.Images[0]))); err != nil {
			return &failure{stage: "usage", message: "--svg: " + err.Error()}
		}
	}
	if f.format == "json" {
		err = writeCountJSON(s.out, out)
	} else {
		err = writeCountText(s.out, out)
	}
	if err != nil {
		return &failure{stage: "internal", message: "writing the result: " + err.Error()}
	}
	if f.ask == "" && f.member == "" {
		return nil
	}
	best := parikh.No
	for _, im := range out.Images {
		if im.status == parikh.Yes {
			return nil
		}
		if im.status == parikh.Unknown {
			best = parikh.Unknown
		}
	}
	if best == parikh.Unknown {
		return status(exitUndecided)
	}
	return status(exitBroken)
}

func instances(subjects []*subject) string {
	var names []string
	for _, u := range subjects {
		names = append(names, strconv.Quote(u.start.Instance))
	}
	return strings.Join(names, ", ")
}

// readSystem reads a system from a file.
func readSystem(file string) (*pds.Table, error) {
	r, err := os.Open(file)
	if err != nil {
		return nil, &failure{stage: "usage", message: "--system: " + err.Error()}
	}
	defer r.Close()
	t, err := pds.Read(r)
	if err != nil {
		return nil, &failure{stage: "usage", message: fmt.Sprintf("%s: %v", filepath.ToSlash(file), err), places: []string{filepath.ToSlash(file)}}
	}
	if len(t.Starts()) == 0 {
		return nil, &failure{stage: "usage", message: fmt.Sprintf("%s: starts: the system has none", filepath.ToSlash(file)), places: []string{filepath.ToSlash(file)}}
	}
	return t, nil
}

func systemSubject(f *countFlags) ([]*subject, error) {
	t, err := readSystem(f.system)
	if err != nil {
		return nil, err
	}
	var out []*subject
	for _, h := range t.Starts() {
		opt := parikh.SystemOptions{Budget: f.steps}
		opt.Question.AnyMoment = f.at == "always"
		sys, err := parikh.NewSystem(t, h, opt)
		if err != nil {
			return nil, engineFailure(filepath.ToSlash(f.system), err)
		}
		title := filepath.ToSlash(f.system)
		if len(t.Starts()) > 1 {
			title += fmt.Sprintf(", from %s %s", t.StateName(h.State), t.SymbolName(h.Symbol))
		}
		out = append(out, &subject{title: title, start: properties.Start{Head: h}, sys: sys, opt: opt})
	}
	return out, nil
}

func engineFailure(what string, err error) error {
	if errors.Is(err, summary.ErrExhausted) {
		return &failure{stage: "usage", message: what + ": the budget of one start ran out before the system was explored: give more --steps"}
	}
	return &failure{stage: "usage", message: what + ": " + err.Error(), places: []string{what}}
}

// functionSubjects loads the module, finds the starts of the function and makes
// the image of each. An empty name is every function.
func functionSubjects(ctx context.Context, s streams, f *countFlags, name string, patterns []string) ([]*subject, error) {
	out, err := findSubjects(ctx, s, f, name, patterns)
	if err != nil {
		return nil, err
	}
	for _, u := range out {
		if err := u.build(f); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// findSubjects is functionSubjects without the images.
func findSubjects(ctx context.Context, s streams, f *countFlags, name string, patterns []string) ([]*subject, error) {
	if len(patterns) == 0 {
		patterns = []string{"./..."}
	}
	bar := newProgress(s.err, s.errTerminal, f.quiet)
	defer bar.clear()
	cfg := load.Config{Dir: f.dir, Patterns: patterns, Deps: f.deps, Tags: f.tags, Progress: bar.stage, Context: ctx}
	prog, book, _, err := loadAll(&f.checkFlags, cfg, nil, bar, &timings{began: time.Now()})
	if err != nil {
		return nil, err
	}
	bar.clear()
	var rules []*properties.ResolvedRule
	var known []string
	for _, r := range book.Rules {
		known = append(known, r.Name)
		if f.rule == "" || r.Name == f.rule {
			rules = append(rules, r)
		}
	}
	if len(rules) == 0 {
		return nil, countUsage("--rule %s: there is no such rule; there are %s", f.rule, syntax.Enumerate(known, "and"))
	}
	low := analyze(prog)
	low.Judge(book.Rules)
	type meeting struct {
		rule   *properties.ResolvedRule
		model  properties.Model
		starts []properties.Start
	}
	var met []meeting
	others := map[string]bool{}
	for _, r := range rules {
		m := low.Lower(r)
		var mine []properties.Start
		for _, st := range startsOf(m) {
			if name == "" || sameFunction(name, st.Root) {
				mine = append(mine, st)
			} else {
				others[st.Root.Name] = true
			}
		}
		if len(mine) > 0 {
			met = append(met, meeting{r, m, mine})
		}
	}
	switch {
	case len(met) == 0 && name == "":
		return nil, &failure{stage: "usage", message: fmt.Sprintf("no event of rule %s can happen in these packages", f.rule)}
	case len(met) == 0 && f.rule != "":
		return nil, &failure{stage: "usage", message: fmt.Sprintf("no event of rule %s can happen in a function %s; functions where one can are %s", f.rule, name, fewNames(others))}
	case len(met) == 0:
		return nil, &failure{stage: "usage", message: fmt.Sprintf("no event of any rule can happen in a function %s; functions where one can are %s", name, fewNames(others))}
	case len(met) > 1:
		var names []string
		for _, m := range met {
			names = append(names, m.rule.Name)
		}
		return nil, countUsage("%s meets several rules, choose with --rule: %s", name, syntax.Enumerate(names, "or"))
	}
	m := met[0]
	roots := map[string]bool{}
	for _, st := range m.starts {
		roots[st.Root.Package+"."+st.Root.Name] = true
	}
	if len(roots) > 1 && name != "" {
		return nil, countUsage("%s is several functions: %s", name, fewNames(roots))
	}
	var out []*subject
	for _, st := range m.starts {
		if f.instance != "" && st.Instance != f.instance {
			continue
		}
		u := &subject{title: st.Root.Name + ", rule " + m.rule.Name, start: st, model: m.model, rule: m.rule}
		switch {
		case st.Born:
			u.title += ", what is made on the path"
		case st.Instance != "":
			u.title += ", " + st.Instance
		}
		out = append(out, u)
	}
	if len(out) == 0 {
		var names []string
		for _, st := range m.starts {
			names = append(names, strconv.Quote(st.Instance))
		}
		return nil, countUsage("--instance %s: there are %s", f.instance, strings.Join(names, ", "))
	}
	return out, nil
}

// fewNames lists at most six names in order.
func fewNames(set map[string]bool) string {
	var names []string
	for n := range set {
		names = append(names, n)
	}
	if len(names) == 0 {
		return "none"
	}
	slices.Sort(names)
	if len(names) > 6 {
		return strings.Join(names[:6], ", ") + fmt.Sprintf(" and %d more", len(names)-6)
	}
	return syntax.Enumerate(names, "and")
}

// startsOf lists every start of a model. None is taken for closed, so that the
// calls below a function are followed and count.
func startsOf(m properties.Model) []properties.Start {
	var found []properties.Start
	if b, ok := m.(properties.BottomUp); ok {
		for st, more := b.Next(); more; st, more = b.Next() {
			found = append(found, st)
			b.Settle(properties.NotClosed)
		}
	}
	// What the model says in the end is fuller than what it said on the way.
	at := map[pds.Head]int{}
	for i, st := range found {
		at[st.Head] = i
	}
	for _, st := range m.Starts() {
		if i, ok := at[st.Head]; ok {
			found[i] = st
			continue
		}
		at[st.Head] = len(found)
		found = append(found, st)
	}
	slices.SortStableFunc(found, func(a, b properties.Start) int {
		return cmp.Or(cmp.Compare(a.Root.Package, b.Root.Package), cmp.Compare(a.Root.Name, b.Root.Name),
			cmp.Compare(a.Root.Place.File, b.Root.Place.File), cmp.Compare(a.Root.Place.Line, b.Root.Place.Line), made(a)-made(b), cmp.Compare(a.Instance, b.Instance))
	})
	return found
}

// made puts what has no name of its own last.
func made(s properties.Start) int {
	if s.Born {
		return 1
	}
	return 0
}

// bothWays is a model in which each step with a doubt is there twice: as its
// rule counts it, and, behind all rules of the head, as the doubt would have it.
type bothWays struct{ properties.Model }

func (b bothWays) Rules(h pds.Head, dst []pds.Rule) []pds.Rule {
	from := len(dst)
	dst = b.Model.Rules(h, dst)
	for i, n := from, len(dst); i < n; i++ {
		if dst[i].Doubt != 0 {
			twin := dst[i]
			twin.Effect, twin.DoubtEffect, twin.Doubt = twin.DoubtEffect, 0, 0
			dst[i].DoubtEffect, dst[i].Doubt = 0, 0
			dst = append(dst, twin)
		}
	}
	return dst
}

// original gives the model's choice of a rule of bothWays.
func (b bothWays) original(h pds.Head, rule int) (index int, doubt bool) {
	rules := b.Model.Rules(h, nil)
	if rule < len(rules) {
		return rule, false
	}
	n := rule - len(rules)
	for i := range rules {
		if rules[i].Doubt == 0 {
			continue
		}
		if n == 0 {
			return i, true
		}
		n--
	}
	panic(fmt.Sprintf("count: head %+v has no rule %d", h, rule))
}

// build makes the image of a start.
func (u *subject) build(f *countFlags) error {
	accept, q := u.question(f.at)
	t, err := u.table(f.at, f.steps)
	if err != nil {
		return err
	}
	u.opt = parikh.SystemOptions{Accept: accept, Question: q, Budget: f.steps}
	u.sys, err = parikh.NewSystem(t, u.start.Head, u.opt)
	if err != nil {
		return engineFailure(u.title, err)
	}
	return nil
}

// question says which runs --at means; see properties/judge for the same of a
// claim, which also knows what is handed on.
func (u *subject) question(at string) (func(pds.StateID) bool, summary.Question) {
	var q summary.Question
	switch at {
	case "always":
		q.AnyMoment = true
	case "end", "return":
		q.StopMarks = pds.MarkLoss
	}
	return func(state pds.StateID) bool {
		e := u.model.Exit(state)
		if u.start.Born && e.Unborn {
			return false // the counts are those of no instance
		}
		switch at {
		case "end":
			return e.Kind != properties.ExitPanic || u.start.Recovered
		case "return":
			return e.Kind == properties.ExitReturn
		case "success":
			return e.Kind == properties.ExitReturn && e.Outcome != properties.Failure
		case "failure":
			return e.Kind == properties.ExitReturn && e.Outcome != properties.Success
		case "panic":
			return e.Kind == properties.ExitPanic
		}
		return true
	}, q
}

// table writes out what the runs of the start can reach, with the names of the
// rule's counts and the steps' texts. Rules keep their order, states and symbols
// their ids.
func (u *subject) table(at string, budget int64) (*pds.Table, error) {
	b, _, err := u.builder([]*subject{u}, at, budget)
	if err != nil {
		return nil, err
	}
	return b.Table(), nil
}

// builder is table before its end, for the paths of several starts of one model.
// exits are the states that something pops into, in order.
func (u *subject) builder(starts []*subject, at string, budget int64) (b *pds.Builder, exits []pds.StateID, err error) {
	sys := bothWays{u.model}
	b = pds.NewBuilder(u.rule.Counts...)
	seen := map[pds.Head]bool{}
	var heads []pds.Head
	take := func(h pds.Head) {
		if !seen[h] {
			seen[h] = true
			heads = append(heads, h)
		}
	}
	for _, x := range starts {
		take(x.start.Head)
		accept, q := x.question(at)
		g, err := summary.New(sys, budget).Grammar(x.start.Head, accept, q)
		if errors.Is(err, summary.ErrNoWitness) {
			continue
		}
		if err != nil {
			return nil, nil, engineFailure(x.title, err)
		}
		for _, p := range g.Prods {
			if p.Rule != (summary.RuleRef{}) {
				take(p.Rule.Head)
			}
		}
	}
	slices.SortFunc(heads, func(a, b pds.Head) int {
		return cmp.Or(cmp.Compare(a.State, b.State), cmp.Compare(a.Symbol, b.Symbol))
	})
	var states pds.StateID
	var symbols pds.SymbolID
	names := map[pds.SymbolID]string{}
	rules := make([][]pds.Rule, len(heads))
	var marks pds.Mark
	popped := map[pds.StateID]bool{}
	u.both = 0
	for i, h := range heads {
		states, symbols = max(states, h.State), max(symbols, h.Symbol)
		if names[h.Symbol] == "" {
			names[h.Symbol] = fmt.Sprintf("%s#%d", u.model.Frame(h).Func.Name, h.Symbol)
		}
		rules[i] = sys.Rules(h, nil)
		plain := u.model.Rules(h, nil)
		u.both += len(rules[i]) - len(plain)
		for _, r := range rules[i] {
			states, symbols = max(states, r.State), max(symbols, r.Top, r.Below)
			for _, w := range r.Spawn {
				states, symbols = max(states, w.State), max(symbols, w.Symbol)
			}
			marks |= r.Mark
			if r.Kind == pds.Pop && !popped[r.State] {
				popped[r.State] = true
				exits = append(exits, r.State)
			}
		}
	}
	for i := pds.StateID(1); i <= states; i++ {
		b.State(fmt.Sprintf("q%d", i))
	}
	for i := pds.SymbolID(1); i <= symbols; i++ {
		name := names[i]
		if name == "" {
			name = fmt.Sprintf("g%d", i)
		}
		b.Symbol(name)
	}
	for i := 1; i < 32 && marks>>i != 0; i++ {
		b.Mark(fmt.Sprintf("mark%d", i))
	}
	for i, h := range heads {
		for _, r := range rules[i] {
			r.Effect = b.Effect(sys.Vector(r.Effect))
			var options []pds.Option
			if r.Label != 0 {
				st := u.model.Step(r.Label)
				text := st.Text
				if st.Place.Line > 0 {
					text = fmt.Sprintf("%s:%d: %s", st.Place.File, st.Place.Line, st.Text)
				}
				r.Label = 0
				options = append(options, pds.Labelled(text))
			}
			b.Add(h, r, options...)
		}
	}
	slices.Sort(exits)
	return b, exits, nil
}

// original turns a run of the subject's table into choices of the model.
func (u *subject) original(run *pds.Run) []pds.Choice {
	sys := bothWays{u.model}
	out := make([]pds.Choice, 0, len(run.Configs))
	for i := 0; i+1 < len(run.Configs); i++ {
		c := &run.Configs[i]
		var ch pds.Choice
		ch.Rule, ch.Doubt = sys.original(c.Head, c.Choice)
		for k := range c.Spawned {
			ch.Spawned = append(ch.Spawned, u.original(&c.Spawned[k]))
		}
		out = append(out, ch)
	}
	return out
}

// vector reads --member.
func (f *countFlags) vector(names []string) ([]*big.Int, error) {
	v := make([]*big.Int, len(names))
	parts := strings.Split(f.member, ",")
	if !strings.Contains(f.member, "=") && len(parts) != len(names) {
		return nil, countUsage("--member %s: %d numbers and %d counts (%s)", f.member, len(parts), len(names), strings.Join(names, ", "))
	}
	for i, p := range parts {
		at := i
		name, number, named := strings.Cut(p, "=")
		if named {
			if at = slices.Index(names, strings.TrimSpace(name)); at < 0 {
				return nil, countUsage("--member %s: there is no count %s; there are %s", f.member, strings.TrimSpace(name), syntax.Enumerate(names, "and"))
			}
		} else {
			number = p
		}
		n, ok := new(big.Int).SetString(strings.TrimSpace(number), 10)
		if !ok || at >= len(names) || v[at] != nil {
			return nil, countUsage("--member %s: write 1,0 or %s=1", f.member, names[0])
		}
		v[at] = n
	}
	return v, nil
}

// shown gives the indices of the counts to show.
func (f *countFlags) shown(names []string) ([]int, error) {
	var out []int
	if f.counts == "" {
		for i := range names {
			out = append(out, i)
		}
		return out, nil
	}
	for _, n := range strings.Split(f.counts, ",") {
		i := slices.Index(names, strings.TrimSpace(n))
		if i < 0 {
			return nil, countUsage("--counts: there is no count %s; there are %s", strings.TrimSpace(n), syntax.Enumerate(names, "and"))
		}
		if slices.Contains(out, i) {
			return nil, countUsage("--counts: %s is there twice", strings.TrimSpace(n))
		}
		out = append(out, i)
	}
	return out, nil
}

// examine asks the image all that the flags want.
func examine(ctx context.Context, f *countFlags, u *subject) (*countImage, error) {
	names := u.sys.Names()
	shown, err := f.shown(names)
	if err != nil {
		return nil, err
	}
	im := &countImage{Title: u.title, Instance: u.start.Instance, Doubts: u.both}
	for _, i := range shown {
		im.Counts = append(im.Counts, names[i])
	}
	if f.ask != "" || f.member != "" {
		var q lia.Formula
		if f.member != "" {
			v, err := f.vector(names)
			if err != nil {
				return nil, err
			}
			q = u.sys.Is(v)
		} else if q, err = u.sys.Parse(f.ask); err != nil {
			return nil, askFailure(f.ask, names, err)
		}
		a := u.sys.Ask(ctx, q)
		im.status, im.Answer, im.Budget = a.Status, a.Status.String(), a.Budget
		if a.Status == parikh.Yes {
			im.With = map[string]*big.Int{}
			for i, n := range names {
				im.With[n] = a.Counts[i]
				im.with = append(im.with, fmt.Sprintf("%s %s", n, a.Counts[i]))
			}
			for _, p := range a.Parameters {
				im.Parameters = append(im.Parameters, p.Name+" = "+p.Text)
			}
			for _, c := range a.Choices {
				im.Data = append(im.Data, dataText(u.sys.Table, c))
			}
			if err := u.path(ctx, a, im); err != nil {
				return nil, err
			}
		}
	}
	question := f.ask != "" || f.member != ""
	if !question && !f.minimal && !f.rays && f.grid == 0 {
		im.Empty = u.sys.Empty()
		if !im.Empty {
			im.whole(ctx, u.sys, shown)
		}
	}
	if f.minimal {
		im.findMinimal(ctx, u.sys, shown)
	}
	if f.rays {
		if len(shown) > parikh.MaxRayCounts {
			return nil, countUsage("--rays looks at %d counts at most: choose them with --counts", parikh.MaxRayCounts)
		}
		im.findRays(ctx, u.sys, shown)
	}
	if f.grid > 0 {
		if len(shown) < 2 {
			return nil, countUsage("--grid needs two counts and there is only %s", strings.Join(im.Counts, ""))
		}
		g := u.sys.Grid(ctx, shown[0], shown[1], f.grid, lia.And())
		im.Grid = &countGrid{X: names[shown[0]], Y: names[shown[1]], N: f.grid}
		for _, row := range g.Cells {
			var cells []string
			for _, c := range row {
				cells = append(cells, c.String())
			}
			im.Grid.Cells = append(im.Grid.Cells, cells)
		}
		im.Grid.Budget = g.Budget
	}
	return im, nil
}

// dataText describes events of one kind. A datum that a count adds up stands for
// a range: only the counts say how much it was in all.
func dataText(t *pds.Table, c parikh.Choice) string {
	d := t.Data()
	added := func(name string) bool {
		return slices.ContainsFunc(d.Predicates, func(p pds.Predicate) bool {
			e := &d.Events[p.Event]
			return p.By >= 0 && e.Name == c.Event && e.Data[p.By].Name == name
		})
	}
	text := cmp.Or(c.Event, "parameters")
	if c.Times != nil {
		text = c.Times.String() + " × " + text
	}
	for _, v := range c.Values {
		if added(v.Name) {
			text += " " + v.Name + " as counted"
			continue
		}
		text += " " + v.Name + "=" + v.Text
	}
	if c.Guard != "" {
		text += "   (" + c.Guard + ")"
	}
	return text
}

func askFailure(text string, names []string, err error) error {
	var se *lia.SyntaxError
	m := fmt.Sprintf("--ask: %v", err)
	if errors.As(err, &se) {
		m = fmt.Sprintf("--ask, column %d: %s; the counts are %s", se.Offset+1, se.Msg, syntax.Enumerate(names, "and"))
		return &failure{stage: "usage", message: m, text: "pathtally: " + m + "\n    " + text + "\n    " + strings.Repeat(" ", min(se.Offset, len(text))) + "^"}
	}
	return &failure{stage: "usage", message: m}
}

// path adds the path of an answer.
func (u *subject) path(ctx context.Context, a parikh.Answer, im *countImage) error {
	w, err := u.sys.Path(a)
	if errors.Is(err, parikh.ErrNoDerivation) {
		// What merged productions stand for need not fit together: ask for the same
		// counts once more, with productions as they are.
		opt := u.opt
		opt.Plain = true
		plain, err2 := parikh.NewSystem(u.sys.Table, u.start.Head, opt)
		if err2 != nil {
			return engineFailure(u.title, err2)
		}
		b := plain.Ask(ctx, plain.Is(a.Counts))
		if b.Status == parikh.Unknown {
			im.NoPath = fmt.Sprintf("a path was not found: the budget of %s ran out", b.Budget)
			return nil
		}
		w, err = plain.Path(b)
	}
	if errors.Is(err, parikh.ErrTooLong) {
		im.NoPath = "the path is too long to be written out"
		return nil
	}
	if err != nil {
		return &failure{stage: "internal", message: "a bug of pathtally: the path of an answer: " + err.Error()}
	}
	choices, err := w.Choices(maxPathLen, 0)
	if u.model == nil || err != nil {
		im.Run = strings.Split(strings.TrimRight(u.sys.Text(w), "\n"), "\n")
		return nil
	}
	run, err := pds.Replay(u.sys.Table, u.start.Head, choices)
	if err != nil {
		return &failure{stage: "internal", message: "a bug of pathtally: replaying the path of an answer: " + err.Error()}
	}
	// Once more, on the model itself: what is printed is a path of the program.
	own, err := pds.Replay(u.model, u.start.Head, u.original(&run))
	if err != nil || !slices.Equal(own.Total, run.Total) {
		return &failure{stage: "internal", message: fmt.Sprintf("a bug of pathtally: the path of an answer counts %v in the model and %v in the image: %v", own.Total, run.Total, err)}
	}
	im.Path = pathOf(u, &own)
	return nil
}
