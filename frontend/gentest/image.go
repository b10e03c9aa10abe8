package gentest

import (
	"errors"
	"fmt"
	"math/bits"
	"strings"

	"pathtally/pds"
	"pathtally/properties"
	"pathtally/summary"
)

// side bounds the counts that are compared: below it an image is exact.
const side = 12

// image is a set of count vectors (taken, given) with both counts below side:
// bit g of row t.
type image [side]uint32

func (m *image) has(v [2]int) bool { return m[v[0]]>>v[1]&1 == 1 }

func (m *image) set(t, g int64) {
	if t >= 0 && g >= 0 && t < side && g < side {
		m[t] |= 1 << g
	}
}

// join adds the members of n and says whether there was a new one.
func (m *image) join(n *image) (grew bool) {
	for t := range m {
		if n[t]&^m[t] != 0 {
			grew = true
			m[t] |= n[t]
		}
	}
	return grew
}

// sum is the set of all sums of a member of m and one of n.
func (m *image) sum(n *image) (out image) {
	for t, row := range m {
		if row == 1 {
			for u := 0; t+u < side; u++ {
				out[t+u] |= n[u]
			}
			continue
		}
		for ; row != 0; row &= row - 1 {
			g := bits.TrailingZeros32(row)
			for u := 0; t+u < side; u++ {
				out[t+u] |= n[u] << g & (1<<side - 1)
			}
		}
	}
	return out
}

func (m *image) members() (out [][2]int) {
	for t := range m {
		for g := range side {
			if m.has([2]int{t, g}) {
				out = append(out, [2]int{t, g})
			}
		}
	}
	return out
}

func (m *image) String() string {
	var b strings.Builder
	l := m.members()
	for i, v := range l {
		if i == 12 {
			fmt.Fprintf(&b, " and %d more", len(l)-i)
			break
		}
		fmt.Fprintf(&b, " %d/%d", v[0], v[1])
	}
	return strings.TrimSpace(b.String())
}

// imageOf enumerates the count vectors of a question's runs. Since no step
// counts less than nothing, vectors below side come from parts below side only,
// so the enumeration is exact. In either every doubt counts both ways, in sure
// none does; doubtful says whether there is one.
func imageOf(m properties.Model, e *summary.Engine, h pds.Head, accept func(pds.StateID) bool, q summary.Question) (sure, either image, doubtful bool, err error) {
	q.Weights = make([]int64, m.NumCounts())
	g, err := e.Grammar(h, accept, q)
	if errors.Is(err, summary.ErrNoWitness) {
		return sure, either, false, nil
	}
	if err != nil {
		return sure, either, false, err
	}
	effects := make([]image, len(g.Prods))
	for i, p := range g.Prods {
		v := m.Vector(p.Effect)
		effects[i].set(v[0], v[1])
	}
	sure = enumerate(g, effects)
	for i, p := range g.Prods {
		if p.Rule.Head.State == 0 || p.Before {
			continue
		}
		if r := m.Rules(p.Rule.Head, nil)[p.Rule.Index]; r.Doubt != 0 {
			doubtful = true
			for _, f := range []pds.EffectID{r.Effect, r.DoubtEffect} {
				v := m.Vector(f)
				effects[i].set(v[0], v[1])
			}
		}
	}
	if !doubtful {
		return sure, sure, false, nil
	}
	return sure, enumerate(g, effects), true, nil
}

// enumerate gives the image of the start symbol: the least solution of the
// grammar read as equations over images.
func enumerate(g *summary.Grammar, effects []image) image {
	sets := make([]image, g.NumNT)
	users := make([][]int, g.NumNT)
	queued := make([]bool, len(g.Prods))
	var queue []int
	// Left sides are numbered from the start downwards: begin at the bottom.
	for i := len(g.Prods) - 1; i >= 0; i-- {
		for _, a := range g.Prods[i].Rhs {
			users[a] = append(users[a], i)
		}
		queue = append(queue, i)
		queued[i] = true
	}
	for len(queue) > 0 {
		i := queue[0]
		queue = queue[1:]
		queued[i] = false
		p := &g.Prods[i]
		out := effects[i]
		for _, a := range p.Rhs {
			out = out.sum(&sets[a])
		}
		if sets[p.Lhs].join(&out) {
			for _, u := range users[p.Lhs] {
				if !queued[u] {
					queued[u] = true
					queue = append(queue, u)
				}
			}
		}
	}
	return sets[g.Start]
}
