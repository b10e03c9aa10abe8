package lia

import (
	"context"
	"errors"
	"fmt"
	"math/big"
	"sort"

	"github.com/go-air/gini/z"
)

// Check decides the assertions together with the assumptions. The error is
// OnModel's, or ErrStuck; running out of budget or a cancelled context is no
// error but Status Unknown.
func (s *Solver) Check(ctx context.Context, assumptions ...Formula) (Result, error) {
	s.pivotEnd = s.stats.Pivots + s.opt.MaxPivots
	s.nodeEnd = s.stats.Nodes + s.opt.MaxNodes
	s.clauEnd = s.stats.Clauses + s.opt.MaxClauses
	return s.run(ctx, assumptions)
}

// ErrStuck says that OnModel returned lemmas that are all true under the model
// it was shown, so that the search would show it again for ever.
var ErrStuck = errors.New("lia: the lemmas returned by OnModel do not exclude the model")

// run is Check within the budgets already set.
func (s *Solver) run(ctx context.Context, assumptions []Formula) (Result, error) {
	defer s.sx.undoTo(0)
	s.lastLits = nil
	s.dropCuts()
	var assume []z.Lit
	encodeAll := func() {
		s.handOver()
		if assume == nil {
			for _, f := range assumptions {
				assume = append(assume, s.encode(f.node()).lit)
			}
		}
		s.flushSide()
	}
	encodeAll()
	for {
		if s.dead {
			return Result{Status: Unsat}, nil
		}
		if err := ctx.Err(); err != nil {
			return Result{Budget: "cancelled"}, nil
		}
		s.sx.undoTo(0)
		all := append([]z.Lit(nil), assume...)
		if s.boxBits > 0 && !s.noBox {
			all = append(all, s.boxLit)
		}
		switch s.solveSAT(ctx, all) {
		case 0:
			return Result{Budget: "cancelled"}, nil
		case -1:
			core := s.sat.Why(nil)
			if s.boxBits > 0 && !s.noBox && contains(core, s.boxLit) {
				s.enlargeBox()
				continue
			}
			r := Result{Status: Unsat}
			for i, l := range assume {
				if contains(core, l) {
					r.Failed = append(r.Failed, i)
				}
			}
			return r, nil
		}
		s.stats.Rounds++
		s.snapshot()
		m, conflict, budget := s.theory(ctx, assumptions)
		if budget != "" {
			return Result{Budget: budget}, nil
		}
		if conflict != nil {
			if s.stats.Clauses >= s.clauEnd {
				return Result{Budget: "clauses"}, nil
			}
			s.learn(conflict)
			continue
		}
		s.stats.ModelsSeen++
		s.verify(m, assumptions)
		if s.onModel != nil {
			lemmas, err := s.onModel(m)
			if err != nil {
				return Result{}, err
			}
			if len(lemmas) > 0 {
				stuck := true
				for _, f := range lemmas {
					if !m.Holds(f) {
						stuck = false
					}
					s.asserts = append(s.asserts, assertion{f: f, lemma: true})
					s.stats.Lemmas++
				}
				if stuck {
					return Result{}, ErrStuck
				}
				s.sx.undoTo(0)
				encodeAll()
				continue
			}
		}
		return Result{Status: Sat, Model: m}, nil
	}
}

// snapshot keeps the Boolean assignment: gini forgets it when a clause is added,
// and branching adds clauses.
func (s *Solver) snapshot() {
	s.vals = s.vals[:0]
	top := s.sat.MaxVar()
	for v := z.Var(0); v <= top; v++ {
		s.vals = append(s.vals, v > 0 && s.sat.Value(v.Pos()))
	}
}

// known reports whether l was there when gini made the assignment.
func (s *Solver) known(l z.Lit) bool { return int(l.Var()) < len(s.vals) }

// value is the value of l in the assignment.
func (s *Solver) value(l z.Lit) bool { return s.vals[l.Var()] == l.IsPos() }

func contains(ls []z.Lit, l z.Lit) bool {
	for _, x := range ls {
		if x == l {
			return true
		}
	}
	return false
}

// verify puts the model back into everything the caller wrote.
func (s *Solver) verify(m Model, assumptions []Formula) {
	for x := 1; x < len(s.names); x++ {
		v := m.ints[x]
		lo, hi := s.declLo[x], s.declHi[x]
		if lo != nil && v.Cmp(lo.rat().Num()) < 0 || hi != nil && v.Cmp(hi.rat().Num()) > 0 {
			s.fail("search: model gives variable %d (%s) the value %v outside its bounds", x, s.names[x], v)
		}
	}
	memo := map[*node]bool{}
	for i, a := range s.asserts {
		if !m.holds(a.f.node(), memo) {
			s.fail("search: model breaks assertion %d (%s): %v", i, a.name, a.f)
		}
	}
	for i, f := range assumptions {
		if !m.holds(f.node(), memo) {
			s.fail("search: model breaks assumption %d: %v", i, f)
		}
	}
}

// theory looks for an integer point for the current Boolean assignment. Exactly
// one of its results is set: a model, a conflict (theory literals that cannot be
// true together, without box literal if it was not needed), or a budget.
func (s *Solver) theory(ctx context.Context, assumptions []Formula) (m Model, conflict []z.Lit, budget string) {
	sx := s.sx
	sx.maxPivots = s.pivotEnd
	j := s.newJustifier()
	for _, n := range s.roots {
		j.walk(n, true)
	}
	for _, f := range assumptions {
		j.walk(f.node(), true)
	}
	given := j.lits
	asserted := append([]z.Lit(nil), given...)
	for _, l := range asserted {
		if why := s.assertLit(l); why != nil {
			return m, s.literals(why), ""
		}
	}
	if why := s.useCuts(asserted); why != nil {
		return m, s.shrink(why), ""
	}
	boxed, latticeDone := false, s.opt.NoLattice
	cutRounds := 0
	for {
		st, why := sx.check()
		if s.opt.Sanity {
			if err := sx.sanity(); err != nil {
				s.fail("%v", err)
			}
		}
		switch st {
		case lpConflict:
			return m, s.shrink(why), ""
		case lpBudget:
			return m, nil, "pivots"
		}
		x := s.fractional()
		if x < 0 {
			s.lastLits = append([]z.Lit{}, given...) // never nil
			return s.model(), nil, ""
		}
		if ctx.Err() != nil {
			return m, nil, "cancelled"
		}
		if !latticeDone {
			latticeDone = true
			if why := s.latticeConflict(); why != nil {
				return m, s.literals(why), ""
			}
		}
		if !s.opt.NoLattice {
			if l, ok := s.branchRemainder(); ok {
				if s.stats.Nodes >= s.nodeEnd {
					return m, nil, "nodes"
				}
				s.stats.Nodes++
				asserted = append(asserted, l)
				if why := s.assertLit(l); why != nil {
					return m, s.literals(why), ""
				}
				latticeDone = false
				continue
			}
		}
		if !s.opt.NoCuts && cutRounds < 4 && len(s.cuts) < s.opt.MaxCuts && len(asserted) == len(given) {
			cutRounds++
			if n, why := s.addCuts(asserted); why != nil {
				return m, s.shrink(why), ""
			} else if n > 0 {
				continue
			}
		}
		if !boxed && !s.noBox {
			boxed = true
			if s.boxBits == 0 {
				s.enlargeBox()
			}
			if why := s.assertBox(); why != nil {
				return m, s.literals(why), ""
			}
			continue
		}
		if s.stats.Nodes >= s.nodeEnd {
			return m, nil, "nodes"
		}
		s.stats.Nodes++
		l := s.branch(x)
		asserted = append(asserted, l)
		if why := s.assertLit(l); why != nil {
			return m, s.literals(why), ""
		}
	}
}

// assertLit sets the bound that a theory literal means.
func (s *Solver) assertLit(l z.Lit) []reason {
	a := &s.atoms[s.atomOf[l.Var()]-1]
	if l == a.lit {
		return s.sx.setUpper(a.v, a.c, reason(l))
	}
	return s.sx.setLower(a.v, a.c.add(one), reason(l))
}

// literals turns reasons into the ascending set of literals behind them.
func (s *Solver) literals(why []reason) []z.Lit {
	out := make([]z.Lit, 0, len(why))
	for _, w := range why {
		switch {
		case w > 0:
			out = append(out, z.Lit(w))
		case w < 0:
			out = append(out, s.cuts[-w-1].why...)
		}
	}
	sort.Slice(out, func(i, j int) bool { return out[i] < out[j] })
	k := 0
	for i, l := range out {
		if i == 0 || l != out[k-1] {
			out[k] = l
			k++
		}
	}
	return out[:k]
}

// learn forbids the literals to be true together.
func (s *Solver) learn(conflict []z.Lit) {
	s.stats.Clauses++
	s.stats.Literals += int64(len(conflict))
	c := make([]z.Lit, len(conflict))
	for i, l := range conflict {
		c[i] = l.Not()
	}
	if len(c) == 0 {
		s.dead = true
		return
	}
	s.addClause(c...)
}

// minimiseTries and minimisePivots bound the deletion of literals from one
// conflict.
const (
	minimiseTries  = 30
	minimisePivots = 200
)

// shrink makes a linear conflict smaller by leaving out one literal after the
// other and asking the simplex again, warm.
func (s *Solver) shrink(why []reason) []z.Lit {
	lits := s.literals(why)
	if s.opt.NoMinimise || len(lits) < 2 {
		return lits
	}
	sx := s.sx
	defer func() { sx.maxPivots = s.pivotEnd }()
	for tries, i := 0, 0; i < len(lits) && tries < minimiseTries && len(lits) > 1; tries++ {
		s.stats.MinimiseTries++
		sx.undoTo(0)
		sub := make([]z.Lit, 0, len(lits)-1)
		sub = append(append(sub, lits[:i]...), lits[i+1:]...)
		clash := s.assertAll(sub)
		if clash == nil {
			sx.maxPivots = min(s.pivotEnd, s.stats.Pivots+minimisePivots)
			st, w := sx.check()
			if st != lpConflict {
				i++
				continue
			}
			clash = w
		}
		lits = s.literals(clash)
		// Literals before i were found necessary and are still in the set.
		i = min(i, len(lits))
	}
	return lits
}

// assertAll asserts literals (the box literal included) and the cuts they carry.
func (s *Solver) assertAll(ls []z.Lit) []reason {
	for _, l := range ls {
		if l == s.boxLit && s.boxBits > 0 {
			if why := s.assertBox(); why != nil {
				return why
			}
		} else if why := s.assertLit(l); why != nil {
			return why
		}
	}
	return s.useCuts(ls)
}

// fractional picks the variable to branch on: a structural variable with a
// fractional value, of the smallest range, then of the least index; -1 if the
// point is integral (slacks are then integral too).
func (s *Solver) fractional() int32 {
	best := int32(-1)
	var bestRange *num
	for _, v := range s.structural {
		if s.sx.val[v].isInt() {
			continue
		}
		var r *num
		if s.sx.lo[v].set && s.sx.hi[v].set {
			d := s.sx.hi[v].v.sub(s.sx.lo[v].v)
			r = &d
		}
		if best < 0 || r != nil && (bestRange == nil || r.cmp(*bestRange) < 0) {
			best, bestRange = v, r
		}
	}
	return best
}

// branch returns the literal that cuts off the fractional value of v. An atom
// for the split may exist with a value in the present assignment, which must be
// kept; a new atom is free and takes the nearer side.
func (s *Solver) branch(v int32) z.Lit {
	x := s.sx.val[v]
	c := x.floor()
	return s.split(v, c, x.sub(c).cmp(numInt(1).div(numInt(2))) <= 0)
}

// split returns the literal of v <= c or its negation: as the Boolean assignment
// has it if it knows the atom, else by preference.
func (s *Solver) split(v int32, c num, below bool) z.Lit {
	n := len(s.atoms)
	l := s.atomLit(v, c)
	if l == s.truth || l == s.truth.Not() {
		s.fail("split: %v is not between the bounds of variable %d", c, v)
	}
	if len(s.atoms) == n && s.known(l) {
		below = s.value(l)
	}
	if below {
		return l
	}
	return l.Not()
}

// remainderRange is the greatest number of values of a remainder that are
// branched on before its quotient.
const remainderRange = 64

// quotientRange is the number of values up to which a quotient is branched on
// like any variable; that ends by itself and learns better.
const quotientRange = 1024

// branchRemainder splits the range of a remainder whose quotient is fractional.
// Once a remainder has one value its definition is an equation for the lattice
// test, whereas branching on an unbounded quotient need not end.
func (s *Solver) branchRemainder() (z.Lit, bool) {
	sx := s.sx
	for i := range s.remainders {
		d := &s.remainders[i]
		if s.substOn[d.q] || s.svarOf[d.q] < 0 || sx.val[s.svarOf[d.q]].isInt() {
			continue
		}
		q := s.svarOf[d.q]
		if sx.lo[q].set && sx.hi[q].set && sx.hi[q].v.sub(sx.lo[q].v).cmp(numInt(quotientRange)) <= 0 {
			continue
		}
		if d.row < 0 {
			ts, _ := s.resolve(mergeTerms(append(append([]term(nil), d.of...), term{d.q, d.m.neg()})), num{})
			if len(ts) < 2 {
				continue // branching on the variable itself does it
			}
			f, _, _ := canon(ts)
			row, ok := s.forms[formKey(f)]
			if !ok {
				continue // not defined yet
			}
			d.row = row
		}
		lo, hi := sx.lo[d.row], sx.hi[d.row]
		if !lo.set || !hi.set || lo.v.eq(hi.v) || hi.v.sub(lo.v).cmp(numInt(remainderRange)) > 0 {
			continue
		}
		c := sx.val[d.row].floor()
		if c.cmp(hi.v) < 0 {
			return s.split(d.row, c, true), true
		}
		return s.split(d.row, c.sub(one), false), true
	}
	return z.LitNull, false
}

// enlargeBox makes the next search box.
func (s *Solver) enlargeBox() {
	if s.boxBits == 0 {
		s.boxBits = 10
	} else {
		s.boxBits *= 2
		s.stats.BoxEnlarged++
	}
	if s.boxBits > s.opt.MaxBoundBits {
		s.noBox = true
		return
	}
	s.boxLit = s.sat.Lit()
}

// assertBox bounds every structural variable by ±2^boxBits, on the strength of
// the box literal. A refutation that does not use that literal holds without it.
func (s *Solver) assertBox() []reason {
	if s.noBox {
		return nil
	}
	b := numBig(new(big.Int).Lsh(big.NewInt(1), uint(s.boxBits)))
	nb := b.neg()
	for _, v := range s.structural {
		if why := s.sx.setUpper(v, b, reason(s.boxLit)); why != nil {
			return why
		}
		if why := s.sx.setLower(v, nb, reason(s.boxLit)); why != nil {
			return why
		}
	}
	return nil
}

// model reads off the integral point and computes the substituted variables.
func (s *Solver) model() Model {
	m := Model{ints: make([]*big.Int, len(s.names)), bools: make([]bool, len(s.boolNames))}
	for x := 1; x < len(s.names); x++ {
		switch {
		case s.substOn[x]:
		case s.svarOf[x] >= 0:
			m.ints[x] = s.sx.val[s.svarOf[x]].big()
		case s.lo[x] != nil && s.lo[x].sign() > 0:
			m.ints[x] = s.lo[x].big()
		case s.hi[x] != nil && s.hi[x].sign() < 0:
			m.ints[x] = s.hi[x].big()
		default:
			m.ints[x] = new(big.Int)
		}
	}
	for x := 1; x < len(s.names); x++ {
		if !s.substOn[x] {
			continue
		}
		v := s.substK[x].big()
		t := new(big.Int)
		for _, u := range s.subst[x] {
			if m.ints[u.v] == nil {
				panic(fmt.Sprintf("lia: model: variable %d is replaced by a form over the replaced variable %d", x, u.v))
			}
			v.Add(v, t.Mul(u.c.rat().Num(), m.ints[u.v]))
		}
		m.ints[x] = v
	}
	for b := 1; b < len(s.boolNames); b++ {
		if l := s.boolLit[b]; l != z.LitNull {
			m.bools[b] = s.known(l) && s.value(l)
		}
	}
	return m
}
