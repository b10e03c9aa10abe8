package gentest

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"sort"
	"strings"

	"pathtally/frontend"
	"pathtally/frontend/load"
	"pathtally/pds"
	"pathtally/properties"
	"pathtally/properties/judge"
	"pathtally/summary"
)

// ruleText is the rule that all programs are judged by.
const ruleText = `import p %q
rule pair {
  each r *p.Res stays
  count taken: call (*p.Res).Take on r
  count given: call (*p.Res).Give on r
  claim balanced at end: taken == given
  claim not-early always: given <= taken
  claim not-twice always: taken - given <= 1
}
`

// Kind of a failure.
type Kind string

const (
	// Missing: a run shows a count vector that is not in the image.
	Missing Kind = "missing"
	// Refuted: a run breaks a claim that is said to hold.
	Refuted Kind = "refuted"
	// Spurious: the image has a vector that no run shows, although every way
	// through the program's branches was run.
	Spurious Kind = "spurious"
	// Crash: the analysis panicked.
	Crash Kind = "crash"
)

// A Failure is a difference between a program's runs and its model.
type Failure struct {
	Kind     Kind
	Root     string
	Instance string // "" for those born on the way
	What     string // ends or moments, and the kind of exit
	Text     string // the numbers
}

func (f Failure) String() string {
	return fmt.Sprintf("%s: %s, instance %q, %s: %s", f.Kind, f.Root, f.Instance, f.What, f.Text)
}

// same tells whether two failures are of one kind and shape, so that shrinking keeps it.
func (f Failure) same(g Failure) bool { return f.Kind == g.Kind && f.What == g.What }

// Result is what checking one program gave.
type Result struct {
	Program  *Program
	Failures []Failure
	Crashed  bool // Go's runtime could not run it
	Roots    int  // that ran
	Runs     int
	Complete int // roots whose every way was run
	Compared int // count vectors of runs that were looked for in an image
	Exact    int // images of which every vector was looked for in the runs
	Starts   int
	Doubtful int // images in which doubts were taken both ways
	Open     int // starts whose search ran out of budget
}

// CheckAll builds, runs, lowers and compares programs, in dir.
func CheckAll(dir string, progs []*Program) ([]*Result, error) {
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return nil, err
	}
	dir, err := filepath.EvalSymlinks(dir)
	if err != nil {
		return nil, err
	}
	b, err := newBatch(dir, progs)
	if err != nil {
		return nil, err
	}
	runs, err := b.run()
	if err != nil {
		return nil, err
	}
	prog, err := load.Load(load.Config{Dir: dir, Patterns: []string{"./p/..."}, Env: []string{"GOWORK=off", "GOFLAGS=-mod=mod"}})
	if err != nil {
		return nil, err
	}
	var out []*Result
	for i, p := range progs {
		r := &Result{Program: p, Crashed: runs[i] == nil}
		r.check(prog, pkgPath(i), runs[i])
		out = append(out, r)
	}
	return out, nil
}

func (r *Result) fail(k Kind, root, instance, what, format string, args ...any) {
	f := Failure{k, root, instance, what, fmt.Sprintf(format, args...)}
	for _, g := range r.Failures {
		if g == f {
			return
		}
	}
	r.Failures = append(r.Failures, f)
}

// images are what the model says of one start.
type images struct {
	start    properties.Start
	ends     map[string]*image // by kind of exit; "loss": the instance is lost on the way
	sure     map[string]*image // the same without doubts
	moments  *image
	doubtful bool
	spawns   bool
	open     bool
}

// exitNames are the ends that are checkpoints of the rule. A panic that leaves a
// root ends the process.
var exitNames = map[properties.ExitKind]string{properties.ExitReturn: "return", properties.ExitGoexit: "goexit"}

func lookAt(m properties.Model, e *summary.Engine, s properties.Start) *images {
	im := &images{start: s, ends: map[string]*image{}, sure: map[string]*image{}, moments: &image{}}
	if e.Saturate(s.Head, 400_000).Exhausted {
		im.open = true
		return im
	}
	for kind, name := range exitNames {
		accept := func(q pds.StateID) bool {
			x := m.Exit(q)
			return x.Kind == kind && !(s.Born && x.Unborn)
		}
		im.take(name, m, e, accept, summary.Question{})
	}
	im.take("loss", m, e, func(pds.StateID) bool { return false }, summary.Question{StopMarks: pds.MarkLoss})
	_, all, _, err := imageOf(m, e, s.Head, func(pds.StateID) bool { return true }, summary.Question{AnyMoment: true})
	im.moments, im.open = &all, im.open || err != nil
	return im
}

func (im *images) take(name string, m properties.Model, e *summary.Engine, accept func(pds.StateID) bool, q summary.Question) {
	sure, either, doubtful, err := imageOf(m, e, im.start.Head, accept, q)
	im.sure[name], im.ends[name] = &sure, &either
	im.doubtful, im.open = im.doubtful || doubtful, im.open || err != nil
}

// check compares what ran with what the model says.
func (r *Result) check(prog *load.Program, path string, runs map[string]*RootRun) {
	defer func() {
		if x := recover(); x != nil {
			r.fail(Crash, "", "", "", "%v", x)
		}
	}()
	sh := frontend.Analyze(prog, path)
	file := properties.ParseRuleFile("gen.rules", ".", fmt.Sprintf(ruleText, path))
	book, err := properties.Resolve([]*properties.RuleFile{file}, prog.Universe(), properties.Options{})
	if err != nil {
		panic(err)
	}
	rule := book.Rules[0]
	m := sh.Lower(rule)
	e := summary.New(m, 0)
	byRoot := map[string][]*images{}
	if b, ok := m.(properties.BottomUp); ok {
		for _, more := b.Next(); more; _, more = b.Next() {
			b.Settle(properties.NotClosed) // no short cuts: every root's paths go all the way down
		}
	}
	for _, s := range m.Starts() {
		// Closures carry the name of the function they stand in.
		if s.Inner || s.Kind != "exported" || runs[s.Root.Name] == nil {
			continue
		}
		r.Starts++
		im := lookAt(m, e, s)
		if im.open {
			r.Open++
		}
		if im.doubtful {
			r.Doubtful++
		}
		byRoot[s.Root.Name] = append(byRoot[s.Root.Name], im)
	}
	verdicts := map[[3]string]judge.Question{}
	for _, q := range judge.Merge([]*judge.RuleResult{judge.Judge(rule, sh.Lower(rule), judge.Options{})}).Questions {
		if q.RootKind != "exported" {
			continue // a closure, named as the function it stands in
		}
		verdicts[[3]string{q.Root.Name, q.Instance, q.Claim}] = q
	}
	var names []string
	for n := range runs {
		names = append(names, n)
	}
	sort.Strings(names)
	for _, n := range names {
		r.Roots++
		r.Runs += runs[n].Runs
		if runs[n].Complete {
			r.Complete++
		}
		r.compare(runs[n], byRoot[n], e, m, verdicts)
	}
}

// compare looks at one root.
func (r *Result) compare(run *RootRun, ims []*images, e *summary.Engine, m properties.Model, verdicts map[[3]string]judge.Question) {
	byInstance := map[string][]Observed{}
	var order []string
	for _, o := range run.Seen {
		if byInstance[o.Instance] == nil {
			order = append(order, o.Instance)
		}
		byInstance[o.Instance] = append(byInstance[o.Instance], o)
	}
	for _, inst := range order {
		var im *images
		for _, c := range ims {
			if inst == "" && c.start.Born || inst != "" && c.start.Instance == inst {
				im = c
			}
		}
		if im != nil && im.open {
			continue
		}
		var seen image
		for _, o := range byInstance[inst] {
			for _, end := range o.Ends {
				for _, v := range end {
					if o.Exit != "panic" {
						seen.set(int64(v[0]), int64(v[1]))
					}
				}
			}
			r.compareSeen(o, im)
			r.bounds(o, im, e)
			r.claims(o, im, verdicts)
		}
		if im == nil || !run.Complete {
			continue
		}
		// The other way round: what is in the image was run.
		r.Exact++
		for _, kind := range []string{"return", "goexit", "loss"} {
			var lone image
			for _, v := range im.sure[kind].members() {
				if !seen.has(v) && !(v == [2]int{} && inst == "") {
					lone.set(int64(v[0]), int64(v[1]))
				}
			}
			if lone != (image{}) {
				r.fail(Spurious, run.Root, inst, "end by "+kind, "%s; ran: %s", &lone, &seen)
			}
		}
	}
}

// compareSeen looks for what ran in the image.
func (r *Result) compareSeen(o Observed, im *images) {
	if o.Exit == "panic" {
		return // the process ends: no checkpoint of this rule
	}
	var ends, moments image
	if im != nil {
		ends = *im.ends[o.Exit]
		ends.join(im.ends["loss"])
		moments = *im.moments
	} else {
		ends.set(0, 0) // nothing of the root concerns the instance
		moments.set(0, 0)
	}
	for _, end := range o.Ends {
		r.Compared++
		if !slices.ContainsFunc(end, ends.has) {
			r.fail(Missing, o.Root, o.Instance, "end by "+o.Exit, "%v ran, the model has %s", end, &ends)
		}
	}
	for _, v := range o.Moments {
		r.Compared++
		if !moments.has(v) {
			r.fail(Missing, o.Root, o.Instance, "moment", "%d/%d ran, the model has %s", v[0], v[1], &moments)
		}
	}
}

// bounds asks the questions that verdicts rest on: greatest weights at ends.
func (r *Result) bounds(o Observed, im *images, e *summary.Engine) {
	if im == nil || im.doubtful || o.Exit == "panic" {
		return
	}
	for _, w := range [][]int64{{1, 0}, {0, 1}, {-1, 0}, {0, -1}, {1, -1}, {-1, 1}} {
		v := e.Solve(summary.Question{Weights: w, StopMarks: pds.MarkLoss}).Greatest(im.start.Head, func(pds.StateID) bool { return true })
		most := int64(math.MinInt64)
		switch v.Kind {
		case summary.Unbounded, summary.Exhausted:
			continue
		case summary.Finite:
			most, _ = v.Int64()
		}
		for _, end := range o.Ends {
			x := end[0]
			if len(end) > 1 {
				continue // spawned work
			}
			if got := w[0]*int64(x[0]) + w[1]*int64(x[1]); got > most {
				r.fail(Missing, o.Root, o.Instance, "end by "+o.Exit, "%d/%d ran, the greatest weight under %v is %v", x[0], x[1], w, v)
			}
		}
	}
}

// claims compares verdicts with what ran. A contract (the caller gives back)
// makes a claim hold that the image breaks; that is no error.
func (r *Result) claims(o Observed, im *images, verdicts map[[3]string]judge.Question) {
	if im == nil || o.Exit == "panic" {
		return
	}
	check := func(claim string, vs [][2]int, ok func(taken, given int) bool, known *image) {
		q, asked := verdicts[[3]string{o.Root, o.Instance, claim}]
		if !asked || q.Verdict != judge.Holds {
			return
		}
		for _, v := range vs {
			if ok(v[0], v[1]) {
				continue
			}
			if !im.start.Born && known.has(v) {
				continue
			}
			r.fail(Refuted, o.Root, o.Instance, claim, "%d/%d ran; it holds because %s", v[0], v[1], q.Grounds)
		}
	}
	known := *im.sure[o.Exit]
	known.join(im.sure["loss"])
	var ends [][2]int
	for _, end := range o.Ends {
		if len(end) == 1 {
			ends = append(ends, end[0])
		}
	}
	check("balanced", ends, func(t, g int) bool { return t == g }, &known)
	check("not-early", o.Moments, func(t, g int) bool { return g <= t }, im.moments)
	check("not-twice", o.Moments, func(t, g int) bool { return t-g <= 1 }, im.moments)
}

// Report prints a failing program with its seed and what is wrong.
func (r *Result) Report() string {
	var b strings.Builder
	fmt.Fprintf(&b, "// seed %d, known %t\n", r.Program.Seed, r.Program.Known)
	for _, f := range r.Failures {
		fmt.Fprintf(&b, "// %s\n", f)
	}
	b.WriteString(r.Program.Source())
	return b.String()
}
