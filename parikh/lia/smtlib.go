package lia

import (
	"bufio"
	"fmt"
	"io"
	"math/big"
	"strings"
)

// Names gives the SMT-LIB symbols of variables and the bounds to declare; a
// Solver's method WriteSMTLIB fills it from the solver.
type Names struct {
	Var  func(Var) string  // nil: x1, x2, ...
	Bool func(Bool) string // nil: b1, b2, ...
	// Vars and Bools are to be declared, in this order. Lo and Hi give declared
	// bounds, nil for none; both funcs may be nil.
	Vars   []Var
	Bools  []Bool
	Lo, Hi func(Var) *big.Int
}

// WriteSMTLIB writes f as an SMT-LIB 2.6 script of logic QF_LIA: declarations,
// bounds, one assertion and check-sat. Shared sub-formulas become definitions, so
// the size is linear in that of f.
func WriteSMTLIB(w io.Writer, f Formula, names Names) error {
	return writeSMTLIB(w, []Formula{f}, names, "")
}

// WriteSMTLIB writes the assertions, lemmas included, and the assumptions as an
// SMT-LIB 2.6 script. Symbols are x1, x2, ... and b1, b2, ... in order of making,
// with the given names as comments.
func (s *Solver) WriteSMTLIB(w io.Writer, assumptions ...Formula) error {
	var fs []Formula
	for _, a := range s.asserts {
		fs = append(fs, a.f)
	}
	fs = append(fs, assumptions...)
	n := Names{}
	var note strings.Builder
	for x := 1; x < len(s.names); x++ {
		n.Vars = append(n.Vars, Var(x))
		if s.names[x] != "" {
			fmt.Fprintf(&note, "; x%d is %q\n", x, s.names[x])
		}
	}
	for b := 1; b < len(s.boolNames); b++ {
		n.Bools = append(n.Bools, Bool(b))
		if s.boolNames[b] != "" {
			fmt.Fprintf(&note, "; b%d is %q\n", b, s.boolNames[b])
		}
	}
	at := func(l []*num) func(Var) *big.Int {
		return func(x Var) *big.Int {
			if l[x] == nil {
				return nil
			}
			return l[x].big()
		}
	}
	n.Lo, n.Hi = at(s.declLo), at(s.declHi)
	return writeSMTLIB(w, fs, n, note.String())
}

func writeSMTLIB(w io.Writer, fs []Formula, names Names, note string) error {
	if names.Var == nil {
		names.Var = func(x Var) string { return fmt.Sprintf("x%d", x) }
	}
	if names.Bool == nil {
		names.Bool = func(b Bool) string { return fmt.Sprintf("b%d", b) }
	}
	varName := func(x Var) string { return smtSymbol(names.Var(x)) }
	b := bufio.NewWriter(w)
	b.WriteString("(set-option :produce-models true)\n(set-logic QF_LIA)\n")
	b.WriteString(note)
	for _, x := range names.Vars {
		fmt.Fprintf(b, "(declare-const %s Int)\n", varName(x))
		if names.Lo != nil {
			if v := names.Lo(x); v != nil {
				fmt.Fprintf(b, "(assert (>= %s %s))\n", varName(x), smtInt(v))
			}
		}
		if names.Hi != nil {
			if v := names.Hi(x); v != nil {
				fmt.Fprintf(b, "(assert (<= %s %s))\n", varName(x), smtInt(v))
			}
		}
	}
	for _, x := range names.Bools {
		fmt.Fprintf(b, "(declare-const %s Bool)\n", smtSymbol(names.Bool(x)))
	}
	uses := map[*node]int{}
	for _, f := range fs {
		countParents(f.node(), uses)
	}
	p := &smtPrinter{w: b, names: names, varName: varName, uses: uses, defs: map[*node]string{}}
	for _, f := range fs {
		text := p.formula(f.node())
		fmt.Fprintf(b, "(assert %s)\n", text)
	}
	b.WriteString("(check-sat)\n")
	return b.Flush()
}

func countParents(n *node, uses map[*node]int) {
	if uses[n]++; uses[n] > 1 {
		return
	}
	for _, k := range n.kids {
		countParents(k, uses)
	}
}

type smtPrinter struct {
	w       *bufio.Writer
	names   Names
	varName func(Var) string
	uses    map[*node]int
	defs    map[*node]string
}

// formula returns the text of n and writes definitions of shared parts first.
func (p *smtPrinter) formula(n *node) string {
	if d, ok := p.defs[n]; ok {
		return d
	}
	var text string
	switch n.op {
	case opTrue:
		return "true"
	case opFalse:
		return "false"
	case opBool:
		return smtSymbol(p.names.Bool(n.b))
	case opLE:
		text = "(<= " + p.lin(n.lin) + " 0)"
	case opEQ:
		text = "(= " + p.lin(n.lin) + " 0)"
	default:
		word := map[op]string{opNot: "not", opAnd: "and", opOr: "or", opIff: "="}[n.op]
		parts := make([]string, 0, len(n.kids)+1)
		parts = append(parts, "("+word)
		for _, k := range n.kids {
			parts = append(parts, p.formula(k))
		}
		text = strings.Join(parts, " ") + ")"
	}
	if p.uses[n] > 1 {
		d := fmt.Sprintf("def!%d", len(p.defs)+1)
		fmt.Fprintf(p.w, "(define-fun %s () Bool %s)\n", d, text)
		p.defs[n] = d
		return d
	}
	return text
}

func (p *smtPrinter) lin(l Lin) string {
	var parts []string
	for _, t := range l.terms {
		parts = append(parts, smtTimes(t.c, p.varName(t.v)))
	}
	for _, m := range l.mods {
		parts = append(parts, smtTimes(m.c, "(mod "+p.lin(*m.of)+" "+m.m.String()+")"))
	}
	if !l.k.isZero() || len(parts) == 0 {
		parts = append(parts, smtInt(l.k.big()))
	}
	if len(parts) == 1 {
		return parts[0]
	}
	return "(+ " + strings.Join(parts, " ") + ")"
}

func smtTimes(c num, what string) string {
	if c.eq(one) {
		return what
	}
	return "(* " + smtInt(c.big()) + " " + what + ")"
}

func smtInt(v *big.Int) string {
	if v.Sign() < 0 {
		return "(- " + new(big.Int).Neg(v).String() + ")"
	}
	return v.String()
}

// smtSymbol quotes a name that is not a simple symbol; the two characters that
// even a quoted symbol cannot hold become '_', and names in the style of our own
// definitions get a '_' in front.
func smtSymbol(name string) string {
	if strings.HasPrefix(name, "def!") {
		name = "_" + name
	}
	simple := name != "" && !(name[0] >= '0' && name[0] <= '9')
	for i := 0; i < len(name) && simple; i++ {
		c := name[i]
		simple = c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || strings.IndexByte("~!@$%^&*_-+=<>.?/", c) >= 0
	}
	switch name {
	case "let", "forall", "exists", "match", "par", "not", "and", "or", "xor", "ite", "true", "false", "mod", "div", "abs", "_", "!", "as", "+", "-", "*", "=", "<", "<=", ">", ">=", "=>":
		simple = false
	}
	if simple {
		return name
	}
	return "|" + strings.NewReplacer("|", "_", "\\", "_").Replace(name) + "|"
}
