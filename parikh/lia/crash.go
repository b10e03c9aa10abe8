package lia

// crash replaces the basic slacks of equations by structural columns before the
// first check, so that the simplex need not do it pivot by pivot. It repeatedly
// takes a column with exactly one entry in the equations not yet served (first
// found, first taken), which makes a triangular basis without any arithmetic.
//
// On the flow system of a grammar this visits nonterminals in the order of their
// least derivations: a column is ready when all nonterminals on its right side
// are served. The basis picks one terminating production per nonterminal, whose
// values are the counts of an actual derivation, hence a feasible vertex. On
// other systems the basis may be infeasible, as any basis may.
//
// It must run before any structural variable is basic.
func (s *simplex) crash() {
	m := len(s.rows)
	open := make([]bool, m)
	count := make([]int32, len(s.cols))
	found := false
	for i, row := range s.rows {
		slack := row[len(row)-1].i
		if !s.fixed[slack] || s.pos[slack] != int32(i) {
			continue
		}
		open[i], found = true, true
		for _, e := range row[:len(row)-1] {
			count[e.i]++
		}
	}
	if !found {
		return
	}
	s.settle()
	var queue []int32
	for v := range s.cols {
		if count[v] == 1 && !s.fixed[v] {
			queue = append(queue, int32(v))
		}
	}
	served := false
	for len(queue) > 0 {
		v := queue[0]
		queue = queue[1:]
		row := int32(-1)
		for _, e := range s.cols[v] {
			if open[e.i] {
				row = e.i
			}
		}
		if row < 0 {
			continue // another column served its row meanwhile
		}
		open[row], served = false, true
		slack := s.basic[row]
		s.pos[slack] = -1
		s.val[slack] = s.lo[slack].v
		s.basic[row] = v
		s.pos[v] = row
		for _, e := range s.rows[row] {
			if count[e.i]--; count[e.i] == 1 && !s.fixed[e.i] && s.pos[e.i] < 0 && e.i != slack {
				queue = append(queue, e.i)
			}
		}
	}
	if !served {
		return
	}
	s.refactor()
	// Basic values from the nonbasic ones: B·x_B = -N·x_N.
	w := &s.w
	w.clear()
	for v := range s.cols {
		if s.pos[v] >= 0 || s.val[v].isZero() {
			continue
		}
		x := s.val[v].neg()
		for _, e := range s.cols[v] {
			w.add(e.i, e.c.mul(x))
		}
	}
	s.fac.ftran(w)
	for p, v := range s.basic {
		s.setBasic(v, w.val[p])
	}
}
