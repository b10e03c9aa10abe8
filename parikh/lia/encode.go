package lia

import (
	"sort"
	"strconv"

	"github.com/go-air/gini/z"
)

// This file turns formulas into clauses and atoms.

// encoded is what a formula node became. For opEQ, a and b are the literals of
// "form <= c" and "form >= c"; the node is their conjunction.
type encoded struct {
	lit  z.Lit
	a, b z.Lit
}

// hardRow is a fact of arithmetic that holds always: Σ terms + k <= 0 or == 0.
// Its terms hold no remainders.
type hardRow struct {
	terms []term
	k     num
	eq    bool
	dead  bool // used up by presolve
}

// flat replaces each remainder t mod m in l by t - m·q for a free q, shared by
// all remainders of the same form, and notes 0 <= t - m·q <= m-1 as a fact. The
// definition has exactly one q for each t, so it may stand at the top whatever
// the polarity of l.
func (s *Solver) flat(l Lin) ([]term, num) {
	if len(l.mods) == 0 {
		return l.terms, l.k
	}
	all := append([]term(nil), l.terms...)
	k := l.k
	for _, m := range l.mods {
		t, tk := s.flat(*m.of)
		key := formKey(t) + "+" + tk.String() + "%" + m.m.String()
		q, ok := s.modVars[key]
		rem := func() []term {
			r := append([]term(nil), t...)
			return mergeTerms(append(r, term{q, m.m.neg()}))
		}
		if !ok {
			q = s.newVar("", nil, nil)
			s.modVars[key] = q
			s.quotients = append(s.quotients, quotient{q, t, tk, m.m, -1})
			s.remainders = append(s.remainders, quotient{q, t, tk, m.m, -1})
			up := rem()
			down := make([]term, len(up))
			for i, x := range up {
				down[i] = term{x.v, x.c.neg()}
			}
			s.side = append(s.side,
				hardRow{terms: down, k: tk.neg()},
				hardRow{terms: up, k: tk.sub(m.m).add(one)})
		}
		for _, x := range rem() {
			all = append(all, term{x.v, x.c.mul(m.c)})
		}
		k = k.add(tk.mul(m.c))
	}
	return mergeTerms(all), k
}

// quotient is q = floor((Σ of + k) / m).
type quotient struct {
	q   Var
	of  []term
	k   num
	m   num
	row int32 // simplex variable of the form of - m·q, -1 until asked for
}

// boundQuotients gives those quotients bounds whose dividend is bounded, which
// spares the search an infinite direction. Others are kept for later facts.
func (s *Solver) boundQuotients() {
	keep := s.quotients[:0]
	for _, d := range s.quotients {
		if s.substOn[d.q] {
			continue
		}
		ts, k := s.resolve(d.of, d.k)
		lo, hi, loOK, hiOK := k, k, true, true
		for _, t := range ts {
			v := s.svar(t.v)
			l, h := s.baseLo(v), s.baseHi(v)
			if t.c.sign() < 0 {
				l, h = h, l
			}
			if loOK = loOK && l != nil; loOK {
				lo = lo.add(l.mul(t.c))
			}
			if hiOK = hiOK && h != nil; hiOK {
				hi = hi.add(h.mul(t.c))
			}
		}
		q := s.svar(d.q)
		if loOK && s.sx.setLower(q, lo.div(d.m).floor(), 0) != nil || hiOK && s.sx.setUpper(q, hi.div(d.m).floor(), 0) != nil {
			s.dead = true
		}
		if !loOK || !hiOK {
			keep = append(keep, d)
		}
	}
	s.quotients = keep
}

func formKey(ts []term) string {
	b := make([]byte, 0, 12*len(ts))
	for _, t := range ts {
		b = strconv.AppendInt(b, int64(t.v), 36)
		b = append(b, ':')
		if t.c.b == nil {
			b = strconv.AppendInt(b, t.c.n, 36)
		} else {
			b = append(b, t.c.b.Num().String()...)
			b = append(b, 'd')
		}
		b = append(b, ' ')
	}
	return string(b)
}

// resolve applies the substitutions of presolve.
func (s *Solver) resolve(ts []term, k num) ([]term, num) {
	hit := false
	for _, t := range ts {
		if s.substOn[t.v] {
			hit = true
			break
		}
	}
	if !hit {
		return ts, k
	}
	all := make([]term, 0, 2*len(ts))
	for _, t := range ts {
		if !s.substOn[t.v] {
			all = append(all, t)
			continue
		}
		k = k.add(t.c.mul(s.substK[t.v]))
		for _, u := range s.subst[t.v] {
			all = append(all, term{u.v, u.c.mul(t.c)})
		}
	}
	return mergeTerms(all), k
}

// canon divides by the greatest common divisor and makes the first coefficient
// positive: Σ ts = sign·g·Σ out.
func canon(ts []term) (out []term, g num, neg bool) {
	for _, t := range ts {
		g = g.gcd(t.c)
		if g.isUnit() {
			break
		}
	}
	neg = ts[0].c.sign() < 0
	if g.eq(one) && !neg {
		return ts, g, neg
	}
	d := g.inv()
	if neg {
		d = d.neg()
	}
	out = make([]term, len(ts))
	for i, t := range ts {
		out[i] = term{t.v, t.c.mul(d)}
	}
	return out, g, neg
}

// svar is the simplex variable of x, made at first use with x's bounds.
func (s *Solver) svar(x Var) int32 {
	if v := s.svarOf[x]; v >= 0 {
		return v
	}
	v := s.sx.addVar()
	s.svarOf[x] = v
	s.structural = append(s.structural, v)
	for len(s.varAt) <= int(v) {
		s.varAt = append(s.varAt, 0)
	}
	s.varAt[v] = x
	if s.lo[x] != nil {
		s.sx.setLower(v, *s.lo[x], 0)
	}
	if s.hi[x] != nil {
		s.sx.setUpper(v, *s.hi[x], 0)
	}
	return v
}

// form is the simplex variable equal to a canonical Σ ts.
func (s *Solver) form(ts []term) int32 {
	if len(ts) == 1 {
		return s.svar(ts[0].v)
	}
	key := formKey(ts)
	if v, ok := s.forms[key]; ok {
		return v
	}
	es := make([]ent, len(ts))
	for i, t := range ts {
		es[i] = ent{s.svar(t.v), t.c}
	}
	v := s.sx.addRow(es)
	s.stats.Rows++
	s.forms[key] = v
	return v
}

// leLit is the literal of Σ ts + k <= 0, after presolve, tightened by the
// greatest common divisor of the coefficients.
func (s *Solver) leLit(ts []term, k num) z.Lit {
	ts, k = s.resolve(ts, k)
	if len(ts) == 0 {
		if k.sign() <= 0 {
			return s.truth
		}
		return s.truth.Not()
	}
	f, g, neg := canon(ts)
	v := s.form(f)
	if neg { // -g·f + k <= 0: f >= k/g
		return s.atomLit(v, k.div(g).ceil().sub(one)).Not()
	}
	return s.atomLit(v, k.neg().div(g).floor())
}

// atomLit is the literal of v <= c. Atoms of one variable are linked in order,
// so that the Boolean search knows that v <= 3 gives v <= 5.
func (s *Solver) atomLit(v int32, c num) z.Lit {
	if lo := s.baseLo(v); lo != nil && c.cmp(*lo) < 0 {
		return s.truth.Not()
	}
	if hi := s.baseHi(v); hi != nil && c.cmp(*hi) >= 0 {
		return s.truth
	}
	l := s.byVar[v]
	at := sort.Search(len(l), func(i int) bool { return s.atoms[l[i]].c.cmp(c) >= 0 })
	if at < len(l) && s.atoms[l[at]].c.eq(c) {
		return s.atoms[l[at]].lit
	}
	id := int32(len(s.atoms))
	lit := s.sat.Lit()
	s.atoms = append(s.atoms, atom{v, c, lit})
	s.stats.Atoms++
	for int(lit.Var()) >= len(s.atomOf) {
		s.atomOf = append(s.atomOf, 0)
	}
	s.atomOf[lit.Var()] = id + 1
	if at > 0 {
		s.addClause(s.atoms[l[at-1]].lit.Not(), lit)
	}
	if at < len(l) {
		s.addClause(lit.Not(), s.atoms[l[at]].lit)
	}
	l = append(l, 0)
	copy(l[at+1:], l[at:])
	l[at] = id
	s.byVar[v] = l
	return lit
}

// baseLo is the lower bound of v that always holds, nil if there is none or a
// literal's bound hides it.
func (s *Solver) baseLo(v int32) *num {
	if b := s.sx.lo[v]; b.set && b.why == 0 {
		return &b.v
	}
	return nil
}

func (s *Solver) baseHi(v int32) *num {
	if b := s.sx.hi[v]; b.set && b.why == 0 {
		return &b.v
	}
	return nil
}

// encode returns the literal of a node; both directions of each definition are
// written, so the literal's value is the node's value in every assignment.
func (s *Solver) encode(n *node) encoded {
	if e, ok := s.enc[n]; ok {
		return e
	}
	var e encoded
	switch n.op {
	case opTrue:
		e.lit = s.truth
	case opFalse:
		e.lit = s.truth.Not()
	case opBool:
		if s.boolLit[n.b] == z.LitNull {
			s.boolLit[n.b] = s.sat.Lit()
		}
		e.lit = s.boolLit[n.b]
	case opLE:
		e.lit = s.leLit(s.flat(n.lin))
	case opEQ:
		ts, k := s.resolve(s.flat(n.lin))
		e.a, e.b = s.truth, s.truth
		if len(ts) == 0 {
			if !k.isZero() {
				e.a = s.truth.Not()
			}
		} else if _, g, _ := canon(ts); !k.div(g).isInt() {
			e.a = s.truth.Not()
		} else {
			e.a = s.leLit(ts, k)
			down := make([]term, len(ts))
			for i, t := range ts {
				down[i] = term{t.v, t.c.neg()}
			}
			e.b = s.leLit(down, k.neg())
		}
		e.lit = s.define(opAnd, []z.Lit{e.a, e.b})
	case opNot:
		e.lit = s.encode(n.kids[0]).lit.Not()
	case opAnd, opOr, opIff:
		ls := make([]z.Lit, len(n.kids))
		for i, k := range n.kids {
			ls[i] = s.encode(k).lit
		}
		e.lit = s.define(n.op, ls)
	default:
		s.fail("encode: unknown formula kind %d", n.op)
	}
	s.enc[n] = e
	return e
}

// define returns a literal equivalent to the combination of ls.
func (s *Solver) define(o op, ls []z.Lit) z.Lit {
	if o == opIff {
		a, b := ls[0], ls[1]
		switch {
		case a == s.truth:
			return b
		case b == s.truth:
			return a
		case a == s.truth.Not():
			return b.Not()
		case b == s.truth.Not():
			return a.Not()
		}
		x := s.sat.Lit()
		s.addClause(x.Not(), a.Not(), b)
		s.addClause(x.Not(), a, b.Not())
		s.addClause(x, a, b)
		s.addClause(x, a.Not(), b.Not())
		return x
	}
	unit, zero := s.truth, s.truth.Not()
	if o == opOr {
		unit, zero = zero, unit
	}
	kept := make([]z.Lit, 0, len(ls))
	for _, l := range ls {
		if l == zero {
			return zero
		}
		if l != unit {
			kept = append(kept, l)
		}
	}
	switch len(kept) {
	case 0:
		return unit
	case 1:
		return kept[0]
	}
	x := s.sat.Lit()
	if o == opAnd {
		long := make([]z.Lit, 0, len(kept)+1)
		for _, l := range kept {
			s.addClause(x.Not(), l)
			long = append(long, l.Not())
		}
		s.addClause(append(long, x)...)
		return x
	}
	for _, l := range kept {
		s.addClause(l.Not(), x)
	}
	s.addClause(append(kept, x.Not())...)
	return x
}

// justify collects into j.lits the theory literals that make node n have the
// value want under the Boolean assignment: of a true disjunction one disjunct is
// enough, so atoms that do not matter never reach the simplex.
type justifier struct {
	s    *Solver
	seen map[justKey]bool
	have map[z.Lit]bool
	lits []z.Lit
}

type justKey struct {
	n    *node
	want bool
}

func (s *Solver) newJustifier() *justifier {
	return &justifier{s: s, seen: map[justKey]bool{}, have: map[z.Lit]bool{}}
}

func (j *justifier) add(l z.Lit) {
	s := j.s
	if int(l.Var()) >= len(s.atomOf) || s.atomOf[l.Var()] == 0 || j.have[l] {
		return
	}
	j.have[l] = true
	j.lits = append(j.lits, l)
}

func (j *justifier) value(n *node) bool { return j.s.value(j.s.enc[n].lit) }

func (j *justifier) walk(n *node, want bool) {
	key := justKey{n, want}
	if j.seen[key] {
		return
	}
	j.seen[key] = true
	switch n.op {
	case opTrue, opFalse, opBool:
	case opLE:
		l := j.s.enc[n].lit
		if !want {
			l = l.Not()
		}
		j.add(l)
	case opEQ:
		e := j.s.enc[n]
		switch {
		case want:
			j.add(e.a)
			j.add(e.b)
		case !j.s.value(e.a):
			j.add(e.a.Not())
		default:
			j.add(e.b.Not())
		}
	case opNot:
		j.walk(n.kids[0], !want)
	case opIff:
		for _, k := range n.kids {
			j.walk(k, j.value(k))
		}
	case opAnd, opOr:
		if want == (n.op == opAnd) {
			for _, k := range n.kids {
				j.walk(k, want)
			}
			return
		}
		var pick *node
		for _, k := range n.kids {
			if j.value(k) != want {
				continue
			}
			if j.free(k, want) {
				return
			}
			if pick == nil {
				pick = k
			}
		}
		if pick == nil {
			j.s.fail("justify: no child of the formula has the value of its parent")
		}
		j.walk(pick, want)
	}
}

// free reports whether giving n its value needs no new theory literal.
func (j *justifier) free(n *node, want bool) bool {
	if j.seen[justKey{n, want}] {
		return true
	}
	switch n.op {
	case opTrue, opFalse, opBool:
		return true
	case opNot:
		return j.free(n.kids[0], !want)
	case opLE:
		l := j.s.enc[n].lit
		if !want {
			l = l.Not()
		}
		return j.have[l] || int(l.Var()) >= len(j.s.atomOf) || j.s.atomOf[l.Var()] == 0
	}
	return false
}
