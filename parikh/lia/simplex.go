package lia

import (
	"fmt"
	"sort"
)

// simplex decides feasibility of bounds on variables and on linear rows over
// the rationals, exactly: the general simplex of Dutertre and de Moura, A fast
// linear-arithmetic solver for DPLL(T), CAV 2006, section 3, with a revised
// (factored) basis in place of their explicit tableau, because the tableau of a
// deep flow system fills up quadratically and its basis does not.
//
// Row i reads slack_i - Σ a_ij x_j = 0; slacks are variables like the others.
// All variables are integers in the end and all bounds are integral, so strict
// bounds never occur and no infinitesimals are needed.
//
// Invariants between calls: Mx = 0 for the matrix M of rows; every nonbasic
// variable that is not in moved lies within its bounds; every basic variable
// outside its bounds is in infeas.
type simplex struct {
	cols [][]ent // per variable: (row, coefficient in M)
	rows [][]ent // per row: (variable, coefficient in M), slack included
	lo,
	hi []bound // per variable
	val   []num   // per variable
	pos   []int32 // per variable: basis position, -1 when nonbasic
	basic []int32 // per position (= row of the factor): variable
	fac   factor

	trail    []undo
	infeas   []int32
	inInfeas []bool
	moved    []int32 // nonbasic variables to be put back within their bounds
	left     []int32 // per variable: leaving count in the running check
	fixed    []bool  // per variable: has one value for good, so it never enters

	w, y, alpha spvec
	stats       *Stats
	driveRows   int   // see the constant; tests lower it
	maxPivots   int64 // check gives up when stats.Pivots reaches it
}

// bound is one side of a variable; why 0 means it always holds.
type bound struct {
	v   num
	set bool
	why reason
}

// reason names the cause of a bound: 0 always true, > 0 a literal of the SAT
// layer, < 0 the literals of cut number -reason-1.
type reason int32

type undo struct {
	v     int32
	upper bool
	old   bound
}

func newSimplex(st *Stats) *simplex {
	return &simplex{stats: st, maxPivots: 1 << 62, driveRows: driveRows}
}

// addVar makes a free structural variable of value 0.
func (s *simplex) addVar() int32 {
	v := int32(len(s.cols))
	s.cols = append(s.cols, nil)
	s.lo = append(s.lo, bound{})
	s.hi = append(s.hi, bound{})
	s.val = append(s.val, num{})
	s.pos = append(s.pos, -1)
	s.inInfeas = append(s.inInfeas, false)
	s.left = append(s.left, 0)
	s.fixed = append(s.fixed, false)
	s.alpha.grow(len(s.cols))
	return v
}

// addRow makes a slack variable equal to Σ c·x over the terms; it is basic.
func (s *simplex) addRow(terms []ent) int32 {
	i := int32(len(s.rows))
	slack := s.addVar()
	row := make([]ent, 0, len(terms)+1)
	s.fac.grow(int(i) + 1)
	s.w.grow(int(i) + 1)
	s.y.grow(int(i) + 1)
	var v num
	for _, t := range terms {
		c := t.c.neg()
		row = append(row, ent{t.i, c})
		s.cols[t.i] = append(s.cols[t.i], ent{i, c})
		if !s.val[t.i].isZero() {
			v = v.add(t.c.mul(s.val[t.i]))
		}
		if p := s.pos[t.i]; p >= 0 {
			// The column reads e_p + c·e_i after the present etas.
			s.fac.push(eta{piv: p, col: []ent{{p, one}, {i, t.c}}})
		}
	}
	row = append(row, ent{slack, one})
	s.cols[slack] = []ent{{i, one}}
	s.rows = append(s.rows, row)
	s.basic = append(s.basic, slack)
	s.pos[slack] = i
	s.val[slack] = v
	return slack
}

// mark returns a point for undoTo.
func (s *simplex) mark() int { return len(s.trail) }

// undoTo takes back the bounds set since the mark; values stay.
func (s *simplex) undoTo(mark int) {
	for i := len(s.trail) - 1; i >= mark; i-- {
		u := s.trail[i]
		if u.upper {
			s.hi[u.v] = u.old
		} else {
			s.lo[u.v] = u.old
		}
	}
	s.trail = s.trail[:mark]
}

// setLower asserts v >= c. A clash with the upper bound is returned as the
// reasons of both.
func (s *simplex) setLower(v int32, c num, why reason) []reason {
	if s.lo[v].set && s.lo[v].v.cmp(c) >= 0 {
		return nil
	}
	if s.hi[v].set && s.hi[v].v.cmp(c) < 0 {
		return []reason{why, s.hi[v].why}
	}
	s.trail = append(s.trail, undo{v, false, s.lo[v]})
	s.lo[v] = bound{c, true, why}
	if s.val[v].cmp(c) < 0 {
		s.outside(v)
	}
	return nil
}

// setUpper asserts v <= c.
func (s *simplex) setUpper(v int32, c num, why reason) []reason {
	if s.hi[v].set && s.hi[v].v.cmp(c) <= 0 {
		return nil
	}
	if s.lo[v].set && s.lo[v].v.cmp(c) > 0 {
		return []reason{why, s.lo[v].why}
	}
	s.trail = append(s.trail, undo{v, true, s.hi[v]})
	s.hi[v] = bound{c, true, why}
	if s.val[v].cmp(c) > 0 {
		s.outside(v)
	}
	return nil
}

func (s *simplex) outside(v int32) {
	if s.pos[v] < 0 {
		s.moved = append(s.moved, v)
	} else if !s.inInfeas[v] {
		s.inInfeas[v] = true
		s.infeas = append(s.infeas, v)
	}
}

// side is -1 below the lower bound, 1 above the upper one, else 0.
func (s *simplex) side(v int32) int {
	if s.lo[v].set && s.val[v].cmp(s.lo[v].v) < 0 {
		return -1
	}
	if s.hi[v].set && s.val[v].cmp(s.hi[v].v) > 0 {
		return 1
	}
	return 0
}

// setBasic changes the value of a basic variable.
func (s *simplex) setBasic(v int32, x num) {
	s.val[v] = x
	if !s.inInfeas[v] && s.side(v) != 0 {
		s.inInfeas[v] = true
		s.infeas = append(s.infeas, v)
	}
}

// settle puts the moved nonbasic variables back within their bounds, all in
// one solve.
func (s *simplex) settle() {
	w := &s.w
	w.clear()
	for _, v := range s.moved {
		if s.pos[v] >= 0 {
			continue
		}
		var to num
		switch s.side(v) {
		case 0:
			continue
		case -1:
			to = s.lo[v].v
		case 1:
			to = s.hi[v].v
		}
		d := to.sub(s.val[v])
		s.val[v] = to
		for _, e := range s.cols[v] {
			w.add(e.i, e.c.mul(d))
		}
	}
	s.moved = s.moved[:0]
	if len(w.idx) == 0 {
		return
	}
	s.fac.ftran(w)
	for _, p := range w.idx {
		if !w.val[p].isZero() {
			v := s.basic[p]
			s.setBasic(v, s.val[v].sub(w.val[p]))
		}
	}
}

// rowOf fills s.alpha with the nonbasic part of the row of the basic variable
// at position p: x_p + Σ alpha_j x_j is constant. Variables that are fixed for
// good are left out: they can neither enter nor give a reason.
func (s *simplex) rowOf(p int32) {
	s.y.clear()
	s.y.add(p, one)
	s.fac.btran(&s.y)
	s.alpha.clear()
	for _, i := range s.y.idx {
		c := s.y.val[i]
		if c.isZero() {
			continue
		}
		for _, e := range s.rows[i] {
			if s.pos[e.i] < 0 && !s.fixed[e.i] {
				s.alpha.add(e.i, e.c.mul(c))
			}
		}
	}
}

type lpStatus uint8

const (
	lpOK lpStatus = iota
	lpConflict
	lpBudget
	lpUnbounded
)

// pickLeaving chooses the violated basic variable: the most violated of the
// first 200 in the list, or under Bland's rule the least index. It drops
// entries that are no longer violated. -1 when there is none.
func (s *simplex) pickLeaving(bland bool) int32 {
	best := int32(-1)
	var worst num
	k := 0
	seen := 0
	for i, v := range s.infeas {
		side := 0
		if s.pos[v] >= 0 {
			side = s.side(v)
		}
		if side == 0 {
			s.inInfeas[v] = false
			continue
		}
		s.infeas[k] = v
		k++
		seen++
		if bland {
			if best < 0 || v < best {
				best = v
			}
			continue
		}
		var d num
		if side < 0 {
			d = s.lo[v].v.sub(s.val[v])
		} else {
			d = s.val[v].sub(s.hi[v].v)
		}
		if best < 0 || d.cmp(worst) > 0 || d.eq(worst) && v < best {
			best, worst = v, d
		}
		if seen >= 200 {
			k += copy(s.infeas[k:], s.infeas[i+1:])
			break
		}
	}
	s.infeas = s.infeas[:k]
	return best
}

// repeatLimit is the number of repeated departures from the basis in one check
// after which Bland's rule takes over. A cycle must repeat departures, so this
// ends every cycle; an honest run over a sparse flow hardly repeats any.
const repeatLimit = 50

// With few violated variables in a large system check drives them home one by one,
// keeping all else within bounds: dense rows, such as claims over all counts, are
// then priced once for many pivots.
const (
	driveCount = 3
	driveRows  = 300
)

// check looks for values within all bounds. On lpConflict it returns the
// reasons of the bounds in an infeasible row (a Farkas combination whose
// multipliers are the row's coefficients).
func (s *simplex) check() (lpStatus, []reason) {
	s.settle()
	bland, repeats := false, 0
	var touched []int32
	defer func() {
		for _, v := range touched {
			s.left[v] = 0
		}
	}()
	for {
		b := s.pickLeaving(bland)
		if b < 0 {
			return lpOK, nil
		}
		if s.stats.Pivots >= s.maxPivots {
			return lpBudget, nil
		}
		side := s.side(b)
		if len(s.infeas) <= driveCount && len(s.rows) >= s.driveRows {
			target := s.lo[b].v
			if side > 0 {
				target = s.hi[b].v
			}
			if st := s.drive(b, side < 0, &target); st != lpOK {
				return st, nil
			}
			if s.side(b) != 0 {
				return lpConflict, s.rowConflict(b, side)
			}
			continue
		}
		s.rowOf(s.pos[b])
		enter := int32(-1)
		for _, j := range s.alpha.idx {
			a := s.alpha.val[j].sign()
			if a == 0 {
				continue
			}
			// x_b = ... - alpha_j x_j: to raise x_b, raise x_j where alpha_j < 0.
			up := (side < 0) == (a < 0)
			if s.atEnd(j, up) {
				continue
			}
			switch {
			case enter < 0:
				enter = j
			case bland:
				enter = min(enter, j)
			case len(s.cols[j]) < len(s.cols[enter]) || len(s.cols[j]) == len(s.cols[enter]) && j < enter:
				enter = j
			}
		}
		if enter < 0 {
			return lpConflict, s.rowConflict(b, side)
		}
		if s.left[b] == 0 {
			touched = append(touched, b)
		} else if repeats++; repeats > repeatLimit {
			bland = true
		}
		s.left[b]++
		to := s.hi[b].v
		if side < 0 {
			to = s.lo[b].v
		}
		theta := s.val[b].sub(to).div(s.alpha.val[enter])
		s.column(enter)
		s.shift(enter, theta)
		s.swap(s.pos[b], enter)
	}
}

func (s *simplex) rowConflict(b int32, side int) []reason {
	var why []reason
	if side < 0 {
		why = append(why, s.lo[b].why)
	} else {
		why = append(why, s.hi[b].why)
	}
	for _, j := range s.alpha.idx {
		a := s.alpha.val[j].sign()
		if a == 0 {
			continue
		}
		if (side < 0) == (a < 0) {
			why = append(why, s.hi[j].why)
		} else {
			why = append(why, s.lo[j].why)
		}
	}
	return why
}

// column fills s.w with B⁻¹ times the column of j.
func (s *simplex) column(j int32) {
	s.w.clear()
	for _, e := range s.cols[j] {
		s.w.add(e.i, e.c)
	}
	s.fac.ftran(&s.w)
}

// shift moves the nonbasic j by t; s.w holds its column.
func (s *simplex) shift(j int32, t num) {
	if t.isZero() {
		return
	}
	s.val[j] = s.val[j].add(t)
	for _, p := range s.w.idx {
		if c := s.w.val[p]; !c.isZero() {
			v := s.basic[p]
			s.setBasic(v, s.val[v].sub(c.mul(t)))
		}
	}
}

// swap lets j enter the basis at position p; s.w holds its column.
func (s *simplex) swap(p, j int32) {
	s.stats.Pivots++
	if e, ok := etaFor(&s.w, p); ok {
		s.fac.push(e)
	}
	out := s.basic[p]
	s.pos[out] = -1
	s.basic[p] = j
	s.pos[j] = p
	if s.side(out) != 0 {
		s.moved = append(s.moved, out)
	}
	if s.side(j) != 0 && !s.inInfeas[j] {
		s.inInfeas[j] = true
		s.infeas = append(s.infeas, j)
	}
	if s.fac.nnz > 2*s.fac.baseNNZ+len(s.rows)+200 {
		s.refactor()
	}
}

// priced is the number of entering candidates kept from one pricing of all
// columns. After a pivot a candidate's rate is read off its own column, so most
// pivots need no pricing (multiple pricing: Orchard-Hays, Advanced Linear-
// Programming Computing Techniques, 1968).
const priced = 40

// candidate is a nonbasic variable whose move helps the driven variable.
type candidate struct {
	j    int32
	rate num // absolute change of the driven variable per unit
}

// minimise moves to a vertex with the least value of o, from a feasible point
// (check returned lpOK). lpUnbounded means that a ray within all bounds lowers
// o for ever.
func (s *simplex) minimise(o int32) lpStatus { return s.drive(o, false, nil) }

// drive is the primal simplex with o as objective: it moves o upwards or
// downwards without letting any variable leave its bounds that is within them
// now. With a target, the bound that o violates, it stops as soon as o is within its
// bounds. lpOK: the target or the optimum is reached; if o is still outside its bounds then, s.alpha is the row of
// o, which is a conflict. lpUnbounded occurs only without a target.
func (s *simplex) drive(o int32, upwards bool, target *num) lpStatus {
	still := 0 // pivots in a row without progress
	var list []candidate
	for {
		if s.stats.Pivots >= s.maxPivots {
			return lpBudget
		}
		if target != nil && s.side(o) == 0 {
			return lpOK
		}
		var j int32
		var up bool
		switch {
		case s.pos[o] < 0:
			if s.atEnd(o, upwards) {
				return lpOK
			}
			j, up = o, upwards
			s.column(j)
		case len(list) > 0 && still <= repeatLimit:
			j = list[0].j
			list = list[1:]
			if s.pos[j] >= 0 {
				continue
			}
			s.column(j)
			rate := s.w.val[s.pos[o]] // o = ... - rate·x_j
			if rate.isZero() {
				continue
			}
			up = (rate.sign() < 0) == upwards
			if s.atEnd(j, up) {
				continue
			}
		default:
			list = s.price(o, upwards, still > repeatLimit, list[:0])
			if len(list) == 0 {
				return lpOK
			}
			if still <= repeatLimit {
				continue
			}
			j = list[0].j // Bland: the least index
			list = list[:0]
			s.column(j)
			up = (s.w.val[s.pos[o]].sign() < 0) == upwards
		}
		// Moving j by t·dir moves the basic variable at p by -t·dir·w_p.
		var step num
		block, found := int32(-1), false
		if up && s.hi[j].set {
			step, found = s.hi[j].v.sub(s.val[j]), true
		} else if !up && s.lo[j].set {
			step, found = s.val[j].sub(s.lo[j].v), true
		}
		for _, p := range s.w.idx {
			c := s.w.val[p]
			if c.isZero() {
				continue
			}
			v := s.basic[p]
			grows := (c.sign() < 0) == up
			var room num
			switch {
			case v == o && target != nil:
				// Not to the near bound but on to the next vertex, if the far bound
				// allows: on a flow that is an integral point.
				far := s.lo[o]
				if upwards {
					far = s.hi[o]
				}
				if !far.set {
					continue
				}
				room = far.v.sub(s.val[o]).abs()
			case grows:
				if !s.hi[v].set || s.val[v].cmp(s.hi[v].v) > 0 {
					continue
				}
				room = s.hi[v].v.sub(s.val[v])
			default:
				if !s.lo[v].set || s.val[v].cmp(s.lo[v].v) < 0 {
					continue
				}
				room = s.val[v].sub(s.lo[v].v)
			}
			room = room.div(c.abs())
			d := -1
			if found {
				d = room.cmp(step)
			}
			if d < 0 || d == 0 && block >= 0 && v < s.basic[block] {
				step, block, found = room, p, true
			}
		}
		if !found {
			if target == nil {
				return lpUnbounded
			}
			block = s.pos[o]
			step = target.sub(s.val[o]).div(s.w.val[block]).abs()
		}
		if step.isZero() {
			still++
		} else {
			still = 0
		}
		if !up {
			step = step.neg()
		}
		s.shift(j, step)
		if block >= 0 {
			s.swap(block, j)
		} else {
			s.stats.Pivots++
		}
	}
}

// atEnd reports whether v cannot move in the given direction.
func (s *simplex) atEnd(v int32, up bool) bool {
	if up {
		return s.hi[v].set && s.val[v].cmp(s.hi[v].v) >= 0
	}
	return s.lo[v].set && s.val[v].cmp(s.lo[v].v) <= 0
}

// price lists the variables with the best rates for moving the basic variable o
// upwards (or down), best first; under Bland's rule only the one of least index.
func (s *simplex) price(o int32, upwards, bland bool, list []candidate) []candidate {
	s.rowOf(s.pos[o])
	for _, k := range s.alpha.idx {
		a := s.alpha.val[k]
		if a.isZero() || s.atEnd(k, (a.sign() < 0) == upwards) {
			continue
		}
		if bland {
			if len(list) == 0 || k < list[0].j {
				list = append(list[:0], candidate{k, a.abs()})
			}
			continue
		}
		list = append(list, candidate{k, a.abs()})
	}
	sort.Slice(list, func(x, y int) bool {
		if c := list[x].rate.cmp(list[y].rate); c != 0 {
			return c > 0
		}
		return list[x].j < list[y].j
	})
	if keep := priced + len(s.alpha.idx)/8; len(list) > keep {
		list = list[:keep]
	}
	return list
}

// sanity checks the invariants of the type; cost: one pass over the matrix.
func (s *simplex) sanity() error {
	for i, row := range s.rows {
		var sum num
		for _, e := range row {
			sum = sum.add(e.c.mul(s.val[e.i]))
		}
		if !sum.isZero() {
			return fmt.Errorf("simplex: row %d is off by %v", i, sum)
		}
	}
	for p, v := range s.basic {
		if s.pos[v] != int32(p) {
			return fmt.Errorf("simplex: variable %d at position %d thinks it is at %d", v, p, s.pos[v])
		}
		if s.side(v) != 0 && !s.inInfeas[v] {
			return fmt.Errorf("simplex: violated basic variable %d is not listed", v)
		}
	}
	moved := map[int32]bool{}
	for _, v := range s.moved {
		moved[v] = true
	}
	for v := range s.cols {
		if s.pos[v] < 0 && s.side(int32(v)) != 0 && !moved[int32(v)] {
			return fmt.Errorf("simplex: nonbasic variable %d is outside its bounds", v)
		}
	}
	return nil
}

// dropRows removes the rows of the given unbounded slacks. Their variables stay,
// free and in no row, so that numbers do not change.
func (s *simplex) dropRows(gone map[int32]bool) {
	s.settle()
	// A removed slack must be basic: then the other basic variables are a basis of
	// the other rows.
	for v := range s.cols {
		if j := int32(v); gone[j] && s.pos[j] < 0 {
			s.column(j)
			at := int32(-1)
			for _, p := range s.w.idx {
				if !s.w.val[p].isZero() && !gone[s.basic[p]] && (at < 0 || p < at) {
					at = p
				}
			}
			if at < 0 {
				panic("lia: dropRows: a nonbasic slack depends on removed rows only")
			}
			s.swap(at, j)
		}
	}
	renumber := make([]int32, len(s.rows))
	var rows [][]ent
	for i, row := range s.rows {
		if slack := row[len(row)-1].i; gone[slack] {
			renumber[i] = -1
			s.cols[slack] = nil
			s.pos[slack] = -1
			s.val[slack] = num{}
		} else {
			renumber[i] = int32(len(rows))
			rows = append(rows, row)
		}
	}
	var basic []int32
	for _, v := range s.basic {
		if !gone[v] {
			basic = append(basic, v)
		}
	}
	for v, col := range s.cols {
		k := 0
		for _, e := range col {
			if r := renumber[e.i]; r >= 0 {
				col[k] = ent{r, e.c}
				k++
			}
		}
		s.cols[v] = col[:k]
	}
	s.rows, s.basic = rows, basic
	s.w.clear()
	s.y.clear()
	s.fac.byPivot = s.fac.byPivot[:len(rows)]
	s.fac.byRow = s.fac.byRow[:len(rows)]
	s.refactor()
}
