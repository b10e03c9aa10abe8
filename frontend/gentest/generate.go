package gentest

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
)

// Generate makes the program of a seed. In a known program no branch is left
// to the oracle, so that every root has exactly one run.
//
// without names features to leave out, see features.
func Generate(seed int64, known bool, without ...string) *Program {
	for draft := uint64(0); ; draft++ {
		p := generate(seed, draft, known, without)
		_, err := p.Check()
		for err != nil && dropUnused(p, err) {
			_, err = p.Check()
		}
		if err == nil {
			return p
		}
		if draft == 10 {
			panic(fmt.Sprintf("gentest: seed %d: %v\n%s", seed, err, p.Source()))
		}
	}
}

// generate makes a draft, which need not compile: about 1 in 600 does not.
func generate(seed int64, draft uint64, known bool, without []string) *Program {
	g := &gen{r: rand.New(rand.NewPCG(uint64(seed), draft)), known: known, at: -1, without: without}
	g.risky = g.chance(60) && g.has("panic")
	g.spawns = g.chance(25) && g.has("goroutine")
	for range 1 + g.r.IntN(4) {
		g.signature()
	}
	p := &Program{Seed: seed, Known: known}
	for i := range g.funcs {
		g.at = i
		p.decls = append(p.decls, g.function(&g.funcs[i]))
	}
	g.at = -1
	for i := range 1 + g.r.IntN(2) {
		p.decls = append(p.decls, g.root(i))
	}
	p.decls = append(p.decls, text("type Err struct{}\n\nfunc (Err) Error() string { return \"\" }\n\nvar ErrBad error = Err{}"))
	if g.usesRescue {
		p.decls = append(p.decls, text("func rescue() { recover() }"))
	}
	return p
}

// dropUnused takes a label out that is not used.
func dropUnused(p *Program, err error) bool {
	_, after, ok := strings.Cut(err.Error(), "label ")
	name, _, ok2 := strings.Cut(after, " declared and not used")
	if !ok || !ok2 {
		return false
	}
	var visit func(l []*node)
	visit = func(l []*node) {
		for _, n := range l {
			for i := range n.parts {
				n.parts[i].text = strings.Replace(n.parts[i].text, name+":\n", "", 1)
				visit(n.parts[i].block)
			}
		}
	}
	visit(p.decls)
	return true
}

type gen struct {
	r          *rand.Rand
	known      bool
	risky      bool // panics and Goexit
	spawns     bool
	funcs      []signature
	at         int // the function being written; -1: a root
	names      int
	usesRescue bool
	without    []string
}

// features are what Generate can leave out; the rest is always in.
var features = []string{
	"field func", // a function value stored in a field and called
	"set func",   // a variable of function type is assigned again
	"set res",    // a pointer variable is assigned again
	"set P",      // the pointer field of a box is assigned
	"box",        // a box is allocated
	"local",      // an instance is allocated
	"goto",
	"goroutine",
	"goexit",
	"panic",
	"defer",
	"closure",
	"method value",
	"interface",
	"func param",
	"named",
	"flag",
	"field flag",
	"returned func",
	"returned res",
	"two results",
	"field pointer",
}

func (g *gen) has(feature string) bool {
	if !slices.Contains(features, feature) {
		panic("gentest: no feature " + feature)
	}
	return !slices.Contains(g.without, feature)
}

// A signature is a helper's.
type signature struct {
	name    string
	method  bool
	params  []param
	results []string
	named   bool
}

type param struct{ name, typ string }

// scope is what a statement may name.
type scope struct {
	vars    map[string][]string // by type: *Res, *Box, bool, func(), Taker, int
	results []string            // of the function or closure
	named   []string            // names of named results
	loop    bool
	sw      bool
	label   string
	depth   int
	quiet   bool // no calls of functions, panics or returns: a goroutine's body
	inDefer bool
}

func (s *scope) inner() *scope {
	c := *s
	c.vars = map[string][]string{}
	for k, v := range s.vars {
		c.vars[k] = slices.Clone(v)
	}
	c.depth++
	return &c
}

func (s *scope) add(typ, name string) { s.vars[typ] = append(s.vars[typ], name) }

func (g *gen) chance(percent int) bool { return g.r.IntN(100) < percent }

func pick[T any](g *gen, l []T) T { return l[g.r.IntN(len(l))] }

func (g *gen) name(stem string) string {
	g.names++
	return fmt.Sprintf("%s%d", stem, g.names)
}

func (g *gen) signature() {
	s := signature{name: fmt.Sprintf("f%d", len(g.funcs))}
	types := []string{"*Res", "*Res", "*Res", "bool", "func()", "Taker", "int", "*Box"}
	for i := range g.r.IntN(4) {
		t := pick(g, types)
		if t == "func()" && !g.has("func param") || t == "Taker" && !g.has("interface") {
			t = "*Res"
		}
		s.params = append(s.params, param{fmt.Sprintf("p%d", i), t})
	}
	s.method = g.chance(30)
	switch g.r.IntN(9) {
	case 0, 1:
		if g.has("returned res") {
			s.results = []string{"*Res"}
		}
	case 2:
		s.results = []string{"bool"}
	case 3:
		if g.has("returned func") {
			s.results = []string{"func()"}
		}
	case 4:
		s.results = []string{"error"}
	case 5:
		if g.has("two results") {
			s.results = []string{"*Res", "bool"}
		}
	}
	s.named = len(s.results) > 0 && g.chance(40) && g.has("named")
	g.funcs = append(g.funcs, s)
}

func (g *gen) function(s *signature) *node {
	sc := &scope{vars: map[string][]string{}, results: s.results}
	var ps []string
	for _, p := range s.params {
		ps = append(ps, p.name+" "+p.typ)
		sc.add(p.typ, p.name)
	}
	recv := ""
	if s.method {
		recv = "(b *Box) "
		sc.add("*Box", "b")
	}
	var rs []string
	for i, t := range s.results {
		if s.named {
			n := fmt.Sprintf("out%d", i)
			sc.named = append(sc.named, n)
			if t != "func()" && t != "error" {
				sc.add(t, n)
			}
			t = n + " " + t
		}
		rs = append(rs, t)
	}
	body := g.block(sc, 2+g.r.IntN(5))
	body = append(body, g.finish(sc))
	return tree(fmt.Sprintf("func %s%s(%s) (%s) {", recv, s.name, strings.Join(ps, ", "), strings.Join(rs, ", ")), body, "}")
}

func (g *gen) root(i int) *node {
	sc := &scope{vars: map[string][]string{}}
	var ps []string
	recv := ""
	if g.chance(40) {
		recv = "(b *Box) "
		sc.add("*Box", "b")
	}
	if recv == "" && g.chance(60) {
		ps = append(ps, "b *Box")
		sc.add("*Box", "b")
	}
	for j := range g.r.IntN(3) {
		ps = append(ps, fmt.Sprintf("r%d *Res", j))
		sc.add("*Res", fmt.Sprintf("r%d", j))
	}
	if !g.known && g.chance(40) {
		ps = append(ps, "c bool")
		sc.add("bool", "c")
	}
	var body []*node
	if g.known {
		for _, b := range sc.vars["*Box"] {
			body = append(body, text("%s.F = %t", b, g.chance(50)))
		}
	}
	if g.risky && g.chance(70) {
		body = append(body, g.recovering(sc))
	}
	body = append(body, g.block(sc, 3+g.r.IntN(6))...)
	return tree(fmt.Sprintf("func %sRoot%d(%s) {", recv, i, strings.Join(ps, ", ")), body, "}")
}

// finish is the last statement of a function.
func (g *gen) finish(sc *scope) *node {
	if len(sc.results) == 0 {
		return text("return")
	}
	return text("%s", g.ret(sc))
}

func (g *gen) ret(sc *scope) string {
	if len(sc.results) == 0 {
		return "return"
	}
	if len(sc.named) > 0 && len(sc.results) == len(sc.named) && !slices.Contains(sc.results, "func()") && g.chance(40) {
		return "return"
	}
	var vs []string
	for _, t := range sc.results {
		vs = append(vs, g.value(sc, t))
	}
	return "return " + strings.Join(vs, ", ")
}

// value is an expression of a type without an effect of its own, but for flips.
func (g *gen) value(sc *scope, typ string) string {
	switch typ {
	case "*Res":
		return g.resPtr(sc)
	case "*Box":
		if v := sc.vars["*Box"]; len(v) > 0 && g.chance(90) {
			return pick(g, v)
		}
		return "&Box{P: &Res{}}"
	case "bool":
		if g.chance(30) {
			return fmt.Sprint(g.chance(50))
		}
		return g.cond(sc)
	case "func()":
		if v := sc.vars["func()"]; len(v) > 0 && g.chance(50) {
			return pick(g, v)
		}
		switch g.r.IntN(3) {
		case 0:
			return g.receiver(sc) + pick(g, []string{".Take", ".Give"})
		case 1:
			return "func() { " + g.event(sc) + " }"
		}
		return "func() { " + g.event(sc) + "; " + g.event(sc) + " }"
	case "Taker":
		if v := sc.vars["Taker"]; len(v) > 0 && g.chance(40) {
			return pick(g, v)
		}
		if g.chance(15) {
			return "&Nop{}"
		}
		return g.resPtr(sc)
	case "int":
		return fmt.Sprint(g.r.IntN(3))
	case "error":
		return pick(g, []string{"nil", "ErrBad"})
	}
	panic("gentest: no value of type " + typ)
}

// resPtr is an expression of type *Res.
func (g *gen) resPtr(sc *scope) string {
	if g.chance(5) {
		return "&Res{}"
	}
	r := g.receiver(sc)
	if strings.HasSuffix(r, ".A") || strings.HasSuffix(r, ".C") || r == "Glob" {
		return "&" + r
	}
	return r
}

// receiver is an expression on which Take and Give may be called.
func (g *gen) receiver(sc *scope) string {
	if v := sc.vars["*Res"]; len(v) > 0 && g.chance(70) {
		return pick(g, v)
	}
	if v := sc.vars["*Box"]; len(v) > 0 && g.chance(90) {
		if !g.has("field pointer") {
			return pick(g, v) + pick(g, []string{".A", ".A", ".C"})
		}
		return pick(g, v) + pick(g, []string{".A", ".A", ".C", ".P"})
	}
	return "Glob"
}

func (g *gen) event(sc *scope) string {
	m := pick(g, []string{"Take", "Give"})
	if v := sc.vars["Taker"]; len(v) > 0 && g.chance(20) {
		return pick(g, v) + "." + m + "()"
	}
	r := g.receiver(sc)
	if g.chance(4) {
		if strings.HasPrefix(r, "r") && !strings.Contains(r, ".") {
			return fmt.Sprintf("(*Res).%s(%s)", m, r)
		}
	}
	return r + "." + m + "()"
}

func (g *gen) cond(sc *scope) string {
	flags := sc.vars["bool"]
	for {
		switch n := g.r.IntN(20); {
		case n < 8:
			if !g.known && !sc.quiet {
				return "rt.Flip()"
			}
		case n < 15:
			if len(flags) > 0 {
				f := pick(g, flags)
				if g.chance(40) {
					return "!" + f
				}
				return f
			}
		case n < 17:
			if b := sc.vars["*Box"]; len(b) > 0 && !sc.quiet && !(g.known && g.at >= 0) {
				return pick(g, []string{"", "!"}) + pick(g, b) + ".F"
			}
		case n < 18:
			if r := sc.vars["*Res"]; len(r) > 0 && !g.known {
				return pick(g, r) + pick(g, []string{" != nil", " == nil"})
			}
		case n < 19:
			if i := sc.vars["int"]; len(i) > 0 {
				return pick(g, i) + pick(g, []string{" > 0", " == 1", " < 2", " != 0"})
			}
		default:
			if len(flags) == 0 && (g.known || sc.quiet) {
				return pick(g, []string{"true", "false"})
			}
			if len(flags) > 1 {
				return pick(g, flags) + pick(g, []string{" && ", " || ", " == "}) + pick(g, flags)
			}
		}
	}
}

func (g *gen) block(sc *scope, n int) []*node {
	var out []*node
	for range n {
		out = append(out, g.stmt(sc))
	}
	return out
}

// sub is a block one level deeper.
func (g *gen) sub(sc *scope) []*node {
	return g.block(sc.inner(), 1+g.r.IntN(3))
}

func (g *gen) loopBody(sc *scope, label string) []*node {
	c := sc.inner()
	c.loop, c.sw = true, false
	if label != "" {
		c.label = label
	}
	return g.block(c, 1+g.r.IntN(3))
}

// closure is the body of a function literal.
func (g *gen) closure(sc *scope, quiet bool) []*node {
	c := sc.inner()
	c.results, c.named, c.loop, c.sw, c.label = nil, nil, false, false, ""
	c.quiet = c.quiet || quiet
	return g.block(c, 1+g.r.IntN(3))
}

func (g *gen) recovering(sc *scope) *node {
	switch g.r.IntN(7) {
	case 0, 1:
		return text("defer func() { recover() }()")
	case 2:
		return tree("defer func() { if recover() != nil {", g.closure(sc, false), "} }()")
	case 3:
		g.usesRescue = true
		return text("defer rescue()")
	case 4:
		g.usesRescue = true
		return text("defer func() { rescue() }()")
	case 5:
		return tree("defer func() { if e := recover(); e == nil {", g.closure(sc, false), "} }()")
	}
	return tree("defer func() { if e := recover(); e != nil {", g.closure(sc, false), "panic(e) } }()")
}

func (g *gen) stmt(sc *scope) *node {
	for {
		if n := g.tryStmt(sc); n != nil {
			return n
		}
	}
}

func (g *gen) tryStmt(sc *scope) *node {
	deep := sc.depth >= 3
	switch g.r.IntN(46) {
	default:
		return text("%s", g.event(sc))
	case 0, 1, 2, 3:
		if deep {
			return nil
		}
		then := g.sub(sc)
		c := g.cond(sc)
		short := tree("if "+c+" {", then, "}")
		if g.chance(60) {
			return short
		}
		other := g.sub(sc)
		n := tree("if "+c+" {", then, "} else {", other, "}")
		n.alts = []*node{short}
		return n
	case 4, 5:
		f := g.name("c")
		v := g.cond(sc)
		if g.chance(50) {
			v = fmt.Sprint(g.chance(50))
		}
		sc.add("bool", f)
		return text("%s := %s\n_ = %s", f, v, f)
	case 6:
		if !g.has("flag") {
			return nil
		}
		if sc.quiet {
			return nil
		}
		if v := sc.vars["bool"]; len(v) > 0 {
			return text("%s = %s", pick(g, v), g.value(sc, "bool"))
		}
		return nil
	case 7:
		if !g.has("field flag") {
			return nil
		}
		if b := sc.vars["*Box"]; len(b) > 0 && !sc.quiet {
			return text("%s.F = %s", pick(g, b), g.value(sc, "bool"))
		}
		return nil
	case 8, 9:
		if deep {
			return nil
		}
		label, l := "", ""
		if g.chance(30) {
			l = g.name("L")
			label = l + ":\n"
		}
		switch g.r.IntN(5) {
		case 0:
			i := g.name("i")
			c := sc.inner()
			c.add("int", i)
			return tree(fmt.Sprintf("%sfor %s := 0; %s < %d; %s++ {", label, i, i, 1+g.r.IntN(3), i), g.loopBody(c, l), "}")
		case 1:
			return tree(fmt.Sprintf("%sfor range %d {", label, 1+g.r.IntN(2)), g.loopBody(sc, l), "}")
		case 2:
			if g.known || sc.quiet {
				return nil
			}
			return tree(label+"for rt.Flip() {", g.loopBody(sc, l), "}")
		case 3:
			if g.known || sc.quiet {
				return nil
			}
			return tree(label+"for {\nif !rt.Flip() { break }", g.loopBody(sc, l), "}")
		}
		if g.known || sc.quiet {
			return nil
		}
		if !g.has("goto") {
			return nil
		}
		again := g.name("L")
		c := sc.inner()
		c.loop = false
		return tree(again+":\n{", g.block(c, 1+g.r.IntN(2)), "}\nif rt.Flip() { goto "+again+" }")
	case 10:
		if deep {
			return nil
		}
		c := sc.inner()
		c.sw = true
		b := func() []*node { return g.block(c.inner(), 1+g.r.IntN(2)) }
		fall := ""
		if g.chance(30) {
			fall = "fallthrough\n"
		}
		if !g.known && !sc.quiet && g.chance(50) {
			return tree("switch rt.Pick() {\ncase 0:", b(), fall+"case 1:", b(), "default:", b(), "}")
		}
		if g.chance(50) {
			return tree("switch {\ncase "+g.cond(sc)+":", b(), fall+"case "+g.cond(sc)+":", b(), "}")
		}
		return tree("switch {\ncase "+g.cond(sc)+":", b(), "default:", b(), "}")
	case 11:
		if t := sc.vars["Taker"]; len(t) > 0 && !deep {
			c := sc.inner()
			x := g.name("x")
			c.add("*Res", x)
			if g.chance(50) {
				return tree(fmt.Sprintf("if %s, ok := %s.(*Res); ok {\n_ = %s", x, pick(g, t), x), g.block(c, 1+g.r.IntN(2)), "}")
			}
			return tree(fmt.Sprintf("switch %s := %s.(type) {\ncase *Res:\n_ = %s", x, pick(g, t), x), g.block(c, 1+g.r.IntN(2)), "case *Nop:", g.sub(sc), "}")
		}
		return nil
	case 12, 13:
		if !g.has("defer") {
			return nil
		}
		if sc.quiet {
			return text("defer %s", g.event(sc))
		}
		switch g.r.IntN(4) {
		case 0:
			return text("defer %s", g.event(sc))
		case 1:
			return tree("defer func() {", g.closure(sc, false), "}()")
		case 2:
			if v := sc.vars["func()"]; len(v) > 0 {
				return text("defer %s()", pick(g, v))
			}
			m := g.name("m")
			return text("%s := %s%s\ndefer %s()", m, g.receiver(sc), pick(g, []string{".Take", ".Give"}), m)
		}
		return tree("defer func(x *Res) {\n_ = x", func() []*node {
			c := sc.inner()
			c.add("*Res", "x")
			return g.closure(c, false)
		}(), "}("+g.resPtr(sc)+")")
	case 14:
		if g.risky && !sc.quiet {
			return g.recovering(sc)
		}
		return nil
	case 15:
		if !g.risky || sc.quiet {
			return nil
		}
		if g.chance(15) {
			return text("panic(\"now\")")
		}
		return text("if %s { panic(\"oops\") }", g.cond(sc))
	case 16:
		if !g.risky || sc.quiet || g.chance(60) || !g.has("goexit") {
			return nil
		}
		return text("if %s { runtime.Goexit() }", g.cond(sc))
	case 17, 18, 19, 20, 21:
		return g.call(sc)
	case 22:
		if !g.has("closure") {
			return nil
		}
		fn := g.name("g")
		n := tree(fn+" := func() {", g.closure(sc, false), "}\n_ = "+fn)
		if !sc.quiet {
			sc.add("func()", fn)
			return n
		}
		return nil
	case 23, 24:
		if v := sc.vars["func()"]; len(v) > 0 && !sc.quiet {
			return text("%s()", pick(g, v))
		}
		return nil
	case 25:
		if !g.has("set func") {
			return nil
		}
		if v := sc.vars["func()"]; len(v) > 0 && !sc.quiet {
			return text("%s = %s", pick(g, v), g.value(&scope{vars: map[string][]string{"*Res": sc.vars["*Res"], "*Box": sc.vars["*Box"]}}, "func()"))
		}
		return nil
	case 26:
		if !g.has("method value") {
			return nil
		}
		m := g.name("m")
		n := text("%s := %s%s\n_ = %s", m, g.receiver(sc), pick(g, []string{".Take", ".Give"}), m)
		sc.add("func()", m)
		return n
	case 27:
		if !g.has("interface") {
			return nil
		}
		i := g.name("t")
		n := text("var %s Taker = %s\n_ = %s", i, g.value(sc, "Taker"), i)
		sc.add("Taker", i)
		return n
	case 28:
		if !g.has("local") {
			return nil
		}
		r := g.name("r")
		if sc.quiet {
			return nil
		}
		n := text("%s := &Res{}\n_ = %s", r, r)
		if g.chance(30) {
			n = text("var %s *Res\n%s = %s\n_ = %s", r, r, g.resPtr(sc), r)
		}
		sc.add("*Res", r)
		return n
	case 29:
		if !g.has("local") {
			return nil
		}
		r := g.name("v")
		if sc.quiet {
			return nil
		}
		n := text("var %s Res\n_ = %s\n%sp := &%s\n_ = %sp", r, r, r, r, r)
		sc.add("*Res", r+"p")
		return n
	case 30:
		if !g.has("box") {
			return nil
		}
		r := g.name("b")
		if sc.quiet {
			return nil
		}
		n := text("%s := &Box{P: %s}\n_ = %s", r, g.resPtr(sc), r)
		sc.add("*Box", r)
		return n
	case 31:
		if !g.has("set res") {
			return nil
		}
		if v := sc.vars["*Res"]; len(v) > 0 && !sc.quiet {
			return text("%s = %s", pick(g, v), g.resPtr(sc))
		}
		return nil
	case 32:
		if !g.has("set P") {
			return nil
		}
		if v := sc.vars["*Box"]; len(v) > 0 && !sc.quiet {
			return text("%s.P = %s", pick(g, v), g.resPtr(sc))
		}
		return nil
	case 33:
		if !g.has("field func") {
			return nil
		}
		if v := sc.vars["*Box"]; len(v) > 0 && !sc.quiet {
			b := pick(g, v)
			return text("%s.G = %s\n%s.G()", b, g.value(sc, "func()"), b)
		}
		return nil
	case 34:
		if sc.quiet || sc.depth == 0 {
			return nil
		}
		return text("if %s { %s }", g.cond(sc), g.ret(sc))
	case 35:
		if !sc.loop {
			return nil
		}
		w := pick(g, []string{"break", "continue"})
		if sc.sw {
			w = "continue"
		}
		if sc.label != "" && g.chance(60) {
			w += " " + sc.label
		}
		return text("if %s { %s }", g.cond(sc), w)
	case 36:
		if sc.sw {
			return text("if %s { break }", g.cond(sc))
		}
		return nil
	case 37, 38:
		if !g.spawns || sc.quiet {
			return nil
		}
		x := g.name("x")
		c := &scope{vars: map[string][]string{"*Res": {x}}, depth: sc.depth + 1, quiet: true}
		switch g.r.IntN(3) {
		case 0:
			return tree(fmt.Sprintf("%s := %s\n_ = %s\nrt.Add()\ngo func() { defer rt.Done()", x, g.resPtr(sc), x), g.block(c, 1+g.r.IntN(3)), "}()")
		case 1:
			return text("rt.Wait()")
		}
		return tree(fmt.Sprintf("rt.Add()\ngo func(%s *Res) { defer rt.Done()", x), g.block(c, 1+g.r.IntN(3)), "}("+g.resPtr(sc)+")")
	case 39:
		if len(sc.named) == 0 || sc.quiet {
			return nil
		}
		i := g.r.IntN(len(sc.named))
		if i >= len(sc.results) {
			return nil
		}
		return text("%s = %s", sc.named[i], g.value(sc, sc.results[i]))
	}
}

// call is a call of a helper in one of many forms. Calls that may close a
// circle stand behind a branch, so that runs end.
func (g *gen) call(sc *scope) *node {
	if sc.quiet {
		return nil
	}
	i := g.r.IntN(len(g.funcs))
	s := &g.funcs[i]
	back := i <= g.at
	var args []string
	guard := "rt.Flip()"
	if g.known {
		guard = ""
	}
	for _, p := range s.params {
		if back && g.known && p.typ == "int" {
			if ints := sc.vars["int"]; slices.Contains(ints, "p0") || slices.Contains(ints, "p1") || slices.Contains(ints, "p2") {
				for _, n := range []string{"p0", "p1", "p2"} {
					if slices.Contains(ints, n) {
						args = append(args, n+"-1")
						guard = n + " > 0"
						break
					}
				}
				continue
			}
		}
		args = append(args, g.value(sc, p.typ))
	}
	if back && g.known && (guard == "" || i != g.at) {
		return nil
	}
	f := s.name
	if s.method {
		b := sc.vars["*Box"]
		if len(b) == 0 {
			return nil
		}
		f = pick(g, b) + "." + f
	}
	c := fmt.Sprintf("%s(%s)", f, strings.Join(args, ", "))
	plain := func() *node {
		if len(s.results) == 1 && s.results[0] == "func()" && g.chance(70) {
			if g.chance(50) {
				return text("defer %s()", c)
			}
			return text("%s()", c)
		}
		if g.chance(20) {
			return text("defer %s", c)
		}
		return text("%s", c)
	}
	if back {
		return tree("if "+guard+" {", []*node{plain()}, "}")
	}
	if len(s.results) == 0 || g.chance(30) {
		return plain()
	}
	switch s.results[0] {
	case "*Res":
		r := g.name("r")
		if len(s.results) == 2 {
			ok := g.name("c")
			sc.add("*Res", r)
			sc.add("bool", ok)
			return text("%s, %s := %s\n_, _ = %s, %s", r, ok, c, r, ok)
		}
		sc.add("*Res", r)
		return text("%s := %s\n_ = %s", r, c, r)
	case "bool":
		if sc.depth < 3 && g.chance(60) {
			return tree("if "+c+" {", g.sub(sc), "}")
		}
		ok := g.name("c")
		sc.add("bool", ok)
		return text("%s := %s\n_ = %s", ok, c, ok)
	case "func()":
		fn := g.name("g")
		sc.add("func()", fn)
		return text("%s := %s\n_ = %s", fn, c, fn)
	case "error":
		if sc.depth < 3 {
			return tree("if err := "+c+"; err != nil {", g.sub(sc), "} else {", g.sub(sc), "}")
		}
	}
	return plain()
}
