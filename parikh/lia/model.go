package lia

import (
	"fmt"
	"math/big"
)

// Model is an assignment of integers and truth values. Everything in this file
// works on the formulas as the caller wrote them, with math/big alone: it
// shares no code with presolve, simplex or search, so that it can judge them.
type Model struct {
	ints  []*big.Int // indexed by Var; index 0 unused
	bools []bool     // indexed by Bool; index 0 unused
}

// Int is the value of x, as a copy; 0 for a variable made after the model.
func (m Model) Int(x Var) *big.Int {
	if int(x) >= len(m.ints) {
		return new(big.Int)
	}
	return new(big.Int).Set(m.ints[x])
}

// Bool is the value of b; false for a variable made after the model.
func (m Model) Bool(b Bool) bool { return int(b) < len(m.bools) && m.bools[b] }

// NewModel makes a model from values indexed by Var and Bool (index 0 unused),
// for callers who have an assignment from elsewhere and want it judged.
func NewModel(ints []*big.Int, bools []bool) Model { return Model{ints, bools} }

// Value is the value of a linear form.
func (m Model) Value(l Lin) *big.Int {
	sum := new(big.Int).Set(l.k.rat().Num())
	t := new(big.Int)
	for _, x := range l.terms {
		if int(x.v) < len(m.ints) {
			sum.Add(sum, t.Mul(x.c.rat().Num(), m.ints[x.v]))
		}
	}
	for _, x := range l.mods {
		r := m.Value(*x.of)
		r.Mod(r, x.m.rat().Num()) // Euclidean: in [0, m)
		sum.Add(sum, r.Mul(r, x.c.rat().Num()))
	}
	return sum
}

// Holds reports whether f is true under m. Shared sub-formulas are evaluated
// once.
func (m Model) Holds(f Formula) bool { return m.holds(f.node(), map[*node]bool{}) }

func (m Model) holds(n *node, memo map[*node]bool) bool {
	switch n.op {
	case opTrue:
		return true
	case opFalse:
		return false
	case opLE:
		return m.Value(n.lin).Sign() <= 0
	case opEQ:
		return m.Value(n.lin).Sign() == 0
	case opBool:
		return m.Bool(n.b)
	case opNot:
		return !m.holds(n.kids[0], memo)
	}
	if v, ok := memo[n]; ok {
		return v
	}
	var v bool
	switch n.op {
	case opAnd:
		v = true
		for _, k := range n.kids {
			if !m.holds(k, memo) {
				v = false
				break
			}
		}
	case opOr:
		for _, k := range n.kids {
			if m.holds(k, memo) {
				v = true
				break
			}
		}
	case opIff:
		v = m.holds(n.kids[0], memo) == m.holds(n.kids[1], memo)
	default:
		panic(fmt.Sprintf("lia: unknown formula kind %d", n.op))
	}
	memo[n] = v
	return v
}
