// Parametric systems: parameters, events with data, guards, count predicates.

package pds

import (
	"fmt"
	"math/big"
	"regexp/syntax"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Sort is the sort of a datum or parameter.
type Sort uint8

const (
	Ref    Sort = iota // identity only: == and !=, nil
	Int                // mathematical integers
	String             // sequences of runes
	Bool
)

var sortNames = [...]string{Ref: "ref", Int: "int", String: "string", Bool: "bool"}

// String gives ref, int, string or bool.
func (s Sort) String() string { return sortNames[s] }

// Variable is a parameter of a system, chosen once before the run, or a datum of
// an event, chosen anew each time it happens.
type Variable struct {
	Name string
	Sort Sort
}

// Event is something that rules do and predicates count.
type Event struct {
	Name string
	Data []Variable
}

// Predicate adds to a count whenever an event happens whose data satisfy Where.
// Several predicates may hold of one event, each adds. Where may be nil: always.
type Predicate struct {
	Count int // index into Counts
	Event int // index into Data.Events
	Where *Expr
	By    int // datum (of sort int) that is added; -1: 1 is added
}

// Data is what a parametric system has beside a plain one.
type Data struct {
	Parameters []Variable
	Events     []Event
	Predicates []Predicate
}

// Guard is what a rule says of data: it can be taken if Cond holds of the
// parameters and of some data of its event, which then are the data of this step.
type Guard struct {
	Event int   // index into Data.Events; -1: none, and Cond is about parameters alone
	Cond  *Expr // nil: true
}

// Op is what an [Expr] does with its arguments.
type Op uint8

const (
	OpVar     Op = iota // a parameter or datum of any sort
	OpInt               // Expr.Int
	OpString            // Expr.Text
	OpTrue              // true
	OpFalse             // false
	OpNil               // the ref that refers to nothing
	OpAdd               // sum of ints
	OpScale             // Expr.Int times an int
	OpMod               // remainder by Expr.Int > 0, in [0, Expr.Int)
	OpEq                // two values of one sort
	OpLess              // int < int
	OpLessEq            // int <= int
	OpNot               //
	OpAnd               //
	OpOr                //
	OpPrefix            // the string begins with Expr.Text
	OpSuffix            // the string ends with Expr.Text
	OpMatches           // the regular expression Expr.Text matches the whole string
)

// Expr is a term or formula over parameters and the data of one event.
type Expr struct {
	Op    Op
	Args  []*Expr
	Param bool // OpVar: a parameter, else a datum
	Var   int  // OpVar: index
	Sort  Sort // of the value; Bool for formulas
	Int   *big.Int
	Text  string
	Src   string // the text of a formula that was parsed; only at the top
}

// ExprError says what is wrong with the text of a formula.
type ExprError struct {
	Offset int // in bytes
	Text   string
}

func (e *ExprError) Error() string { return fmt.Sprintf("at byte %d: %s", e.Offset, e.Text) }

// ParseGuard reads a formula over parameters and data. Errors are *ExprError.
//
//	Formula = Or [ "=>" Formula ] .
//	Or      = And { "||" And } .            And = Not { "&&" Not } .
//	Not     = "!" Not | Compare .
//	Compare = Sum [ ( "==" | "!=" | "<" | "<=" | ">" | ">=" ) Sum ] .
//	Sum     = Product { ( "+" | "-" ) Product } .
//	Product = Factor { ( "*" | "%" ) Factor } .
//	Factor  = "-" Factor | Number | String | "true" | "false" | "nil" | Name | "(" Formula ")"
//	        | ( "prefix" | "suffix" | "matches" ) "(" Name "," String ")" .
//
// One side of "*" is a number; the right side of "%" is a positive one, and the
// remainder is never negative. Numbers fit 64 bits. Strings are as in Go. Data
// hide parameters of the same name.
func ParseGuard(text string, params, data []Variable) (*Expr, error) {
	p := &guardParser{text: text, params: params, data: data}
	p.next()
	e := p.formula()
	if p.err == nil && p.tok != "" {
		p.fail(p.at, "unexpected %q", p.tok)
	}
	p.need(e, p.at, Bool)
	if p.err != nil {
		return nil, p.err
	}
	top := *e
	top.Src = text
	return &top, nil
}

type guardParser struct {
	text         string
	params, data []Variable
	pos, at      int
	tok          string // "" at the end
	kind         byte   // 'n'ame, 'i'nt, 's'tring, 'o'perator
	depth        int
	err          *ExprError
}

func (p *guardParser) fail(at int, format string, args ...any) *Expr {
	if p.err == nil {
		p.err = &ExprError{at, fmt.Sprintf(format, args...)}
	}
	p.pos, p.tok, p.kind = len(p.text), "", 0
	return &Expr{Op: OpTrue, Sort: Bool}
}

func (p *guardParser) need(e *Expr, at int, s Sort) {
	if e.Sort != s && p.err == nil {
		p.fail(at, "has sort %s, must be %s", e.Sort, s)
	}
}

func (p *guardParser) next() {
	for p.pos < len(p.text) && strings.IndexByte(" \t\r\n", p.text[p.pos]) >= 0 {
		p.pos++
	}
	p.at = p.pos
	rest := p.text[p.pos:]
	if rest == "" {
		p.tok, p.kind = "", 0
		return
	}
	r, size := utf8.DecodeRuneInString(rest)
	if r == utf8.RuneError && size == 1 {
		p.fail(p.pos, "the text is not valid UTF-8")
		return
	}
	n := 0
	switch {
	case r == '_' || unicode.IsLetter(r):
		p.kind = 'n'
		n = strings.IndexFunc(rest, func(r rune) bool { return r != '_' && !unicode.IsLetter(r) && !unicode.IsDigit(r) })
	case r >= '0' && r <= '9':
		p.kind = 'i'
		n = strings.IndexFunc(rest, func(r rune) bool { return r < '0' || r > '9' })
	case r == '"' || r == '`':
		p.kind = 's'
		q, err := strconv.QuotedPrefix(rest)
		if err != nil {
			p.fail(p.pos, "a string that does not end, or with an escape that Go does not know")
			return
		}
		n = len(q)
	default:
		p.kind = 'o'
		for _, o := range []string{"=>", "||", "&&", "==", "!=", "<=", ">=", "!", "<", ">", "+", "-", "*", "%", "(", ")", ","} {
			if strings.HasPrefix(rest, o) {
				n = len(o)
				break
			}
		}
		if n == 0 {
			p.fail(p.pos, "unexpected character %q", r)
			return
		}
	}
	if n < 0 {
		n = len(rest)
	}
	p.tok = rest[:n]
	p.pos += n
}

func (p *guardParser) is(op string) bool { return p.kind == 'o' && p.tok == op }

func (p *guardParser) enter() bool {
	if p.depth++; p.depth > 200 {
		p.fail(p.at, "nested too deeply")
		return false
	}
	return true
}

func (p *guardParser) formula() *Expr {
	defer func() { p.depth-- }()
	if !p.enter() {
		return &Expr{Op: OpTrue, Sort: Bool}
	}
	at := p.at
	e := p.or()
	if p.is("=>") {
		p.need(e, at, Bool)
		p.next()
		at = p.at
		f := p.formula()
		p.need(f, at, Bool)
		return &Expr{Op: OpOr, Sort: Bool, Args: []*Expr{{Op: OpNot, Sort: Bool, Args: []*Expr{e}}, f}}
	}
	return e
}

func (p *guardParser) list(op string, o Op, sub func() *Expr) *Expr {
	at := p.at
	e := sub()
	if !p.is(op) {
		return e
	}
	p.need(e, at, Bool)
	out := &Expr{Op: o, Sort: Bool, Args: []*Expr{e}}
	for p.is(op) {
		p.next()
		at = p.at
		f := sub()
		p.need(f, at, Bool)
		out.Args = append(out.Args, f)
	}
	return out
}

func (p *guardParser) or() *Expr  { return p.list("||", OpOr, p.and) }
func (p *guardParser) and() *Expr { return p.list("&&", OpAnd, p.not) }

func (p *guardParser) not() *Expr {
	if !p.is("!") {
		return p.compare()
	}
	defer func() { p.depth-- }()
	if !p.enter() {
		return &Expr{Op: OpTrue, Sort: Bool}
	}
	p.next()
	at := p.at
	e := p.not()
	p.need(e, at, Bool)
	return &Expr{Op: OpNot, Sort: Bool, Args: []*Expr{e}}
}

func (p *guardParser) compare() *Expr {
	at := p.at
	e := p.sum()
	if p.kind != 'o' {
		return e
	}
	op := p.tok
	switch op {
	case "==", "!=", "<", "<=", ">", ">=":
	default:
		return e
	}
	p.next()
	right := p.at
	f := p.sum()
	if op == "==" || op == "!=" {
		if e.Sort != f.Sort && p.err == nil {
			p.fail(right, "has sort %s, the left side has %s", f.Sort, e.Sort)
		}
		e = &Expr{Op: OpEq, Sort: Bool, Args: []*Expr{e, f}}
		if op == "!=" {
			e = &Expr{Op: OpNot, Sort: Bool, Args: []*Expr{e}}
		}
		return e
	}
	p.need(e, at, Int)
	p.need(f, right, Int)
	if op[0] == '>' {
		e, f = f, e
	}
	o := OpLess
	if len(op) == 2 {
		o = OpLessEq
	}
	return &Expr{Op: o, Sort: Bool, Args: []*Expr{e, f}}
}

func times(n *big.Int, e *Expr) *Expr {
	return &Expr{Op: OpScale, Sort: Int, Int: n, Args: []*Expr{e}}
}

func (p *guardParser) sum() *Expr {
	at := p.at
	e := p.product()
	if !p.is("+") && !p.is("-") {
		return e
	}
	p.need(e, at, Int)
	out := &Expr{Op: OpAdd, Sort: Int, Args: []*Expr{e}}
	for p.is("+") || p.is("-") {
		minus := p.is("-")
		p.next()
		at = p.at
		f := p.product()
		p.need(f, at, Int)
		if minus {
			f = times(big.NewInt(-1), f)
		}
		out.Args = append(out.Args, f)
	}
	return out
}

func (p *guardParser) product() *Expr {
	at := p.at
	e := p.factor()
	for p.is("*") || p.is("%") {
		op := p.tok
		p.need(e, at, Int)
		p.next()
		right := p.at
		f := p.factor()
		p.need(f, right, Int)
		if p.err != nil {
			return e
		}
		m, n := constant(e), constant(f)
		switch {
		case op == "%" && (n == nil || n.Sign() <= 0):
			return p.fail(right, "the right side of %% must be a positive number")
		case op == "%":
			e = &Expr{Op: OpMod, Sort: Int, Int: n, Args: []*Expr{e}}
		case n != nil:
			e = times(n, e)
		case m != nil:
			e = times(m, f)
		default:
			return p.fail(right, "one side of * must be a number")
		}
	}
	return e
}

// constant is the value of an int without variables, else nil.
func constant(e *Expr) *big.Int {
	switch e.Op {
	case OpInt:
		return e.Int
	case OpScale:
		if n := constant(e.Args[0]); n != nil {
			return new(big.Int).Mul(n, e.Int)
		}
	}
	return nil
}

func (p *guardParser) factor() *Expr {
	defer func() { p.depth-- }()
	if !p.enter() {
		return &Expr{Op: OpTrue, Sort: Bool}
	}
	at, tok, kind := p.at, p.tok, p.kind
	switch {
	case p.is("-"):
		p.next()
		at = p.at
		e := p.factor()
		p.need(e, at, Int)
		return times(big.NewInt(-1), e)
	case p.is("("):
		p.next()
		e := p.formula()
		if !p.is(")") {
			return p.fail(p.at, "expected \")\"")
		}
		p.next()
		return e
	case kind == 'i':
		n, err := strconv.ParseInt(tok, 10, 64)
		if err != nil {
			return p.fail(at, "%s does not fit into 64 bits", tok)
		}
		p.next()
		return &Expr{Op: OpInt, Sort: Int, Int: big.NewInt(n)}
	case kind == 's':
		s, _ := strconv.Unquote(tok) // checked by next
		p.next()
		if !utf8.ValidString(s) {
			return p.fail(at, "a string that is not valid UTF-8")
		}
		return &Expr{Op: OpString, Sort: String, Text: s}
	case kind == 'n':
		p.next()
		switch tok {
		case "true":
			return &Expr{Op: OpTrue, Sort: Bool}
		case "false":
			return &Expr{Op: OpFalse, Sort: Bool}
		case "nil":
			return &Expr{Op: OpNil, Sort: Ref}
		case "prefix", "suffix", "matches":
			if p.is("(") {
				return p.stringTest(tok)
			}
		}
		for i, v := range p.data {
			if v.Name == tok {
				return &Expr{Op: OpVar, Sort: v.Sort, Var: i}
			}
		}
		for i, v := range p.params {
			if v.Name == tok {
				return &Expr{Op: OpVar, Sort: v.Sort, Var: i, Param: true}
			}
		}
		return p.fail(at, "%q is no parameter and no datum of the event", tok)
	}
	if tok == "" {
		return p.fail(at, "the formula ends too early")
	}
	return p.fail(at, "unexpected %q", tok)
}

func (p *guardParser) stringTest(name string) *Expr {
	p.next()
	at := p.at
	e := p.factor()
	p.need(e, at, String)
	if !p.is(",") {
		return p.fail(p.at, "expected \",\"")
	}
	p.next()
	at = p.at
	lit := p.factor()
	if p.err == nil && lit.Op != OpString {
		return p.fail(at, "must be a string in quotes")
	}
	if !p.is(")") {
		return p.fail(p.at, "expected \")\"")
	}
	p.next()
	op := map[string]Op{"prefix": OpPrefix, "suffix": OpSuffix, "matches": OpMatches}[name]
	if op == OpMatches {
		if _, err := syntax.Parse(lit.Text, syntax.Perl); err != nil {
			return p.fail(at, "%v", err)
		}
	}
	return &Expr{Op: op, Sort: Bool, Args: []*Expr{e}, Text: lit.Text}
}

// Data gives the parametric part of the table, nil if it has none; the caller must
// not change it.
func (t *Table) Data() *Data { return t.data }

// Guard gives what rule i of a head says of data, nil if nothing.
func (t *Table) Guard(h Head, i int) *Guard {
	if g := t.guards[h]; i < len(g) {
		return g[i]
	}
	return nil
}

func (t *Table) guardText(h Head, i int) string {
	g := t.Guard(h, i)
	if g == nil {
		return ""
	}
	var b strings.Builder
	if g.Event >= 0 {
		b.WriteString(" on " + t.data.Events[g.Event].Name)
	}
	if g.Cond != nil {
		b.WriteString(" if " + g.Cond.Src)
	}
	return b.String()
}

// The JSON form of the parametric part.

func (in *reader) sort(v *value, path string) (Sort, error) {
	s, err := in.str(v, path)
	if err != nil {
		return 0, err
	}
	for i, name := range sortNames {
		if s == name {
			return Sort(i), nil
		}
	}
	return 0, in.errorAt(v.offset, path, "is %q, must be ref, int, string or bool", s)
}

// variables reads a list of {"name": ..., "sort": ...}.
func (in *reader) variables(v *value, path string) ([]Variable, error) {
	if v.kind == 0 {
		return nil, nil
	}
	if v.kind == '{' && len(v.items) == 0 {
		return nil, nil
	}
	if err := in.want(v, path, '['); err != nil {
		return nil, err
	}
	var out []Variable
	seen := map[string]bool{}
	for i, item := range v.items {
		at := fmt.Sprintf("%s[%d]", path, i)
		var x Variable
		sorted := false
		err := in.members(item, at, func(name string, v *value, path string) (bool, error) {
			var err error
			switch name {
			case "name":
				x.Name, err = in.word(v, path)
				if err == nil && seen[x.Name] {
					err = in.errorAt(v.offset, path, "%q comes twice", x.Name)
				}
			case "sort":
				sorted = true
				x.Sort, err = in.sort(v, path)
			default:
				return false, nil
			}
			return true, err
		})
		if err != nil {
			return nil, err
		}
		if x.Name == "" || !sorted {
			return nil, in.errorAt(item.offset, at, `needs "name" and "sort"`)
		}
		seen[x.Name] = true
		out = append(out, x)
	}
	return out, nil
}

// word reads a name that formulas can use.
func (in *reader) word(v *value, path string) (string, error) {
	s, err := in.str(v, path)
	if err != nil {
		return "", err
	}
	for i, r := range s {
		if r != '_' && !unicode.IsLetter(r) && (i == 0 || !unicode.IsDigit(r)) {
			return "", in.errorAt(v.offset, path, "%q is not a name of letters, digits and _", s)
		}
	}
	switch s {
	case "", "true", "false", "nil":
		return "", in.errorAt(v.offset, path, "%q cannot be a name", s)
	}
	return s, nil
}

func (in *reader) events(v *value, path string) ([]Event, error) {
	if v.kind == 0 {
		return nil, nil
	}
	if err := in.want(v, path, '['); err != nil {
		return nil, err
	}
	var out []Event
	for i, item := range v.items {
		at := fmt.Sprintf("%s[%d]", path, i)
		var e Event
		err := in.members(item, at, func(name string, v *value, path string) (bool, error) {
			var err error
			switch name {
			case "name":
				e.Name, err = in.word(v, path)
				for _, o := range out {
					if err == nil && o.Name == e.Name {
						err = in.errorAt(v.offset, path, "%q comes twice", e.Name)
					}
				}
			case "data":
				e.Data, err = in.variables(v, path)
			default:
				return false, nil
			}
			return true, err
		})
		if err != nil {
			return nil, err
		}
		if e.Name == "" {
			return nil, in.errorAt(item.offset, at, `needs "name"`)
		}
		out = append(out, e)
	}
	return out, nil
}

func (in *reader) event(v *value, path string) (int, error) {
	s, err := in.str(v, path)
	if err != nil {
		return -1, err
	}
	for i, e := range in.b.t.data.Events {
		if e.Name == s {
			return i, nil
		}
	}
	return -1, in.errorAt(v.offset, path, "event %q is not declared", s)
}

func (in *reader) expr(v *value, path string, event int) (*Expr, error) {
	s, err := in.str(v, path)
	if err != nil {
		return nil, err
	}
	var data []Variable
	if event >= 0 {
		data = in.b.t.data.Events[event].Data
	}
	e, err := ParseGuard(s, in.b.t.data.Parameters, data)
	if err != nil {
		return nil, in.errorAt(v.offset, path, "%v", err)
	}
	return e, nil
}

func (in *reader) predicates(v *value, path string) error {
	if v.kind == 0 || v.kind == '{' && len(v.items) == 0 {
		return nil
	}
	if err := in.want(v, path, '['); err != nil {
		return err
	}
	for i, item := range v.items {
		at := fmt.Sprintf("%s[%d]", path, i)
		p := Predicate{Count: -1, Event: -1, By: -1}
		var where, by *value
		err := in.members(item, at, func(name string, v *value, path string) (bool, error) {
			var err error
			switch name {
			case "count":
				var s string
				if s, err = in.str(v, path); err == nil {
					for i, c := range in.b.t.counts {
						if c == s {
							p.Count = i
						}
					}
					if p.Count < 0 {
						err = in.errorAt(v.offset, path, "count %q is not declared", s)
					}
				}
			case "event":
				p.Event, err = in.event(v, path)
			case "where":
				where = v
			case "by":
				by = v
			default:
				return false, nil
			}
			return true, err
		})
		if err != nil {
			return err
		}
		if p.Count < 0 || p.Event < 0 {
			return in.errorAt(item.offset, at, `needs "count" and "event"`)
		}
		if where != nil {
			if p.Where, err = in.expr(where, at+".where", p.Event); err != nil {
				return err
			}
		}
		if by != nil {
			s, err := in.str(by, at+".by")
			if err != nil {
				return err
			}
			for i, d := range in.b.t.data.Events[p.Event].Data {
				if d.Name == s {
					p.By = i
				}
			}
			if p.By < 0 {
				return in.errorAt(by.offset, at+".by", "%q is no datum of the event", s)
			}
			if d := in.b.t.data.Events[p.Event].Data[p.By]; d.Sort != Int {
				return in.errorAt(by.offset, at+".by", "%q has sort %s, must be int", s, d.Sort)
			}
		}
		in.b.t.data.Predicates = append(in.b.t.data.Predicates, p)
	}
	return nil
}

// guard reads the members event and guard of a rule; either may be nil.
func (in *reader) guard(event, cond *value, path string) (*Guard, error) {
	empty := func(v *value) bool { return v == nil || v.kind == 0 || v.kind == '{' && len(v.items) == 0 }
	if empty(event) && empty(cond) {
		return nil, nil
	}
	g := &Guard{Event: -1}
	var err error
	if !empty(event) {
		if g.Event, err = in.event(event, join(path, "event")); err != nil {
			return nil, err
		}
	}
	if !empty(cond) {
		if g.Cond, err = in.expr(cond, join(path, "guard"), g.Event); err != nil {
			return nil, err
		}
	}
	return g, nil
}

type (
	variableJSON struct {
		Name string `json:"name"`
		Sort string `json:"sort"`
	}
	eventJSON struct {
		Name string         `json:"name"`
		Data []variableJSON `json:"data,omitempty"`
	}
	predicateJSON struct {
		Count string `json:"count"`
		Event string `json:"event"`
		Where string `json:"where,omitempty"`
		By    string `json:"by,omitempty"`
	}
)

func variablesJSON(vs []Variable) []variableJSON {
	out := []variableJSON{}
	for _, v := range vs {
		out = append(out, variableJSON{v.Name, v.Sort.String()})
	}
	return out
}

func (t *Table) eventsJSON() []eventJSON {
	out := []eventJSON{}
	for _, e := range t.data.Events {
		out = append(out, eventJSON{e.Name, variablesJSON(e.Data)})
	}
	return out
}

func (t *Table) predicatesJSON() []predicateJSON {
	out := []predicateJSON{}
	for _, p := range t.data.Predicates {
		j := predicateJSON{Count: t.counts[p.Count], Event: t.data.Events[p.Event].Name}
		if p.Where != nil {
			j.Where = p.Where.Src
		}
		if p.By >= 0 {
			j.By = t.data.Events[p.Event].Data[p.By].Name
		}
		out = append(out, j)
	}
	return out
}
