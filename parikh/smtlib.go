// Questions for other solvers, in the published encoding.

package parikh

import (
	"io"
	"math/big"

	"pathtally/parikh/lia"
)

// WriteSMTLIB writes "some derivation of g satisfies the question" as an SMT-LIB
// 2.6 script of logic QF_LIA. The question is a formula over the names of the
// counts ([lia.Parse]; errors are *lia.SyntaxError).
//
// The encoding is the published one (Verma, Seidl and Schwentick, On the
// complexity of equational Horn clauses, CADE 2005), on the trimmed grammar
// without any merging: a number per production, flow, and for each nonterminal a
// distance from the start, where an active nonterminal must be one further than
// the left side of a production that is used and has it on the right. (As first
// printed, the production did not have to be used, so that unreached loops
// passed; both "is used" and "the left side has a distance" are asserted here.)
// Nothing here is shared with the way [Image] decides connectivity.
func WriteSMTLIB(w io.Writer, g *Grammar, question string) error {
	g.check()
	use := g.useful()
	s := lia.New(lia.Options{})
	n := g.NumNT()
	y := make([]lia.Var, len(g.Prods))
	in := make([][]lia.Lin, n)
	out := make([][]lia.Lin, n)
	sums := make([][]lia.Lin, len(g.Counts))
	var counts []lia.Var
	for _, c := range g.Counts {
		counts = append(counts, s.NewFree(c))
	}
	f, err := lia.Parse(question, func(name string) (lia.Var, lia.Bool, bool) {
		for i, c := range g.Counts {
			if c == name {
				return counts[i], 0, true
			}
		}
		return 0, 0, false
	})
	if err != nil {
		return err
	}
	empty := true
	for p := range g.Prods {
		if !use[p] {
			continue
		}
		empty = false
		pr := &g.Prods[p]
		y[p] = s.NewVar("uses of production " + itoa(p))
		out[pr.Lhs] = append(out[pr.Lhs], lia.V(y[p]))
		for _, b := range pr.Rhs {
			in[b] = append(in[b], lia.V(y[p]))
		}
		for _, e := range pr.Effect {
			sums[e.Count] = append(sums[e.Count], lia.Term(e.N, y[p]))
		}
	}
	if empty {
		s.Assert("", lia.False())
	}
	for i, c := range counts {
		s.Assert("", lia.EQ(lia.V(c), lia.Sum(sums[i]...)))
	}
	dist := make([]lia.Var, n)
	for a := range dist {
		if len(out[a]) > 0 {
			dist[a] = s.NewBounded("distance of "+g.Names[a], new(big.Int), nil)
		}
	}
	reach := make([][]lia.Formula, n)
	for p := range g.Prods {
		if !use[p] {
			continue
		}
		pr := &g.Prods[p]
		seen := map[NT]bool{}
		for _, b := range pr.Rhs {
			if b == g.Start || seen[b] {
				continue
			}
			seen[b] = true
			reach[b] = append(reach[b], lia.And(
				lia.GE(lia.V(y[p]), lia.Const(1)),
				lia.GE(lia.V(dist[pr.Lhs]), lia.Const(1)),
				lia.EQ(lia.V(dist[b]), lia.V(dist[pr.Lhs]).Add(lia.Const(1)))))
		}
	}
	for a := range dist {
		if dist[a] == 0 {
			continue
		}
		extra := lia.Const(0)
		if NT(a) == g.Start {
			extra = lia.Const(1)
		}
		s.Assert("", lia.EQ(lia.Sum(append(in[a], extra)...), lia.Sum(out[a]...)))
		if NT(a) == g.Start {
			s.Assert("", lia.EQ(lia.V(dist[a]), lia.Const(1)))
			continue
		}
		unused := lia.And(lia.EQ(lia.Sum(out[a]...), lia.Const(0)), lia.EQ(lia.V(dist[a]), lia.Const(0)))
		s.Assert("", lia.Or(append([]lia.Formula{unused}, reach[a]...)...))
	}
	return s.WriteSMTLIB(w, f)
}
