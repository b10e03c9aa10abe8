// From numbers of productions to a derivation, whatever their size.

package parikh

import (
	"errors"
	"fmt"
	"math/big"
	"slices"
)

// Derivation is a derivation tree in run-length form. A Group stands for Size
// occurrences of one nonterminal, numbered from 0; its Uses say, run by run, which
// production each of them takes; each kid of a use is a run of occurrences of some
// group, one for each occurrence of the use. Every occurrence but the start is a
// kid once. Pumps stand between an occurrence and its production: Times turns, each
// of which leads from the nonterminal back to itself.
//
// Groups[0] is the start; groups stand before those of their kids. The size of a
// derivation is independent of its counts: O(productions · nonterminals) groups
// and at most one pump per production.
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
// a run of occurrences per nonterminal on the right, in order.
type Use struct {
	From, Times *big.Int
	Prod        ProdID
	Kids        []Kid
}

// Kid is the occurrences from From on of a group; Group is [Hole] where a pump's
// turn goes on.
type Kid struct {
	Group int
	From  *big.Int
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

type deriver struct {
	d      *Derivation
	by     [][]ProdID
	rem    []*big.Int // by production: how often still to use
	open   []int      // by nonterminal: the group of occurrences without a production; -1
	closed []int      // groups in the order in which they got productions
	place  []int      // by nonterminal: a group with an occurrence that has a production; -1
	rank   []int      // by nonterminal; -1: no way to an end
	best   []ProdID
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
	w := &deriver{d: &Derivation{G: g}, by: g.byLhs(), place: make([]int, g.NumNT()), open: make([]int, g.NumNT())}
	for a := range w.place {
		w.place[a] = -1
		w.open[a] = -1
	}
	for _, n := range y {
		w.rem = append(w.rem, new(big.Int).Set(n))
	}
	w.owe(g.Start, bigOne)
	if !w.grow() {
		return nil, ErrNoDerivation
	}
	for {
		cyc, ok := w.cycle()
		if !ok {
			return nil, ErrNoDerivation
		}
		if cyc == nil {
			w.renumber()
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

// owe adds occurrences without a production.
func (w *deriver) owe(a NT, times *big.Int) Kid {
	if w.open[a] < 0 {
		w.open[a] = w.newGroup(a, new(big.Int))
	}
	size := w.d.Groups[w.open[a]].Size
	from := new(big.Int).Set(size)
	size.Add(size, times)
	return Kid{w.open[a], from}
}

// use gives occurrences of a group a production; kids other than skip are owed.
func (w *deriver) use(group int, from, times *big.Int, p ProdID, skip int) (kids []Kid) {
	for i, b := range w.d.G.Prods[p].Rhs {
		if i == skip {
			kids = append(kids, Kid{Hole, nil})
			continue
		}
		kids = append(kids, w.owe(b, times))
	}
	g := &w.d.Groups[group]
	g.Uses = append(g.Uses, Use{From: new(big.Int).Set(from), Times: new(big.Int).Set(times), Prod: p, Kids: kids})
	if w.place[g.NT] < 0 {
		w.place[g.NT] = group
	}
	w.rem[p].Sub(w.rem[p], times)
	return kids
}

// renumber puts groups in the order in which they were closed.
func (w *deriver) renumber() {
	to := make([]int, len(w.d.Groups))
	groups := make([]Group, 0, len(w.d.Groups))
	for i, g := range w.closed {
		to[g] = i
		groups = append(groups, w.d.Groups[g])
	}
	for i := range groups {
		for _, u := range groups[i].Uses {
			for j := range u.Kids {
				if u.Kids[j].Group != Hole {
					u.Kids[j].Group = to[u.Kids[j].Group]
				}
			}
		}
		for j := range groups[i].Pumps {
			groups[i].Pumps[j].Top = to[groups[i].Pumps[j].Top]
		}
	}
	w.d.Groups = groups
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
		for a := range w.open {
			if w.open[a] >= 0 {
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
		group := w.open[top]
		w.open[top] = -1
		w.closed = append(w.closed, group)
		from := new(big.Int)
		left := new(big.Int).Set(w.d.Groups[group].Size)
		for left.Sign() > 0 {
			p := w.best[top]
			if w.rem[p].Sign() <= 0 {
				if w.order(); w.rank[top] < 0 {
					return false
				}
				continue
			}
			times := left
			if times.Cmp(w.rem[p]) > 0 {
				times = w.rem[p]
			}
			times = new(big.Int).Set(times)
			w.use(group, from, times, p, -1)
			from.Add(from, times)
			left.Sub(left, times)
		}
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
		w.closed = append(w.closed, group)
		kids := w.use(group, new(big.Int), k, l.p, l.next)
		if i < len(cyc)-1 {
			// The next link's group takes the place of the hole.
			group = w.newGroup(w.d.G.Prods[l.p].Rhs[l.next], k)
			kids[l.next] = Kid{group, new(big.Int)}
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
	type span struct{ from, times *big.Int }
	parts := make([][]span, len(d.Groups)) // which occurrences are kids or turns
	parts[0] = []span{{new(big.Int), bigOne}}
	holes := make([]bool, len(d.Groups)) // a hole lies below each occurrence
	// Groups stand before those of their kids, so one backward pass sees kids first.
	for i := len(d.Groups) - 1; i >= 0; i-- {
		g := &d.Groups[i]
		at := new(big.Int)
		for n, u := range g.Uses {
			if u.From.Cmp(at) != 0 || u.Times.Sign() <= 0 {
				return nil, bad(i, "a run begins at %v, expected %v", u.From, at)
			}
			at.Add(at, u.Times)
			p := &d.G.Prods[u.Prod]
			if p.Lhs != g.NT || len(u.Kids) != len(p.Rhs) {
				return nil, bad(i, "production %d does not fit", u.Prod)
			}
			below := 0
			for j, k := range u.Kids {
				if k.Group == Hole {
					below++
					continue
				}
				if k.Group <= i || k.Group >= len(d.Groups) || d.Groups[k.Group].NT != p.Rhs[j] {
					return nil, bad(i, "kid %d does not fit", k.Group)
				}
				parts[k.Group] = append(parts[k.Group], span{k.From, u.Times})
				if holes[k.Group] {
					below++
				}
			}
			if below > 1 || n > 0 && holes[i] != (below == 1) {
				return nil, bad(i, "holes do not fit")
			}
			holes[i] = below == 1
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
			if t.NT != g.NT || t.Size.Cmp(p.Times) != 0 || !holes[p.Top] || !d.holesFit(p.Top, g.NT, holes) {
				return nil, bad(i, "the turns of a pump do not lead back")
			}
			parts[p.Top] = append(parts[p.Top], span{new(big.Int), p.Times})
		}
	}
	for i, list := range parts {
		slices.SortFunc(list, func(a, b span) int { return a.from.Cmp(b.from) })
		at := new(big.Int)
		for _, s := range list {
			if s.from.Cmp(at) != 0 {
				return nil, bad(i, "occurrence %v is a kid twice or never", at)
			}
			at.Add(at, s.times)
		}
		if at.Cmp(d.Groups[i].Size) != 0 {
			return nil, bad(i, "%v of %v occurrences are kids", at, d.Groups[i].Size)
		}
	}
	if d.Groups[0].NT != d.G.Start || holes[0] {
		return nil, bad(0, "is not the start")
	}
	return y, nil
}

// holesFit: the holes below a pump's top stand for nonterminal a.
func (d *Derivation) holesFit(top int, a NT, holes []bool) bool {
	for _, u := range d.Groups[top].Uses {
		for j, k := range u.Kids {
			switch {
			case k.Group == Hole:
				if d.G.Prods[u.Prod].Rhs[j] != a {
					return false
				}
			case holes[k.Group]:
				if !d.holesFit(k.Group, a, holes) {
					return false
				}
			}
		}
	}
	return true
}
