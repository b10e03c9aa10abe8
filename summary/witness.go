// Witnesses: a short run past a bound.

package summary

import (
	"container/heap"
	"errors"
	"math/big"

	"pathtally/pds"
)

// ErrNoWitness: no run of the question weighs more than the bound.
var ErrNoWitness = errors.New("no run passes the bound")

// ErrExhausted: the budget ran out before the question was answered.
var ErrExhausted = errors.New("the budget ran out")

// windows are the half-widths of weight tried by Witness, smallest first.
var windows = []int64{8, 64}

// narrow is the half-width for parts that are too large for windows.
const narrow = 2

// maxItems bounds the items (nonterminals times weights) of one search.
const maxItems = 6 << 20

// Witness gives the shortest run from h (see [Solution.Greatest] for which runs)
// that weighs more than bound: fewest steps, spawned work included; ties go to
// lower rule indices, then to earlier exits. It is the shortest of all if no part
// of a run weighs more than 8 either way (a part: from a head until its symbol is
// popped or the run stops); parts below -8 are left out, and heavier ones taken
// for 8. If that finds none, the same with 64; else it is the heaviest run, or for
// an unbounded weight a pump on a shortest run, as often as is needed.
//
// ok is false if no run passes the bound, if the budget ran out, or if the run
// found has more than [MaxPath] steps; [Solution.FindWitness] says which.
func (s *Solution) Witness(h pds.Head, accept func(pds.StateID) bool, bound int64) (Path, bool) {
	p, err := s.FindWitness(h, accept, bound)
	return p, err == nil
}

// FindWitness is Witness with the reason of failure: ErrNoWitness, ErrExhausted
// or ErrTooLong.
func (s *Solution) FindWitness(h pds.Head, accept func(pds.StateID) bool, bound int64) (Path, error) {
	targets, ok := s.targets(h, accept)
	if !ok {
		return Path{}, ErrExhausted
	}
	v := s.Greatest(h, accept)
	if above, known := v.Above(bound); !known {
		return Path{}, ErrExhausted
	} else if !above {
		return Path{}, ErrNoWitness
	}
	live := targets[:0:0]
	for _, a := range targets {
		if above, _ := s.value(a).Above(bound); above {
			live = append(live, a)
		}
	}
	budget := MaxPath
	for _, k := range windows {
		if bound >= k {
			continue
		}
		w := s.search(live, k)
		if w == nil {
			// A very large part: at least the nearest windows.
			if w = s.search(live, narrow); w == nil || bound >= narrow {
				break
			}
		}
		if t, length, ok := w.run(live, bound); ok {
			if length > MaxPath {
				return Path{}, ErrTooLong
			}
			return s.emit(t(), &budget)
		}
	}
	for _, a := range live {
		if s.value(a).Kind == Finite {
			t, err := s.bestTree(a)
			if err != nil {
				return Path{}, err
			}
			return s.emit(t, &budget)
		}
	}
	t, err := s.pumped(live, bound)
	if err != nil {
		return Path{}, err
	}
	return s.emit(t, &budget)
}

// search is Knuth's generalisation of Dijkstra's algorithm (A generalization of
// Dijkstra's algorithm, 1977) on items (nonterminal, weight of the run within
// -k..k), by number of steps. Right sides are made binary first.
type search struct {
	s      *Solution
	k      int64 // half-width
	ignore bool  // weights count 0; k is 0
	width  int64 // items per nonterminal
	nts    []NT  // -1: a rest of a right side
	level  []uint8
	local  map[NT]int32
	prods  []searchProd
	uses   [][]int32 // per local nonterminal: productions with it on the right side
	items  []searchItem
	done   [][]int32 // per local nonterminal: its settled weights, shifted by k
	queue  searchQueue
}

type searchProd struct {
	w      int64
	id     int32 // -1: a rest
	lhs    int32
	a, b   int32 // right side; -1: none
	length int64 // steps
}

// searchItem is a nonterminal with a weight; the weight k stands for k or more, so
// that heavy parts are not lost. key is 0 if it was not met, else (steps << 8 |
// level) + 1, negative once it is settled.
type searchItem struct {
	key    int64
	prod   int32 // into search.prods
	wa, wb int16 // weights of the right symbols
}

type searchEntry struct {
	key  int64
	item int64
}

type searchQueue []searchEntry

func (q searchQueue) Len() int { return len(q) }
func (q searchQueue) Less(i, j int) bool {
	return q[i].key < q[j].key || q[i].key == q[j].key && q[i].item < q[j].item
}
func (q searchQueue) Swap(i, j int) { q[i], q[j] = q[j], q[i] }
func (q *searchQueue) Push(x any)   { *q = append(*q, x.(searchEntry)) }
func (q *searchQueue) Pop() any {
	x := (*q)[len(*q)-1]
	*q = (*q)[:len(*q)-1]
	return x
}

// search gives the search of a width, grown by the productive part below the
// targets; nil if that is too large. k < 0 ignores weights. What was settled for
// earlier targets stays: the shortest runs of an item do not depend on who asks.
func (s *Solution) search(targets []NT, k int64) *search {
	if w := s.searches[k]; w != nil && w.grow(targets) {
		return w
	}
	w := &search{s: s, k: max(k, 0), ignore: k < 0, local: map[NT]int32{}}
	w.width = 2*w.k + 1
	delete(s.searches, k)
	if !w.grow(targets) {
		return nil
	}
	s.searches[k] = w
	return w
}

func (w *search) add(a NT, level uint8) int32 {
	w.nts = append(w.nts, a)
	w.level = append(w.level, level)
	w.uses = append(w.uses, nil)
	w.done = append(w.done, nil)
	return int32(len(w.nts) - 1)
}

// grow takes in the part below the targets; false if there is too much of it, and
// then the search is of no more use.
func (w *search) grow(targets []NT) bool {
	s, e := w.s, w.s.e
	var order []int32
	take := func(a NT) int32 {
		if l, ok := w.local[a]; ok {
			return l
		}
		level := uint8(0)
		switch e.g.nts[a].kind {
		case spawned:
			level = 2
		case begun:
			level = 1
		}
		l := w.add(a, level)
		w.local[a] = l
		order = append(order, l)
		return l
	}
	for _, a := range targets {
		take(a)
	}
	first := len(w.prods)
	put := func(n num, p searchProd) bool {
		if w.ignore {
			n = num{}
		}
		// What is below the window three times over nothing brings back into it.
		if n.cmp(num{small: -3 * w.k}) < 0 {
			return false
		}
		if n.cmp(num{small: 3 * w.k}) > 0 {
			n = num{small: 3 * w.k}
		}
		p.w = n.small
		w.prods = append(w.prods, p)
		return true
	}
	least := s.q.leastWork()
	for i := 0; i < len(order); i++ {
		if int64(len(w.nts))*w.width > maxItems {
			return false
		}
		l := order[i]
		a := w.nts[l]
		if s.value(a).Kind == NoPath {
			continue
		}
		if least && e.g.nts[a].kind == spawned {
			put(s.value(a).n, searchProd{id: -2, lhs: l, a: -1, b: -1})
			continue
		}
		start, end := e.productions(a)
	next:
		for p := start; p < end; p++ {
			pr := &e.g.prods[p]
			if !s.live(pr) {
				continue
			}
			rhs := e.g.rhs[pr.rhs : int(pr.rhs)+int(pr.n)]
			for _, b := range rhs {
				if s.value(b).Kind == NoPath {
					continue next
				}
			}
			sp := searchProd{id: p, lhs: l, a: -1, b: -1}
			if pr.takesStep() {
				sp.length = 1
			}
			if len(rhs) > 0 {
				sp.a = take(rhs[0])
			}
			if len(rhs) == 2 {
				sp.b = take(rhs[1])
			}
			if len(rhs) > 2 {
				// A rest stands for rhs[1:], and so on; levels fall along the rests.
				sp.b = w.add(-1, uint8(min(255, 2+len(rhs))))
			}
			if !put(s.prodWeight(pr), sp) || len(rhs) <= 2 {
				continue
			}
			rest := sp.b
			for i := 1; ; i++ {
				sp := searchProd{id: -1, lhs: rest, a: take(rhs[i])}
				if i == len(rhs)-2 {
					sp.b = take(rhs[i+1])
					put(num{}, sp)
					break
				}
				sp.b = w.add(-1, uint8(min(255, 2+len(rhs)-i)))
				put(num{}, sp)
				rest = sp.b
			}
		}
	}
	if int64(len(w.nts))*w.width > maxItems {
		return false
	}
	w.items = append(w.items, make([]searchItem, int64(len(w.nts))*w.width-int64(len(w.items)))...)
	for i := first; i < len(w.prods); i++ {
		p := &w.prods[i]
		if p.a < 0 {
			w.fire(int32(i), 0, 0)
			continue
		}
		w.uses[p.a] = append(w.uses[p.a], int32(i))
		if p.b >= 0 && p.b != p.a {
			w.uses[p.b] = append(w.uses[p.b], int32(i))
		}
		// What was settled before must be offered now.
		for _, wa := range w.done[p.a] {
			if p.b < 0 {
				w.fire(int32(i), int64(wa)-w.k, 0)
				continue
			}
			for _, wb := range w.done[p.b] {
				w.fire(int32(i), int64(wa)-w.k, int64(wb)-w.k)
			}
		}
	}
	return true
}

func (w *search) offer(p int32, weight, steps int64, wa, wb int64) {
	if weight < -w.k {
		return
	}
	weight = min(weight, w.k)
	pr := &w.prods[p]
	key := (steps<<8 | int64(w.level[pr.lhs])) + 1
	at := int64(pr.lhs)*w.width + weight + w.k
	it := &w.items[at]
	if it.key < 0 {
		return
	}
	if it.key != 0 && (it.key < key || it.key == key && (it.prod < p || it.prod == p && (int64(it.wa) < wa || int64(it.wa) == wa && int64(it.wb) <= wb))) {
		return
	}
	newer := it.key != key
	it.key, it.prod, it.wa, it.wb = key, p, int16(wa), int16(wb)
	if newer {
		heap.Push(&w.queue, searchEntry{key, at})
	}
}

// fire offers what a production makes of right sides with the given weights.
func (w *search) fire(p int32, wa, wb int64) {
	pr := &w.prods[p]
	steps := pr.length
	weight := pr.w
	if pr.a >= 0 {
		steps += w.steps(pr.a, wa)
		weight += wa
	}
	if pr.b >= 0 {
		steps += w.steps(pr.b, wb)
		weight += wb
	}
	w.offer(p, weight, steps, wa, wb)
}

func (w *search) steps(l int32, weight int64) int64 {
	return (-w.items[int64(l)*w.width+weight+w.k].key - 1) >> 8
}

// run settles items until one of a target passes the bound; of the shortest it
// takes the first target, then the least weight. build makes its derivation.
func (w *search) run(targets []NT, bound int64) (build func() *tree, length int64, ok bool) {
	rank := map[int32]int{}
	bestItem, bestKey, bestRank := int64(-1), int64(0), 0
	better := func(at int64) {
		l := int32(at / w.width)
		r, is := rank[l]
		if !is || at%w.width-w.k <= bound {
			return
		}
		key := -w.items[at].key
		if bestItem < 0 || key < bestKey || key == bestKey && (r < bestRank || r == bestRank && at < bestItem) {
			bestItem, bestKey, bestRank = at, key, r
		}
	}
	for i, a := range targets {
		l := w.local[a]
		rank[l] = i
		for _, weight := range w.done[l] {
			better(int64(l)*w.width + int64(weight))
		}
	}
	for w.queue.Len() > 0 && (bestItem < 0 || w.queue[0].key <= bestKey) {
		x := heap.Pop(&w.queue).(searchEntry)
		it := &w.items[x.item]
		if it.key != x.key {
			continue
		}
		it.key = -it.key
		better(x.item)
		w.settle(int32(x.item/w.width), x.item%w.width-w.k)
	}
	if bestItem < 0 {
		return nil, 0, false
	}
	return func() *tree { return w.tree(bestItem) }, (bestKey - 1) >> 8, true
}

func (w *search) settle(l int32, weight int64) {
	w.done[l] = append(w.done[l], int32(weight+w.k))
	for _, p := range w.uses[l] {
		pr := &w.prods[p]
		if pr.b < 0 {
			w.fire(p, weight, 0)
			continue
		}
		if pr.a == l {
			for _, o := range w.done[pr.b] {
				w.fire(p, weight, int64(o)-w.k)
			}
		}
		if pr.b == l {
			for _, o := range w.done[pr.a] {
				w.fire(p, int64(o)-w.k, weight)
			}
		}
	}
}

// all settles everything.
func (w *search) all() {
	w.run(nil, 0)
}

// tree builds the derivation of a settled item, with rests folded back.
func (w *search) tree(item int64) *tree {
	made := map[int64]*tree{}
	kids := func(item int64) []int64 {
		var list []int64
		for {
			it := &w.items[item]
			pr := &w.prods[it.prod]
			if pr.a >= 0 {
				list = append(list, int64(pr.a)*w.width+int64(it.wa)+w.k)
			}
			if pr.b < 0 {
				return list
			}
			b := int64(pr.b)*w.width + int64(it.wb) + w.k
			if w.nts[pr.b] >= 0 {
				return append(list, b)
			}
			item = b
		}
	}
	work := []int64{item}
	for len(work) > 0 {
		at := work[len(work)-1]
		if made[at] != nil {
			work = work[:len(work)-1]
			continue
		}
		list := kids(at)
		ready := true
		for _, k := range list {
			if made[k] == nil {
				work = append(work, k)
				ready = false
			}
		}
		if !ready {
			continue
		}
		work = work[:len(work)-1]
		id := w.prods[w.items[at].prod].id
		t := &tree{prod: id, nt: w.nts[at/w.width]}
		if id != -2 {
			t.kids = make([]*tree, len(list))
			for i, k := range list {
				if made[k].prod != -2 {
					t.kids[i] = made[k]
				}
			}
		}
		made[at] = t
	}
	return made[item]
}

// pumped makes a derivation past the bound for unbounded targets: a shortest way
// to a pump, the pump as often as is needed, and a shortest end.
func (s *Solution) pumped(targets []NT, bound int64) (*tree, error) {
	e := s.e
	w := s.search(targets, -1)
	if w == nil {
		return nil, ErrTooLong
	}
	w.all()
	steps := func(a NT) int64 { return w.steps(w.local[a], 0) }
	// The nearest pump: shortest way through contexts, the sides being as short as
	// they can.
	type context struct {
		cost int64
		prod int32
		pos  int
		from int32 // local
	}
	way := make([]context, len(w.nts))
	for i := range way {
		way[i] = context{cost: -1, from: -1}
	}
	var queue searchQueue
	for _, a := range targets {
		l := w.local[a]
		way[l].cost = 0
		heap.Push(&queue, searchEntry{0, int64(l)})
	}
	final := make([]bool, len(w.nts))
	at := int32(-1)
	for queue.Len() > 0 && at < 0 {
		x := heap.Pop(&queue).(searchEntry)
		l := int32(x.item)
		if final[l] {
			continue
		}
		final[l] = true
		a := w.nts[l]
		if s.value(a).Kind == Unbounded && s.pump(a) != nil {
			at = l
			break
		}
		if s.q.leastWork() && e.g.nts[a].kind == spawned {
			continue
		}
		start, end := e.productions(a)
		for p := start; p < end; p++ {
			pr := &e.g.prods[p]
			if !s.live(pr) {
				continue
			}
			rhs := e.g.rhs[pr.rhs : int(pr.rhs)+int(pr.n)]
			total := int64(1)
			ok := true
			for _, b := range rhs {
				if s.value(b).Kind == NoPath {
					ok = false
					break
				}
				total += min(steps(b), 1<<40)
			}
			if !ok {
				continue
			}
			for i, b := range rhs {
				if s.value(b).Kind != Unbounded {
					continue
				}
				bl := w.local[b]
				cost := min(x.key+total-min(steps(b), 1<<40), 1<<60)
				if way[bl].cost < 0 || cost < way[bl].cost {
					way[bl] = context{cost, p, i, l}
					heap.Push(&queue, searchEntry{cost, int64(bl)})
				}
			}
		}
	}
	if at < 0 {
		if s.exact {
			panic("summary: witness: unbounded without a pump")
		}
		// Pumps were found late: ask again, looking closely.
		again := s.e.Solve(s.q)
		again.doubt, again.exact = s.doubt, true
		for _, a := range targets {
			again.value(a)
		}
		return again.pumped(targets, bound)
	}
	short := func(a NT) (*tree, error) {
		if steps(a) > MaxPath {
			return nil, ErrTooLong
		}
		t := w.tree(int64(w.local[a]) * w.width)
		if t.prod == -2 {
			return nil, nil
		}
		return t, nil
	}
	around := func(p int32, pos int, hole *tree, side func(NT) (*tree, error), nt NT) (*tree, error) {
		pr := &e.g.prods[p]
		t := &tree{prod: p, nt: nt, kids: make([]*tree, pr.n)}
		for i := range t.kids {
			if i == pos {
				t.kids[i] = hole
				continue
			}
			b := e.g.rhs[int(pr.rhs)+i]
			if s.q.leastWork() && e.g.nts[b].kind == spawned {
				continue
			}
			var err error
			if t.kids[i], err = side(b); err != nil {
				return nil, err
			}
		}
		return t, nil
	}
	anchor := w.nts[at]
	pump := s.pump(anchor)
	core, err := short(anchor)
	if err != nil {
		return nil, err
	}
	// Gain of one turn, and the weight without any.
	weights := map[*tree]num{}
	gain := num{}
	sides := make([]map[NT]*tree, len(pump))
	length := int64(0)
	for i, st := range pump {
		pr := &e.g.prods[st.prod]
		gain = gain.add(s.prodWeight(pr))
		length++
		sides[i] = map[NT]*tree{}
		for j, b := range e.g.rhs[pr.rhs : int(pr.rhs)+int(pr.n)] {
			if j == st.child {
				continue
			}
			if s.q.leastWork() && e.g.nts[b].kind == spawned {
				gain = gain.add(s.value(b).n)
				continue
			}
			t, err := s.bestTree(b)
			if err != nil {
				return nil, err
			}
			sides[i][b] = t
			gain = gain.add(s.treeWeight(t, weights))
		}
	}
	if gain.sign() <= 0 {
		panic("summary: witness: pump of " + e.name(anchor) + " gains nothing")
	}
	wrap := func(t *tree) (*tree, error) {
		for l := at; way[l].from >= 0; l = way[l].from {
			var err error
			if t, err = around(way[l].prod, way[l].pos, t, short, w.nts[way[l].from]); err != nil {
				return nil, err
			}
		}
		return t, nil
	}
	plain, err := wrap(core)
	if err != nil {
		return nil, err
	}
	need := num{small: bound}.add(num{small: 1}).add(s.treeWeight(plain, weights).neg())
	turns := int64(0)
	if need.sign() > 0 {
		k := new(big.Int).Add(need.toBig(), gain.toBig())
		k.Sub(k, big.NewInt(1)).Quo(k, gain.toBig())
		if !k.IsInt64() || k.Int64() > MaxPath/length {
			return nil, ErrTooLong
		}
		turns = k.Int64()
	}
	if turns == 0 {
		return plain, nil
	}
	inner := *core
	inner.mark = 2
	t := &inner
	for range turns {
		for i := len(pump) - 1; i >= 0; i-- {
			owner := anchor
			if i > 0 {
				prev := &e.g.prods[pump[i-1].prod]
				owner = e.g.rhs[int(prev.rhs)+pump[i-1].child]
			}
			side := func(b NT) (*tree, error) { return sides[i][b], nil }
			if t, err = around(pump[i].prod, pump[i].child, t, side, owner); err != nil {
				return nil, err
			}
		}
	}
	crosses := false
	for _, st := range pump {
		crosses = crosses || st.child >= int(e.g.prods[st.prod].main)
	}
	if crosses || turns == 1 {
		// One turn is no repetition; turns inside spawned work do not stand in a row.
		inner.mark = 0
	} else {
		t.mark, t.turn = 1, int(turns)
	}
	return wrap(t)
}

// treeWeight is the weight of a derivation; shared subtrees are weighed once.
func (s *Solution) treeWeight(t *tree, memo map[*tree]num) num {
	work := []*tree{t}
	for len(work) > 0 {
		t := work[len(work)-1]
		if _, ok := memo[t]; ok {
			work = work[:len(work)-1]
			continue
		}
		ready := true
		pr := &s.e.g.prods[t.prod]
		sum := s.prodWeight(pr)
		for i, k := range t.kids {
			if k == nil {
				sum = sum.add(s.value(s.e.g.rhs[int(pr.rhs)+i]).n)
				continue
			}
			n, ok := memo[k]
			if !ok {
				work = append(work, k)
				ready = false
			}
			sum = sum.add(n)
		}
		if ready {
			memo[t] = sum
			work = work[:len(work)-1]
		}
	}
	return memo[t]
}
