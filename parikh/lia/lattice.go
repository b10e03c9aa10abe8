package lia

import "sort"

// equation is Σ terms + k = 0 over simplex variables, that holds at present.
type equation struct {
	terms []ent // ascending in i
	k     num
}

// latticeSub replaces a variable by Σ terms + k. Its terms hold no variable that
// was replaced at an earlier stage, so going through the stages upwards replaces
// everything in one sweep.
type latticeSub struct {
	v     int32
	terms []ent
	k     num
	src   []int32
}

// longEquation is the number of terms from which an equation takes no part in
// peeling: a claim over all counts would leave no column a singleton.
const longEquation = 40

// latticeTest looks for a system of equations without an integer solution,
// whatever the bounds: it solves them one by one, substituting a variable with
// coefficient 1 or -1, which Euclid's algorithm provides where there is none (the
// column operations of a Hermite normal form, done lazily and sparsely). First
// come the equations that have a variable of their own among the rest (column
// singletons, peeled repeatedly), which need no substitution at all; nearly all
// equations of a flow are such. It returns the indices of equations that already
// have no solution, or nil. work bounds the term operations; when it runs out the
// answer is nil, which claims nothing.
func latticeTest(eqs []equation, weight func(int32) int, work int) []int32 {
	var subs []latticeSub
	stage := map[int32]int32{} // variable -> index in subs
	define := func(u latticeSub) {
		stage[u.v] = int32(len(subs))
		subs = append(subs, u)
	}
	solve := func(ts []ent, k num, at int, src []int32) {
		x := ts[at]
		u := latticeSub{v: x.i, k: k.mul(x.c).neg(), src: src}
		for i, t := range ts {
			if i != at {
				u.terms = append(u.terms, ent{t.i, t.c.mul(x.c).neg()})
			}
		}
		define(u)
	}

	// Peel.
	where := map[int32][]int32{}
	for n := range eqs {
		work -= len(eqs[n].terms)
		if len(eqs[n].terms) > longEquation {
			continue
		}
		for _, t := range eqs[n].terms {
			where[t.i] = append(where[t.i], int32(n))
		}
	}
	count := make(map[int32]int, len(where))
	done := make([]bool, len(eqs))
	var queue []int32
	for n := range eqs {
		if len(eqs[n].terms) > longEquation {
			continue
		}
		for _, t := range eqs[n].terms {
			if _, ok := count[t.i]; !ok {
				if count[t.i] = len(where[t.i]); count[t.i] == 1 {
					queue = append(queue, t.i)
				}
			}
		}
	}
	for len(queue) > 0 {
		v := queue[0]
		queue = queue[1:]
		for _, n := range where[v] {
			if done[n] {
				continue
			}
			at := -1
			for i, t := range eqs[n].terms {
				if t.i == v && t.c.isUnit() {
					at = i
				}
			}
			if at < 0 {
				break
			}
			done[n] = true
			solve(eqs[n].terms, eqs[n].k, at, []int32{n})
			for _, t := range eqs[n].terms {
				if count[t.i]--; count[t.i] == 1 {
					queue = append(queue, t.i)
				}
			}
		}
	}

	// The rest, one by one.
	acc := map[int32]num{}
	used := make([]bool, len(eqs)) // sources of the equation at hand
	fresh := int32(-2)             // new variables count downwards
	for n := range eqs {
		if done[n] {
			continue
		}
		ts, k := eqs[n].terms, eqs[n].k
		src := []int32{int32(n)}
		used[n] = true
		for {
			// One sweep through the stages.
			clear(acc)
			var heap []int32
			put := func(v int32, c num) {
				old, ok := acc[v]
				acc[v] = old.add(c)
				if st, sub := stage[v]; sub && !ok {
					heap = heapPush(heap, st)
				}
			}
			for _, t := range ts {
				put(t.i, t.c)
			}
			work -= len(ts) + 1
			for len(heap) > 0 {
				var st int32
				st, heap = heapPop(heap)
				u := &subs[st]
				c := acc[u.v]
				delete(acc, u.v)
				if c.isZero() {
					continue
				}
				for _, x := range u.terms {
					put(x.i, x.c.mul(c))
				}
				k = k.add(u.k.mul(c))
				for _, x := range u.src {
					if !used[x] {
						used[x] = true
						src = append(src, x)
					}
				}
				if work -= len(u.terms) + len(u.src); work < 0 {
					return nil
				}
			}
			ts = make([]ent, 0, len(acc))
			for v, c := range acc {
				if !c.isZero() {
					ts = append(ts, ent{v, c})
				}
			}
			sort.Slice(ts, func(i, j int) bool { return ts[i].i < ts[j].i })
			if len(ts) == 0 {
				if !k.isZero() {
					return ascending(src)
				}
				break
			}
			if work -= 10 * len(ts); work < 0 { // sorting and what follows
				return nil
			}
			var g num
			for _, t := range ts {
				g = g.gcd(t.c)
			}
			if !k.div(g).isInt() {
				return ascending(src)
			}
			if !g.eq(one) {
				d := g.inv()
				for i := range ts {
					ts[i].c = ts[i].c.mul(d)
				}
				k = k.mul(d)
			}
			best, m := -1, 0
			for i, t := range ts {
				if t.c.isUnit() && (best < 0 || weight(t.i) < weight(ts[best].i)) {
					best = i
				}
				if t.c.abs().cmp(ts[m].c.abs()) < 0 {
					m = i
				}
			}
			if best >= 0 {
				solve(ts, k, best, ascending(src))
				break
			}
			// Euclid: a fresh variable t = x + Σ floor(c_i/c)·y_i.
			x := ts[m]
			u := latticeSub{v: x.i, terms: []ent{{fresh, one}}} // a definition: no source
			fresh--
			for i, t := range ts {
				if i != m {
					if q := t.c.div(x.c).floor(); !q.isZero() {
						u.terms = append(u.terms, ent{t.i, q.neg()})
					}
				}
			}
			define(u)
		}
		for _, x := range src {
			used[x] = false
		}
	}
	return nil
}

func ascending(l []int32) []int32 {
	sort.Slice(l, func(i, j int) bool { return l[i] < l[j] })
	return l
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
