// Strongly connected components and the loop nest.

package parikh

import "slices"

// components gives the strongly connected components of the graph on 0..n-1,
// users of a component after it (Tarjan, Depth-first search and linear graph
// algorithms, 1972; iterative). Nodes with skip are left out.
func components(n int, next func(int32) []int32, skip func(int32) bool) [][]int32 {
	type frame struct {
		a int32
		i int
	}
	index := make([]int32, n) // 0: not met
	low := make([]int32, n)
	on := make([]bool, n)
	var stack []int32
	var frames []frame
	var out [][]int32
	counter := int32(0)
	enter := func(a int32) {
		counter++
		index[a], low[a] = counter, counter
		on[a] = true
		stack = append(stack, a)
		frames = append(frames, frame{a, 0})
	}
	for s := int32(0); s < int32(n); s++ {
		if index[s] != 0 || skip != nil && skip(s) {
			continue
		}
		enter(s)
		for len(frames) > 0 {
			f := &frames[len(frames)-1]
			if succ := next(f.a); f.i < len(succ) {
				b := succ[f.i]
				f.i++
				if skip != nil && skip(b) {
					continue
				}
				if index[b] == 0 {
					enter(b)
				} else if on[b] {
					low[f.a] = min(low[f.a], index[b])
				}
				continue
			}
			a := f.a
			frames = frames[:len(frames)-1]
			if len(frames) > 0 {
				p := frames[len(frames)-1].a
				low[p] = min(low[p], low[a])
			}
			if low[a] == index[a] {
				var c []int32
				for {
					b := stack[len(stack)-1]
					stack = stack[:len(stack)-1]
					on[b] = false
					c = append(c, b)
					if b == a {
						break
					}
				}
				slices.Sort(c)
				out = append(out, c)
			}
		}
	}
	return out
}

// region is a strongly connected set of the loop nest that does not hold the
// start.
type region struct {
	nts     []int32 // ascending
	entries int     // members with predecessors outside, in the whole graph
	parent  int     // the region around it; -1: none
	cuts    int     // lazy clauses that were needed inside
	ranked  bool
}

// loopNest lists the regions of the dependency graph, outer ones first: each
// strongly connected set with a cycle, then those of the rest once its header is
// taken out, and so on. The header of the set that holds the start (0) is the
// start; of others it is the entry with most productions from outside. The nest
// is cut off where its regions have 20 members per nonterminal of the grammar;
// what would lie deeper is left to lazy clauses.
func (r *reduced) loopNest() (regions []region) {
	next := make([][]int32, r.numNT)
	prev := make([][]int32, r.numNT)
	for i := range r.prods {
		p := &r.prods[i]
		for j, b := range p.rhs {
			if j == 0 || p.rhs[j-1] != b {
				next[p.lhs] = append(next[p.lhs], b)
				prev[b] = append(prev[b], p.lhs)
			}
		}
	}
	// level[a] is the piece that a belongs to now; a piece is split by taking its
	// header out. All pieces of one depth are split in one pass over the graph.
	level := make([]int32, r.numNT) // -1: taken out
	owner := []int{-1}              // by piece: the region that it is the inside of
	total := 0
	for {
		split := components(r.numNT, func(a int32) []int32 { return next[a] }, func(a int32) bool { return level[a] < 0 })
		// Edges between different pieces do not connect: pieces of one depth come from
		// different components one depth up, so no cycle leads through two of them.
		for i := range level {
			if level[i] >= 0 {
				level[i] = -level[i] - 2 // to be set again below
			}
		}
		var owners []int
		any := false
		for _, c := range split {
			if len(c) == 1 && !slices.Contains(next[c[0]], c[0]) {
				level[c[0]] = -1
				continue
			}
			any = true
			parent := owner[-level[c[0]]-2]
			member := map[int32]bool{}
			for _, a := range c {
				member[a] = true
			}
			header, most, entries := c[0], -1, 0
			for _, a := range c {
				outside := 0
				for _, b := range prev[a] {
					if !member[b] {
						outside++
					}
				}
				if outside > 0 {
					entries++
				}
				if outside > most {
					header, most = a, outside
				}
			}
			inside := parent
			if member[0] {
				header = 0
			} else {
				inside = len(regions)
				regions = append(regions, region{nts: c, entries: entries, parent: parent})
				total += len(c)
			}
			piece := int32(len(owners))
			owners = append(owners, inside)
			for _, a := range c {
				level[a] = piece
			}
			level[header] = -1
		}
		if !any || total > 20*r.numNT {
			return regions
		}
		owner = owners
	}
}
