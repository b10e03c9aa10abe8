// Many overlapping predicates: a bounded number of outcomes, not all 2^n.

package parikh

import (
	"context"
	"fmt"
	"math/big"

	"pathtally/parikh/lia"
)

// slotSystem decides the contributions of one group of n predicates without
// listing outcomes. The sum of m outcomes (0/1 vectors v, with a 1 for the
// multiplicity in front) is a sum of multiples of at most K = 2d log2(4d) of them,
// d = n+1 (Eisenbrand and Shmonin, Carathéodory bounds for integer cones, 2006,
// with entries at most 1). Each slot is one outcome with a multiplicity.
//
// Slots are added a few at a time. What is outside them is a rest that any
// outcomes could make up, restricted only by what holds of all pairs of
// predicates: with the rest forced to nothing a yes is final, with the rest free a
// no is. Only when all K slots are there is the rest nothing by force.
type slotSystem struct {
	g     *group
	m     lia.Lin // how often the class happens
	slots []slot
	bound int       // K
	rest  lia.Var   // multiplicity outside the slots as they are now
	part  []lia.Var // by predicate: contribution
	outer []lia.Var // by predicate: contribution of the rest
}

type slot struct {
	times lia.Var
	adds  []lia.Var // by predicate: times if it holds, else 0
	env   map[int]dataVar
}

// slotBound is the least K with 2^K >= (4d)^(2d).
func slotBound(predicates int) int {
	d := int64(predicates + 1)
	n := new(big.Int).Exp(big.NewInt(4*d), big.NewInt(2*d), nil)
	return new(big.Int).Sub(n, bigOne).BitLen()
}

// addSlots makes the variables of a group's contributions, with a few slots.
func (d *dataLayer) addSlots(s *lia.Solver, sl *slotSystem, extra [][]lia.Lin) {
	preds := d.t.Data().Predicates
	sl.bound = slotBound(len(sl.g.preds))
	if n := len(sl.g.preds); n < 10 {
		sl.bound = min(sl.bound, 1<<n) // each outcome once
	}
	for _, p := range sl.g.preds {
		x := s.NewVar("contribution")
		sl.part = append(sl.part, x)
		extra[preds[p].Count] = append(extra[preds[p].Count], lia.V(x))
	}
	s.Assert("possible", lia.Or(lia.LE(sl.m, lia.Const(0)), sl.g.possible(translation{d, d.params, d.copies(s, sl.g)})))
	d.undecided = append(d.undecided, sl)
	d.restOf(s, sl)
	d.grow(s, sl, 4)
}

// restOf makes the chain's first rest: everything.
func (d *dataLayer) restOf(s *lia.Solver, sl *slotSystem) {
	sl.rest = s.NewVar("rest")
	s.Assert("rest", lia.EQ(lia.V(sl.rest), sl.m))
	sl.outer = sl.part
	pairs := d.pairs(sl.g)
	for i, x := range sl.outer {
		s.Assert("rest", lia.LE(lia.V(x), lia.V(sl.rest)))
		for j := range i {
			for _, f := range pairs[[2]int{i, j}].formulas(lia.V(x), lia.V(sl.outer[j]), lia.V(sl.rest)) {
				s.Assert("pair", f)
			}
		}
	}
}

// pair says which of the four outcomes of two predicates happen.
type pair [2][2]bool

// formulas are the linear facts about sums x, y of two predicates over m outcomes.
func (p pair) formulas(x, y, m lia.Lin) (fs []lia.Formula) {
	if !p[1][1] {
		fs = append(fs, lia.LE(x.Add(y), m))
	}
	if !p[0][0] {
		fs = append(fs, lia.GE(x.Add(y), m))
	}
	if !p[1][0] {
		fs = append(fs, lia.LE(x, y))
	}
	if !p[0][1] {
		fs = append(fs, lia.LE(y, x))
	}
	return fs
}

func (d *dataLayer) pairs(g *group) map[[2]int]pair {
	s := lia.New(d.opt.Solver)
	t := translation{d, d.variables(s, d.t.Data().Parameters), d.copies(s, g)}
	s.Assert("guard", g.possible(t))
	preds := d.t.Data().Predicates
	var holds []lia.Formula
	for _, p := range g.preds {
		holds = append(holds, t.formula(preds[p].Where))
	}
	out := map[[2]int]pair{}
	see := func(m lia.Model) {
		for i := range holds {
			a := btoi(m.Holds(holds[i]))
			for j := range i {
				p := out[[2]int{i, j}]
				p[a][btoi(m.Holds(holds[j]))] = true
				out[[2]int{i, j}] = p
			}
		}
	}
	for i := range holds {
		for j := range i {
			for a := range 2 {
				for b := range 2 {
					if out[[2]int{i, j}][a][b] {
						continue
					}
					f, h := holds[i], holds[j]
					if a == 0 {
						f = lia.Not(f)
					}
					if b == 0 {
						h = lia.Not(h)
					}
					r, err := s.Check(context.Background(), f, h)
					if err != nil {
						panic(fmt.Sprintf("parikh: pairs: %v", err))
					}
					switch r.Status {
					case lia.Sat:
						see(r.Model)
					case lia.Unknown:
						p := out[[2]int{i, j}]
						p[a][b] = true
						out[[2]int{i, j}] = p
					}
				}
			}
		}
	}
	return out
}

func btoi(b bool) int {
	if b {
		return 1
	}
	return 0
}

// grow takes n more slots out of the rest (fewer if the bound is reached). The old
// rest and its contributions become sums of the new slots and a new rest, for
// which the same facts hold.
func (d *dataLayer) grow(s *lia.Solver, sl *slotSystem, n int) {
	n = min(n, sl.bound-len(sl.slots))
	if n <= 0 {
		return
	}
	g := sl.g
	preds := d.t.Data().Predicates
	sum := []lia.Lin{}
	sums := make([][]lia.Lin, len(g.preds))
	for range n {
		x := slot{times: s.NewVar("slot"), env: d.copies(s, g)}
		t := translation{d, d.params, x.env}
		unused := lia.LE(lia.V(x.times), lia.Const(0))
		s.Assert("slot", lia.Or(unused, g.possible(t)))
		for i, p := range g.preds {
			y := s.NewVar("slot's contribution")
			x.adds = append(x.adds, y)
			f := t.formula(preds[p].Where)
			s.Assert("slot", lia.LE(lia.V(y), lia.V(x.times)))
			s.Assert("slot", lia.Or(unused, lia.And(f, lia.EQ(lia.V(y), lia.V(x.times))), lia.And(lia.Not(f), lia.LE(lia.V(y), lia.Const(0)))))
			sums[i] = append(sums[i], lia.V(y))
		}
		if k := len(sl.slots); k > 0 {
			s.Assert("order", lia.LE(lia.V(x.times), lia.V(sl.slots[k-1].times)))
		}
		sum = append(sum, lia.V(x.times))
		sl.slots = append(sl.slots, x)
	}
	old, outer := sl.rest, sl.outer
	sl.rest = s.NewVar("rest")
	s.Assert("rest", lia.EQ(lia.V(old), lia.Sum(append(sum, lia.V(sl.rest))...)))
	sl.outer = nil
	for i := range g.preds {
		x := s.NewVar("rest's contribution")
		sl.outer = append(sl.outer, x)
		s.Assert("rest", lia.EQ(lia.V(outer[i]), lia.Sum(append(sums[i], lia.V(x))...)))
		s.Assert("rest", lia.LE(lia.V(x), lia.V(sl.rest)))
	}
	pairs := d.pairs(g)
	for i := range g.preds {
		for j := range i {
			for _, f := range pairs[[2]int{i, j}].formulas(lia.V(sl.outer[i]), lia.V(sl.outer[j]), lia.V(sl.rest)) {
				s.Assert("pair", f)
			}
		}
	}
}

func (sl *slotSystem) exactly() lia.Formula { return lia.LE(lia.V(sl.rest), lia.Const(0)) }

func (sl *slotSystem) full() bool { return len(sl.slots) == sl.bound }

func (sl *slotSystem) refine(_ context.Context, im *Image, _ lia.Model) (progress bool, budget string) {
	if sl.full() {
		return false, ""
	}
	im.data.grow(im.s, sl, len(sl.slots))
	return true, ""
}

// undecided is a group whose outcomes are not listed: the image's system is too
// large by what it leaves open, and too small once exactly is assumed.
type undecided interface {
	// exactly makes every model a true one.
	exactly() lia.Formula
	// full: exactly excludes nothing that is possible.
	full() bool
	// refine takes away some of what was left open, looking at a model of it.
	refine(ctx context.Context, im *Image, m lia.Model) (progress bool, budget string)
}

// maxRefinements bounds the rounds of one question.
const maxRefinements = 200

// ask decides a question in systems with undecided groups.
func (im *Image) askRefining(ctx context.Context, f lia.Formula) Answer {
	check := func(fs ...lia.Formula) lia.Result {
		r, err := im.s.Check(ctx, fs...)
		if err != nil {
			panic(fmt.Sprintf("parikh: ask: %v", err))
		}
		return r
	}
	for range maxRefinements {
		open := check(f)
		if open.Status != lia.Sat {
			return im.answer(open.Status, open.Budget, open.Model)
		}
		// The model itself may be a true one; then exactly costs little.
		progress, full, budget := false, true, "slots"
		for _, u := range im.data.undecided {
			p, b := u.refine(ctx, im, open.Model)
			progress = progress || p
			full = full && u.full()
			if b != "" {
				budget = b
			}
		}
		fs := []lia.Formula{f}
		for _, u := range im.data.undecided {
			fs = append(fs, u.exactly())
		}
		r := check(fs...)
		if r.Status == lia.Sat || full {
			return im.answer(r.Status, r.Budget, r.Model)
		}
		if !progress {
			return Answer{Budget: budget}
		}
	}
	return Answer{Budget: "slots"}
}

// exactSlots prepares for questions other than Ask. False: there are groups
// whose outcomes are not listed.
func (im *Image) exactSlots() bool { return im.data == nil || len(im.data.undecided) == 0 }
