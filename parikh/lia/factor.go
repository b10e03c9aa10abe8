package lia

import (
	"fmt"
	"sort"
)

// ent is one non-zero of a sparse vector; i is a row, a position or a variable,
// as the context says.
type ent struct {
	i int32
	c num
}

// eta is an elementary matrix: the identity with column piv replaced by col
// (which holds an entry at piv).
type eta struct {
	piv int32
	col []ent
}

// factor holds the inverse of the basis as a product of etas (product form of
// the inverse: Dantzig and Orchard-Hays, 1954), with singletons ordered first so
// that the triangular part, which is nearly everything for flow systems, makes
// no fill. Both solves are hypersparse: a heap visits only those etas that can
// change the vector, so a pivot costs what it touches and not the number of rows.
type factor struct {
	etas    []eta
	byPivot [][]int32 // per row: etas that pivot on it, ascending
	byRow   [][]int32 // per row: etas with an entry in it, ascending
	baseNNZ int       // entries after the last refactoring
	nnz     int       // entries now
	stamp   []int32   // per eta, equals epoch when queued by the running btran
	epoch   int32
	heap    []int32
	v       spvec // scratch of refactor
}

// spvec is a dense vector with a list of the entries that may be non-zero.
type spvec struct {
	val  []num
	mark []bool
	idx  []int32
}

func (x *spvec) grow(n int) {
	for len(x.val) < n {
		x.val = append(x.val, num{})
		x.mark = append(x.mark, false)
	}
}

func (x *spvec) clear() {
	for _, i := range x.idx {
		x.val[i] = num{}
		x.mark[i] = false
	}
	x.idx = x.idx[:0]
}

func (x *spvec) add(i int32, c num) (fresh bool) {
	if !x.mark[i] {
		x.mark[i] = true
		x.idx = append(x.idx, i)
		x.val[i] = c
		return true
	}
	x.val[i] = x.val[i].add(c)
	return false
}

func (f *factor) grow(rows int) {
	for len(f.byPivot) < rows {
		f.byPivot = append(f.byPivot, nil)
		f.byRow = append(f.byRow, nil)
	}
}

func (f *factor) push(e eta) {
	k := int32(len(f.etas))
	f.etas = append(f.etas, e)
	f.stamp = append(f.stamp, 0)
	f.byPivot[e.piv] = append(f.byPivot[e.piv], k)
	for _, x := range e.col {
		f.byRow[x.i] = append(f.byRow[x.i], k)
	}
	f.nnz += len(e.col)
}

// etaFor makes the eta that maps the vector w (pivot row r) to the unit vector;
// ok is false when it is the identity.
func etaFor(w *spvec, r int32) (eta, bool) {
	p := w.val[r].inv()
	if p.eq(one) && len(w.idx) == 1 {
		return eta{}, false
	}
	e := eta{piv: r, col: make([]ent, 0, len(w.idx))}
	for _, i := range w.idx {
		switch {
		case i == r:
			e.col = append(e.col, ent{i, p})
		case !w.val[i].isZero():
			e.col = append(e.col, ent{i, w.val[i].mul(p).neg()})
		}
	}
	return e, len(e.col) > 1 || !p.eq(one)
}

func heapPush(h []int32, x int32) []int32 {
	h = append(h, x)
	for i := len(h) - 1; i > 0; {
		p := (i - 1) / 2
		if h[p] <= h[i] {
			break
		}
		h[p], h[i] = h[i], h[p]
		i = p
	}
	return h
}

func heapPop(h []int32) (int32, []int32) {
	top := h[0]
	n := len(h) - 1
	h[0] = h[n]
	h = h[:n]
	for i := 0; ; {
		c := 2*i + 1
		if c >= n {
			break
		}
		if c+1 < n && h[c+1] < h[c] {
			c++
		}
		if h[i] <= h[c] {
			break
		}
		h[i], h[c] = h[c], h[i]
		i = c
	}
	return top, h
}

// ftran replaces x (indexed by row) by B⁻¹x (indexed by basis position).
func (f *factor) ftran(x *spvec) {
	h := f.heap[:0]
	// Every marked row has its next eta in the heap.
	next := func(r, after int32) {
		l := f.byPivot[r]
		k := 0
		if after >= 0 {
			k = sort.Search(len(l), func(i int) bool { return l[i] > after })
		}
		if k < len(l) {
			h = heapPush(h, l[k])
		}
	}
	for _, r := range x.idx {
		next(r, -1)
	}
	for len(h) > 0 {
		var k int32
		k, h = heapPop(h)
		e := &f.etas[k]
		t := x.val[e.piv]
		if !t.isZero() {
			x.val[e.piv] = num{}
			for _, y := range e.col {
				if x.add(y.i, y.c.mul(t)) {
					next(y.i, k)
				}
			}
		}
		next(e.piv, k)
	}
	f.heap = h
}

// btran replaces y (indexed by basis position) by the row vector yB⁻¹ (indexed
// by row).
func (f *factor) btran(y *spvec) {
	h := f.heap[:0]
	f.epoch++
	queue := func(r, before int32) {
		for _, k := range f.byRow[r] {
			if k >= before {
				break
			}
			if f.stamp[k] != f.epoch {
				f.stamp[k] = f.epoch
				h = heapPush(h, -k) // greatest first
			}
		}
	}
	for _, r := range y.idx {
		queue(r, int32(len(f.etas)))
	}
	for len(h) > 0 {
		var k int32
		k, h = heapPop(h)
		k = -k
		e := &f.etas[k]
		var sum num
		for _, x := range e.col {
			if y.mark[x.i] && !y.val[x.i].isZero() {
				sum = sum.add(x.c.mul(y.val[x.i]))
			}
		}
		if y.mark[e.piv] {
			y.val[e.piv] = sum
		} else if !sum.isZero() {
			y.add(e.piv, sum)
			queue(e.piv, k)
		}
	}
	f.heap = h
}

// refactor rebuilds the etas from the basic columns and assigns positions anew.
// Order: column singletons are peeled first and applied last, in reverse; row
// singletons are applied first; what is left (the nucleus) goes in between by
// ascending column length. In that order no singleton column is changed by an
// earlier eta.
func (s *simplex) refactor() {
	f := &s.fac
	m := len(s.rows)
	f.etas, f.stamp, f.nnz, f.epoch = f.etas[:0], f.stamp[:0], 0, 0
	for i := range f.byPivot {
		f.byPivot[i], f.byRow[i] = f.byPivot[i][:0], f.byRow[i][:0]
	}
	s.stats.Refactors++

	vars := append([]int32(nil), s.basic...)
	colCount := make([]int32, m) // by index into vars
	rowCount := make([]int32, m)
	at := make(map[int32]int32, m) // variable -> index into vars
	rowDone := make([]bool, m)
	colDone := make([]bool, m)
	for k, v := range vars {
		at[v] = int32(k)
		colCount[k] = int32(len(s.cols[v]))
		for _, e := range s.cols[v] {
			rowCount[e.i]++
		}
	}
	type pair struct{ k, row int32 }
	var colPeel, rowPeel []pair
	var queue []int32
	for k := range vars {
		if colCount[k] == 1 {
			queue = append(queue, int32(k))
		}
	}
	for len(queue) > 0 {
		k := queue[len(queue)-1]
		queue = queue[:len(queue)-1]
		if colDone[k] || colCount[k] != 1 {
			continue
		}
		row := int32(-1)
		for _, e := range s.cols[vars[k]] {
			if !rowDone[e.i] {
				row = e.i
			}
		}
		colDone[k], rowDone[row] = true, true
		colPeel = append(colPeel, pair{k, row})
		for _, e := range s.rows[row] {
			if s.pos[e.i] >= 0 {
				if j := at[e.i]; !colDone[j] {
					if colCount[j]--; colCount[j] == 1 {
						queue = append(queue, j)
					}
				}
			}
		}
	}
	for i := range rowCount {
		rowCount[i] = 0
	}
	for k, v := range vars {
		if !colDone[k] {
			for _, e := range s.cols[v] {
				rowCount[e.i]++
			}
		}
	}
	for i := range rowCount {
		if !rowDone[i] && rowCount[i] == 1 {
			queue = append(queue, int32(i))
		}
	}
	for len(queue) > 0 {
		row := queue[len(queue)-1]
		queue = queue[:len(queue)-1]
		if rowDone[row] || rowCount[row] != 1 {
			continue
		}
		k := int32(-1)
		for _, e := range s.rows[row] {
			if s.pos[e.i] >= 0 && !colDone[at[e.i]] {
				k = at[e.i]
			}
		}
		colDone[k], rowDone[row] = true, true
		rowPeel = append(rowPeel, pair{k, row})
		for _, e := range s.cols[vars[k]] {
			if rowCount[e.i]--; !rowDone[e.i] && rowCount[e.i] == 1 {
				queue = append(queue, e.i)
			}
		}
	}
	var nucleus []int32
	for k := range vars {
		if !colDone[k] {
			nucleus = append(nucleus, int32(k))
		}
	}
	sort.SliceStable(nucleus, func(i, j int) bool {
		return len(s.cols[vars[nucleus[i]]]) < len(s.cols[vars[nucleus[j]]])
	})

	w := &f.v
	w.grow(m)
	load := func(k int32) {
		w.clear()
		for _, e := range s.cols[vars[k]] {
			w.add(e.i, e.c)
		}
	}
	place := func(k, row int32) {
		if e, ok := etaFor(w, row); ok {
			f.push(e)
		}
		s.basic[row] = vars[k]
		s.pos[vars[k]] = row
	}
	for _, p := range rowPeel {
		load(p.k)
		place(p.k, p.row)
	}
	for _, k := range nucleus {
		load(k)
		f.ftran(w)
		row := int32(-1)
		for _, i := range w.idx {
			if rowDone[i] || w.val[i].isZero() {
				continue
			}
			if row < 0 || rowCount[i] < rowCount[row] || rowCount[i] == rowCount[row] && i < row {
				row = i
			}
		}
		if row < 0 {
			panic(fmt.Sprintf("lia: refactor: singular basis at variable %d", vars[k]))
		}
		rowDone[row] = true
		place(k, row)
	}
	for i := len(colPeel) - 1; i >= 0; i-- {
		load(colPeel[i].k)
		place(colPeel[i].k, colPeel[i].row)
	}
	w.clear()
	f.baseNNZ = f.nnz
}
