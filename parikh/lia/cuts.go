package lia

import (
	"math/big"

	"github.com/go-air/gini/z"
)

// cut is a row that every integer point satisfies which satisfies the literals
// in why: v >= c, or v <= c when upper is set.
type cut struct {
	v     int32
	row   bool // the row of v was made for this cut
	c     num
	upper bool
	why   []z.Lit // ascending; empty: holds always
}

const (
	cutsPerRound = 4
	cutLength    = 60 // terms of a cut at most
	cutBits      = 24 // bits of a coefficient at most; 40 made pivots 1000 times dearer
)

// addCuts makes mixed-integer Gomory cuts (Gomory, An algorithm for the mixed
// integer problem, RAND RM-2597, 1960; in bounded form as in Dutertre and de
// Moura, Integrating simplex with DPLL(T), SRI-CSL-06-01, section 4) from rows
// with fractional basic variables, and asserts them. A cut is valid under the
// bounds it was made from, so it carries their literals. It returns how many it
// asserted, or the reasons of a clash.
func (s *Solver) addCuts(asserted []z.Lit) (int, []reason) {
	var made []cut
	for _, v := range s.structural {
		if len(made) >= cutsPerRound || len(s.cuts)+len(made) >= s.opt.MaxCuts {
			break
		}
		if s.sx.pos[v] >= 0 && !s.sx.val[v].isInt() {
			if c, ok := s.gomory(v); ok {
				made = append(made, c)
			}
		}
	}
	for _, c := range made {
		s.cuts = append(s.cuts, c)
		s.stats.Cuts++
		if why := s.assertCut(len(s.cuts) - 1); why != nil {
			return 0, why
		}
	}
	return len(made), nil
}

func (s *Solver) assertCut(i int) []reason {
	c := &s.cuts[i]
	why := reason(-(i + 1))
	if len(c.why) == 0 {
		why = 0
	}
	if c.upper {
		return s.sx.setUpper(c.v, c.c, why)
	}
	return s.sx.setLower(c.v, c.c, why)
}

// useCuts asserts the cuts whose literals are all among ls.
func (s *Solver) useCuts(ls []z.Lit) []reason {
	if len(s.cuts) == 0 {
		return nil
	}
	have := make(map[z.Lit]bool, len(ls))
	for _, l := range ls {
		have[l] = true
	}
next:
	for i := range s.cuts {
		for _, l := range s.cuts[i].why {
			if !have[l] {
				continue next
			}
		}
		if why := s.assertCut(i); why != nil {
			return why
		}
	}
	return nil
}

// gomory makes the cut of the row of the basic variable b. With every nonbasic
// x_j at a bound, y_j >= 0 its distance from it, the row is
// x_b + Σ a_j y_j = β. For f_j, f0 the fractional parts of a_j, β the cut is
// Σ g_j y_j >= 1 with g_j = f_j/f0 if f_j <= f0, else (1-f_j)/(1-f0).
func (s *Solver) gomory(b int32) (cut, bool) {
	sx := s.sx
	sx.rowOf(sx.pos[b])
	f0 := sx.val[b].fracPart()
	var why []reason
	var sum []ent // over structural variables
	rhs := one
	for _, j := range sx.alpha.idx {
		a := sx.alpha.val[j]
		if a.isZero() {
			continue
		}
		var at bound
		upper := false
		switch {
		case sx.lo[j].set && sx.val[j].eq(sx.lo[j].v):
			at = sx.lo[j]
		case sx.hi[j].set && sx.val[j].eq(sx.hi[j].v):
			at, upper = sx.hi[j], true
			a = a.neg()
		default:
			return cut{}, false // not a vertex
		}
		f := a.fracPart()
		if f.isZero() {
			continue
		}
		var g num
		if f.cmp(f0) <= 0 {
			g = f.div(f0)
		} else {
			g = one.sub(f).div(one.sub(f0))
		}
		why = append(why, at.why)
		// g·(x_j - l) or g·(u - x_j)
		if upper {
			rhs = rhs.sub(g.mul(at.v))
			g = g.neg()
		} else {
			rhs = rhs.add(g.mul(at.v))
		}
		sum = s.addStructural(sum, j, g)
	}
	sum = mergeEnts(sum)
	if len(sum) == 0 || len(sum) > cutLength {
		return cut{}, false
	}
	scale := rhs.den()
	for _, t := range sum {
		scale = scale.lcm(t.c.den())
	}
	limit := numBig(new(big.Int).Lsh(big.NewInt(1), cutBits))
	ts := make([]ent, len(sum))
	var g num
	for i, t := range sum {
		ts[i] = ent{t.i, t.c.mul(scale)}
		g = g.gcd(ts[i].c)
	}
	upper := ts[0].c.sign() < 0
	d := g.inv()
	if upper {
		d = d.neg()
	}
	for i := range ts {
		ts[i].c = ts[i].c.mul(d)
		if ts[i].c.abs().cmp(limit) > 0 {
			return cut{}, false
		}
	}
	c := rhs.mul(scale).mul(d)
	if upper {
		c = c.floor()
	} else {
		c = c.ceil()
	}
	n := len(sx.rows)
	v := s.structuralForm(ts)
	return cut{v: v, row: len(sx.rows) > n, c: c, upper: upper, why: s.literals(why)}, true
}

// addStructural appends g·x_j in structural variables.
func (s *Solver) addStructural(sum []ent, j int32, g num) []ent {
	col := s.sx.cols[j]
	if len(col) == 1 {
		row := s.sx.rows[col[0].i]
		if row[len(row)-1].i == j { // j is the slack of this row
			for _, t := range row[:len(row)-1] {
				sum = append(sum, ent{t.i, t.c.mul(g).neg()})
			}
			return sum
		}
	}
	return append(sum, ent{j, g})
}

// structuralForm is form for terms given in simplex variables.
func (s *Solver) structuralForm(ts []ent) int32 {
	if len(ts) == 1 {
		return ts[0].i
	}
	out := make([]term, len(ts))
	for i, t := range ts {
		out[i] = term{s.varOf(t.i), t.c}
	}
	return s.form(mergeTerms(out))
}

// dropCuts forgets all cuts and takes the rows made for them out of the simplex,
// which must be free of assumed bounds. Old cuts make every pivot dearer and
// rarely serve the next question.
func (s *Solver) dropCuts() {
	gone := map[int32]bool{}
	for _, c := range s.cuts {
		// An atom may have come to use the form since.
		if c.row && len(s.byVar[c.v]) == 0 {
			gone[c.v] = true
		}
	}
	s.cuts = s.cuts[:0]
	if len(gone) == 0 {
		return
	}
	for key, v := range s.forms {
		if gone[v] {
			delete(s.forms, key)
		}
	}
	s.sx.dropRows(gone)
}
