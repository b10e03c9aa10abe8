package syntax

// Tokens to tree, by recursive descent with one function per rule of the
// grammar, in its order.

import (
	"fmt"
	"math/big"
	"strconv"
	"strings"
)

// Parse reads a rule file. The tree is never nil: after an error it holds what
// could be read, with a *Bad for each clause that could not. The error is an
// Errors with the lexical and grammatical errors, at most one per clause.
func Parse(name, src string) (*File, error) {
	f := newFile(name, src)
	p := &parser{f: f}
	p.toks = lex(f)
	p.file()
	return f, p.errs.Err()
}

// maxDepth bounds the nesting of formulas and types, so that no input can
// exhaust the goroutine's stack.
const maxDepth = 200

type parser struct {
	f     *File
	toks  []Token
	i     int
	errs  Errors
	tried []string // words that at() was asked for at token i, in order
	depth int
	// declares is the name that the clause being read declares, once known.
	declares *Ident
}

// bail unwinds to the clause in which an error was found.
type bail struct{}

func (p *parser) tok() *Token { return &p.toks[p.i] }

// at reports whether the current token is one of the grammar's words w.
func (p *parser) at(w ...string) bool {
	p.tried = append(p.tried, w...)
	t := p.tok()
	if t.Kind != Word {
		return false
	}
	for _, w := range w {
		if t.Text == w {
			return true
		}
	}
	return false
}

func (p *parser) advance() *Token {
	t := p.tok()
	if t.Kind != EOF {
		p.i++
	}
	p.tried = p.tried[:0]
	return t
}

// accept reads the word if it stands here.
func (p *parser) accept(w string) bool {
	if p.at(w) {
		p.advance()
		return true
	}
	return false
}

// expect reads the word or fails.
func (p *parser) expect(w string) *Token {
	if !p.at(w) {
		p.fail("")
	}
	return p.advance()
}

// since gives the span from a token's start to the end of the last token read
// that is no semicolon.
func (p *parser) since(from int) Span {
	last := p.i - 1
	for last > 0 && p.toks[last].Kind == Word && p.toks[last].Text == ";" {
		last--
	}
	if last < 0 {
		return Span{from, from}
	}
	return Span{from, max(from, p.toks[last].To)}
}

// shownToken is how a message names the current token.
func (p *parser) shownToken() string {
	switch t := p.tok(); {
	case t.Kind == Code:
		return "code"
	case t.Text == ",":
		return "a comma"
	default:
		return t.Text
	}
}

// ends names what ends before the current token, "" if nothing does.
func (p *parser) ends() string {
	switch t := p.tok(); {
	case t.Kind == EOF || t.auto && p.toks[p.i+1].Kind == EOF:
		return "the file"
	case t.auto:
		return "the clause"
	}
	return ""
}

// fail records an error at the current token and leaves the clause. what is
// what was expected, "" if the words tried say it all.
func (p *parser) fail(what string) {
	t := p.tok()
	if t.Kind == illegal {
		p.errs = append(p.errs, t.err)
		panic(bail{})
	}
	tried := uniq(p.tried)
	if what == "" && len(tried) == 1 {
		what = tried[0]
	}
	found := "found " + p.shownToken()
	at := t.Span
	if ends := p.ends(); ends != "" {
		found = "but " + ends + " ends here"
		if p.i > 0 { // behind what was read, not where the next clause starts
			at = Span{p.toks[p.i-1].To, p.toks[p.i-1].To}
		}
	}
	msg := fmt.Sprintf("expected %s, %s", what, found)
	if what == "" {
		msg = fmt.Sprintf("%s cannot stand here", p.shownToken())
		if ends := p.ends(); ends != "" {
			msg = ends + " ends too early"
		}
	}
	p.errs = append(p.errs, p.f.Errorf(Grammatical, at, p.hint(what, tried), "%s", msg))
	panic(bail{})
}

// hint says what could stand in the place of the current token.
func (p *parser) hint(what string, tried []string) string {
	t := p.tok()
	var letters []string
	closer := ""
	for _, w := range tried {
		switch {
		case w == "nil" || w == "struct":
			what = "" // formulas, patterns and types: too many words to be of help
			tried = nil
		case isLetters(w):
			letters = append(letters, w)
		case w == ")" || w == "]":
			closer = w
		}
	}
	if !t.auto && t.Kind != EOF {
		if n := Near(t.Text, letters); n != "" {
			return n + " could stand here"
		}
		if t.Kind == Word && isLetters(t.Text) && strings.Contains(what, "name") {
			return t.Text + " is a word of the language; choose another name"
		}
	}
	switch {
	case tried == nil:
		return ""
	case closer != "" && what != closer:
		return closer + " could stand here"
	case len(letters) > 1:
		return "here can stand " + Enumerate(letters, "or")
	}
	return ""
}

func isLetters(s string) bool { return s != "" && s[0] >= 'a' && s[0] <= 'z' }

func uniq(in []string) []string {
	var out []string
	seen := map[string]bool{}
	for _, w := range in {
		if w == ";" {
			continue
		}
		if !seen[w] {
			seen[w] = true
			out = append(out, w)
		}
	}
	return out
}

// deeper counts nesting; the result undoes it.
func (p *parser) deeper() func() {
	if p.depth++; p.depth > maxDepth {
		p.errs = append(p.errs, p.f.Errorf(Grammatical, p.tok().Span, "", "this is nested more than %d deep", maxDepth))
		panic(bail{})
	}
	return func() { p.depth-- }
}

// guard runs f, which reads up to the semicolon of one clause, and reads that
// too. After an error it skips to the semicolon and reports false.
func (p *parser) guard(f func()) (ok bool) {
	p.declares, p.depth = nil, 0
	p.tried = p.tried[:0]
	defer func() {
		if r := recover(); r != nil {
			if _, mine := r.(bail); !mine {
				panic(r)
			}
			p.skip()
		}
	}()
	f()
	p.expect(";")
	return true
}

// skip reads up to and with the next semicolon outside braces opened behind
// this place; it stops before a brace that closes more.
func (p *parser) skip() {
	p.tried = p.tried[:0]
	for depth := 0; ; p.i++ {
		t := p.tok()
		if t.Kind == EOF {
			return
		}
		if t.Kind != Word {
			continue
		}
		switch t.Text {
		case "{":
			depth++
		case "}":
			if depth == 0 {
				return
			}
			depth--
		case ";":
			if depth == 0 || p.toks[p.i+1].Kind == Word && p.toks[p.i+1].Text == "rule" {
				p.i++
				return
			}
		}
	}
}

func (p *parser) file() {
	if p.at("ruleset") {
		var name *Ident
		if p.guard(func() {
			p.advance()
			name = p.name("the name of the rule set")
		}) {
			p.f.RuleSet = name
		}
	}
	for p.at("import") {
		var im *Import
		if p.guard(func() { im = p.importLine() }) {
			p.f.Imports = append(p.f.Imports, im)
		} else {
			p.f.BadImport = true
		}
	}
	for p.tok().Kind != EOF {
		before := p.i
		var d Decl
		if p.guard(func() {
			switch {
			case p.at("rule"):
				p.rule() // kept whatever follows it
			case p.at("model"):
				d = p.model()
			case p.at("enable", "disable", "soften", "root", "noroot", "pin"):
				d = p.setting()
			case p.at("import"):
				p.f.BadImport = true
				p.errs = append(p.errs, p.f.Errorf(Grammatical, p.tok().Span, "", "import stands before all rules, models and settings"))
				panic(bail{})
			default:
				p.fail("a rule, a model or a setting")
			}
		}) && d != nil {
			p.f.Decls = append(p.f.Decls, d)
		}
		if p.i == before { // a closing brace too many, and what goes on behind it in its line
			line, _ := p.f.Position(p.tok().From)
			p.i++
			if next, _ := p.f.Position(p.tok().From); next == line {
				p.skip()
			}
		}
	}
}

func (p *parser) name(what string) *Ident {
	if p.tok().Kind != Name {
		p.fail(what)
	}
	t := p.advance()
	return &Ident{t.Span, t.Text}
}

func (p *parser) str(what string) *StrLit {
	if p.tok().Kind != String {
		p.fail(what)
	}
	t := p.advance()
	v, err := strconv.Unquote(t.Text)
	if err != nil {
		panic("syntax: the lexer let a malformed string through: " + t.Text)
	}
	return &StrLit{t.Span, v}
}

func (p *parser) int(what string) *IntLit {
	if p.tok().Kind != Int {
		p.fail(what)
	}
	t := p.advance()
	v, ok := new(big.Int).SetString(strings.ReplaceAll(t.Text, "_", ""), 10)
	if !ok {
		panic("syntax: the lexer let a malformed number through: " + t.Text)
	}
	return &IntLit{t.Span, v}
}

func (p *parser) importLine() *Import {
	from := p.expect("import").From
	im := &Import{}
	if p.tok().Kind == Name {
		im.Name = p.name("")
	}
	im.Path = p.str(`the package's path between "…"`)
	im.Span = p.since(from)
	return im
}

func (p *parser) rule() {
	from := p.expect("rule").From
	r := &Rule{Doc: p.docBefore(from), Name: p.name("the rule's name")}
	p.expect("{")
	p.f.Decls = append(p.f.Decls, r)
	for !p.at("}") && p.tok().Kind != EOF && !p.atTop() {
		start, before := p.tok().From, p.i
		var c Clause
		isClaim := p.at("claim", "advice")
		if p.guard(func() { c = p.clause() }) {
			r.Clauses = append(r.Clauses, c)
		} else {
			r.Clauses = append(r.Clauses, &Bad{Span: p.since(start), Declares: p.declares, Claim: isClaim})
		}
		if p.i == before {
			break
		}
	}
	p.tried = p.tried[:0]
	r.Span = p.since(from)
	if !p.at("}") {
		at := Span{r.Name.From, r.Name.To}
		p.errs = append(p.errs, p.f.Errorf(Grammatical, at, "", "the rule %s has no closing }", r.Name.Text))
		// What follows starts a declaration of its own; stand on a semicolon.
		p.i--
		if p.tok().Text != ";" {
			panic(bail{})
		}
		return
	}
	p.advance()
	r.Span = p.since(from)
}

// atTop reports whether a word that only starts declarations stands here.
func (p *parser) atTop() bool {
	t := p.tok()
	return t.Kind == Word && topWords[t.Text] && !clauseWords[t.Text]
}

// docBefore gives the comment block that ends in the line before offset from.
func (p *parser) docBefore(from int) string {
	line, _ := p.f.Position(from)
	var block []string
	cs := p.f.Comments
	for i := len(cs) - 1; i >= 0; i-- {
		if cs[i].From > from {
			continue
		}
		l, _ := p.f.Position(cs[i].From)
		if l != line-1 || !cs[i].Own {
			break
		}
		line = l
		block = append(block, strings.TrimPrefix(strings.TrimPrefix(cs[i].Text, "//"), " "))
	}
	for i, j := 0, len(block)-1; i < j; i, j = i+1, j-1 {
		block[i], block[j] = block[j], block[i]
	}
	return strings.Join(block, "\n")
}

func (p *parser) clause() Clause {
	from := p.tok().From
	switch {
	case p.at("each"):
		return p.each()
	case p.accept("within"):
		p.expect("goroutine")
		return &Scope{Span: p.since(from)}
	case p.accept("across"):
		p.expect("goroutines")
		return &Scope{Span: p.since(from), Across: true}
	case p.at("count"):
		return p.count()
	case p.at("phase"):
		return p.phase()
	case p.at("claim", "advice"):
		return p.claim()
	case p.at("model"):
		return p.model()
	case p.at("holds", "broken"):
		return p.example()
	}
	p.fail("a clause")
	return nil
}

func (p *parser) each() *Each {
	from := p.expect("each").From
	e := &Each{Name: p.name("the name of the instance")}
	p.declares = e.Name
	e.Types = append(e.Types, p.typ())
	for p.accept("|") {
		e.Types = append(e.Types, p.typ())
	}
	if p.accept("in") {
		e.In = append(e.In, p.subject("a field or a global"))
		for p.accept(",") {
			e.In = append(e.In, p.subject("a field or a global"))
		}
	}
	if p.at("stays", "moves") {
		t := p.advance()
		e.Hand = &Ident{t.Span, t.Text}
	}
	if p.accept("where") {
		e.Where = p.formula()
	}
	e.Span = p.since(from)
	return e
}

func (p *parser) count() *Count {
	from := p.expect("count").From
	c := &Count{Name: p.name("the name of the count")}
	p.declares = c.Name
	if p.accept("by") {
		c.By = p.sum()
	}
	p.expect(":")
	c.Event = p.event()
	if p.accept("since") {
		c.Since = p.event()
	}
	c.Span = p.since(from)
	return c
}

func (p *parser) phase() *Phase {
	from := p.expect("phase").From
	c := &Phase{Name: p.name("the name of the phase")}
	p.declares = c.Name
	p.expect("from")
	c.From = p.event()
	if p.accept("until") {
		c.Until = p.event()
	}
	c.Span = p.since(from)
	return c
}

func (p *parser) claim() *Claim {
	t := p.advance()
	c := &Claim{Advice: t.Text == "advice", Name: p.name("the name of the " + t.Text)}
	p.declares = c.Name
	c.Point = p.point()
	p.expect(":")
	c.Formula = p.formula()
	c.Reason = p.reason()
	c.Span = p.since(t.From)
	return c
}

func (p *parser) reason() *StrLit {
	if p.accept("reason") {
		return p.str(`the reason between "…"`)
	}
	return nil
}

func (p *parser) point() *Point {
	from := p.tok().From
	pt := &Point{}
	switch {
	case p.accept("always"):
		pt.Word = "always"
	case p.accept("at"):
		if !p.at("return", "success", "failure", "panic", "end") {
			p.fail("a checkpoint")
		}
		pt.Word = p.advance().Text
	case p.at("before", "after"):
		pt.Word = p.advance().Text
		pt.Event = p.event()
	default:
		p.fail("a checkpoint")
	}
	pt.Span = p.since(from)
	return pt
}

func (p *parser) example() *Example {
	t := p.advance()
	e := &Example{}
	if t.Text == "broken" {
		e.Broken = append(e.Broken, p.name("the name of the claim that the code breaks"))
		for p.accept(",") {
			e.Broken = append(e.Broken, p.name("the name of a claim"))
		}
	}
	if p.tok().Kind != Code {
		p.fail("code between back quotes")
	}
	c := p.advance()
	n := run(c.Text)
	e.Code = &CodeLit{Span: c.Span, Inner: Span{c.From + n, c.To - n}, Value: c.Text[n : len(c.Text)-n]}
	e.Span = p.since(t.From)
	return e
}

func (p *parser) model() *Model {
	from := p.expect("model").From
	m := &Model{Callees: p.callees()}
	switch {
	case p.at("calls", "spawns", "keeps", "yields"):
		m.Effect = p.advance().Text
		p.expect("arg")
		m.Arg = p.int("the number of an argument")
	case p.accept("never"):
		p.expect("returns")
		m.Effect = "never returns"
	case p.accept("repeats"):
		m.Effect = "repeats"
	default:
		p.fail("what the function does")
	}
	m.Span = p.since(from)
	return m
}

func (p *parser) setting() *Setting {
	t := p.advance()
	s := &Setting{Word: t.Text}
	switch t.Text {
	case "root", "noroot":
		s.Callees = p.callees()
	case "pin":
		s.Name = p.name("the name of the rule set")
		s.Version = p.str(`the version between "…"`)
	default:
		for {
			n := p.name("the name of a rule or a rule set")
			tg := &Target{Name: n}
			if p.accept("/") {
				tg.Claim = p.name("the name of a claim")
			}
			tg.Span = p.since(n.From)
			s.Targets = append(s.Targets, tg)
			if !p.accept(",") {
				break
			}
		}
		if p.accept("in") {
			s.In = append(s.In, p.str(`a pattern of packages between "…"`))
			for p.accept(",") {
				s.In = append(s.In, p.str(`a pattern of packages between "…"`))
			}
		}
		s.Reason = p.reason()
	}
	s.Span = p.since(t.From)
	return s
}

func (p *parser) event() *Event {
	from := p.tok().From
	e := &Event{}
	if !p.at("call", "spawn", "send", "receive", "close", "make") {
		p.fail("an event")
	}
	e.Act = p.advance().Text
	switch e.Act {
	case "call", "spawn":
		e.Callees = p.callees()
		if p.accept("on") {
			e.On = p.subject("the name of the receiver")
		}
	case "send", "receive", "close":
		p.expect("on")
		e.On = p.subject("the name of the channel")
	}
	if e.Act != "receive" && e.Act != "close" && p.accept("with") {
		e.With = p.patterns()
	}
	switch e.Act {
	case "call", "spawn", "receive":
		if p.accept("returning") {
			e.Giving = p.patterns()
		}
	case "make":
		p.expect("returning")
		e.Giving = p.patterns()
	}
	for {
		side := p.tok().From
		if p.accept("where") {
			e.Where = append(e.Where, p.formula())
			continue
		}
		if !p.at("inside", "outside") {
			break
		}
		s := &Side{Outside: p.advance().Text == "outside", Name: p.name("the name of a phase")}
		s.Span = p.since(side)
		e.Within = append(e.Within, s)
	}
	e.Span = p.since(from)
	return e
}

func (p *parser) patterns() *Patterns {
	from := p.tok().From
	ps := &Patterns{}
	if !p.accept("(") {
		ps.List = append(ps.List, p.pattern())
	} else if !p.accept(")") {
		ps.List = append(ps.List, p.pattern())
		for p.accept(",") {
			ps.List = append(ps.List, p.pattern())
		}
		p.expect(")")
	}
	ps.Span = p.since(from)
	return ps
}

func (p *parser) pattern() *Pattern {
	t := p.tok()
	pt := &Pattern{Kind: t.Text}
	switch {
	case p.at("_", "...", "nil", "true", "false"):
		p.advance()
	case p.accept("-"):
		pt.Kind = "int"
		pt.Int = new(big.Int).Neg(p.int("a number").Value)
	case t.Kind == Int:
		pt.Kind = "int"
		pt.Int = p.int("").Value
	case t.Kind == String:
		pt.Kind = "string"
		pt.String = p.str("").Value
	case t.Kind == Name:
		pt.Kind = "subject"
		pt.Subject = p.subject("")
	default:
		p.fail("a pattern: a name, a constant, _ or ...")
	}
	pt.Span = p.since(t.From)
	return pt
}

func (p *parser) subject(what string) *Subject {
	from := p.tok().From
	s := &Subject{Parts: []*Ident{p.name(what)}}
	for p.accept(".") {
		s.Parts = append(s.Parts, p.name("a name"))
	}
	s.Span = p.since(from)
	return s
}

func (p *parser) callees() []*Callee {
	cs := []*Callee{p.callee()}
	for p.accept(",") {
		cs = append(cs, p.callee())
	}
	return cs
}

func (p *parser) callee() *Callee {
	from := p.tok().From
	c := &Callee{}
	if p.accept("(") {
		c.Recv = true
		c.Pointer = p.accept("*")
		c.Subject = p.subject("the receiver's type")
		c.Args = p.typeArgs()
		p.expect(")")
		p.expect(".")
		c.Method = p.name("the name of a method")
	} else {
		c.Subject = p.subject("a function, such as os.Open or (*os.File).Close")
		c.Args = p.typeArgs()
	}
	c.Prefix = p.accept("*")
	c.Span = p.since(from)
	return c
}

func (p *parser) typeArgs() []TypeExpr {
	if !p.accept("[") {
		return nil
	}
	ts := []TypeExpr{p.typ()}
	for p.accept(",") {
		ts = append(ts, p.typ())
	}
	p.expect("]")
	return ts
}

func (p *parser) typ() TypeExpr {
	defer p.deeper()()
	t := p.tok()
	from := t.From
	switch {
	case p.accept("_"):
		return &AnyType{t.Span}
	case p.accept("*"):
		el := p.typ()
		return &PointerType{p.since(from), el}
	case p.accept("["):
		var n *IntLit
		if p.tok().Kind == Int {
			n = p.int("")
		}
		p.expect("]")
		el := p.typ()
		return &ArrayType{p.since(from), n, el}
	case p.accept("map"):
		p.expect("[")
		k := p.typ()
		p.expect("]")
		el := p.typ()
		return &MapType{p.since(from), k, el}
	case p.at("chan", "<-chan", "chan<-"):
		p.advance()
		el := p.typ()
		return &ChanType{p.since(from), t.Text, el}
	case p.accept("func"):
		p.expect("(")
		var ps []TypeExpr
		if !p.at(")") {
			ps = append(ps, p.typ())
			for p.accept(",") {
				ps = append(ps, p.typ())
			}
		}
		p.expect(")")
		return &FuncType{p.since(from), ps}
	case p.accept("struct"):
		p.expect("{")
		p.expect("}")
		return &StructType{p.since(from)}
	case t.Kind == Name:
		s := p.subject("")
		args := p.typeArgs()
		return &NamedType{p.since(from), s, args}
	}
	p.fail("a type")
	return nil
}

func (p *parser) formula() Formula {
	defer p.deeper()()
	from := p.tok().From
	x := p.or()
	if p.at("=>") {
		op := p.advance()
		y := p.formula()
		return &Binary{p.since(from), "=>", op.Span, x, y}
	}
	return x
}

// binary reads operands that operators of one precedence join to the left.
func (p *parser) binary(operand func() Formula, ops ...string) Formula {
	from := p.tok().From
	x := operand()
	for p.at(ops...) {
		op := p.advance()
		y := operand()
		x = &Binary{p.since(from), op.Text, op.Span, x, y}
	}
	return x
}

func (p *parser) or() Formula  { return p.binary(p.and, "||") }
func (p *parser) and() Formula { return p.binary(p.not, "&&") }

func (p *parser) not() Formula {
	defer p.deeper()()
	from := p.tok().From
	if p.accept("!") {
		x := p.not()
		return &Unary{p.since(from), "!", x}
	}
	return p.compare()
}

func (p *parser) compare() Formula {
	from := p.tok().From
	c := &Chain{Terms: []Formula{p.sum()}}
	for p.at("==", "!=", "<", "<=", ">", ">=", "starts", "ends", "matches") {
		t := p.advance()
		c.Ops = append(c.Ops, &Ident{t.Span, t.Text})
		c.Terms = append(c.Terms, p.sum())
	}
	if len(c.Ops) == 0 {
		return c.Terms[0]
	}
	c.Span = p.since(from)
	return c
}

func (p *parser) sum() Formula     { return p.binary(p.product, "+", "-") }
func (p *parser) product() Formula { return p.binary(p.factor, "*", "%") }

func (p *parser) factor() Formula {
	defer p.deeper()()
	t := p.tok()
	switch {
	case p.accept("-"):
		x := p.factor()
		return &Unary{p.since(t.From), "-", x}
	case t.Kind == Int:
		return p.int("")
	case t.Kind == String:
		return p.str("")
	case p.at("true", "false", "nil"):
		p.advance()
		return &WordLit{t.Span, t.Text}
	case p.at("len", "cap"):
		p.advance()
		p.expect("(")
		s := p.subject("a name")
		p.expect(")")
		return &Size{p.since(t.From), t.Text, s}
	case t.Kind == Name:
		return p.subject("")
	case p.accept("("):
		x := p.formula()
		p.expect(")")
		return &Paren{p.since(t.From), x}
	}
	p.fail("a count, a number or a formula in parentheses")
	return nil
}
