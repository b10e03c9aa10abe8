package judge

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"slices"
	"strings"

	"pathtally/pds"
	"pathtally/properties"
)

// Options bounds the work on one rule.
type Options struct {
	// Steps is the budget of one start, in steps of the search; 0 is DefaultSteps.
	Steps int64
	// Causes bounds the findings of one claim at one start; 0 is DefaultCauses.
	Causes int
	// State says what the switches of the rule files make of a claim in a
	// package (import path); nil: everything is on.
	State func(claim, pkg string) properties.State
	// Asked is told about every question, as soon as it has its verdict; nil:
	// nobody. Judge calls it from one goroutine.
	Asked func(Verdict)
}

const (
	// A start that is judged at all needs a few hundred steps, rarely thousands;
	// one that takes more than this takes without end (an explosion of contexts).
	DefaultSteps  = 10_000
	DefaultCauses = 20
)

// A RuleResult is what one rule gave on one model, before Merge.
type RuleResult struct {
	findings    []Finding
	keys        []string // parallel to findings
	open        []Open
	questions   []Question
	assumptions []properties.Note
	instances   int
	roots       []string
	cut         []string
}

// A judge works on one rule and one model.
type judge struct {
	rule      *properties.ResolvedRule
	m         properties.Model
	s         searcher
	opt       Options
	starts    []properties.Start
	homes     map[string][]int // starts by Home, in order
	surpluses map[string]surplus
	res       *RuleResult
	keyAt     map[string]int // index into res.findings
	known     map[string]*causesSoFar
}

// Judge gives the verdicts of one rule on one model. It panics with a *Bug if
// a witness does not replay.
func Judge(rule *properties.ResolvedRule, m properties.Model, opt Options) *RuleResult {
	return newJudge(rule, m, newEngine(m, opt.steps()), opt).run()
}

func (o Options) steps() int64 {
	if o.Steps > 0 {
		return o.Steps
	}
	return DefaultSteps
}

func (o Options) causes() int {
	if o.Causes > 0 {
		return o.Causes
	}
	return DefaultCauses
}

func newJudge(rule *properties.ResolvedRule, m properties.Model, s searcher, opt Options) *judge {
	j := &judge{rule: rule, m: m, s: s, opt: opt, homes: map[string][]int{}, surpluses: map[string]surplus{}, res: &RuleResult{}, keyAt: map[string]int{}, known: map[string]*causesSoFar{}}
	if b, ok := m.(properties.BottomUp); ok {
		for s, more := b.Next(); more; s, more = b.Next() {
			b.Settle(j.closed(&s))
		}
	}
	j.starts = m.Starts()
	for i := range j.starts {
		if h := j.starts[i].Home; h != "" && !j.starts[i].Born {
			j.homes[h] = append(j.homes[h], i)
		}
	}
	return j
}

func (j *judge) run() *RuleResult {
	seenRoot := map[string]bool{}
	for si := range j.starts {
		s := &j.starts[si]
		if s.Inner {
			continue
		}
		root := s.Root.Package + "." + s.Root.Name + fmt.Sprint(s.Root.Place)
		if !seenRoot[root] {
			seenRoot[root] = true
			j.res.roots = append(j.res.roots, root)
		}
		if s.Instance != "" || s.Born {
			j.res.instances++
		}
		for ci := range j.rule.Claims {
			if j.state(j.rule.Claims[ci].Name, s.Root.Package) != properties.Off {
				j.question(si, &j.rule.Claims[ci])
			}
		}
	}
	j.res.assumptions = append(j.res.assumptions, j.m.Assumptions()...)
	return j.res
}

// state is what the switches make of a claim in a package.
func (j *judge) state(claim, pkg string) properties.State {
	if j.opt.State == nil {
		return properties.On
	}
	return j.opt.State(claim, pkg)
}

// question gives one claim at one start its verdict.
func (j *judge) question(si int, c *properties.Claim) {
	s := &j.starts[si]
	advice := c.Advice || j.state(c.Name, s.Root.Package) == properties.Softened
	ask := Question{Set: j.rule.Set, Rule: j.rule.Name, Claim: c.Name, Advice: advice, Root: s.Root, RootKind: s.Kind, Instance: s.Instance}
	var grounds []string
	var open *Open
	take := func(v answered) (more bool) {
		switch v.verdict {
		case Broken:
			ask.Verdict = Broken
			ask.Advice = ask.Advice || v.soft
			ask.Blame = v.blame
			grounds = []string{v.ground}
			return false
		case Undecided:
			if open == nil {
				open = v.open
			}
		default:
			grounds = append(grounds, v.ground)
		}
		return true
	}
	if s.Even {
		grounds = []string{"every function below it that touches the instance is even by itself"}
	} else if c.Linear {
		for qi := range c.Questions {
			if !take(j.answer(si, c, &c.Questions[qi])) {
				break
			}
		}
	} else if len(c.Cases) == 0 {
		open = j.openFor(s, c, "form of the claim: it takes the set of all count vectors", 0)
	} else {
		for _, all := range c.Cases {
			if !take(j.answerCase(si, c, all)) {
				break
			}
		}
	}
	if len(grounds) == 0 && open == nil {
		grounds = []string{"no count can break it"}
	}
	if ask.Verdict != Broken && open != nil {
		ask.Verdict = Undecided
		grounds = []string{"stopped by " + open.StoppedBy}
		j.res.open = append(j.res.open, *open)
	}
	slices.Sort(grounds)
	ask.Grounds = strings.Join(slices.Compact(grounds), "; ")
	j.res.questions = append(j.res.questions, ask)
	if j.opt.Asked != nil {
		j.opt.Asked(ask.Verdict)
	}
}

type answered struct {
	verdict Verdict
	ground  string
	open    *Open
	soft    bool // all that is broken stands in packages where the claim is softened
	blame   []properties.Func
}

// closed says whether callers of a function have to follow it: see
// properties.BottomUp. It asks every claim, advice too, on or off.
func (j *judge) closed(s *properties.Start) properties.Settled {
	of := func(stop *stopped) properties.Settled {
		if stop != nil {
			return properties.Spent
		}
		return properties.NotClosed
	}
	matters := func(e properties.Exit) bool { return e.Kind != properties.ExitPanic || s.Caught }
	for ci := range j.rule.Claims {
		c := &j.rule.Claims[ci]
		if !c.Linear {
			return properties.NotClosed
		}
		for qi := range c.Questions {
			w := c.Questions[qi].Weights
			a := j.asks(s, c, w)
			a.fear = true
			if isEnd(c.Point) {
				// Whatever way the function is left, and whoever recovers.
				a.stops = pds.MarkLoss
				a.accept = func(q pds.StateID) bool {
					e := j.m.Exit(q)
					return matters(e) && !(s.Born && e.Unborn) && !(j.rule.Moves && e.Outside)
				}
			}
			most, stop := j.s.greatest(a)
			if stop != nil || most.over(c.Questions[qi].Bound) {
				return of(stop)
			}
			if qi == 0 && ci == 0 {
				armed, stop := j.s.greatest(ask{start: s.Head, weights: w, fear: true, accept: func(q pds.StateID) bool {
					e := j.m.Exit(q)
					return e.Armed && matters(e)
				}})
				if stop != nil || !armed.none {
					return of(stop)
				}
			}
			if s.Born {
				continue
			}
			all, stop := j.span(s.Head, w, matters)
			if stop != nil || !all.none && !all.is(0) {
				return of(stop)
			}
		}
	}
	if !s.Born {
		return properties.Closed
	}
	// A live instance that comes out even is as good as one that is met for the
	// first time: callers begin with it there.
	for ci := range j.rule.Claims {
		for qi := range j.rule.Claims[ci].Questions {
			live, stop := j.span(s.Head, j.rule.Claims[ci].Questions[qi].Weights, func(e properties.Exit) bool {
				return !e.Unborn && e.Named && matters(e)
			})
			if stop != nil || !live.none && !live.is(0) {
				return of(stop)
			}
		}
	}
	return properties.Closed
}

// answer decides one inequality of a claim at one start.
func (j *judge) answer(si int, c *properties.Claim, q *properties.Question) answered {
	s := &j.starts[si]
	x, stop := j.suspect(si, c, q)
	if stop != nil {
		return j.undecided(s, c, stop)
	}
	if x.ground != "" {
		if o, stop := j.fears(s, c, x); o != nil || stop != nil {
			if stop != nil {
				return j.undecided(s, c, stop)
			}
			return answered{verdict: Undecided, open: o}
		}
		return answered{ground: x.ground}
	}
	a := x.a
	a.mend = true
	most, stop := j.s.greatest(a)
	if stop != nil {
		return j.undecided(s, c, stop)
	}
	if !most.over(x.bound) {
		return answered{verdict: Undecided, open: j.doubtOf(s, c, x.a, x.bound)}
	}
	return j.causes(si, c, q, a, x.bound, x.notes, nil)
}

// undecided says what stopped a search.
func (j *judge) undecided(s *properties.Start, c *properties.Claim, stop *stopped) answered {
	o := j.openFor(s, c, stop.reason, stop.steps)
	o.SoFar = "nothing broken on what was seen; that is not an answer"
	return answered{verdict: Undecided, open: o}
}

// A suspected is an inequality that some path breaks and no contract excuses;
// with a ground it is neither.
type suspected struct {
	ground string
	a      ask
	bound  int64
	notes  []properties.Note
}

// suspect asks whether some path breaks an inequality, contracts apart.
func (j *judge) suspect(si int, c *properties.Claim, q *properties.Question) (suspected, *stopped) {
	x := suspected{a: j.asks(&j.starts[si], c, q.Weights), bound: q.Bound}
	most, stop := j.s.greatest(x.a)
	if stop != nil {
		return x, stop
	}
	if !most.over(x.bound) {
		x.ground = holdsText(q, j.rule.Counts, most)
		return x, nil
	}
	ex, stop := j.excuseOf(si, c, q)
	if stop != nil || ex == nil {
		return x, stop
	}
	x.notes = []properties.Note{ex.note}
	x.bound += ex.credit
	if ex.returns && isEnd(c.Point) {
		inner := x.a.accept
		x.a.accept = func(q pds.StateID) bool { return inner(q) && j.m.Exit(q).Kind != properties.ExitReturn }
	}
	if most, stop = j.s.greatest(x.a); stop != nil {
		return x, stop
	}
	if !most.over(x.bound) {
		j.res.assumptions = append(j.res.assumptions, ex.note)
		x.ground = ex.note.Text
	}
	return x, nil
}

// fears asks what held once more with every doubt taken that would make a path
// heavier: what is broken then hangs on a doubt, and does not hold. nil: it holds.
func (j *judge) fears(s *properties.Start, c *properties.Claim, x suspected) (*Open, *stopped) {
	a := x.a
	a.fear = true
	most, stop := j.s.greatest(a)
	if stop != nil || !most.over(x.bound) {
		return nil, stop
	}
	o := j.openFor(s, c, "a doubt", 0)
	choices, stop := j.s.witness(a, x.bound)
	if stop != nil {
		o.StoppedBy = stop.reason
		return o, nil
	}
	t, err := replay(j.m, a.start, choices)
	if err != nil {
		j.bug("replaying an undecided path", s, err.Error())
	}
	if d := j.firstDoubt(t.run, choices, negated(a.weights), true); d != 0 {
		n := j.m.Doubt(d)
		o.Doubt = n
		o.StoppedBy = "doubt: " + n.Text
		if n.Place.Line > 0 {
			o.Place = n.Place
		}
		o.SoFar = "the claim is broken if this step concerns the instance, and holds if it does not"
	}
	return o, nil
}

// doubtOf names the doubt that an answer hangs on: the first one on the
// shortest breaking path that would make the path lighter.
func (j *judge) doubtOf(s *properties.Start, c *properties.Claim, a ask, bound int64) *Open {
	o := j.openFor(s, c, "a doubt", 0)
	choices, stop := j.s.witness(a, bound)
	if stop != nil {
		o.StoppedBy = stop.reason
		return o
	}
	t, err := replay(j.m, a.start, choices)
	if err != nil {
		j.bug("replaying an undecided path", s, err.Error())
	}
	if d := j.firstDoubt(t.run, choices, a.weights, false); d != 0 {
		n := j.m.Doubt(d)
		o.Doubt = n
		o.StoppedBy = "doubt: " + n.Text
		if n.Place.Line > 0 {
			o.Place = n.Place
		}
		o.SoFar = "the claim holds if this step concerns the instance, and is broken if it does not"
	}
	return o
}

// firstDoubt is the first doubt of a path that would make it lighter, among
// those that the path took or among those that it did not.
func (j *judge) firstDoubt(r pds.Run, choices []pds.Choice, w []int64, taken bool) pds.DoubtID {
	for i := range choices {
		rule := r.Configs[i].Rule
		if rule.Doubt != 0 && choices[i].Doubt == taken && dot(w, j.m.Vector(rule.DoubtEffect)) < dot(w, j.m.Vector(rule.Effect)) {
			return rule.Doubt
		}
		for k, sub := range r.Configs[i].Spawned {
			if k < len(choices[i].Spawned) {
				if d := j.firstDoubt(sub, choices[i].Spawned[k], w, taken); d != 0 {
					return d
				}
			}
		}
	}
	return 0
}

// causes lists the ways in which a broken question is lost, each once.
// fits, if not nil, must accept the counts of a path for it to count as broken.
func (j *judge) causes(si int, c *properties.Claim, q *properties.Question, a ask, bound int64, notes []properties.Note, fits func([]int64) bool) answered {
	s := &j.starts[si]
	limit := j.opt.causes()
	found := map[string]bool{}
	first, off, soft := "", "", true
	var blamed []properties.Func
	// What earlier starts have shown is switched off: a start that is even
	// without it is broken by nothing else, and no path has to be found again.
	var known *causesSoFar
	if fits == nil {
		key := fmt.Sprint(c.Name, " ", q.Text, " ", s.Home, " ", s.Born)
		if known = j.known[key]; known == nil {
			known = &causesSoFar{}
			j.known[key] = known
		}
		known.starts++
		if known.starts > searchedStarts && len(known.off)+len(known.offLabels) > 0 {
			b := a
			b.off, b.offLabels = known.off, known.offLabels
			most, stop := j.s.greatest(b)
			if stop == nil && !most.over(bound) {
				return known.answer
			}
			if stop == nil {
				a = b
			}
		}
	}
	// The same cause may show in several contexts: those turns are bounded too.
	for turn := 0; ; turn++ {
		if len(found) >= limit || turn >= 4*limit {
			j.res.cut = append(j.res.cut, fmt.Sprintf("%s: after %d findings of %s/%s, more may exist", s.Root.Name, len(found), j.rule.Name, c.Name))
			break
		}
		choices, stop := j.s.witness(a, bound)
		if stop != nil && turn == 0 {
			// The weight is known, the path is not: nothing is broken without a path.
			return answered{verdict: Undecided, open: j.openFor(s, c, stop.reason, stop.steps)}
		}
		if choices == nil {
			if turn == 0 && stop == nil && (known == nil || known.answer.verdict != Broken) {
				j.bug("finding a witness", s, fmt.Sprintf("%s has a path over %d and no witness", c.Name, bound))
			}
			break
		}
		t, by := j.confirm(s, c, a, bound, choices)
		if fits != nil && !fits(t.total()) {
			break
		}
		f, key, b, stop := j.finding(s, c, q, a, bound, t, by)
		if stop != nil {
			if turn == 0 {
				return answered{verdict: Undecided, open: j.openFor(s, c, stop.reason, stop.steps)}
			}
			break
		}
		f.Assumptions = sortedNotes(append(f.Assumptions, notes...))
		if again := found[key]; again && b.label != 0 && !slices.Contains(a.offLabels, b.label) {
			// The same step in another context: switch it off in all of them.
			a.offLabels = append(slices.Clone(a.offLabels), b.label)
		} else if !again {
			found[key] = true
			blamed = append(blamed, f.Blame)
			switch j.state(c.Name, f.Blame.Package) {
			case properties.Off:
				off = f.Blame.Package
			case properties.Softened:
				f.Advice = true
				j.add(f, key)
			default:
				soft = soft && f.Advice
				j.add(f, key)
			}
			if first == "" {
				first = f.Message
			}
		}
		if len(b.mask) == 0 {
			break
		}
		a.off = append(slices.Clone(a.off), b.mask...)
	}
	if len(found) > 0 && !j.reported(found) {
		return answered{ground: "switched off in " + off + ", where it is broken"}
	}
	v := answered{verdict: Broken, ground: first, soft: soft, blame: blamed}
	if known != nil {
		known.off = union(known.off, a.off)
		known.offLabels = union(known.offLabels, a.offLabels)
		if known.answer.verdict == Broken && len(found) == 0 {
			return known.answer
		}
		known.answer = v
	}
	return v
}

// searchedStarts is how many starts that share a cause are searched for the
// shortest path to it; the others are broken by the same causes or searched for
// others.
const searchedStarts = 4

// causesSoFar is what the starts asked so far have shown of one question about
// one place.
type causesSoFar struct {
	starts    int
	off       []ruleAt
	offLabels []pds.LabelID
	answer    answered
}

// reported says that a finding with one of the keys was kept.
func (j *judge) reported(keys map[string]bool) bool {
	for k := range keys {
		if _, ok := j.keyAt[k]; ok {
			return true
		}
	}
	return false
}

// confirm replays a witness; a contradiction is a bug of the program.
func (j *judge) confirm(s *properties.Start, c *properties.Claim, a ask, bound int64, choices []pds.Choice) (*trace, leaving) {
	t, err := replay(j.m, a.start, choices)
	if err != nil {
		j.bug("replaying a broken path of "+c.Name, s, err.Error())
	}
	by, ok := a.ended(j.m, t)
	if !ok {
		j.bug("replaying a broken path of "+c.Name, s, fmt.Sprintf("the path ends in state %d (%s), where the claim is not judged", t.run.State, t.run.End))
	}
	if got := dot(a.weights, t.total()); got <= bound {
		j.bug("replaying a broken path of "+c.Name, s, fmt.Sprintf("weights %v give %d on %v, not more than %d", a.weights, got, t.total(), bound))
	}
	return t, by
}

func (j *judge) bug(stage string, s *properties.Start, text string) {
	panic(&Bug{Stage: stage, Rule: j.rule.Name, Where: s.Root.Name + " " + s.Instance, Text: text})
}

// finding words one broken path.
func (j *judge) finding(s *properties.Start, c *properties.Claim, q *properties.Question, a ask, bound int64, t *trace, by leaving) (Finding, string, *blamed, *stopped) {
	b, stop := j.blame(s, a, bound, t, by)
	if stop != nil {
		return Finding{}, "", nil, stop
	}
	fn := t.acts[b.act].fn
	subj := subject(j.rule, s)
	f := Finding{
		Set: j.rule.Set, Rule: j.rule.Name, Claim: c.Name, Advice: c.Advice, Point: pointText(c.Point), Formula: c.Text, Broken: q.Text, Reason: c.Reason,
		Root: s.Root, RootKind: s.Kind, Blame: fn, Instance: s.Instance, Home: s.Home,
		Opened: b.opened, Cause: b.cause, CountNames: j.rule.Counts, Counts: t.total(), Starts: 1, OtherWay: b.other,
	}
	f.Message = message(fn.Name, j.rule, c, *q, subj, by, f.Counts, b.event())
	word := ""
	f.OpenedVerb = "counted at"
	if b.opening >= 0 {
		// The count that the opening event adds to names it: "taken at".
		for k, d := range t.moves[b.opening].delta {
			if d > 0 && a.weights[k] > 0 {
				f.OpenedVerb = j.rule.Counts[k] + " at"
				if subj != "" && opens(a.weights) {
					word = j.rule.Counts[k]
				}
				break
			}
		}
	}
	f.CauseText = causeText(b.kind, by, b.passed, b.cause.Place.File, *q, word)
	if text, ok := instantiate(q.Text, j.rule.Counts, f.Counts); ok {
		f.Fact = text + " is false"
	}
	f.Path = t.steps(j.m, j.lastStep(t, by))
	f.Assumptions = j.assumed(t)
	// The instance as the blamed function sees it: the step there that opens it.
	// Starts that reach it under other names are one finding.
	seen := Spot{Text: s.Home}
	if k := j.anchor(t, b.act, b.opening); k >= 0 {
		seen = j.spot(t, k)
	}
	what := seen.Text
	f.Fingerprint = fingerprint(j.rule.Name, c.Name, q.Text, fn.Package, fn.Name, what, b.cause.Function, string(b.kind), b.cause.Text)
	// Behind one fork there may be several ways to the end: still one cause.
	at := b.cause
	if b.byFork && b.fork.Place.Line > 0 {
		at = b.fork
	}
	parts := []string{j.rule.Set, j.rule.Name, c.Name, fn.Package, fn.Name, what, placeKey(seen.Place), placeKey(at.Place), at.Text}
	if !b.byFork || s.Born {
		parts = append(parts, placeKey(b.opened.Place))
	}
	return f, strings.Join(parts, "\x00"), b, nil
}

func placeKey(p properties.Place) string { return fmt.Sprintf("%s:%d:%d", p.File, p.Line, p.Column) }

// lastStep is the line behind the last step: how the path ended.
func (j *judge) lastStep(t *trace, by leaving) PathStep {
	p := PathStep{Function: t.acts[0].fn.Name, Kind: properties.StepEnd}
	switch by {
	case byReturn:
		p.Text = "has returned"
	case byPanic:
		p.Text = "the panic leaves it"
	case byGoexit:
		p.Text = "the goroutine ends"
	case byLoss:
		act := j.actAtEnd(t)
		p.Function, p.Depth = t.acts[act].fn.Name, t.acts[act].depth
		p.Text = "no name of it is left"
	default:
		act := j.actAtEnd(t)
		p.Function, p.Depth = t.acts[act].fn.Name, t.acts[act].depth
		p.Text = "at this moment"
		if t.end.Symbol != 0 {
			for _, r := range j.m.Rules(t.end, nil) {
				if r.Mark != 0 && r.Label != 0 {
					st := j.m.Step(r.Label)
					p.Place, p.Text = st.Place, st.Text
					break
				}
			}
		}
	}
	return p
}

// assumed lists what the steps of a path rest on.
func (j *judge) assumed(t *trace) []properties.Note {
	var notes []properties.Note
	var add func(r pds.Run)
	add = func(r pds.Run) {
		for i := 0; i+1 < len(r.Configs); i++ {
			if l := r.Configs[i].Rule.Label; l != 0 {
				notes = append(notes, j.m.Step(l).Assumes...)
			}
			for _, s := range r.Configs[i].Spawned {
				add(s)
			}
		}
	}
	add(t.run)
	return sortedNotes(notes)
}

// add keeps a finding; of two with one key the shorter path stays.
func (j *judge) add(f Finding, key string) {
	if at, ok := j.keyAt[key]; ok {
		mergeFinding(&j.res.findings[at], f)
		return
	}
	j.keyAt[key] = len(j.res.findings)
	j.res.findings = append(j.res.findings, f)
	j.res.keys = append(j.res.keys, key)
}

func (j *judge) openFor(s *properties.Start, c *properties.Claim, by string, steps int64) *Open {
	o := &Open{Set: j.rule.Set, Rule: j.rule.Name, Claim: c.Name, Advice: c.Advice || j.state(c.Name, s.Root.Package) == properties.Softened, Point: pointText(c.Point), Formula: c.Text,
		Root: s.Root, Instance: s.Instance, Place: s.Root.Place, StoppedBy: by}
	if steps > 0 {
		o.Steps = 4 * steps
	}
	return o
}

// holdsText says why a question holds, in counts.
func holdsText(q *properties.Question, names []string, g greatestWeight) string {
	if g.none {
		return "no path comes to this checkpoint"
	}
	var b strings.Builder
	// What is added first, so that it reads "released - taken".
	for _, sign := range []int64{1, -1} {
		for i, w := range q.Weights {
			if w*sign <= 0 {
				continue
			}
			switch {
			case sign < 0 && b.Len() == 0:
				b.WriteString("-")
			case sign < 0:
				b.WriteString(" - ")
			case b.Len() > 0:
				b.WriteString(" + ")
			}
			if w*sign != 1 {
				fmt.Fprintf(&b, "%d ", w*sign)
			}
			b.WriteString(names[i])
		}
	}
	if b.Len() == 0 {
		return "it speaks of no count"
	}
	return fmt.Sprintf("the greatest %s is %d", b.String(), g.n)
}

func fingerprint(parts ...string) string {
	h := sha256.Sum256([]byte(strings.Join(parts, "\x00")))
	return hex.EncodeToString(h[:8])
}

// union appends to a what b has besides.
func union[T comparable](a, b []T) []T {
	out := slices.Clone(a)
	for _, x := range b {
		if !slices.Contains(out, x) {
			out = append(out, x)
		}
	}
	return out
}
