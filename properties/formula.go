package properties

// Claims to questions: the negation of a formula over counts, in disjunctive
// form, each atom an integer inequality weights·counts > bound.

import (
	"math/big"

	"pathtally/properties/syntax"
)

// linear is a linear term over the counts of a rule: Σ w[i]·count(i) + k.
type linear struct {
	w []*big.Int // len = number of counts
	k *big.Int
}

// atom is w·counts > bound; text is the comparison it breaks.
type atom struct {
	w     []*big.Int
	bound *big.Int
	text  string
}

// maxCases bounds the size of a negated claim.
const maxCases = 64

// term reads a formula that must be a number.
func (r *resolver) term(f syntax.Formula) linear {
	zero := func() linear {
		l := linear{w: make([]*big.Int, len(r.counts)), k: new(big.Int)}
		for i := range l.w {
			l.w[i] = new(big.Int)
		}
		return l
	}
	switch f := f.(type) {
	case *syntax.Paren:
		return r.term(f.X)
	case *syntax.IntLit:
		l := zero()
		l.k.Set(f.Value)
		return l
	case *syntax.Unary:
		if f.Op == "-" {
			return r.term(f.X).times(big.NewInt(-1))
		}
	case *syntax.Subject:
		l := zero()
		l.w[r.countOf(f)].SetInt64(1)
		return l
	case *syntax.Size:
		r.fail(syntax.Naming, f, "", "not judged yet: %s", f.Word)
	case *syntax.Binary:
		switch f.Op {
		case "+", "-":
			x, y := r.term(f.X), r.term(f.Y)
			if f.Op == "-" {
				y = y.times(big.NewInt(-1))
			}
			return x.plus(y)
		case "*":
			x, y := r.term(f.X), r.term(f.Y)
			switch {
			case x.constant():
				return y.times(x.k)
			case y.constant():
				return x.times(y.k)
			}
			r.fail(syntax.Naming, f.Y, "one side of * is a number", "a count cannot be multiplied by a count")
		case "%":
			x, y := r.term(f.X), r.term(f.Y)
			if !y.constant() {
				r.fail(syntax.Naming, f.Y, "", "the right side of %% is a number")
			}
			if y.k.Sign() <= 0 {
				r.fail(syntax.Naming, f.Y, "", "the right side of %% is greater than 0")
			}
			if x.constant() {
				l := zero()
				l.k.Mod(x.k, y.k)
				return l
			}
			r.fail(syntax.Naming, f, "", "not judged yet: %% of a count")
		}
	case *syntax.StrLit:
		r.fail(syntax.Naming, f, "", "a string cannot stand where a number is needed")
	case *syntax.WordLit:
		r.fail(syntax.Naming, f, "", "%s cannot stand where a number is needed", f.Word)
	}
	r.fail(syntax.Naming, f, "comparisons give truth values, which && || ! and => join", "a truth value cannot stand where a number is needed")
	return linear{}
}

func (l linear) constant() bool {
	for _, w := range l.w {
		if w.Sign() != 0 {
			return false
		}
	}
	return true
}

func (l linear) times(n *big.Int) linear {
	out := linear{k: new(big.Int).Mul(l.k, n)}
	for _, w := range l.w {
		out.w = append(out.w, new(big.Int).Mul(w, n))
	}
	return out
}

func (l linear) plus(m linear) linear {
	out := linear{k: new(big.Int).Add(l.k, m.k)}
	for i, w := range l.w {
		out.w = append(out.w, new(big.Int).Add(w, m.w[i]))
	}
	return out
}

// above is the atom l > n.
func (l linear) above(n int64, text string) atom {
	return atom{w: l.w, bound: new(big.Int).Sub(big.NewInt(n), l.k), text: text}
}

// negated gives the operator of the negated comparison.
var negated = map[string]string{"==": "!=", "!=": "==", "<": ">=", "<=": ">", ">": "<=", ">=": "<"}

// cases gives a formula, or its negation, in disjunctive form: some path
// satisfies it iff it satisfies all atoms of one case.
func (r *resolver) cases(f syntax.Formula, neg bool) [][]atom {
	switch f := f.(type) {
	case *syntax.Paren:
		return r.cases(f.X, neg)
	case *syntax.Unary:
		if f.Op == "!" {
			return r.cases(f.X, !neg)
		}
	case *syntax.WordLit:
		if f.Word != "nil" {
			if (f.Word == "true") != neg {
				return [][]atom{nil}
			}
			return nil
		}
	case *syntax.Binary:
		switch f.Op {
		case "&&", "||":
			x, y := r.cases(f.X, neg), r.cases(f.Y, neg)
			if (f.Op == "&&") != neg {
				return r.both(f, x, y)
			}
			return r.either(f, x, y)
		case "=>":
			x, y := r.cases(f.X, !neg), r.cases(f.Y, neg)
			if neg {
				return r.both(f, x, y)
			}
			return r.either(f, x, y)
		}
	case *syntax.Chain:
		return r.chain(f, neg)
	case *syntax.Subject:
		if len(f.Parts) == 1 && r.phases[f.Parts[0].Text] {
			r.fail(syntax.Naming, f, "", "not judged yet: phases")
		}
		r.countOf(f)
	}
	r.fail(syntax.Naming, f, "compare it: taken == released", "a claim is a truth value, not a number")
	return nil
}

func (r *resolver) either(at syntax.Node, x, y [][]atom) [][]atom {
	if len(x)+len(y) > maxCases {
		r.fail(syntax.Naming, at, "split the claim into several", "not judged yet: a claim that can be broken in more than %d ways", maxCases)
	}
	return append(append([][]atom{}, x...), y...)
}

func (r *resolver) both(at syntax.Node, x, y [][]atom) [][]atom {
	if len(x)*len(y) > maxCases {
		r.fail(syntax.Naming, at, "split the claim into several", "not judged yet: a claim that can be broken in more than %d ways", maxCases)
	}
	var out [][]atom
	for _, a := range x {
		for _, b := range y {
			out = append(out, append(append([]atom{}, a...), b...))
		}
	}
	return out
}

// chain is a comparison; a chain of several means "and".
func (r *resolver) chain(c *syntax.Chain, neg bool) [][]atom {
	var out [][]atom
	if !neg {
		out = [][]atom{nil}
	}
	for i, op := range c.Ops {
		if negated[op.Text] == "" {
			r.fail(syntax.Naming, op, "", "not judged yet: %s", op.Text)
		}
		if op.Text == "!=" && len(c.Ops) > 1 {
			r.fail(syntax.Naming, op, "write two comparisons joined by &&", "!= does not stand in a chain")
		}
		link := syntax.Span{From: c.Terms[i].Pos().From, To: c.Terms[i+1].Pos().To}
		x, y := r.operand(c, i), r.operand(c, i+1)
		d := x.plus(y.times(big.NewInt(-1)))
		minus := d.times(big.NewInt(-1))
		text := r.file.Tree.Text(link)
		o := op.Text
		if neg {
			o = negated[o]
		}
		var one [][]atom
		switch o {
		case ">":
			one = [][]atom{{d.above(0, text)}}
		case ">=":
			one = [][]atom{{d.above(-1, text)}}
		case "<":
			one = [][]atom{{minus.above(0, text)}}
		case "<=":
			one = [][]atom{{minus.above(-1, text)}}
		case "==":
			one = [][]atom{{d.above(-1, text), minus.above(-1, text)}}
		case "!=":
			one = [][]atom{{d.above(0, text)}, {minus.above(0, text)}}
		}
		if neg {
			out = r.either(c, out, one)
		} else {
			out = r.both(c, out, one)
		}
	}
	return out
}

// operand is term i of a comparison, which must be a number.
func (r *resolver) operand(c *syntax.Chain, i int) linear {
	if s, ok := c.Terms[i].(*syntax.Subject); ok && len(s.Parts) == 1 && r.phases[s.Parts[0].Text] {
		r.fail(syntax.Naming, s, "it is a truth value already", "%s is a phase, not a number", s)
	}
	return r.term(c.Terms[i])
}

// simplify drops what cannot happen: atoms without counts, cases that no counts
// satisfy, atoms that are always true. nonneg[i]: count i is never below 0.
func simplify(cases [][]atom, nonneg []bool) [][]atom {
	var out [][]atom
next:
	for _, c := range cases {
		kept := []atom{}
		for _, a := range c {
			g := new(big.Int)
			never, always := a.bound.Sign() >= 0, a.bound.Sign() < 0
			for i, w := range a.w {
				g.GCD(nil, nil, g, new(big.Int).Abs(w))
				never = never && (w.Sign() == 0 || w.Sign() < 0 && nonneg[i])
				always = always && (w.Sign() == 0 || w.Sign() > 0 && nonneg[i])
			}
			switch {
			case never:
				continue next
			case always:
				continue
			}
			if g.Sign() > 0 { // w·c > b and (w/g)·c > ⌊b/g⌋ are the same for integers
				b := atom{bound: new(big.Int), text: a.text}
				for _, w := range a.w {
					b.w = append(b.w, new(big.Int).Quo(w, g))
				}
				b.bound.Div(a.bound, g) // Euclidean: rounds down for g > 0
				a = b
			}
			known := false
			for _, k := range kept {
				known = known || k.same(a)
			}
			if !known {
				kept = append(kept, a)
			}
		}
		for _, k := range out {
			if sameCase(k, kept) {
				continue next
			}
		}
		out = append(out, kept)
	}
	return out
}

func sameCase(x, y []atom) bool {
	if len(x) != len(y) {
		return false
	}
	for i := range x {
		if !x[i].same(y[i]) {
			return false
		}
	}
	return true
}

func (a atom) same(b atom) bool {
	if a.bound.Cmp(b.bound) != 0 {
		return false
	}
	for i := range a.w {
		if a.w[i].Cmp(b.w[i]) != 0 {
			return false
		}
	}
	return true
}

// question gives the claim's negation as questions.
func (r *resolver) question(c *Claim, f syntax.Formula, nonneg []bool) {
	cases := simplify(r.cases(f, true), nonneg)
	if len(cases) == 0 {
		r.fail(syntax.Naming, f, "it is true whatever the counts are, which are never below 0", "no path can break this claim")
	}
	c.Linear = true
	for _, cs := range cases {
		if len(cs) == 0 {
			r.fail(syntax.Naming, f, "it is false whatever the counts are, which are never below 0", "every path breaks this claim")
		}
		c.Linear = c.Linear && len(cs) == 1
		var qs []Question
		for _, a := range cs {
			q := Question{Bound: r.int64(f, a.bound), Text: a.text}
			for _, w := range a.w {
				q.Weights = append(q.Weights, r.int64(f, w))
			}
			qs = append(qs, q)
		}
		c.Cases = append(c.Cases, qs)
	}
	if c.Linear {
		for _, qs := range c.Cases {
			c.Questions = append(c.Questions, qs[0])
		}
	}
}

// int64 converts a number of the file, or fails.
func (r *resolver) int64(at syntax.Node, n *big.Int) int64 {
	if !n.IsInt64() {
		r.fail(syntax.Naming, at, "", "%s is out of range: numbers have at most 63 bits", n)
	}
	return n.Int64()
}

// countOf gives the index of the count that a subject names, or fails.
func (r *resolver) countOf(s *syntax.Subject) int {
	name := s.Parts[0].Text
	if len(s.Parts) == 1 {
		if i, ok := r.counts[name]; ok {
			return i
		}
		if r.phases[name] {
			r.fail(syntax.Naming, s, "", "%s is a phase, not a number", name)
		}
		if r.broken[name] {
			panic(bail{}) // its own clause has the error
		}
	}
	switch {
	case r.inst != nil && name == r.inst.Name.Text:
		r.fail(syntax.Naming, s, r.countHint(name), "%s is the instance, not a count", s)
	case len(s.Parts) > 1:
		r.fail(syntax.Naming, s, r.countHint(name), "%s is not a count", s)
	}
	r.fail(syntax.Naming, s, r.countHint(name), "there is no count %s", s)
	return 0
}

// countHint says which counts there are.
func (r *resolver) countHint(name string) string {
	if n := syntax.Near(name, r.countNames); n != "" {
		return "there is " + n
	}
	for i := range name {
		if name[i] == '-' {
			if _, ok := r.counts[name[:i]]; ok {
				return "- between letters is part of a name; to subtract, put spaces around it"
			}
		}
	}
	if len(r.countNames) == 0 {
		return "the rule has no counts"
	}
	return thereIs(r.countNames)
}

// thereIs is a hint at all of names, which are not empty.
func thereIs(names []string) string {
	if len(names) == 1 {
		return "there is " + names[0]
	}
	return "there are " + syntax.Enumerate(names, "and")
}
