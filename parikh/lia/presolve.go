package lia

// This file simplifies the facts of arithmetic before the first search and hands
// facts to the simplex. Everything here preserves the set of integer solutions
// exactly; a substituted variable keeps a form from which its value is computed.

// splitHard walks down the conjunctions of n and sorts its parts into facts of
// arithmetic and the rest.
func (s *Solver) splitHard(n *node, hard []hardRow, soft []*node) ([]hardRow, []*node) {
	switch n.op {
	case opTrue:
	case opFalse:
		s.dead = true
	case opAnd:
		for _, k := range n.kids {
			hard, soft = s.splitHard(k, hard, soft)
		}
	case opLE, opEQ:
		ts, k := s.flat(n.lin)
		hard = append(hard, hardRow{terms: ts, k: k, eq: n.op == opEQ})
	case opNot:
		// ¬(l <= 0) is -l + 1 <= 0.
		if k := n.kids[0]; k.op == opLE {
			ts, c := s.flat(k.lin)
			neg := make([]term, len(ts))
			for i, t := range ts {
				neg[i] = term{t.v, t.c.neg()}
			}
			return append(hard, hardRow{terms: neg, k: c.neg().add(one)}), soft
		}
		soft = append(soft, n)
	default:
		soft = append(soft, n)
	}
	return hard, soft
}

// handOver brings new assertions to the simplex and to gini. The simplex must be
// free of assumed bounds.
func (s *Solver) handOver() {
	if s.done == len(s.asserts) && s.prepared {
		return
	}
	var hard []hardRow
	var soft []*node
	for ; s.done < len(s.asserts); s.done++ {
		hard, soft = s.splitHard(s.asserts[s.done].f.node(), hard, soft)
	}
	first := !s.prepared
	if first {
		s.prepared = true
		uses := make(map[Var]int)
		seen := map[*node]bool{}
		for _, n := range soft {
			s.countUses(n, seen, uses)
		}
		hard = append(hard, s.side...)
		s.side = nil
		if !s.opt.NoPresolve {
			p := &presolver{s: s, rows: hard, uses: uses}
			p.run()
			hard = p.rows
		}
	}
	for i := range hard {
		if !hard[i].dead {
			s.addFact(hard[i])
		}
	}
	for _, n := range soft {
		e := s.encode(n)
		s.addClause(e.lit)
		s.roots = append(s.roots, n)
	}
	s.flushSide()
	if first && !s.opt.NoPresolve && !s.dead {
		s.sx.crash()
	}
}

// flushSide hands over the definitions of remainders that encode came across.
func (s *Solver) flushSide() {
	for len(s.side) > 0 {
		side := s.side
		s.side = nil
		for _, r := range side {
			s.addFact(r)
		}
	}
	s.boundQuotients()
	s.sx.commit()
}

// countUses counts in how many atoms of n each variable occurs, and thereby
// makes the quotients of its remainders.
func (s *Solver) countUses(n *node, seen map[*node]bool, uses map[Var]int) {
	if seen[n] {
		return
	}
	seen[n] = true
	if n.op == opLE || n.op == opEQ {
		ts, _ := s.flat(n.lin)
		for _, t := range ts {
			uses[t.v]++
		}
	}
	for _, k := range n.kids {
		s.countUses(k, seen, uses)
	}
}

// commit makes the bounds set so far permanent.
func (s *simplex) commit() {
	for _, u := range s.trail {
		lo, hi := s.lo[u.v], s.hi[u.v]
		s.fixed[u.v] = lo.set && hi.set && lo.v.eq(hi.v)
	}
	s.trail = s.trail[:0]
}

// addFact sets the permanent bound that r states.
func (s *Solver) addFact(r hardRow) {
	ts, k := s.resolve(r.terms, r.k)
	if len(ts) == 0 {
		if k.sign() > 0 || r.eq && k.sign() != 0 {
			s.dead = true
		}
		return
	}
	f, g, neg := canon(ts)
	v := s.form(f)
	c := k.div(g)
	if !neg {
		c = c.neg()
	}
	clash := func(why []reason) {
		if why != nil {
			s.dead = true
		}
	}
	if r.eq {
		if !c.isInt() {
			s.dead = true
			return
		}
		clash(s.sx.setLower(v, c, 0))
		clash(s.sx.setUpper(v, c, 0))
	} else if neg {
		clash(s.sx.setLower(v, c.ceil(), 0))
	} else {
		clash(s.sx.setUpper(v, c.floor(), 0))
	}
	s.sx.commit()
}

// presolver works on rows Σ terms + k <= 0 or == 0 and on the solver's bounds.
type presolver struct {
	s       *Solver
	rows    []hardRow
	uses    map[Var]int // atoms outside the rows that mention the variable
	occ     [][]int32   // by Var: rows that mention it, possibly stale
	order   []Var       // substituted variables, in order
	queue   []int32
	inQueue []bool
	steps   int
}

func (p *presolver) run() {
	s := p.s
	p.occ = make([][]int32, len(s.names))
	p.inQueue = make([]bool, len(p.rows))
	for i := range p.rows {
		for _, t := range p.rows[i].terms {
			p.occ[t.v] = append(p.occ[t.v], int32(i))
		}
		p.enqueue(int32(i))
	}
	for x := range s.names {
		if s.lo[x] != nil && s.hi[x] != nil && s.lo[x].eq(*s.hi[x]) {
			p.fix(Var(x))
		}
	}
	limit := 40*len(p.rows) + 1000
	for len(p.queue) > 0 && !s.dead {
		if p.steps++; p.steps > limit {
			break // what is done is exact; the rest is left to the search
		}
		i := p.queue[0]
		p.queue = p.queue[1:]
		p.inQueue[i] = false
		if !p.rows[i].dead {
			p.row(i)
		}
	}
	// Later substitutions into earlier ones.
	for i := len(p.order) - 1; i >= 0; i-- {
		x := p.order[i]
		s.subst[x], s.substK[x] = s.resolve(s.subst[x], s.substK[x])
	}
	s.stats.Substituted += int64(len(p.order))
}

func (p *presolver) enqueue(i int32) {
	if !p.inQueue[i] {
		p.inQueue[i] = true
		p.queue = append(p.queue, i)
	}
}

// least and greatest value of c·x; ok is false when it is infinite.
func (p *presolver) least(t term) (num, bool) {
	b := p.s.lo[t.v]
	if t.c.sign() < 0 {
		b = p.s.hi[t.v]
	}
	if b == nil {
		return num{}, false
	}
	return b.mul(t.c), true
}

func (p *presolver) greatest(t term) (num, bool) {
	v, ok := p.least(term{t.v, t.c.neg()})
	return v.neg(), ok
}

// row simplifies row i once.
func (p *presolver) row(i int32) {
	s := p.s
	r := &p.rows[i]
	if len(r.terms) == 0 {
		if r.k.sign() > 0 || r.eq && !r.k.isZero() {
			s.dead = true
		}
		r.dead = true
		return
	}
	// Divide by the greatest common divisor.
	_, g, _ := canon(r.terms)
	if !g.eq(one) {
		d := g.inv()
		ts := make([]term, len(r.terms))
		for j, t := range r.terms {
			ts[j] = term{t.v, t.c.mul(d)}
		}
		r.terms, r.k = ts, r.k.mul(d)
		if !r.k.isInt() {
			if r.eq {
				s.dead = true
				return
			}
			r.k = r.k.ceil() // Σ <= -k/g, rounded down
		}
	}
	if len(r.terms) == 1 {
		t := r.terms[0] // coefficient 1 or -1 by now
		at := r.k.neg()
		if t.c.sign() < 0 {
			at = r.k
		}
		r.dead = true
		if r.eq || t.c.sign() > 0 {
			p.tighten(t.v, nil, &at)
		}
		if r.eq || t.c.sign() < 0 {
			p.tighten(t.v, &at, nil)
		}
		return
	}
	lo, hi := r.k, r.k
	loInf, hiInf := 0, 0
	for _, t := range r.terms {
		if v, ok := p.least(t); ok {
			lo = lo.add(v)
		} else {
			loInf++
		}
		if v, ok := p.greatest(t); ok {
			hi = hi.add(v)
		} else {
			hiInf++
		}
	}
	if loInf == 0 && lo.sign() > 0 || r.eq && hiInf == 0 && hi.sign() < 0 {
		s.dead = true
		return
	}
	if !r.eq && hiInf == 0 && hi.sign() <= 0 {
		r.dead = true
		return
	}
	if loInf == 0 && lo.isZero() || r.eq && hiInf == 0 && hi.isZero() {
		// Every variable sits at the end that makes the sum least (or greatest).
		atLeast := loInf == 0 && lo.isZero()
		ts := r.terms
		r.dead = true
		for _, t := range ts {
			if (t.c.sign() > 0) == atLeast {
				v := *s.lo[t.v]
				p.tighten(t.v, nil, &v)
			} else {
				v := *s.hi[t.v]
				p.tighten(t.v, &v, nil)
			}
		}
		return
	}
	if r.eq {
		p.equation(i, lo, hi, loInf, hiInf)
	}
}

// tighten narrows the bounds of x.
func (p *presolver) tighten(x Var, lo, hi *num) {
	s := p.s
	changed := false
	if lo != nil && (s.lo[x] == nil || lo.cmp(*s.lo[x]) > 0) {
		v := *lo
		s.lo[x], changed = &v, true
	}
	if hi != nil && (s.hi[x] == nil || hi.cmp(*s.hi[x]) < 0) {
		v := *hi
		s.hi[x], changed = &v, true
	}
	if !changed {
		return
	}
	if s.lo[x] != nil && s.hi[x] != nil {
		switch c := s.lo[x].cmp(*s.hi[x]); {
		case c > 0:
			s.dead = true
			return
		case c == 0:
			p.fix(x)
			return
		}
	}
	for _, i := range p.occ[x] {
		if !p.rows[i].dead {
			p.enqueue(i)
		}
	}
}

// fix substitutes x by its only value.
func (p *presolver) fix(x Var) {
	if !p.s.substOn[x] {
		p.substitute(x, nil, *p.s.lo[x])
	}
}

// substitute replaces x by Σ ts + k everywhere.
func (p *presolver) substitute(x Var, ts []term, k num) {
	s := p.s
	s.substOn[x], s.subst[x], s.substK[x] = true, ts, k
	p.order = append(p.order, x)
	for _, t := range ts {
		p.uses[t.v] += p.uses[x]
	}
	for _, i := range p.occ[x] {
		r := &p.rows[i]
		if r.dead {
			continue
		}
		had := false
		for _, t := range r.terms {
			if t.v == x {
				had = true
				break
			}
		}
		if !had {
			continue
		}
		all := make([]term, 0, len(r.terms)+len(ts))
		for _, t := range r.terms {
			if t.v != x {
				all = append(all, t)
				continue
			}
			r.k = r.k.add(t.c.mul(k))
			for _, u := range ts {
				all = append(all, term{u.v, u.c.mul(t.c)})
			}
		}
		r.terms = mergeTerms(all)
		for _, u := range ts {
			p.occ[u.v] = append(p.occ[u.v], i)
		}
		p.enqueue(i)
	}
	p.occ[x] = nil
}

// liveOcc counts the rows that mention x and drops stale and double entries.
func (p *presolver) liveOcc(x Var) int {
	out := p.occ[x][:0]
	for _, i := range p.occ[x] {
		if p.rows[i].dead || len(out) > 0 && out[len(out)-1] == i {
			continue
		}
		for _, t := range p.rows[i].terms {
			if t.v == x {
				out = append(out, i)
				break
			}
		}
	}
	p.occ[x] = out
	return len(out)
}

// equation tries to use the equation i to remove a variable: one with
// coefficient 1 or -1 whose bounds follow from the bounds of the others, if that
// makes the system no larger; in an equation of two variables the bounds are
// moved to the other one. An equation without such coefficients gets one by
// Euclid's algorithm on its coefficients (a unimodular change of variables).
func (p *presolver) equation(i int32, lo, hi num, loInf, hiInf int) {
	s := p.s
	for round := 0; ; round++ {
		r := &p.rows[i]
		n := len(r.terms)
		best, bestCost := -1, 0
		unit := false
		for j, t := range r.terms {
			if !t.c.isUnit() {
				continue
			}
			unit = true
			if n > 40 {
				continue
			}
			if n > 2 && !p.implied(t, lo, hi, loInf, hiInf) {
				continue
			}
			o := p.liveOcc(t.v) - 1 + p.uses[t.v]
			cost := (n-1)*o - n - o
			if cost > 10 && round == 0 {
				continue
			}
			if best < 0 || cost < bestCost {
				best, bestCost = j, cost
			}
		}
		if best >= 0 {
			t := r.terms[best]
			ts := make([]term, 0, n-1)
			for j, u := range r.terms {
				if j != best {
					ts = append(ts, term{u.v, u.c.mul(t.c).neg()})
				}
			}
			k := r.k.mul(t.c).neg()
			if n == 2 {
				p.moveBounds(t.v, ts[0], k)
				if s.dead || s.substOn[t.v] || s.substOn[ts[0].v] {
					p.enqueue(i)
					return
				}
			}
			r.dead = true
			p.substitute(t.v, ts, k)
			return
		}
		if unit || n > 30 {
			return
		}
		// c·x + Σ a_j y_j + k = 0 with c the least coefficient: put
		// x = t - Σ floor(a_j/c)·y_j.
		m := 0
		for j, t := range r.terms {
			if t.c.abs().cmp(r.terms[m].c.abs()) < 0 {
				m = j
			}
		}
		x := r.terms[m]
		fresh := s.newVar("", nil, nil)
		p.occ = append(p.occ, nil)
		ts := []term{{fresh, one}}
		for j, u := range r.terms {
			if j != m {
				if q := u.c.div(x.c).floor(); !q.isZero() {
					ts = append(ts, term{u.v, q.neg()})
				}
			}
		}
		ts = mergeTerms(ts)
		if s.lo[x.v] != nil {
			neg := make([]term, len(ts))
			for j, t := range ts {
				neg[j] = term{t.v, t.c.neg()}
			}
			p.addRow(hardRow{terms: neg, k: *s.lo[x.v]})
		}
		if s.hi[x.v] != nil {
			p.addRow(hardRow{terms: ts, k: s.hi[x.v].neg()})
		}
		p.substitute(x.v, ts, num{})
		// The new row has the free variable fresh, so only that has implied bounds.
		lo, hi, loInf, hiInf = num{}, num{}, 2, 2
	}
}

func (p *presolver) addRow(r hardRow) {
	i := int32(len(p.rows))
	p.rows = append(p.rows, r)
	p.inQueue = append(p.inQueue, false)
	for _, t := range r.terms {
		p.occ[t.v] = append(p.occ[t.v], i)
	}
	p.enqueue(i)
}

// implied reports whether the bounds of the variable of t (coefficient 1 or -1)
// follow from the equation and the bounds of the others; lo, hi and the counts
// of infinite ends describe the whole row.
func (p *presolver) implied(t term, lo, hi num, loInf, hiInf int) bool {
	s := p.s
	// t.c·x = -(rest), rest within [lo - least(t), hi - greatest(t)].
	l, lok := p.least(t)
	h, hok := p.greatest(t)
	restLo, restLoOK := lo, loInf == 0
	if lok {
		restLo = lo.sub(l)
	} else {
		restLoOK = loInf == 1
	}
	restHi, restHiOK := hi, hiInf == 0
	if hok {
		restHi = hi.sub(h)
	} else {
		restHiOK = hiInf == 1
	}
	// x in [-restHi, -restLo] for coefficient 1, [restLo, restHi] for -1.
	xlo, xloOK, xhi, xhiOK := restLo, restLoOK, restHi, restHiOK
	if t.c.sign() > 0 {
		xlo, xloOK, xhi, xhiOK = restHi.neg(), restHiOK, restLo.neg(), restLoOK
	}
	if s.lo[t.v] != nil && (!xloOK || xlo.cmp(*s.lo[t.v]) < 0) {
		return false
	}
	return s.hi[t.v] == nil || xhiOK && xhi.cmp(*s.hi[t.v]) <= 0
}

// moveBounds gives y the bounds that x = y.c·y + k has.
func (p *presolver) moveBounds(x Var, y term, k num) {
	s := p.s
	lo, hi := s.lo[x], s.hi[x]
	end := func(b *num) *num {
		if b == nil {
			return nil
		}
		v := b.sub(k).div(y.c)
		return &v
	}
	l, h := end(lo), end(hi)
	if y.c.sign() < 0 {
		l, h = h, l
	}
	if l != nil {
		v := l.ceil()
		l = &v
	}
	if h != nil {
		v := h.floor()
		h = &v
	}
	p.tighten(y.v, l, h)
}
