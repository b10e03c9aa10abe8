// The image as an integer system, and questions about it.

package parikh

import (
	"context"
	"errors"
	"fmt"
	"math/big"

	"pathtally/parikh/lia"
)

// Options sets budgets and switches of an [Image]; the zero value is the default
// of each. No switch changes an answer, except that Unknown may come or go.
type Options struct {
	Solver lia.Options // budgets of one question
	Plain  bool        // no merging of productions; for tests
	Eager  bool        // assert the clauses of all regions at once, not when needed
	// MaxCuts is the number of lazy clauses inside one region after which it gets
	// rank variables, if it is also an eighth of the region's size; default 50, -1: at
	// once.
	MaxCuts int
}

// Status is an answer to "is there a derivation such that".
type Status uint8

const (
	// Unknown: a budget ran out or the context was cancelled.
	Unknown Status = iota
	// Yes: there is one; exact.
	Yes
	// No: there is none; exact.
	No
)

// String gives unknown, yes or no.
func (s Status) String() string { return [...]string{"unknown", "yes", "no"}[s] }

// Answer is the outcome of a question.
type Answer struct {
	Status Status
	// Budget names what ran out if Status is Unknown: pivots, nodes, clauses, cuts
	// or cancelled.
	Budget string
	Counts []*big.Int // Yes: one per name in Names
	prods  []*big.Int // Yes: by production of the input
	// Parameters and Choices say with which values, in systems with data.
	Parameters []Value
	Choices    []Choice
}

// Productions says how often each production of the input grammar is used; nil
// unless the answer is Yes. The caller must not change it.
func (a *Answer) Productions() []*big.Int { return a.prods }

// Image is the count image of a grammar: the set of count vectors of its
// derivations. Not safe for concurrent use; deterministic as long as the same
// questions are asked in the same order.
type Image struct {
	g   *Grammar
	r   *reduced
	opt Options
	*flow
	names    []string     // of the counts that questions speak of
	counts   []lia.Var    // by name
	data     *dataLayer   // nil without data
	asked    *lia.Formula // the question of the running Ask
	repaired Answer
	circ     *circulation // made when first needed
}

// New makes the image of a grammar.
func New(g *Grammar, opt Options) *Image {
	if opt.MaxCuts == 0 {
		opt.MaxCuts = 50
	}
	im := &Image{g: g, r: reduce(g, opt.Plain), opt: opt}
	im.flow = newFlow(im.r, opt, []int32{0}, true)
	s := im.flow.s
	if im.r.empty {
		s.Assert("empty", lia.False())
	}
	im.names, im.counts = g.Counts, im.flow.countVars(g.Counts)
	s.OnModel(func(m lia.Model) ([]lia.Formula, error) {
		lemmas := im.flow.cut(m)
		if lemmas != nil && im.asked != nil && im.data == nil {
			if a, ok := im.repair(m); ok {
				im.repaired = a
				return nil, errRepaired
			}
		}
		return lemmas, nil
	})
	return im
}

// Empty: the grammar has no derivation.
func (im *Image) Empty() bool { return im.r.empty }

// Size says how large the system is: productions and nonterminals of the input
// and after merging, and regions of the loop nest, of which multi have several
// entries.
func (im *Image) Size() (prods, nts, merged, mergedNTs, regions, multi int) {
	for _, s := range im.regions {
		if s.entries > 1 {
			multi++
		}
	}
	return len(im.g.Prods), im.g.NumNT(), len(im.r.prods), im.r.numNT, len(im.regions), multi
}

// Work counts what all questions so far took.
func (im *Image) Work() lia.Stats { return im.s.Stats() }

// Cuts is the number of lazy clauses so far, Ranked the number of regions with
// rank variables.
func (im *Image) Cuts() (cuts, ranked int) {
	for _, s := range im.regions {
		cuts += s.cuts
		if s.ranked {
			ranked++
		}
	}
	return cuts, ranked
}

// Grammar is the grammar that the image was made of.
func (im *Image) Grammar() *Grammar { return im.g }

// Names lists the counts that questions speak of; the caller must not change it.
func (im *Image) Names() []string { return im.names }

// Count is a count as a form, for questions.
func (im *Image) Count(i int) lia.Lin { return lia.V(im.counts[i]) }

// Parse reads a question over the names of the counts; see [lia.Parse]. Errors are
// *lia.SyntaxError.
func (im *Image) Parse(text string) (lia.Formula, error) {
	return lia.Parse(text, im.scope)
}

func (im *Image) scope(name string) (lia.Var, lia.Bool, bool) {
	for i, c := range im.names {
		if c == name {
			return im.counts[i], 0, true
		}
	}
	return 0, 0, false
}

// Ask asks for a derivation whose counts satisfy f.
func (im *Image) Ask(ctx context.Context, f lia.Formula) Answer {
	if im.data != nil && len(im.data.undecided) > 0 {
		return im.askRefining(ctx, f)
	}
	im.asked = &f
	r, err := im.s.Check(ctx, f)
	im.asked = nil
	if err == errRepaired {
		return im.repaired
	}
	if err != nil {
		panic(fmt.Sprintf("parikh: ask: %v", err))
	}
	return im.answer(r.Status, r.Budget, r.Model)
}

// errRepaired ends a search whose answer is Image.repaired.
var errRepaired = errors.New("parikh: a disconnected point was repaired")

// repair takes what is not reached out of a disconnected point. What is left is a
// derivation, unless what was taken out led into it; often its counts answer the
// question too.
func (im *Image) repair(m lia.Model) (Answer, bool) {
	y := make([]*big.Int, len(im.y))
	reached := im.flow.reach(m)
	for i, x := range im.y {
		y[i] = new(big.Int)
		if reached[im.r.prods[i].lhs] {
			y[i] = m.Int(x)
		}
	}
	rest := make([]*big.Int, im.r.numNT)
	for i := range rest {
		rest[i] = new(big.Int)
	}
	rest[0].SetInt64(1)
	for i, n := range y {
		if n.Sign() == 0 {
			continue
		}
		p := &im.r.prods[i]
		rest[p.lhs].Sub(rest[p.lhs], n)
		for _, b := range p.rhs {
			rest[b].Add(rest[b], n)
		}
	}
	for _, n := range rest {
		if n.Sign() != 0 {
			return Answer{}, false
		}
	}
	a := Answer{Status: Yes, Counts: im.r.effect(y, allCounts(len(im.counts)))}
	most := lia.Var(0)
	for _, c := range im.counts {
		most = max(most, c)
	}
	ints := make([]*big.Int, most+1)
	for i := range ints {
		ints[i] = new(big.Int)
	}
	for i, c := range im.counts {
		ints[c] = a.Counts[i]
	}
	if !lia.NewModel(ints, nil).Holds(*im.asked) {
		return Answer{}, false
	}
	a.prods = im.r.expand(y)
	return a, true
}

func allCounts(n int) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = i
	}
	return out
}

func (im *Image) answer(st lia.Status, budget string, m lia.Model) Answer {
	switch st {
	case lia.Unsat:
		return Answer{Status: No}
	case lia.Unknown:
		return Answer{Budget: budget}
	}
	a := Answer{Status: Yes}
	for _, c := range im.counts {
		a.Counts = append(a.Counts, m.Int(c))
	}
	y := make([]*big.Int, len(im.y))
	for i, x := range im.y {
		y[i] = m.Int(x)
	}
	a.prods = im.r.expand(y)
	if im.data != nil {
		a.Parameters, a.Choices = im.data.values(m)
	}
	return a
}

// Is is the formula "the counts are v"; nil in v leaves a count free.
func (im *Image) Is(v []*big.Int) lia.Formula {
	var fs []lia.Formula
	for i, n := range v {
		if n != nil {
			fs = append(fs, lia.EQ(im.Count(i), lia.ConstBig(n)))
		}
	}
	return lia.And(fs...)
}

// Member asks whether v is in the image.
func (im *Image) Member(ctx context.Context, v []*big.Int) Answer { return im.Ask(ctx, im.Is(v)) }

// flow is the system of a reduced grammar: one variable per production, what
// enters a nonterminal leaves it, and connectivity.
type flow struct {
	r       *reduced
	opt     Options
	s       *lia.Solver
	y       []lia.Var // by reduced production
	roots   []int32
	start   []int32 // by nonterminal: first production; len = numNT + 1
	regions []region
	inner   []int32 // by nonterminal: the innermost region, -1 if none
	isIn    [][]int32
}

// newFlow makes the flow of derivations from nonterminal 0 (roots = {0}, derive),
// or that of circulations, which hang on some of the roots; without roots it says
// nothing about connectivity.
func newFlow(r *reduced, opt Options, roots []int32, derive bool) *flow {
	f := &flow{r: r, opt: opt, s: lia.New(opt.Solver), roots: roots}
	f.start = make([]int32, r.numNT+1)
	for i := range r.prods {
		f.start[r.prods[i].lhs+1] = int32(i + 1)
	}
	for a := 0; a < r.numNT; a++ {
		f.start[a+1] = max(f.start[a+1], f.start[a])
	}
	in := make([][]lia.Lin, r.numNT)
	for i := range r.prods {
		x := f.s.NewVar("y" + itoa(i))
		f.y = append(f.y, x)
		p := &r.prods[i]
		in[p.lhs] = append(in[p.lhs], lia.Term(-1, x))
		for j := 0; j < len(p.rhs); {
			k := j
			for k < len(p.rhs) && p.rhs[k] == p.rhs[j] {
				k++
			}
			in[p.rhs[j]] = append(in[p.rhs[j]], lia.Term(int64(k-j), x))
			j = k
		}
	}
	for a := range in {
		extra := lia.Const(0)
		if a == 0 && derive {
			extra = lia.Const(1)
		}
		if !r.empty {
			f.s.Assert("flow", lia.EQ(lia.Sum(append(in[a], extra)...), lia.Const(0)))
		}
	}
	if roots == nil {
		return f
	}
	f.regions = r.loopNest()
	f.inner = make([]int32, r.numNT)
	for a := range f.inner {
		f.inner[a] = -1
	}
	for i, s := range f.regions {
		for _, a := range s.nts {
			f.inner[a] = int32(i)
		}
	}
	if opt.Eager {
		for _, s := range f.regions {
			f.s.Assert("region", f.entered(s.nts))
		}
	}
	return f
}

// countVars makes a variable for each count, equal to what the productions add up
// to; natural if no production takes away.
func (f *flow) countVars(names []string) []lia.Var {
	sums := make([][]lia.Lin, len(names))
	natural := make([]bool, len(names))
	for i := range natural {
		natural[i] = true
	}
	for i := range f.r.prods {
		for _, e := range f.r.prods[i].eff {
			sums[e.c] = append(sums[e.c], lia.TermBig(e.n, f.y[i]))
			if e.n.Sign() < 0 {
				natural[e.c] = false
			}
		}
	}
	vars := make([]lia.Var, len(names))
	for i, name := range names {
		if natural[i] {
			vars[i] = f.s.NewVar(name)
		} else {
			vars[i] = f.s.NewFree(name)
		}
		f.s.Assert("count", lia.EQ(lia.V(vars[i]), lia.Sum(sums[i]...)))
	}
	return vars
}

func (f *flow) prodsOf(a int32) (first, end int32) { return f.start[a], f.start[a+1] }

// entered is the clause of a set without roots: none of its nonterminals is used,
// or a production from outside leads into it.
func (f *flow) entered(set []int32) lia.Formula {
	member := map[int32]bool{}
	var used []lia.Lin
	for _, a := range set {
		member[a] = true
		for p, end := f.prodsOf(a); p < end; p++ {
			used = append(used, lia.V(f.y[p]))
		}
	}
	// Productions into the set are found by their right sides.
	f.index()
	var into []lia.Lin
	seen := map[int32]bool{}
	for _, a := range set {
		for _, p := range f.isIn[a] {
			if !member[f.r.prods[p].lhs] && !seen[p] {
				seen[p] = true
				into = append(into, lia.V(f.y[p]))
			}
		}
	}
	// Number by number, so that divisibility arguments see that they are nothing; as
	// one sum where that would be many atoms.
	unused := lia.LE(lia.Sum(used...), lia.Const(0))
	if len(used) <= 64 {
		var each []lia.Formula
		for _, x := range used {
			each = append(each, lia.LE(x, lia.Const(0)))
		}
		unused = lia.And(each...)
	}
	return lia.Or(unused, lia.GE(lia.Sum(into...), lia.Const(1)))
}

// index lists for each nonterminal the productions that have it on the right.
func (f *flow) index() {
	if f.isIn != nil {
		return
	}
	f.isIn = make([][]int32, f.r.numNT)
	for i := range f.r.prods {
		p := &f.r.prods[i]
		for j, b := range p.rhs {
			if j == 0 || p.rhs[j-1] != b {
				f.isIn[b] = append(f.isIn[b], int32(i))
			}
		}
	}
}

// reach says which nonterminals are reached from the roots along productions in
// use.
func (f *flow) reach(m lia.Model) []bool {
	reached := make([]bool, f.r.numNT)
	var work []int32
	for _, a := range f.roots {
		if !reached[a] {
			reached[a] = true
			work = append(work, a)
		}
	}
	for len(work) > 0 {
		a := work[len(work)-1]
		work = work[:len(work)-1]
		for p, end := f.prodsOf(a); p < end; p++ {
			if m.Int(f.y[p]).Sign() <= 0 {
				continue
			}
			for _, b := range f.r.prods[p].rhs {
				if !reached[b] {
					reached[b] = true
					work = append(work, b)
				}
			}
		}
	}
	return reached
}

// cut gives clauses that a disconnected point breaks and every derivation keeps;
// none if the point is connected. For each source component of what is active but
// not reached: the clause of the outermost region around it that the point breaks,
// else that of the component; rank variables if too many were needed.
func (f *flow) cut(m lia.Model) (lemmas []lia.Formula) {
	active := make([]bool, f.r.numNT)
	fires := make([]bool, len(f.y))
	for i, x := range f.y {
		if m.Int(x).Sign() > 0 {
			fires[i] = true
			active[f.r.prods[i].lhs] = true
		}
	}
	reached := f.reach(m)
	loose := func(a int32) bool { return active[a] && !reached[a] }
	any := false
	for a := range active {
		any = any || loose(int32(a))
	}
	if !any {
		return nil
	}
	next := func(a int32) []int32 {
		var out []int32
		for p, end := f.prodsOf(a); p < end; p++ {
			if fires[p] {
				out = append(out, f.r.prods[p].rhs...)
			}
		}
		return out
	}
	comps := components(f.r.numNT, next, func(a int32) bool { return !loose(a) })
	of := make([]int32, f.r.numNT)
	for i, c := range comps {
		for _, a := range c {
			of[a] = int32(i)
		}
	}
	source := make([]bool, len(comps))
	for i := range source {
		source[i] = true
	}
	for i, c := range comps {
		for _, a := range c {
			for _, b := range next(a) {
				if of[b] != int32(i) {
					source[of[b]] = false
				}
			}
		}
	}
	done := map[int32]bool{}
	for i, c := range comps {
		if source[i] {
			lemmas = append(lemmas, f.cutFor(c, m, done)...)
		}
	}
	return lemmas
}

func (f *flow) cutFor(c []int32, m lia.Model, done map[int32]bool) []lia.Formula {
	// The regions around c, innermost first. A root cannot be in c, but where there
	// are several roots it may be in a region; then the region says nothing.
	var around []int32
	in := make(map[int32]bool, len(c))
	for _, a := range c {
		in[a] = true
	}
	for i := f.inner[c[0]]; i >= 0; i = int32(f.regions[i].parent) {
		n := 0
		for _, a := range f.regions[i].nts {
			if in[a] {
				n++
			}
		}
		root := false
		for _, a := range f.roots {
			root = root || a != 0 && containsSorted(f.regions[i].nts, a)
		}
		if n == len(c) && !root {
			around = append(around, i)
		}
	}
	for k := len(around) - 1; k >= 0; k-- {
		i := around[k]
		if done[i] {
			return nil // broken by another component already
		}
		clause := f.entered(f.regions[i].nts)
		if !m.Holds(clause) {
			done[i] = true
			f.regions[i].cuts++
			return []lia.Formula{clause}
		}
	}
	if len(around) > 0 {
		s := &f.regions[around[0]]
		if s.cuts++; s.cuts > f.opt.MaxCuts && (f.opt.MaxCuts < 0 || s.cuts > len(s.nts)/8) && !s.ranked {
			s.ranked = true
			return []lia.Formula{f.entered(c), f.ranks(s.nts)}
		}
	}
	return []lia.Formula{f.entered(c)}
}

func containsSorted(list []int32, a int32) bool {
	lo, hi := 0, len(list)
	for lo < hi {
		if mid := (lo + hi) / 2; list[mid] < a {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return lo < len(list) && list[lo] == a
}

// ranks says with one rank per member that a set without roots is connected to
// the outside: what is active has a production from outside, or one of a member
// whose rank is one less. It excludes every disconnected point whose source
// component lies in the set (such a component has a member of least rank, all of
// whose active predecessors lie in the component).
func (f *flow) ranks(set []int32) lia.Formula {
	f.index()
	rank := map[int32]lia.Var{}
	for _, a := range set {
		rank[a] = f.s.NewBounded(fmt.Sprintf("rank%d", a), bigOne, big.NewInt(int64(len(set))))
	}
	var all []lia.Formula
	for _, a := range set {
		var used, into []lia.Lin
		for p, end := f.prodsOf(a); p < end; p++ {
			used = append(used, lia.V(f.y[p]))
		}
		by := map[int32][]lia.Lin{}
		var order []int32
		for _, p := range f.isIn[a] {
			b := f.r.prods[p].lhs
			if _, ok := rank[b]; !ok {
				into = append(into, lia.V(f.y[p]))
				continue
			}
			if b == a {
				continue
			}
			if by[b] == nil {
				order = append(order, b)
			}
			by[b] = append(by[b], lia.V(f.y[p]))
		}
		alt := []lia.Formula{lia.LE(lia.Sum(used...), lia.Const(0)), lia.GE(lia.Sum(into...), lia.Const(1))}
		for _, b := range order {
			alt = append(alt, lia.And(lia.GE(lia.Sum(by[b]...), lia.Const(1)), lia.EQ(lia.V(rank[a]), lia.Sum(lia.V(rank[b]), lia.Const(1)))))
		}
		all = append(all, lia.Or(alt...))
	}
	return lia.And(all...)
}
