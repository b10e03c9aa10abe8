// An image as a finite union of linear sets.

package parikh

import (
	"context"
	"fmt"
	"math/big"
	"slices"
	"strings"

	"pathtally/parikh/lia"
)

// LinearSet is {Base + n1·Periods[0] + n2·Periods[1] + ... : n natural}. Periods
// are linearly independent.
type LinearSet struct {
	Base    []*big.Int
	Periods [][]*big.Int
}

// String prints (1,0) + N(2,3) + N(0,1).
func (s LinearSet) String() string {
	var b strings.Builder
	b.WriteString(vectorText(s.Base))
	for _, p := range s.Periods {
		b.WriteString(" + N" + vectorText(p))
	}
	return b.String()
}

func vectorText(v []*big.Int) string {
	parts := make([]string, len(v))
	for i, n := range v {
		parts[i] = n.String()
	}
	return "(" + strings.Join(parts, ",") + ")"
}

// Union is a union of linear sets. Every set lies in the image; if Complete, the
// union is the image.
type Union struct {
	Sets     []LinearSet
	Complete bool
	Budget   string // if not Complete: what ran out, or "limit"
}

// maxPeriods bounds the pumps looked for at one support, maxSimplices the
// independent choices among them.
const (
	maxPeriods   = 16
	maxSimplices = 24
)

// LinearSets finds at most limit linear sets, in three steps again and again:
// solve (a derivation whose vector is in no set so far, with fewest productions),
// generalise (the pumps among the nonterminals it uses are periods), block.
//
// It ends: of infinitely many derivations with one support, two are comparable;
// their difference is a circulation on that support and a natural combination of
// the pumps found, so that the second vector was in a set of the first.
//
// Proving that nothing is left can be hard; each step has a budget of at most
// 1,000 branching steps.
func (im *Image) LinearSets(ctx context.Context, limit int) Union {
	var u Union
	if im.r.empty {
		u.Complete = true
		return u
	}
	if im.data != nil {
		u.Budget = "data"
		return u
	}
	opt := im.opt
	if opt.Solver.MaxNodes == 0 || opt.Solver.MaxNodes > 1000 {
		opt.Solver.MaxNodes = 1000
	}
	if opt.Solver.MaxPivots == 0 || opt.Solver.MaxPivots > 100_000 {
		opt.Solver.MaxPivots = 100_000
	}
	im = New(im.g, opt) // a system of its own, with small budgets
	var total []lia.Lin
	for _, x := range im.y {
		total = append(total, lia.V(x))
	}
	periods := map[string][][][]*big.Int{}
	var outside []lia.Formula
	for len(u.Sets) < limit {
		o, err := im.s.Minimise(ctx, lia.Sum(total...), outside...)
		if err != nil {
			panic(fmt.Sprintf("parikh: linear sets: %v", err))
		}
		if o.Status == lia.Unsat {
			u.Complete = true
			break
		}
		if o.Status == lia.Unknown && !o.Found {
			u.Budget = o.Budget
			break
		}
		base := make([]*big.Int, len(im.counts))
		for i, c := range im.counts {
			base[i] = o.Model.Int(c)
		}
		var support []int32
		for i, x := range im.y {
			if a := im.r.prods[i].lhs; o.Model.Int(x).Sign() > 0 && !slices.Contains(support, a) {
				support = append(support, a)
			}
		}
		key := fmt.Sprint(support)
		simplices, ok := periods[key]
		if !ok {
			var budget string
			if simplices, budget = im.periods(ctx, support); budget != "" {
				u.Budget = budget
				break
			}
			periods[key] = simplices
		}
		for _, p := range simplices {
			s := LinearSet{base, p}
			u.Sets = append(u.Sets, s)
			outside = append(outside, lia.Not(s.holds(im.counts)))
		}
	}
	if !u.Complete && u.Budget == "" {
		u.Budget = "limit"
		if im.Ask(ctx, lia.And(outside...)).Status == No {
			u.Complete, u.Budget = true, ""
		}
	}
	u.prune()
	return u
}

// periods gives independent sets of periods such that every effect of a
// circulation inside the support is a natural combination of one of them, up to
// finitely many offsets. budget is not empty if it does not get there. (Pumps that
// use more than the support would do no harm, but there may be no finite set that
// generates them: in S -> a A S | eps, A -> b A | eps each effect has to contain
// an a before it contains a b.)
func (im *Image) periods(ctx context.Context, support []int32) (simplices [][][]*big.Int, budget string) {
	f := &circulation{flow: newFlow(im.r, im.opt, nil, false)}
	f.counts = f.countVars(im.g.Counts)
	counts := f.counts
	for i, x := range f.y {
		if !slices.Contains(support, im.r.prods[i].lhs) {
			f.s.Assert("support", lia.LE(lia.V(x), lia.Const(0)))
		}
	}
	var total []lia.Lin
	for _, x := range f.y {
		total = append(total, lia.V(x))
	}
	k := len(counts)
	zero := make([]*big.Int, k)
	for i := range zero {
		zero[i] = new(big.Int)
	}
	all := make([]int, k)
	for i := range all {
		all[i] = i
	}
	found, budget := f.cone(ctx, all)
	if budget != "" {
		return nil, budget
	}
	if simplices = independentSets(k, found); len(simplices) > maxSimplices {
		return nil, "limit"
	}
	offsets := [][]*big.Int{zero}
	for range 8 * maxPeriods {
		// Known effects: offsets plus combinations of one simplex.
		var fresh []lia.Formula
		for _, o := range offsets {
			for _, p := range simplices {
				fresh = append(fresh, lia.Not(LinearSet{o, p}.holds(counts)))
			}
		}
		o, err := f.s.Minimise(ctx, lia.Sum(total...), fresh...)
		if err != nil {
			panic(fmt.Sprintf("parikh: periods: %v", err))
		}
		if o.Status == lia.Unsat {
			return simplices, ""
		}
		if o.Status == lia.Unknown && !o.Found {
			return nil, o.Budget
		}
		e := make([]*big.Int, k)
		for i, c := range counts {
			e[i] = o.Model.Int(c)
		}
		switch combination(ctx, e, found) {
		case lia.Sat:
			offsets = append(offsets, e)
			continue
		case lia.Unknown:
			return nil, "nodes"
		}
		found = append(found, e)
		if simplices = independentSets(k, found); len(found) > maxPeriods || len(simplices) > maxSimplices {
			return nil, "limit"
		}
	}
	return nil, "limit"
}

// combination asks whether e is a natural combination of vs.
func combination(ctx context.Context, e []*big.Int, vs [][]*big.Int) lia.Status {
	s := lia.New(lia.Options{})
	sums := make([][]lia.Lin, len(e))
	for range vs {
		s.NewVar("")
	}
	for j, v := range vs {
		for i, n := range v {
			sums[i] = append(sums[i], lia.TermBig(n, lia.Var(j+1)))
		}
	}
	for i, n := range e {
		s.Assert("", lia.EQ(lia.Sum(sums[i]...), lia.ConstBig(n)))
	}
	r, err := s.Check(ctx)
	if err != nil {
		panic(fmt.Sprintf("parikh: combination: %v", err))
	}
	return r.Status
}

// independentSets lists maximal independent choices of generators whose cones
// cover the cone of all: of extreme generators if the cone is pointed.
func independentSets(k int, gens [][]*big.Int) [][][]*big.Int {
	use := gens
	facets, lines := dualCone(k, gens)
	for _, l := range lines {
		facets = append(facets, l, negated(l))
	}
	if extreme, both := dualCone(k, facets); len(both) == 0 {
		use = nil
		for _, e := range extreme {
			// The least generator on this ray.
			var least []*big.Int
			for _, g := range gens {
				if fmt.Sprint(primitive(g)) == fmt.Sprint(e) && (least == nil || compareMagnitude(g, least) < 0) {
					least = g
				}
			}
			use = append(use, least)
		}
	}
	sortVectors(use)
	rank := len(invert(use).rows)
	var out [][][]*big.Int
	var rec func(from int, chosen [][]*big.Int)
	rec = func(from int, chosen [][]*big.Int) {
		if len(out) > maxSimplices {
			return
		}
		if len(chosen) == rank {
			out = append(out, slices.Clone(chosen))
			return
		}
		for i := from; i < len(use); i++ {
			next := append(slices.Clone(chosen), use[i])
			if len(invert(next).rows) == len(next) {
				rec(i+1, next)
			}
		}
	}
	rec(0, nil)
	return out
}

func compareMagnitude(a, b []*big.Int) int {
	for i := range a {
		if c := a[i].CmpAbs(b[i]); c != 0 {
			return c
		}
	}
	return 0
}

// inverse solves n·periods = v: at coordinates rows, n = solve·v / det.
type inverse struct {
	rows  []int // as many coordinates as the rank
	solve [][]*big.Rat
}

// invert finds coordinates on which the first rank-many independent vectors are
// invertible, and the inverse; for independent vectors, rank = len(vs).
func invert(vs [][]*big.Int) inverse {
	var inv inverse
	if len(vs) == 0 {
		return inv
	}
	k := len(vs[0])
	// Rows: vectors; eliminate along coordinates.
	m := make([][]*big.Rat, len(vs))
	for i, v := range vs {
		m[i] = make([]*big.Rat, k+len(vs))
		for j := range m[i] {
			m[i][j] = new(big.Rat)
		}
		for j, n := range v {
			m[i][j].SetInt(n)
		}
		m[i][k+i].SetInt64(1)
	}
	t := new(big.Rat)
	rank := 0
	for j := 0; j < k && rank < len(m); j++ {
		at := slices.IndexFunc(m[rank:], func(r []*big.Rat) bool { return r[j].Sign() != 0 })
		if at < 0 {
			continue
		}
		m[rank], m[rank+at] = m[rank+at], m[rank]
		p := new(big.Rat).Inv(m[rank][j])
		for l := range m[rank] {
			m[rank][l].Mul(m[rank][l], p)
		}
		for i := range m {
			if i != rank && m[i][j].Sign() != 0 {
				f := new(big.Rat).Set(m[i][j])
				for l := range m[i] {
					m[i][l].Sub(m[i][l], t.Mul(f, m[rank][l]))
				}
			}
		}
		inv.rows = append(inv.rows, j)
		rank++
	}
	// Now m = T·vs with T in the right part, and m is the identity at inv.rows: if
	// v = n·vs then v restricted to rows is n·T^-1..., so n = v_rows·T.
	for i := range rank {
		inv.solve = append(inv.solve, m[i][k:])
	}
	return inv
}

// holds is the formula "the counts are in the set": the multiples of the periods
// are determined by as many coordinates, must be natural, and fit the others.
func (s LinearSet) holds(counts []lia.Var) lia.Formula {
	inv := invert(s.Periods)
	diff := make([]lia.Lin, len(counts))
	for i, c := range counts {
		diff[i] = lia.V(c).Sub(lia.ConstBig(s.Base[i]))
	}
	var all []lia.Formula
	// n_j = sum over i of diff[rows[i]]·solve[i][j].
	times := make([]lia.Lin, len(s.Periods))
	dens := make([]*big.Int, len(s.Periods))
	for j := range s.Periods {
		den := big.NewInt(1)
		for i := range inv.rows {
			d := inv.solve[i][j].Denom()
			den.Mul(den, new(big.Int).Div(d, new(big.Int).GCD(nil, nil, den, d)))
		}
		var parts []lia.Lin
		for i, row := range inv.rows {
			x := inv.solve[i][j]
			parts = append(parts, diff[row].ScaleBig(new(big.Int).Mul(x.Num(), new(big.Int).Div(den, x.Denom()))))
		}
		times[j], dens[j] = lia.Sum(parts...), den
		all = append(all, lia.GE(times[j], lia.Const(0)))
		if den.Cmp(bigOne) != 0 {
			all = append(all, lia.EQ(times[j].ModBig(den), lia.Const(0)))
		}
	}
	for i := range counts {
		if slices.Contains(inv.rows, i) {
			continue
		}
		// den·diff = sum over j of times_j·period_j[i]·den/dens_j
		den := big.NewInt(1)
		for _, d := range dens {
			den.Mul(den, new(big.Int).Div(d, new(big.Int).GCD(nil, nil, den, d)))
		}
		parts := []lia.Lin{diff[i].ScaleBig(new(big.Int).Neg(den))}
		for j, p := range s.Periods {
			parts = append(parts, times[j].ScaleBig(new(big.Int).Mul(p[i], new(big.Int).Div(den, dens[j]))))
		}
		all = append(all, lia.EQ(lia.Sum(parts...), lia.Const(0)))
	}
	return lia.And(all...)
}

// Contains says whether v is in the set.
func (s LinearSet) Contains(v []*big.Int) bool {
	vars := make([]lia.Var, len(v))
	ints := make([]*big.Int, len(v)+1)
	for i, n := range v {
		vars[i] = lia.Var(i + 1)
		ints[i+1] = n
	}
	return lia.NewModel(ints, nil).Holds(s.holds(vars))
}

// prune drops sets that lie in another one and sorts the rest.
func (u *Union) prune() {
	within := func(a, b LinearSet) bool {
		if !b.Contains(a.Base) {
			return false
		}
		zero := make([]*big.Int, len(b.Base))
		for i := range zero {
			zero[i] = new(big.Int)
		}
		span := LinearSet{zero, b.Periods}
		for _, p := range a.Periods {
			if !span.Contains(p) {
				return false
			}
		}
		return true
	}
	var keep []LinearSet
next:
	for i, a := range u.Sets {
		for j, b := range u.Sets {
			if i != j && within(a, b) && (j < i || !within(b, a)) {
				continue next
			}
		}
		keep = append(keep, a)
	}
	slices.SortStableFunc(keep, func(a, b LinearSet) int { return compareVectors(a.Base, b.Base) })
	u.Sets = keep
}
