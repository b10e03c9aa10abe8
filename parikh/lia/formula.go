package lia

import (
	"fmt"
	"math/big"
	"sort"
	"strings"
)

// Var is an integer variable of one Solver, numbered from 1; 0 is invalid.
type Var int32

// Bool is a propositional variable of one Solver, numbered from 1; 0 is invalid.
type Bool int32

// Lin is a linear form: integer multiples of variables and of remainders, plus
// an integer. The zero value is the form 0. A Lin is immutable and may be
// shared. Sample: "2*taken - released + 3*(seen mod 4) - 1".
type Lin struct {
	terms []term // strictly ascending in v, no zero coefficient
	mods  []modTerm
	k     num
}

type term struct {
	v Var
	c num // integer, non-zero
}

// modTerm is c times the remainder of of divided by m, which lies in [0, m).
type modTerm struct {
	c  num
	of *Lin
	m  num // >= 1
}

// Const is the form k.
func Const(k int64) Lin { return Lin{k: numInt(k)} }

// ConstBig is the form k; k is copied.
func ConstBig(k *big.Int) Lin { return Lin{k: numBig(new(big.Int).Set(k))} }

// V is the form x.
func V(x Var) Lin { return Term(1, x) }

// Term is the form c*x.
func Term(c int64, x Var) Lin { return mkTerm(numInt(c), x) }

// TermBig is the form c*x; c is copied.
func TermBig(c *big.Int, x Var) Lin { return mkTerm(numBig(new(big.Int).Set(c)), x) }

func mkTerm(c num, x Var) Lin {
	if x <= 0 {
		panic(fmt.Sprintf("lia: invalid variable %d in a linear form", x))
	}
	if c.isZero() {
		return Lin{}
	}
	return Lin{terms: []term{{x, c}}}
}

// Sum adds any number of forms in O(n log n) of the total number of terms; use
// it instead of repeated Add for long sums.
func Sum(ls ...Lin) Lin {
	var out Lin
	n := 0
	for _, l := range ls {
		n += len(l.terms)
	}
	all := make([]term, 0, n)
	for _, l := range ls {
		all = append(all, l.terms...)
		out.mods = append(out.mods, l.mods...)
		out.k = out.k.add(l.k)
	}
	out.terms = mergeTerms(all)
	return out
}

// mergeTerms sorts all in place and adds up equal variables.
func mergeTerms(all []term) []term {
	sorted := true
	for i := 1; i < len(all); i++ {
		if all[i-1].v >= all[i].v {
			sorted = false
			break
		}
	}
	if sorted {
		return all
	}
	sort.Slice(all, func(i, j int) bool { return all[i].v < all[j].v })
	out := all[:0]
	for i := 0; i < len(all); {
		t := all[i]
		for i++; i < len(all) && all[i].v == t.v; i++ {
			t.c = t.c.add(all[i].c)
		}
		if !t.c.isZero() {
			out = append(out, t)
		}
	}
	return out
}

// Add is l + m.
func (l Lin) Add(m Lin) Lin { return Sum(l, m) }

// Sub is l - m.
func (l Lin) Sub(m Lin) Lin { return Sum(l, m.Scale(-1)) }

// Scale is c*l.
func (l Lin) Scale(c int64) Lin { return l.scale(numInt(c)) }

// ScaleBig is c*l; c is copied.
func (l Lin) ScaleBig(c *big.Int) Lin { return l.scale(numBig(new(big.Int).Set(c))) }

func (l Lin) scale(c num) Lin {
	if c.isZero() {
		return Lin{}
	}
	out := Lin{k: l.k.mul(c), terms: make([]term, len(l.terms))}
	for i, t := range l.terms {
		out.terms[i] = term{t.v, t.c.mul(c)}
	}
	for _, m := range l.mods {
		out.mods = append(out.mods, modTerm{m.c.mul(c), m.of, m.m})
	}
	return out
}

// Mod is the remainder of l divided by m, in [0, |m|) whatever the sign of l
// (the mathematical remainder, which for negative l is not Go's %). It panics
// when m is 0: that is the caller's error.
func (l Lin) Mod(m int64) Lin { return l.ModBig(big.NewInt(m)) }

// ModBig is Mod for any modulus; m is copied.
func (l Lin) ModBig(m *big.Int) Lin {
	if m.Sign() == 0 {
		panic("lia: remainder of a division by zero")
	}
	mm := numBig(new(big.Int).Abs(m))
	if k, ok := l.constant(); ok {
		return Lin{k: k.sub(k.div(mm).floor().mul(mm))}
	}
	return Lin{mods: []modTerm{{one, &l, mm}}}
}

// constant returns the value of a form without variables.
func (l Lin) constant() (num, bool) { return l.k, len(l.terms) == 0 && len(l.mods) == 0 }

// IsConst reports the value of l if it mentions no variable, else nil.
func (l Lin) IsConst() *big.Int {
	if k, ok := l.constant(); ok {
		return k.big()
	}
	return nil
}

// String prints l with variables as x1, x2, ...
func (l Lin) String() string { return l.format(func(v Var) string { return fmt.Sprintf("x%d", v) }) }

func (l Lin) format(name func(Var) string) string {
	var b strings.Builder
	put := func(c num, what string) {
		switch {
		case b.Len() == 0 && c.sign() < 0:
			b.WriteString("-")
		case b.Len() > 0 && c.sign() < 0:
			b.WriteString(" - ")
		case b.Len() > 0:
			b.WriteString(" + ")
		}
		a := c.abs()
		switch {
		case what == "":
			b.WriteString(a.String())
		case a.eq(one):
			b.WriteString(what)
		default:
			b.WriteString(a.String() + "*" + what)
		}
	}
	for _, t := range l.terms {
		put(t.c, name(t.v))
	}
	for _, m := range l.mods {
		put(m.c, "("+m.of.format(name)+" mod "+m.m.String()+")")
	}
	if !l.k.isZero() || b.Len() == 0 {
		put(l.k, "")
	}
	return b.String()
}

type op uint8

const (
	opTrue op = iota
	opFalse
	opLE   // lin <= 0
	opEQ   // lin == 0
	opBool // b
	opNot
	opAnd
	opOr
	opIff
)

// Formula is a quantifier-free formula over linear atoms and Boolean variables.
// The zero value is true. Formulas are immutable, share sub-formulas freely and
// are compared by identity.
type Formula struct{ n *node }

type node struct {
	op   op
	b    Bool
	lin  Lin
	kids []*node
}

var (
	trueNode  = &node{op: opTrue}
	falseNode = &node{op: opFalse}
)

func (f Formula) node() *node {
	if f.n == nil {
		return trueNode
	}
	return f.n
}

// True is the formula that always holds.
func True() Formula { return Formula{trueNode} }

// False is the formula that never holds.
func False() Formula { return Formula{falseNode} }

// IsBool is the formula "b holds".
func IsBool(b Bool) Formula {
	if b <= 0 {
		panic(fmt.Sprintf("lia: invalid Boolean variable %d in a formula", b))
	}
	return Formula{&node{op: opBool, b: b}}
}

func cmpNode(o op, l Lin) Formula {
	if k, ok := l.constant(); ok {
		if o == opLE && k.sign() <= 0 || o == opEQ && k.isZero() {
			return True()
		}
		return False()
	}
	return Formula{&node{op: o, lin: l}}
}

// LE is a <= b.
func LE(a, b Lin) Formula { return cmpNode(opLE, a.Sub(b)) }

// LT is a < b, which over the integers is a + 1 <= b.
func LT(a, b Lin) Formula { return cmpNode(opLE, Sum(a, b.Scale(-1), Const(1))) }

// GE is a >= b.
func GE(a, b Lin) Formula { return LE(b, a) }

// GT is a > b.
func GT(a, b Lin) Formula { return LT(b, a) }

// EQ is a == b.
func EQ(a, b Lin) Formula { return cmpNode(opEQ, a.Sub(b)) }

// NE is a != b.
func NE(a, b Lin) Formula { return Not(EQ(a, b)) }

// Congruent is t ≡ r modulo m; m != 0.
func Congruent(t, r Lin, m int64) Formula { return EQ(t.Sub(r).Mod(m), Const(0)) }

// Divides is c | t; c != 0.
func Divides(c int64, t Lin) Formula { return EQ(t.Mod(c), Const(0)) }

// Not is the negation of f.
func Not(f Formula) Formula {
	switch n := f.node(); n.op {
	case opTrue:
		return False()
	case opFalse:
		return True()
	case opNot:
		return Formula{n.kids[0]}
	}
	return Formula{&node{op: opNot, kids: []*node{f.n}}}
}

// And is the conjunction; And() is true.
func And(fs ...Formula) Formula { return nary(opAnd, opTrue, opFalse, fs) }

// Or is the disjunction; Or() is false. Where several disjuncts are true in a
// Boolean assignment the search prefers the earlier one, so put the cheap case
// (the one that constrains least) first.
func Or(fs ...Formula) Formula { return nary(opOr, opFalse, opTrue, fs) }

func nary(o, unit, zero op, fs []Formula) Formula {
	kids := make([]*node, 0, len(fs))
	for _, f := range fs {
		switch n := f.node(); n.op {
		case unit:
		case zero:
			return Formula{n}
		default:
			kids = append(kids, n)
		}
	}
	switch len(kids) {
	case 0:
		if unit == opTrue {
			return True()
		}
		return False()
	case 1:
		return Formula{kids[0]}
	}
	return Formula{&node{op: o, kids: kids}}
}

// Implies is "f only if g".
func Implies(f, g Formula) Formula { return Or(Not(f), g) }

// Iff is "f exactly when g".
func Iff(f, g Formula) Formula {
	a, b := f.node(), g.node()
	switch {
	case a.op == opTrue:
		return g
	case b.op == opTrue:
		return f
	case a.op == opFalse:
		return Not(g)
	case b.op == opFalse:
		return Not(f)
	}
	return Formula{&node{op: opIff, kids: []*node{a, b}}}
}

// String prints f in the syntax that Parse reads (apart from "<=>", which Parse
// does not have), with variables as x1, x2, ... and Booleans as b1, b2, ...
func (f Formula) String() string {
	var b strings.Builder
	f.node().print(&b)
	return b.String()
}

func (n *node) print(b *strings.Builder) {
	list := func(sep string) {
		b.WriteByte('(')
		for i, k := range n.kids {
			if i > 0 {
				b.WriteString(sep)
			}
			k.print(b)
		}
		b.WriteByte(')')
	}
	switch n.op {
	case opTrue:
		b.WriteString("true")
	case opFalse:
		b.WriteString("false")
	case opLE:
		l := n.lin
		k := l.k.neg()
		l.k = num{}
		b.WriteString(l.String() + " <= " + k.String())
	case opEQ:
		l := n.lin
		k := l.k.neg()
		l.k = num{}
		b.WriteString(l.String() + " == " + k.String())
	case opBool:
		fmt.Fprintf(b, "b%d", n.b)
	case opNot:
		b.WriteString("!")
		b.WriteByte('(')
		n.kids[0].print(b)
		b.WriteByte(')')
	case opAnd:
		list(" && ")
	case opOr:
		list(" || ")
	case opIff:
		list(" <=> ")
	}
}
