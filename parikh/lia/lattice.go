package lia

// equation is Σ terms + k = 0 over simplex variables, with the reasons for it.
type equation struct {
	terms []ent // ascending in i
	k     num
	src   []int32 // ascending indices of the equations it was made from
}

// latticeTest looks for a system of equations without an integer solution,
// whatever the bounds: it solves them one by one, substituting a variable with
// coefficient 1 or -1, which Euclid's algorithm provides where there is none (the
// column operations of a Hermite normal form, done lazily and sparsely). It
// returns the indices of equations that already have no solution, or nil. work
// bounds the term operations; when it runs out the answer is nil, which claims
// nothing.
func latticeTest(eqs []equation, weight func(int32) int, work int) []int32 {
	type sub struct {
		terms []ent
		k     num
		src   []int32
	}
	subs := map[int32]sub{}
	fresh := int32(-2) // new variables count downwards
	for n := range eqs {
		cur := eqs[n]
		cur.src = []int32{int32(n)}
		for {
			// Substitute until no substituted variable is left.
			for {
				hit := false
				var out []ent
				for _, t := range cur.terms {
					if u, ok := subs[t.i]; ok {
						if !hit {
							hit = true
							out = append(out, cur.terms[:0:0]...)
						}
						for _, x := range u.terms {
							out = append(out, ent{x.i, x.c.mul(t.c)})
						}
						cur.k = cur.k.add(u.k.mul(t.c))
						cur.src = union(cur.src, u.src)
						work -= len(u.terms) + len(u.src)
					} else {
						out = append(out, t)
					}
				}
				work -= len(cur.terms) + 1
				if work < 0 {
					return nil
				}
				if !hit {
					break
				}
				cur.terms = mergeEnts(out)
			}
			if len(cur.terms) == 0 {
				if !cur.k.isZero() {
					return cur.src
				}
				break
			}
			var g num
			for _, t := range cur.terms {
				g = g.gcd(t.c)
			}
			if !cur.k.div(g).isInt() {
				return cur.src
			}
			if !g.eq(one) {
				d := g.inv()
				ts := make([]ent, len(cur.terms))
				for i, t := range cur.terms {
					ts[i] = ent{t.i, t.c.mul(d)}
				}
				cur.terms, cur.k = ts, cur.k.mul(d)
			}
			best := -1
			for i, t := range cur.terms {
				if t.c.isUnit() && (best < 0 || weight(t.i) < weight(cur.terms[best].i)) {
					best = i
				}
			}
			if best >= 0 {
				x := cur.terms[best]
				u := sub{k: cur.k.mul(x.c).neg(), src: cur.src}
				for i, t := range cur.terms {
					if i != best {
						u.terms = append(u.terms, ent{t.i, t.c.mul(x.c).neg()})
					}
				}
				subs[x.i] = u
				break
			}
			m := 0
			for i, t := range cur.terms {
				if t.c.abs().cmp(cur.terms[m].c.abs()) < 0 {
					m = i
				}
			}
			x := cur.terms[m]
			u := sub{terms: []ent{{fresh, one}}}
			fresh--
			for i, t := range cur.terms {
				if i != m {
					if q := t.c.div(x.c).floor(); !q.isZero() {
						u.terms = append(u.terms, ent{t.i, q.neg()})
					}
				}
			}
			subs[x.i] = u // a definition of the fresh variable: no source
		}
	}
	return nil
}

// mergeEnts sorts and adds up.
func mergeEnts(es []ent) []ent {
	ts := make([]term, len(es))
	for i, e := range es {
		ts[i] = term{Var(e.i), e.c}
	}
	ts = mergeTerms(ts)
	out := make([]ent, len(ts))
	for i, t := range ts {
		out[i] = ent{int32(t.v), t.c}
	}
	return out
}

// union of ascending lists.
func union(a, b []int32) []int32 {
	if len(b) == 0 {
		return a
	}
	out := make([]int32, 0, len(a)+len(b))
	for len(a) > 0 && len(b) > 0 {
		switch {
		case a[0] < b[0]:
			out, a = append(out, a[0]), a[1:]
		case a[0] > b[0]:
			out, b = append(out, b[0]), b[1:]
		default:
			out, a, b = append(out, a[0]), a[1:], b[1:]
		}
	}
	return append(append(out, a...), b...)
}

// latticeConflict tests the equations that hold under the present bounds and
// returns the reasons of a system of them without integer solution. It first
// leaves variables open that only literals fix: what is refuted so needs fewer
// literals.
func (s *Solver) latticeConflict() []reason {
	if why := s.latticeAt(false); why != nil {
		return why
	}
	return s.latticeAt(true)
}

// latticeAt is latticeConflict, with or without the values of the variables that
// literals fix.
func (s *Solver) latticeAt(assumed bool) []reason {
	sx := s.sx
	isFixed := func(v int32) bool {
		return sx.lo[v].set && sx.hi[v].set && sx.lo[v].v.eq(sx.hi[v].v)
	}
	var eqs []equation
	var whys [][]reason
	for i := range sx.rows {
		row := sx.rows[i]
		slack := row[len(row)-1].i
		if !isFixed(slack) {
			continue
		}
		e := equation{k: sx.lo[slack].v}
		why := []reason{sx.lo[slack].why, sx.hi[slack].why}
		for _, t := range row[:len(row)-1] {
			if sx.fixed[t.i] || assumed && isFixed(t.i) {
				e.k = e.k.add(t.c.mul(sx.lo[t.i].v))
				why = append(why, sx.lo[t.i].why, sx.hi[t.i].why)
			} else {
				e.terms = append(e.terms, t)
			}
		}
		e.terms = mergeEnts(e.terms)
		eqs = append(eqs, e)
		whys = append(whys, why)
	}
	if len(eqs) == 0 {
		return nil
	}
	weight := func(v int32) int {
		if v < 0 {
			return 0
		}
		return len(sx.cols[v])
	}
	const work = 400_000
	src := latticeTest(eqs, weight, work)
	if src == nil {
		return nil
	}
	// Fewer equations may do.
	for tries := 0; tries < 10 && len(src) > 1; tries++ {
		sub := make([]equation, len(src))
		for i, k := range src {
			sub[i] = eqs[k]
		}
		again := latticeTest(sub, weight, work)
		if again == nil || len(again) == len(src) {
			break
		}
		next := make([]int32, len(again))
		for i, k := range again {
			next[i] = src[k]
		}
		src = next
	}
	s.stats.LatticeConflicts++
	why := []reason{}
	for _, k := range src {
		why = append(why, whys[k]...)
	}
	return why
}
