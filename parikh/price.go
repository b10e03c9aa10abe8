// Overlapping predicates without parameters: outcomes on demand, and pricing.

package parikh

import (
	"context"
	"fmt"
	"math/big"

	"pathtally/parikh/lia"
)

// pricedSystem decides the contributions of one group without listing all
// outcomes. It keeps some outcomes (columns) and some linear facts that hold of
// every outcome (cuts): sums of columns are possible, so a yes with them is final;
// whatever breaks a cut is impossible, so a no under the cuts is final. A point
// between the two is separated: either a linear form tells it from the sums of
// all columns, and then the outcome that is worst for the form is a new column, or
// there is none and the form is a new cut; or the columns suffice. (Column
// generation with Farkas pricing; each form and each pricing is one question to
// the solver.)
type pricedSystem struct {
	g       *group
	m       lia.Lin
	part    []lia.Var
	columns []column
	s       *lia.Solver // of outcomes
	bits    []lia.Var   // 0/1, by predicate
	env     map[int]dataVar
	cuts    int
}

type column struct {
	holds  []int64 // 0/1 by predicate
	times  lia.Var
	sample []Value
}

// addPriced makes the variables of a group's contributions.
func (d *dataLayer) addPriced(s *lia.Solver, p *pricedSystem, extra [][]lia.Lin) {
	preds := d.t.Data().Predicates
	for _, q := range p.g.preds {
		x := s.NewVar("contribution")
		p.part = append(p.part, x)
		extra[preds[q].Count] = append(extra[preds[q].Count], lia.V(x))
		s.Assert("most", lia.LE(lia.V(x), p.m))
	}
	p.s = lia.New(d.opt.Solver)
	p.env = d.copies(p.s, p.g)
	t := translation{d, nil, p.env}
	p.s.Assert("guard", p.g.possible(t))
	for _, q := range p.g.preds {
		b := p.s.NewBounded("holds", new(big.Int), bigOne)
		p.bits = append(p.bits, b)
		p.s.Assert("holds", lia.Iff(lia.GE(lia.V(b), lia.Const(1)), t.formula(preds[q].Where)))
	}
	pairs := d.pairs(p.g)
	for i := range p.part {
		for j := range i {
			for _, f := range pairs[[2]int{i, j}].formulas(lia.V(p.part[i]), lia.V(p.part[j]), p.m) {
				s.Assert("pair", f)
			}
		}
	}
	d.undecided = append(d.undecided, p)
}

func (p *pricedSystem) exactly() lia.Formula {
	sums := make([][]lia.Lin, len(p.part)+1)
	for _, c := range p.columns {
		sums[len(p.part)] = append(sums[len(p.part)], lia.V(c.times))
		for i, b := range c.holds {
			if b != 0 {
				sums[i] = append(sums[i], lia.V(c.times))
			}
		}
	}
	all := []lia.Formula{lia.EQ(p.m, lia.Sum(sums[len(p.part)]...))}
	for i, x := range p.part {
		all = append(all, lia.EQ(lia.V(x), lia.Sum(sums[i]...)))
	}
	return lia.And(all...)
}

func (p *pricedSystem) full() bool { return false }

// refine separates the point of a model.
func (p *pricedSystem) refine(ctx context.Context, im *Image, m lia.Model) (progress bool, budget string) {
	point := []*big.Int{m.Value(p.m)}
	for _, x := range p.part {
		point = append(point, m.Int(x))
	}
	for range 4 * (len(p.part) + 4) {
		form, st := p.separate(ctx, point)
		if st == lia.Unknown {
			return progress, "slots"
		}
		if st == lia.Unsat {
			return progress, ""
		}
		// Is there an outcome on the wrong side of the form?
		parts := []lia.Lin{lia.ConstBig(form[0])}
		for i, b := range p.bits {
			parts = append(parts, lia.V(b).ScaleBig(form[i+1]))
		}
		r, err := p.s.Check(ctx, lia.LE(lia.Sum(parts...), lia.Const(-1)))
		if err != nil {
			panic(fmt.Sprintf("parikh: price: %v", err))
		}
		switch r.Status {
		case lia.Unknown:
			return progress, r.Budget
		case lia.Sat:
			c := column{times: im.s.NewVar("times"), sample: im.data.sample(r.Model, p.g, p.env)}
			for _, b := range p.bits {
				c.holds = append(c.holds, r.Model.Int(b).Int64())
			}
			p.columns = append(p.columns, c)
			progress = true
		case lia.Unsat:
			parts := []lia.Lin{p.m.ScaleBig(form[0])}
			for i, x := range p.part {
				parts = append(parts, lia.V(x).ScaleBig(form[i+1]))
			}
			im.s.Assert("cut", lia.GE(lia.Sum(parts...), lia.Const(0)))
			p.cuts++
			return true, ""
		}
	}
	return progress, ""
}

// separate finds a linear form that is >= 0 on all columns (with a 1 in front) and
// < 0 at the point, with small coefficients if there is such a one.
func (p *pricedSystem) separate(ctx context.Context, point []*big.Int) ([]*big.Int, lia.Status) {
	st := lia.Unsat
	for _, size := range []int64{1, 4, 1 << 20} {
		s := lia.New(smallBudget(size))
		form := make([]lia.Lin, len(point))
		vars := make([]lia.Var, len(point))
		var at []lia.Lin
		for i, n := range point {
			top := size
			if i == 0 {
				top = size * int64(len(point)) // the constant
			}
			vars[i] = s.NewBounded("", big.NewInt(-top), big.NewInt(top))
			form[i] = lia.V(vars[i])
			at = append(at, form[i].ScaleBig(n))
		}
		for _, c := range p.columns {
			parts := []lia.Lin{form[0]}
			for i, b := range c.holds {
				if b != 0 {
					parts = append(parts, form[i+1])
				}
			}
			s.Assert("column", lia.GE(lia.Sum(parts...), lia.Const(0)))
		}
		s.Assert("point", lia.LE(lia.Sum(at...), lia.Const(-1)))
		r, err := s.Check(ctx)
		if err != nil {
			panic(fmt.Sprintf("parikh: separate: %v", err))
		}
		if r.Status == lia.Sat {
			out := make([]*big.Int, len(vars))
			for i, x := range vars {
				out[i] = r.Model.Int(x)
			}
			return out, lia.Sat
		}
		st = r.Status
	}
	return nil, st
}

// smallBudget gives small searches small budgets: the next size is tried if they run out.
func smallBudget(size int64) lia.Options {
	if size > 4 {
		return lia.Options{}
	}
	return lia.Options{MaxNodes: 200, MaxPivots: 20000}
}
