package lia

import (
	"fmt"
	"math/big"
	"strings"
	"unicode"
	"unicode/utf8"
)

// SyntaxError is an error in the text of a formula.
type SyntaxError struct {
	Offset int // bytes from the start of the text
	Msg    string
}

func (e *SyntaxError) Error() string { return fmt.Sprintf("offset %d: %s", e.Offset, e.Msg) }

// Scope resolves the names in a formula. Exactly one of x and b is set when ok.
type Scope func(name string) (x Var, b Bool, ok bool)

// maxDepth bounds the nesting of formulas, so that no text can exhaust the stack.
const maxDepth = 1000

// Parse reads a formula over named counts and truth values. Its grammar is that
// of formulas in rules, restricted to integers and truth values:
//
//	Formula  = Or [ "=>" Formula ] .
//	Or       = And { "||" And } .
//	And      = Not { "&&" Not } .
//	Not      = "!" Not | Compare .
//	Compare  = Sum { ( "==" | "!=" | "<" | "<=" | ">" | ">=" ) Sum } .
//	Sum      = Product { ( "+" | "-" ) Product } .
//	Product  = Factor { ( "*" | "%" ) Factor } .
//	Factor   = "-" Factor | Int | "true" | "false" | Name | "(" Formula ")" .
//
// A chain of comparisons means "and"; "!=" does not chain. One side of "*" and
// the right side of "%" must be constant. "%" is the mathematical remainder, in
// [0, m) also for negative left sides. "==" and "!=" also compare two formulas.
// A name holds letters, digits, "_", and "-" before a letter, as in
// "starts-ok"; write "a - b" for a difference. Errors are *SyntaxError.
func Parse(text string, scope Scope) (Formula, error) {
	p := &parser{text: text, scope: scope}
	p.next()
	v := p.formula()
	if p.err == nil && p.tok != "" {
		p.fail(p.at, "expected an operator or the end, found %s", quoted(p.tok))
	}
	f := p.truth(v)
	if p.err != nil {
		return Formula{}, p.err
	}
	return f, nil
}

// value is what a part of the text denotes: a truth value or an integer.
type value struct {
	isInt bool
	l     Lin
	f     Formula
	at    int // offset, for errors
}

type parser struct {
	text  string
	scope Scope
	pos   int
	tok   string // "" at the end
	at    int
	kind  tokenKind
	depth int
	err   *SyntaxError
}

type tokenKind uint8

const (
	tokEnd tokenKind = iota
	tokName
	tokInt
	tokOp
)

func quoted(tok string) string {
	if tok == "" {
		return "the end"
	}
	return fmt.Sprintf("%q", tok)
}

// fail keeps the first error and jumps to the end of the text.
func (p *parser) fail(at int, format string, args ...any) {
	if p.err == nil {
		p.err = &SyntaxError{at, fmt.Sprintf(format, args...)}
	}
	p.pos, p.tok, p.kind = len(p.text), "", tokEnd
}

func isLetter(r rune) bool { return r == '_' || unicode.IsLetter(r) }

func (p *parser) next() {
	for p.pos < len(p.text) && strings.IndexByte(" \t\r\n", p.text[p.pos]) >= 0 {
		p.pos++
	}
	p.at = p.pos
	rest := p.text[p.pos:]
	if rest == "" {
		p.tok, p.kind = "", tokEnd
		return
	}
	r, size := utf8.DecodeRuneInString(rest)
	switch {
	case r == utf8.RuneError && size == 1:
		p.fail(p.pos, "the text is not valid UTF-8")
		return
	case isLetter(r):
		n := size
		for n < len(rest) {
			r, size := utf8.DecodeRuneInString(rest[n:])
			if r == '-' {
				after, _ := utf8.DecodeRuneInString(rest[n+1:])
				if !unicode.IsLetter(after) {
					break
				}
			} else if !isLetter(r) && !unicode.IsDigit(r) {
				break
			}
			n += size
		}
		p.tok, p.kind = rest[:n], tokName
	case r >= '0' && r <= '9':
		n := 1
		for n < len(rest) && (rest[n] >= '0' && rest[n] <= '9' || rest[n] == '_') {
			n++
		}
		p.tok, p.kind = rest[:n], tokInt
	default:
		for _, o := range []string{"=>", "||", "&&", "==", "!=", "<=", ">=", "!", "<", ">", "+", "-", "*", "%", "(", ")"} {
			if strings.HasPrefix(rest, o) {
				p.tok, p.kind = o, tokOp
				p.pos += len(o)
				return
			}
		}
		p.fail(p.pos, "unexpected character %q", r)
		return
	}
	p.pos += len(p.tok)
}

func (p *parser) is(ops ...string) bool {
	if p.kind != tokOp {
		return false
	}
	for _, o := range ops {
		if p.tok == o {
			return true
		}
	}
	return false
}

func (p *parser) truth(v value) Formula {
	if v.isInt {
		p.fail(v.at, "expected a truth value (a comparison), found a number")
	}
	return v.f
}

func (p *parser) number(v value) Lin {
	if !v.isInt {
		p.fail(v.at, "expected a number, found a truth value")
	}
	return v.l
}

func (p *parser) enter() bool {
	if p.depth++; p.depth > maxDepth {
		p.fail(p.at, "the formula is nested too deeply (more than %d levels)", maxDepth)
		return false
	}
	return true
}

func (p *parser) formula() value {
	if !p.enter() {
		return value{}
	}
	defer func() { p.depth-- }()
	v := p.or()
	if p.is("=>") {
		p.next()
		w := p.formula()
		return value{f: Implies(p.truth(v), p.truth(w)), at: v.at}
	}
	return v
}

func (p *parser) or() value {
	v := p.and()
	if !p.is("||") {
		return v
	}
	fs := []Formula{p.truth(v)}
	for p.is("||") {
		p.next()
		fs = append(fs, p.truth(p.and()))
	}
	return value{f: Or(fs...), at: v.at}
}

func (p *parser) and() value {
	v := p.not()
	if !p.is("&&") {
		return v
	}
	fs := []Formula{p.truth(v)}
	for p.is("&&") {
		p.next()
		fs = append(fs, p.truth(p.not()))
	}
	return value{f: And(fs...), at: v.at}
}

func (p *parser) not() value {
	at, odd, any := p.at, false, false
	for p.is("!") {
		odd, any = !odd, true
		p.next()
	}
	v := p.compare()
	if !any {
		return v
	}
	f := p.truth(v)
	if odd {
		f = Not(f)
	}
	return value{f: f, at: at}
}

func (p *parser) compare() value {
	v := p.sum()
	if !p.is("==", "!=", "<", "<=", ">", ">=") {
		return v
	}
	var fs []Formula
	left, chainNE := v, false
	for n := 0; p.is("==", "!=", "<", "<=", ">", ">="); n++ {
		o, at := p.tok, p.at
		if chainNE || o == "!=" && n > 0 {
			p.fail(at, `"!=" cannot stand in a chain of comparisons`)
			break
		}
		chainNE = o == "!="
		p.next()
		right := p.sum()
		if p.err != nil {
			break
		}
		if !left.isInt && !right.isInt && (o == "==" || o == "!=") {
			f := Iff(left.f, right.f)
			if o == "!=" {
				f = Not(f)
			}
			fs = append(fs, f)
		} else {
			fs = append(fs, map[string]func(a, b Lin) Formula{
				"==": EQ, "!=": NE, "<": LT, "<=": LE, ">": GT, ">=": GE,
			}[o](p.number(left), p.number(right)))
		}
		left = right
	}
	return value{f: And(fs...), at: v.at}
}

func (p *parser) sum() value {
	v := p.product()
	if !p.is("+", "-") {
		return v
	}
	ls := []Lin{p.number(v)}
	for p.is("+", "-") {
		minus := p.tok == "-"
		p.next()
		l := p.number(p.product())
		if minus {
			l = l.Scale(-1)
		}
		ls = append(ls, l)
	}
	return value{isInt: true, l: Sum(ls...), at: v.at}
}

func (p *parser) product() value {
	v := p.factor()
	for p.is("*", "%") {
		o := p.tok
		p.next()
		w := p.factor()
		a, b := p.number(v), p.number(w)
		if p.err != nil {
			return value{}
		}
		ca, cb := a.IsConst(), b.IsConst()
		switch {
		case o == "%" && cb == nil:
			p.fail(w.at, `the right side of "%%" must be constant`)
		case o == "%" && cb.Sign() == 0:
			p.fail(w.at, "remainder of a division by zero")
		case o == "%":
			v = value{isInt: true, l: a.ModBig(cb), at: v.at}
		case cb != nil:
			v = value{isInt: true, l: a.ScaleBig(cb), at: v.at}
		case ca != nil:
			v = value{isInt: true, l: b.ScaleBig(ca), at: v.at}
		default:
			p.fail(w.at, `one side of "*" must be constant`)
		}
	}
	return v
}

func (p *parser) factor() value {
	at, minus, any := p.at, false, false
	for p.is("-") {
		minus, any = !minus, true
		p.next()
	}
	v := p.primary()
	if any {
		l := p.number(v)
		if minus {
			l = l.Scale(-1)
		}
		v = value{isInt: true, l: l, at: at}
	}
	return v
}

func (p *parser) primary() value {
	at, tok := p.at, p.tok
	switch p.kind {
	case tokInt:
		n, ok := new(big.Int).SetString(strings.ReplaceAll(tok, "_", ""), 10)
		if !ok {
			p.fail(at, "malformed number %q", tok)
			return value{}
		}
		p.next()
		return value{isInt: true, l: ConstBig(n), at: at}
	case tokName:
		p.next()
		switch tok {
		case "true":
			return value{f: True(), at: at}
		case "false":
			return value{f: False(), at: at}
		}
		x, b, ok := p.scope(tok)
		switch {
		case !ok:
			p.fail(at, "unknown name %q", tok)
			return value{}
		case x > 0:
			return value{isInt: true, l: V(x), at: at}
		}
		return value{f: IsBool(b), at: at}
	case tokOp:
		if tok == "(" {
			p.next()
			v := p.formula()
			if !p.is(")") {
				p.fail(p.at, `expected ")", found %s`, quoted(p.tok))
				return value{}
			}
			p.next()
			v.at = at
			return v
		}
	}
	p.fail(at, "expected a number, a name or \"(\", found %s", quoted(tok))
	return value{}
}
