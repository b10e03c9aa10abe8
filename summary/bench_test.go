package summary

import (
	"fmt"
	"testing"

	"pathtally/pds"
)

// family is a system made by a function of the head.
type family struct {
	rules func(h pds.Head, dst []pds.Rule) []pds.Rule
}

func (f family) Rules(h pds.Head, dst []pds.Rule) []pds.Rule { return f.rules(h, dst) }
func (f family) NumCounts() int                              { return 2 }
func (f family) Vector(e pds.EffectID) []int64 {
	return [][]int64{{0, 0}, {1, 0}, {-1, 1}, {-1, 0}}[e]
}

// nested: n functions, each takes, calls the next twice in a row, and releases;
// the last one does nothing. Symbols 4i+1..4i+4 belong to function i. With exits
// > 1 each function returns in any of as many states, and callers go on alike.
func nested(n, exits int) family {
	return family{func(h pds.Head, dst []pds.Rule) []pds.Rule {
		i, at := int(h.Symbol-1)/4, int(h.Symbol-1)%4
		sym := func(i, at int) pds.SymbolID { return pds.SymbolID(4*i + at + 1) }
		switch {
		case i == n-1:
			for q := range exits {
				dst = append(dst, pds.Rule{Kind: pds.Pop, State: pds.StateID(q + 1)})
			}
		case at == 0:
			dst = append(dst, pds.Rule{Kind: pds.Step, State: 1, Top: sym(i, 1), Effect: 1})
		case at == 1:
			dst = append(dst, pds.Rule{Kind: pds.Push, State: 1, Top: sym(i+1, 0), Below: sym(i, 2)})
		case at == 2:
			dst = append(dst, pds.Rule{Kind: pds.Push, State: h.State, Top: sym(i+1, 0), Below: sym(i, 3)})
		case at == 3:
			dst = append(dst, pds.Rule{Kind: pds.Pop, State: h.State, Effect: 2})
		}
		return dst
	}}
}

// recursion: n functions that call each other in a ring with two exits, ok and
// failed; after a failure the rest is skipped.
func recursion(n int) family {
	const run, ok, failed = 1, 2, 3
	return family{func(h pds.Head, dst []pds.Rule) []pds.Rule {
		i, at := int(h.Symbol-1)/4, int(h.Symbol-1)%4
		sym := func(i, at int) pds.SymbolID { return pds.SymbolID(4*(i%n) + at + 1) }
		switch {
		case at == 0:
			dst = append(dst,
				pds.Rule{Kind: pds.Pop, State: failed},
				pds.Rule{Kind: pds.Pop, State: ok},
				pds.Rule{Kind: pds.Step, State: run, Top: sym(i, 1), Effect: 1})
		case at == 1:
			dst = append(dst,
				pds.Rule{Kind: pds.Push, State: run, Top: sym(i+1, 0), Below: sym(i, 2)},
				pds.Rule{Kind: pds.Push, State: run, Top: sym(i+7, 0), Below: sym(i, 2)})
		case at == 2 && h.State == ok:
			dst = append(dst, pds.Rule{Kind: pds.Step, State: run, Top: sym(i, 3)})
		case at == 2:
			dst = append(dst, pds.Rule{Kind: pds.Pop, State: failed, Effect: 3})
		default:
			dst = append(dst, pds.Rule{Kind: pds.Pop, State: ok, Effect: 3})
		}
		return dst
	}}
}

// loops: n loops one behind the other, each of which takes and releases.
func loops(n int) family {
	return family{func(h pds.Head, dst []pds.Rule) []pds.Rule {
		i, at := int(h.Symbol-1)/4, int(h.Symbol-1)%4
		sym := func(i, at int) pds.SymbolID { return pds.SymbolID(4*i + at + 1) }
		switch {
		case i == n:
			dst = append(dst, pds.Rule{Kind: pds.Pop, State: 1})
		case at == 0:
			dst = append(dst,
				pds.Rule{Kind: pds.Step, State: 1, Top: sym(i, 1), Effect: 1},
				pds.Rule{Kind: pds.Step, State: 1, Top: sym(i+1, 0)})
		default:
			dst = append(dst, pds.Rule{Kind: pds.Step, State: 1, Top: sym(i, (at+1)%4), Effect: []pds.EffectID{0, 0, 0, 3}[at]})
		}
		return dst
	}}
}

func all(pds.StateID) bool { return true }

// Measured once on 2 cores shared with other work (AMD EPYC, linux/amd64, go
// 1.26.8), seconds for saturation and solving together, ended / at any moment:
//
//	nested, 50,000 functions, 1 exit     200,000 pairs   0.5 / 0.9
//	nested, 1,200 functions, 20 exits  1,007,000 pairs   4.7 / 3.7 (weights of 1,200 bits; saturation alone 0.8)
//	recursion, 20,000 functions          140,000 pairs   0.5 / 0.8 (one component)
//	loops, 50,000                        200,000 pairs   0.5 / 0.7
func BenchmarkSolve(b *testing.B) {
	for _, c := range []struct {
		name string
		sys  pds.System
		want map[bool]ValueKind // ended, at any moment
	}{
		{"nested/n=50000,exits=1", nested(50000, 1), map[bool]ValueKind{false: Finite, true: Finite}},
		{"nested/n=1200,exits=20", nested(1200, 20), map[bool]ValueKind{false: Finite, true: Finite}},
		{"recursion/n=20000", recursion(20000), map[bool]ValueKind{false: Finite, true: Unbounded}},
		{"loops/n=50000", loops(50000), map[bool]ValueKind{false: Finite, true: Finite}},
	} {
		for _, moment := range []bool{false, true} {
			b.Run(fmt.Sprintf("%s,moment=%v", c.name, moment), func(b *testing.B) {
				h := pds.Head{State: 1, Symbol: 1}
				var size Size
				for range b.N {
					e := New(c.sys, 0)
					if a := e.Saturate(h, 0); a.Exhausted {
						b.Fatal(a)
					}
					if v := e.Solve(Question{Weights: []int64{1, 0}, AnyMoment: moment}).Greatest(h, all); v.Kind != c.want[moment] {
						b.Fatalf("%v", v)
					}
					size = e.Size()
				}
				b.ReportMetric(float64(size.Nodes), "nodes")
				b.ReportMetric(float64(size.Pairs), "pairs")
				b.ReportMetric(float64(size.Productions), "prods")
			})
		}
	}
}

// BenchmarkSaturate closes more than a million (node, exit) pairs.
func BenchmarkSaturate(b *testing.B) {
	for range b.N {
		e := New(nested(1200, 20), 0)
		if a := e.Saturate(pds.Head{State: 1, Symbol: 1}, 0); a.Exhausted {
			b.Fatal(a)
		}
		s := e.Size()
		b.ReportMetric(float64(s.Pairs), "pairs")
		b.ReportMetric(float64(e.steps), "steps")
	}
}

// BenchmarkWitness asks for a path from each of many heads of one system, as a
// report with many findings does.
func BenchmarkWitness(b *testing.B) {
	for range b.N {
		s := New(loops(20000), 0).Solve(Question{Weights: []int64{1, 0}, AnyMoment: true})
		steps := 0
		for i := range 1000 {
			p, ok := s.Witness(pds.Head{State: 1, Symbol: pds.SymbolID(1 + 80*i)}, all, 0)
			if !ok {
				b.Fatal("no witness")
			}
			steps += len(p.Steps)
		}
		b.ReportMetric(float64(steps), "steps")
	}
}
