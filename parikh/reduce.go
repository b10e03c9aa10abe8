// Making a grammar smaller without changing its image.

package parikh

import (
	"math/big"
	"slices"
	"strconv"
	"strings"
)

func itoa(i int) string { return strconv.Itoa(i) }

// recipe says which productions of the input a production of the reduced grammar
// stands for: prod once (if not -1) and each kid so many times. Recipes form an
// acyclic graph in which kids have smaller ids, so numbers like 2^79 need 79 nodes.
type recipe struct {
	prod ProdID
	kids []recipeUse
}

type recipeUse struct {
	of int32
	n  int64
}

// rprod is a production of the reduced grammar; rhs is a multiset.
type rprod struct {
	lhs    int32
	rhs    []int32 // ascending
	eff    vec
	recipe int32
}

// reduced is a trimmed grammar with the image of the input and, usually, far
// fewer productions. Nonterminals are dense; 0 is the start.
type reduced struct {
	src     *Grammar
	numNT   int
	prods   []rprod // grouped by lhs, ascending
	recipes []recipe
	empty   bool // the input has no derivation
}

// reduce trims, and unless plain says so, replaces nonterminals whose image is
// one vector by that vector, inlines chains, and merges parallel productions and
// bisimilar nonterminals.
func reduce(g *Grammar, plain bool) *reduced {
	g.check()
	w := &reducer{g: g, r: &reduced{src: g}}
	use := g.useful()
	w.prods = make([]*rprod, 0, len(g.Prods))
	for p := range g.Prods {
		if !use[p] {
			continue
		}
		pr := &g.Prods[p]
		q := &rprod{lhs: int32(pr.Lhs), eff: vecOf(pr.Effect), recipe: w.recipe(ProdID(p))}
		for _, r := range pr.Rhs {
			q.rhs = append(q.rhs, int32(r))
		}
		slices.Sort(q.rhs)
		w.prods = append(w.prods, q)
	}
	if len(w.prods) == 0 {
		w.r.empty = true
		w.r.numNT = 1
		return w.r
	}
	w.start = int32(g.Start)
	w.numNT = len(g.Names)
	if !plain {
		for range 4 {
			before := len(w.prods)
			w.parallel()
			w.constants()
			w.inline()
			w.parallel()
			w.bisimilar()
			if len(w.prods) == before {
				break
			}
		}
	}
	w.number()
	return w.r
}

type reducer struct {
	g     *Grammar
	r     *reduced
	prods []*rprod // live ones
	start int32
	numNT int // bound of nonterminal ids
}

func (w *reducer) recipe(p ProdID, kids ...recipeUse) int32 {
	w.r.recipes = append(w.r.recipes, recipe{p, kids})
	return int32(len(w.r.recipes) - 1)
}

// parallel keeps one of the productions with equal sides and effects, and drops
// A → A without effect.
func (w *reducer) parallel() {
	seen := make(map[string]bool, len(w.prods))
	out := w.prods[:0]
	for _, p := range w.prods {
		if len(p.rhs) == 1 && p.rhs[0] == p.lhs && len(p.eff) == 0 {
			continue
		}
		k := p.key()
		if seen[k] {
			continue
		}
		seen[k] = true
		out = append(out, p)
	}
	w.prods = out
}

func (p *rprod) key() string {
	var b strings.Builder
	b.WriteString(itoa(int(p.lhs)))
	b.WriteByte('>')
	for _, r := range p.rhs {
		b.WriteString(itoa(int(r)))
		b.WriteByte(',')
	}
	p.eff.key(&b)
	return b.String()
}

// constants removes nonterminals whose image is a single vector. With b(A) the
// vector of one derivation of A, a production is uneven if its effect and the b of
// its right side do not sum up to b of its left side; A is constant iff it
// reaches no uneven production.
func (w *reducer) constants() {
	users := make([][]int32, w.numNT)
	miss := make([]int, len(w.prods))
	first := make([]int32, w.numNT)
	for i := range first {
		first[i] = -1
	}
	base := make([]vec, w.numNT)
	code := make([]int32, w.numNT)
	var work []int32
	for i, p := range w.prods {
		miss[i] = len(p.rhs)
		for _, r := range p.rhs {
			users[r] = append(users[r], int32(i))
		}
	}
	sum := func(p *rprod) vec {
		v := p.eff
		for _, r := range p.rhs {
			v = v.add(base[r])
		}
		return v
	}
	settle := func(i int32) {
		p := w.prods[i]
		if first[p.lhs] >= 0 {
			return
		}
		first[p.lhs] = i
		base[p.lhs] = sum(p)
		kids := []recipeUse{{p.recipe, 1}}
		for _, r := range p.rhs {
			kids = append(kids, recipeUse{code[r], 1})
		}
		code[p.lhs] = w.recipe(-1, kids...)
		work = append(work, p.lhs)
	}
	for i := range w.prods {
		if miss[i] == 0 {
			settle(int32(i))
		}
	}
	for len(work) > 0 {
		a := work[0]
		work = work[1:]
		for _, i := range users[a] {
			if miss[i]--; miss[i] == 0 {
				settle(i)
			}
		}
	}
	varies := make([]bool, w.numNT)
	vary := func(a int32) {
		if !varies[a] {
			varies[a] = true
			work = append(work, a)
		}
	}
	for _, p := range w.prods {
		if !sum(p).equal(base[p.lhs]) {
			vary(p.lhs)
		}
	}
	for len(work) > 0 {
		a := work[len(work)-1]
		work = work[:len(work)-1]
		for _, i := range users[a] {
			vary(w.prods[i].lhs)
		}
	}
	if !varies[w.start] {
		w.prods = []*rprod{{lhs: w.start, eff: base[w.start], recipe: code[w.start]}}
		return
	}
	var out []*rprod
	for _, p := range w.prods {
		if !varies[p.lhs] {
			continue
		}
		var rhs []int32
		kids := []recipeUse{{p.recipe, 1}}
		for _, r := range p.rhs {
			if varies[r] {
				rhs = append(rhs, r)
				continue
			}
			p.eff = p.eff.add(base[r])
			kids = append(kids, recipeUse{code[r], 1})
		}
		if len(kids) > 1 {
			p.rhs, p.recipe = rhs, w.recipe(-1, kids...)
		}
		out = append(out, p)
	}
	w.prods = out
}

// inline removes nonterminals other than the start that do not call themselves
// directly and have one production, or one use. A nonterminal of a loop whose one
// production has two nonterminals of that loop stays if something outside the
// loop uses it, so that no loop gets more entries.
func (w *reducer) inline() {
	comp := w.components()
	prodsOf := make([][]*rprod, w.numNT)
	usersOf := make([][]*rprod, w.numNT) // with repetitions removed; may hold dead ones
	dead := map[*rprod]bool{}
	var queue []int32
	queued := make([]bool, w.numNT)
	push := func(a int32) {
		if !queued[a] {
			queued[a] = true
			queue = append(queue, a)
		}
	}
	addUser := func(p *rprod) {
		for i, r := range p.rhs {
			if i == 0 || p.rhs[i-1] != r {
				usersOf[r] = append(usersOf[r], p)
			}
		}
	}
	for _, p := range w.prods {
		prodsOf[p.lhs] = append(prodsOf[p.lhs], p)
		addUser(p)
	}
	for a := range prodsOf {
		if len(prodsOf[a]) > 0 {
			push(int32(a))
		}
	}
	for len(queue) > 0 {
		a := queue[0]
		queue = queue[1:]
		queued[a] = false
		if a == w.start || len(prodsOf[a]) == 0 {
			continue
		}
		var users []*rprod
		seen := map[*rprod]bool{}
		uses := 0
		outside := false
		for _, p := range usersOf[a] {
			if dead[p] || seen[p] {
				continue
			}
			n := 0
			for _, r := range p.rhs {
				if r == a {
					n++
				}
			}
			if n == 0 {
				continue
			}
			seen[p] = true
			users = append(users, p)
			uses += n
			outside = outside || comp[p.lhs] != comp[a]
		}
		usersOf[a] = users
		selfish := false
		long := 0
		for _, p := range prodsOf[a] {
			inner := 0
			for _, r := range p.rhs {
				selfish = selfish || r == a
				if comp[r] == comp[a] {
					inner++
				}
			}
			selfish = selfish || inner > 1 && outside
			long = max(long, len(p.rhs))
		}
		single := len(prodsOf[a]) == 1
		fits := uses == 1 && (len(prodsOf[a]) <= 8 || len(users[0].rhs) == 1) || single && (long <= 1 || uses <= 2 && long == 2)
		if selfish || !fits {
			continue
		}
		for _, u := range users {
			dead[u] = true
			var rest []int32
			n := 0
			for _, r := range u.rhs {
				if r == a {
					n++
				} else {
					rest = append(rest, r)
				}
			}
			list := prodsOf[u.lhs]
			list = slices.DeleteFunc(slices.Clone(list), func(p *rprod) bool { return p == u })
			for _, p := range prodsOf[a] {
				q := &rprod{lhs: u.lhs, eff: u.eff, rhs: slices.Clone(rest), recipe: w.recipe(-1, recipeUse{u.recipe, 1}, recipeUse{p.recipe, int64(n)})}
				for range n {
					q.eff = q.eff.add(p.eff)
					q.rhs = append(q.rhs, p.rhs...)
				}
				slices.Sort(q.rhs)
				list = append(list, q)
				addUser(q)
				for _, r := range q.rhs {
					push(r)
				}
			}
			prodsOf[u.lhs] = list
			push(u.lhs)
		}
		for _, p := range prodsOf[a] {
			dead[p] = true
		}
		prodsOf[a] = nil
	}
	w.prods = w.prods[:0]
	for _, list := range prodsOf {
		w.prods = append(w.prods, list...)
	}
}

// bisimilar merges nonterminals whose productions agree up to merging, by
// partition refinement from the coarsest partition; a partition that is not
// stable after some rounds is given up.
func (w *reducer) bisimilar() {
	const rounds = 40
	color := make([]int32, w.numNT)
	byLhs := make([][]*rprod, w.numNT)
	for _, p := range w.prods {
		byLhs[p.lhs] = append(byLhs[p.lhs], p)
	}
	classes := 1
	for range rounds {
		next := make([]int32, w.numNT)
		ids := map[string]int32{}
		for a, list := range byLhs {
			if len(list) == 0 {
				continue
			}
			var keys []string
			for _, p := range list {
				q := rprod{eff: p.eff}
				for _, r := range p.rhs {
					q.rhs = append(q.rhs, color[r])
				}
				slices.Sort(q.rhs)
				keys = append(keys, q.key())
			}
			slices.Sort(keys)
			k := itoa(int(color[a])) + "|" + strings.Join(slices.Compact(keys), "|")
			id, ok := ids[k]
			if !ok {
				id = int32(len(ids))
				ids[k] = id
			}
			next[a] = id
		}
		stable := len(ids) == classes
		classes = len(ids)
		color = next
		if !stable {
			continue
		}
		leader := make([]int32, classes)
		for i := range leader {
			leader[i] = -1
		}
		leader[color[w.start]] = w.start
		for a, list := range byLhs {
			if len(list) > 0 && leader[color[a]] < 0 {
				leader[color[a]] = int32(a)
			}
		}
		var out []*rprod
		for _, p := range w.prods {
			if leader[color[p.lhs]] != p.lhs {
				continue
			}
			for i, r := range p.rhs {
				p.rhs[i] = leader[color[r]]
			}
			slices.Sort(p.rhs)
			out = append(out, p)
		}
		w.prods = out
		return
	}
}

// number trims again, numbers what is left densely, the start first, and sorts
// productions by left side.
func (w *reducer) number() {
	byLhs := make([][]*rprod, w.numNT)
	for _, p := range w.prods {
		byLhs[p.lhs] = append(byLhs[p.lhs], p)
	}
	id := make([]int32, w.numNT)
	for i := range id {
		id[i] = -1
	}
	order := []int32{w.start}
	id[w.start] = 0
	for i := 0; i < len(order); i++ {
		for _, p := range byLhs[order[i]] {
			for _, r := range p.rhs {
				if id[r] < 0 {
					id[r] = int32(len(order))
					order = append(order, r)
				}
			}
		}
	}
	w.r.numNT = len(order)
	for _, a := range order {
		for _, p := range byLhs[a] {
			q := rprod{lhs: id[a], eff: p.eff, recipe: p.recipe}
			for _, r := range p.rhs {
				q.rhs = append(q.rhs, id[r])
			}
			slices.Sort(q.rhs)
			w.r.prods = append(w.r.prods, q)
		}
	}
}

// components numbers the strongly connected components of the dependency graph.
func (w *reducer) components() []int32 {
	next := make([][]int32, w.numNT)
	for _, p := range w.prods {
		next[p.lhs] = append(next[p.lhs], p.rhs...)
	}
	comp := make([]int32, w.numNT)
	for i, c := range components(w.numNT, func(a int32) []int32 { return next[a] }, nil) {
		for _, a := range c {
			comp[a] = int32(i)
		}
	}
	return comp
}

// expand turns multiplicities of reduced productions into those of the input's.
func (r *reduced) expand(y []*big.Int) []*big.Int {
	need := make([]*big.Int, len(r.recipes))
	add := func(id int32, n *big.Int) {
		if need[id] == nil {
			need[id] = new(big.Int)
		}
		need[id].Add(need[id], n)
	}
	for i, p := range r.prods {
		if y[i].Sign() != 0 {
			add(p.recipe, y[i])
		}
	}
	out := make([]*big.Int, len(r.src.Prods))
	for i := range out {
		out[i] = new(big.Int)
	}
	for id := len(r.recipes) - 1; id >= 0; id-- {
		if need[id] == nil {
			continue
		}
		c := &r.recipes[id]
		if c.prod >= 0 {
			out[c.prod].Add(out[c.prod], need[id])
		}
		for _, k := range c.kids {
			add(k.of, new(big.Int).Mul(need[id], big.NewInt(k.n)))
		}
	}
	return out
}
