// From numbers of productions to a derivation, whatever their size.

package parikh

import (
	"errors"
	"fmt"
	"math/big"
)

// Derivation is a derivation tree in run-length form. A Group stands for Size
// occurrences of one nonterminal, numbered from 0; its Uses say, run by run, which
// production each of them takes; each kid of a use is a group with one occurrence
// per occurrence of the run. Pumps stand between an occurrence and its production:
// Times turns, each of which leads from the nonterminal back to itself.
//
// Groups[0] is the start. The size of a derivation is independent of its counts:
// O(productions · nonterminals) groups and at most one pump per production.
type Derivation struct {
	G      *Grammar
	Groups []Group
}

// Group: see [Derivation].
type Group struct {
	NT    NT
	Size  *big.Int
	Uses  []Use // ascending in From; they cover 0..Size-1 without overlap
	Pumps []Pump
}

// Use says that the occurrences From..From+Times-1 of a group take Prod. Kids has
// a group per nonterminal on the right, in order; [Hole] where a pump's turn goes
// on.
type Use struct {
	From, Times *big.Int
	Prod        ProdID
	Kids        []int
}

// Hole is the kid at which a turn of a pump ends and the next one begins.
const Hole = -1

// Pump puts Times turns at occurrence At of a group. Turn i is occurrence i of
// group Top. Several pumps at one occurrence follow each other in order.
type Pump struct {
	At, Times *big.Int
	Top       int
}

// ErrNoDerivation says that numbers of productions are not those of a derivation.
var ErrNoDerivation = errors.New("parikh: these are not the productions of a derivation")

// pending is a run of occurrences without a production.
type pending struct {
	group       int
	from, times *big.Int
}

type deriver struct {
	d     *Derivation
	by    [][]ProdID
	rem   []*big.Int // by production: how often still to use
	pend  [][]pending
	owed  []*big.Int // by nonterminal: sum over pend
	place []int      // by nonterminal: a group with an occurrence that has a production; -1
	rank  []int      // by nonterminal; -1: no way to an end
	best  []ProdID
}

// Derive rebuilds a derivation of g that uses each production y[p] times. The
// error is ErrNoDerivation. First what is owed is grown to the ground along
// least ranks, so that it never gets stuck; what remains are circulations, which
// are cut into simple cycles hung at nonterminals that the tree has already.
func Derive(g *Grammar, y []*big.Int) (*Derivation, error) {
	// Only productions in use take part, so cost follows them and not the grammar.
	sub := &Grammar{Counts: g.Counts}
	var back []ProdID
	var rem []*big.Int
	var ntBack []NT
	id := map[NT]NT{}
	number := func(a NT) NT {
		b, ok := id[a]
		if !ok {
			b = NT(len(ntBack))
			id[a] = b
			ntBack = append(ntBack, a)
		}
		return b
	}
	sub.Start = number(g.Start)
	for p, n := range y {
		if n.Sign() < 0 {
			return nil, ErrNoDerivation
		}
		if n.Sign() == 0 {
			continue
		}
		q := Production{Lhs: number(g.Prods[p].Lhs)}
		for _, b := range g.Prods[p].Rhs {
			q.Rhs = append(q.Rhs, number(b))
		}
		sub.Prods = append(sub.Prods, q)
		back = append(back, ProdID(p))
		rem = append(rem, n)
	}
	sub.Names = make([]string, len(ntBack))
	d, err := derive(sub, rem)
	if err != nil {
		return nil, err
	}
	d.G = g
	for i := range d.Groups {
		x := &d.Groups[i]
		x.NT = ntBack[x.NT]
		for j := range x.Uses {
			x.Uses[j].Prod = back[x.Uses[j].Prod]
		}
	}
	return d, nil
}

func derive(g *Grammar, y []*big.Int) (*Derivation, error) {
	w := &deriver{d: &Derivation{G: g}, by: g.byLhs(), place: make([]int, g.NumNT()), pend: make([][]pending, g.NumNT()), owed: make([]*big.Int, g.NumNT())}
	for a := range w.place {
		w.place[a] = -1
		w.owed[a] = new(big.Int)
	}
	for _, n := range y {
		w.rem = append(w.rem, new(big.Int).Set(n))
	}
	w.owe(w.newGroup(g.Start, bigOne), bigOne)
	if !w.grow() {
		return nil, ErrNoDerivation
	}
	for {
		cyc, ok := w.cycle()
		if !ok {
			return nil, ErrNoDerivation
		}
		if cyc == nil {
			return w.d, nil
		}
		w.pump(cyc)
		if !w.grow() {
			return nil, ErrNoDerivation
		}
	}
}

func (w *deriver) newGroup(a NT, size *big.Int) int {
	w.d.Groups = append(w.d.Groups, Group{NT: a, Size: new(big.Int).Set(size)})
	return len(w.d.Groups) - 1
}

func (w *deriver) owe(group int, times *big.Int) {
	a := w.d.Groups[group].NT
	w.pend[a] = append(w.pend[a], pending{group, new(big.Int), new(big.Int).Set(times)})
	w.owed[a].Add(w.owed[a], times)
}

// use gives occurrences of a group a production; kids other than skip are owed.
func (w *deriver) use(group int, from, times *big.Int, p ProdID, skip int) (kids []int) {
	for i, b := range w.d.G.Prods[p].Rhs {
		if i == skip {
			kids = append(kids, Hole)
			continue
		}
		k := w.newGroup(b, times)
		kids = append(kids, k)
		w.owe(k, times)
	}
	g := &w.d.Groups[group]
	g.Uses = append(g.Uses, Use{From: new(big.Int).Set(from), Times: new(big.Int).Set(times), Prod: p, Kids: kids})
	if w.place[g.NT] < 0 {
		w.place[g.NT] = group
	}
	w.rem[p].Sub(w.rem[p], times)
	return kids
}

// order ranks nonterminals by the height of their least tree of productions that
// remain.
func (w *deriver) order() {
	n := w.d.G.NumNT()
	w.rank = make([]int, n)
	w.best = make([]ProdID, n)
	for a := range w.rank {
		w.rank[a] = -1
	}
	miss := make([]int, len(w.rem))
	users := make([][]ProdID, n)
	var ready []ProdID
	for p := range w.rem {
		if w.rem[p].Sign() == 0 {
			continue
		}
		miss[p] = len(w.d.G.Prods[p].Rhs)
		for _, b := range w.d.G.Prods[p].Rhs {
			users[b] = append(users[b], ProdID(p))
		}
		if miss[p] == 0 {
			ready = append(ready, ProdID(p))
		}
	}
	for height := 1; len(ready) > 0; height++ {
		var next []ProdID
		var settled []NT
		for _, p := range ready {
			if a := w.d.G.Prods[p].Lhs; w.rank[a] < 0 {
				w.rank[a], w.best[a] = height, p
				settled = append(settled, a)
			}
		}
		for _, a := range settled {
			for _, p := range users[a] {
				if miss[p]--; miss[p] == 0 {
					next = append(next, p)
				}
			}
		}
		ready = next
	}
}

// grow gives productions to everything that is owed. False: impossible.
func (w *deriver) grow() bool {
	w.order()
	for {
		// The owed nonterminal of highest rank: what it brings has lower ranks.
		top := NT(-1)
		for a := range w.owed {
			if w.owed[a].Sign() > 0 {
				if w.rank[a] < 0 {
					return false
				}
				if top < 0 || w.rank[a] > w.rank[top] {
					top = NT(a)
				}
			}
		}
		if top < 0 {
			return true
		}
		p := w.best[top]
		if w.rem[p].Sign() <= 0 {
			w.order()
			continue
		}
		list := w.pend[top]
		run := list[len(list)-1]
		w.pend[top] = list[:len(list)-1]
		times := run.times
		if times.Cmp(w.rem[p]) > 0 {
			times = new(big.Int).Set(w.rem[p])
			w.pend[top] = append(w.pend[top], pending{run.group, new(big.Int).Add(run.from, times), new(big.Int).Sub(run.times, times)})
		}
		w.owed[top].Sub(w.owed[top], times)
		w.use(run.group, run.from, times, p, -1)
	}
}

// link is a step of a cycle: production p and which nonterminal on its right goes
// on.
type link struct {
	p    ProdID
	next int
}

// cycle finds a simple cycle of productions that remain through a nonterminal of
// the tree; nil if nothing remains, false if what remains does not touch the tree.
func (w *deriver) cycle() ([]link, bool) {
	any := false
	// Inside a component that nothing else leads to, every nonterminal is on a cycle;
	// any nonterminal of the tree that is on a cycle will do.
	for a := range w.place {
		for _, p := range w.by[a] {
			if w.rem[p].Sign() > 0 {
				any = true
			}
		}
		if w.place[a] < 0 {
			continue
		}
		if cyc := w.cycleAt(NT(a)); cyc != nil {
			return cyc, true
		}
	}
	return nil, !any
}

// cycleAt finds a shortest cycle through a.
func (w *deriver) cycleAt(a NT) []link {
	type from struct {
		a NT
		link
	}
	came := map[NT]from{}
	queue := []NT{a}
	for i := 0; i < len(queue); i++ {
		b := queue[i]
		for _, p := range w.by[b] {
			if w.rem[p].Sign() == 0 {
				continue
			}
			for j, c := range w.d.G.Prods[p].Rhs {
				if _, ok := came[c]; ok {
					continue
				}
				came[c] = from{b, link{p, j}}
				if c == a {
					var cyc []link
					for x := a; ; {
						f := came[x]
						cyc = append(cyc, f.link)
						if x = f.a; x == a {
							break
						}
					}
					for i, j := 0, len(cyc)-1; i < j; i, j = i+1, j-1 {
						cyc[i], cyc[j] = cyc[j], cyc[i]
					}
					return cyc
				}
				queue = append(queue, c)
			}
		}
	}
	return nil
}

// pump hangs a cycle into the tree as often as its productions remain.
func (w *deriver) pump(cyc []link) {
	a := w.d.G.Prods[cyc[0].p].Lhs
	k := new(big.Int).Set(w.rem[cyc[0].p])
	for _, l := range cyc {
		if w.rem[l.p].Cmp(k) < 0 {
			k.Set(w.rem[l.p])
		}
	}
	host := w.place[a]
	at := w.d.Groups[host].Uses[0].From
	top := w.newGroup(a, k)
	w.d.Groups[host].Pumps = append(w.d.Groups[host].Pumps, Pump{At: new(big.Int).Set(at), Times: new(big.Int).Set(k), Top: top})
	group := top
	for i, l := range cyc {
		last := i == len(cyc)-1
		kids := w.use(group, new(big.Int), k, l.p, l.next)
		if !last {
			// The next link's group takes the place of the hole.
			next := w.newGroup(w.d.G.Prods[l.p].Rhs[l.next], k)
			kids[l.next] = next
			group = next
		}
	}
}

// Check replays the derivation without looking at how it was found: each group's
// uses cover its occurrences once, kids have the right nonterminal and size, each
// pump's turn leads back to where it began. It gives the number of uses of each
// production; errors are bugs.
func (d *Derivation) Check() ([]*big.Int, error) {
	y := make([]*big.Int, len(d.G.Prods))
	for i := range y {
		y[i] = new(big.Int)
	}
	bad := func(g int, format string, args ...any) error {
		return fmt.Errorf("parikh: derivation: group %d: %s", g, fmt.Sprintf(format, args...))
	}
	parents := make([]int, len(d.Groups)) // how often a group is a kid or a pump's top
	holes := make([]*big.Int, len(d.Groups))
	// Groups are made before their kids, so one backward pass sees kids first.
	for i := len(d.Groups) - 1; i >= 0; i-- {
		g := &d.Groups[i]
		at := new(big.Int)
		holes[i] = new(big.Int)
		for _, u := range g.Uses {
			if u.From.Cmp(at) != 0 || u.Times.Sign() <= 0 {
				return nil, bad(i, "a run begins at %v, expected %v", u.From, at)
			}
			at.Add(at, u.Times)
			p := &d.G.Prods[u.Prod]
			if p.Lhs != g.NT || len(u.Kids) != len(p.Rhs) {
				return nil, bad(i, "production %d does not fit", u.Prod)
			}
			for j, k := range u.Kids {
				if k == Hole {
					holes[i].Add(holes[i], u.Times)
					continue
				}
				if k <= i || k >= len(d.Groups) || d.Groups[k].NT != p.Rhs[j] || d.Groups[k].Size.Cmp(u.Times) != 0 {
					return nil, bad(i, "kid %d does not fit", k)
				}
				parents[k]++
				holes[i].Add(holes[i], holes[k])
			}
			y[u.Prod].Add(y[u.Prod], u.Times)
		}
		if at.Cmp(g.Size) != 0 {
			return nil, bad(i, "%v of %v occurrences have a production", at, g.Size)
		}
		for _, p := range g.Pumps {
			if p.At.Sign() < 0 || p.At.Cmp(g.Size) >= 0 || p.Top <= i || p.Top >= len(d.Groups) {
				return nil, bad(i, "a pump is out of place")
			}
			t := &d.Groups[p.Top]
			// One hole per turn, at a nonterminal equal to the first.
			if t.NT != g.NT || t.Size.Cmp(p.Times) != 0 || holes[p.Top].Cmp(p.Times) != 0 || !d.holesFit(p.Top, g.NT, holes) {
				return nil, bad(i, "the turns of a pump do not lead back")
			}
			parents[p.Top]++
		}
	}
	for i, n := range parents {
		if want := min(i, 1); n != want {
			return nil, bad(i, "hangs at %d places", n)
		}
	}
	if d.Groups[0].NT != d.G.Start || d.Groups[0].Size.Cmp(bigOne) != 0 || holes[0].Sign() != 0 {
		return nil, bad(0, "is not the start")
	}
	return y, nil
}

// holesFit: the holes below a pump's top stand for nonterminal a. holes has the
// number of holes below each group.
func (d *Derivation) holesFit(top int, a NT, holes []*big.Int) bool {
	for {
		if len(d.Groups[top].Uses) != 1 {
			return false
		}
		u := &d.Groups[top].Uses[0]
		next := Hole
		for j, k := range u.Kids {
			if k == Hole {
				return d.G.Prods[u.Prod].Rhs[j] == a
			}
			if holes[k].Sign() > 0 {
				next = k
			}
		}
		if next == Hole {
			return false
		}
		top = next
	}
}
