package lia

import (
	"context"
	"math/big"

	"github.com/go-air/gini/z"
)

// Optimum is the outcome of Minimise.
type Optimum struct {
	// Status is Sat when Value is the exact least value (or Unbounded is set),
	// Unsat when there is no model at all, Unknown when a budget ran out; Model
	// and Value then hold the best found, if Found is set.
	Status    Status
	Budget    string   // Unknown: as in Result
	Unbounded bool     // Sat: there are models with values below any number
	Found     bool     // Model and Value are set
	Value     *big.Int // value of the objective under Model
	Lower     *big.Int // a proven lower bound, nil if none
	Model     Model
	Failed    []int // Unsat: as in Result
}

// Minimise finds the least value of the objective over the models of the
// assertions and assumptions by asking for smaller and smaller values. The
// relaxation over the Boolean assignment of the last model tells where to ask;
// the answer rests on the refutation of the last question only. Budgets count
// over all questions. Unboundedness is claimed only without an OnModel callback,
// which might refuse the models along the ray; with one the search for ever
// smaller models ends in Unknown.
func (s *Solver) Minimise(ctx context.Context, objective Lin, assumptions ...Formula) (Optimum, error) {
	s.pivotEnd = s.stats.Pivots + s.opt.MaxPivots
	s.nodeEnd = s.stats.Nodes + s.opt.MaxNodes
	s.clauEnd = s.stats.Clauses + s.opt.MaxClauses
	var out Optimum
	var lits []z.Lit // behind the last model; nil when the relaxation was used up
	ask := func(extra ...Formula) (Result, error) {
		r, err := s.run(ctx, append(append([]Formula(nil), assumptions...), extra...))
		if err == nil && r.Status == Sat {
			out.Found, out.Model, out.Value = true, r.Model, r.Model.Value(objective)
			lits = s.lastLits
		}
		return r, err
	}
	r, err := ask()
	if err != nil || r.Status != Sat {
		out.Status, out.Budget, out.Failed = r.Status, r.Budget, r.Failed
		return out, err
	}
	step := big.NewInt(1)
	for {
		if out.Lower != nil && out.Lower.Cmp(out.Value) >= 0 {
			out.Status = Sat
			return out, nil
		}
		// Where to ask: right after a model at the relaxation's optimum if that is
		// an improvement; else just below a value that the relaxation confirms; else
		// between the bounds, or further down with doubled steps.
		target := new(big.Int).Sub(out.Value, step)
		if out.Lower != nil {
			target.Add(out.Lower, out.Value).Rsh(target, 1) // rounded down: below Value
		}
		if lits != nil {
			relaxed, st := s.relax(objective, lits)
			lits = nil
			switch {
			case st == lpUnbounded && s.onModel == nil:
				out.Status, out.Unbounded = Sat, true
				return out, nil
			case st == lpBudget:
				out.Budget = "pivots"
				return out, nil
			case st == lpOK && relaxed.Cmp(out.Value) == 0:
				target.Sub(out.Value, big.NewInt(1))
			case st == lpOK && (out.Lower == nil || relaxed.Cmp(out.Lower) >= 0):
				target = relaxed
			}
		}
		r, err := ask(LE(objective, ConstBig(target)))
		if err != nil {
			return out, err
		}
		switch r.Status {
		case Unknown:
			out.Budget = r.Budget
			return out, nil
		case Sat:
			step.Lsh(step, 1)
		case Unsat:
			out.Lower = target.Add(target, big.NewInt(1))
		}
	}
}

// relax returns the least value, rounded up, of the objective over the rational
// points that satisfy lits.
func (s *Solver) relax(objective Lin, lits []z.Lit) (*big.Int, lpStatus) {
	sx := s.sx
	defer sx.undoTo(0)
	ts, k := s.flat(objective)
	s.flushSide()
	ts, k = s.resolve(ts, k)
	if len(ts) == 0 {
		return k.big(), lpOK
	}
	f, g, neg := canon(ts)
	v := s.form(f)
	if neg {
		// Minimise -g·v: a row of its own for the opposite of v.
		es := make([]ent, len(f))
		for i, t := range f {
			es[i] = ent{s.svar(t.v), t.c.neg()}
		}
		key := "-" + formKey(f)
		w, ok := s.forms[key]
		if !ok {
			w = sx.addRow(es)
			s.forms[key] = w
		}
		v = w
	}
	sx.commit()
	for _, l := range lits {
		if why := s.assertLit(l); why != nil {
			s.fail("relax: the literals of a model clash")
		}
	}
	sx.maxPivots = s.pivotEnd
	st, _ := sx.check()
	if st == lpConflict {
		s.fail("relax: the literals of a model have no rational point")
	}
	if st == lpOK {
		st = sx.minimise(v)
	}
	if st != lpOK {
		return nil, st
	}
	return sx.val[v].mul(g).add(k).ceil().big(), lpOK
}

// Maximise is Minimise of the opposite; Value and Lower are those of objective
// (Lower is then an upper bound).
func (s *Solver) Maximise(ctx context.Context, objective Lin, assumptions ...Formula) (Optimum, error) {
	o, err := s.Minimise(ctx, objective.Scale(-1), assumptions...)
	if o.Value != nil {
		o.Value = new(big.Int).Neg(o.Value)
	}
	if o.Lower != nil {
		o.Lower = new(big.Int).Neg(o.Lower)
	}
	return o, err
}
