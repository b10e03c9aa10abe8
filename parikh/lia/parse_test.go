package lia

import (
	"fmt"
	"math/big"
	"strings"
	"testing"
)

func testScope(name string) (Var, Bool, bool) {
	switch name {
	case "taken":
		return 1, 0, true
	case "released":
		return 2, 0, true
	case "starts-ok":
		return 3, 0, true
	case "on":
		return 0, 1, true
	case "off":
		return 0, 2, true
	}
	return 0, 0, false
}

// TestParse evaluates formulas at all small points against Go expressions.
func TestParse(t *testing.T) {
	mod := func(a, m int) int { return ((a % m) + m) % m }
	for _, c := range []struct {
		text string
		want func(a, b, c int, on, off bool) bool
	}{
		{"taken == released && taken % 2 == 1 => starts-ok >= 1",
			func(a, b, c int, _, _ bool) bool { return !(a == b && mod(a, 2) == 1) || c >= 1 }},
		{"taken<=released<=starts-ok", func(a, b, c int, _, _ bool) bool { return a <= b && b <= c }},
		{"taken < released == starts-ok", func(a, b, c int, _, _ bool) bool { return a < b && b == c }},
		{"taken != released", func(a, b, _ int, _, _ bool) bool { return a != b }},
		{"!on || off && taken > 1", func(a, _, _ int, on, off bool) bool { return !on || off && a > 1 }},
		{"!!on => off => !(taken >= 2)", func(a, _, _ int, on, off bool) bool { return !on || !off || a < 2 }},
		{"on == off", func(_, _, _ int, on, off bool) bool { return on == off }},
		{"on != (taken == 1)", func(a, _, _ int, on, _ bool) bool { return on != (a == 1) }},
		{"2*taken - released*3 - -1 > 1_0 - 9", func(a, b, _ int, _, _ bool) bool { return 2*a-3*b+1 > 1 }},
		{"(taken - released) % 3 * 2 == 2", func(a, b, _ int, _, _ bool) bool { return mod(a-b, 3)*2 == 2 }},
		{"-taken % 2 + released % -3 == 1", func(a, b, _ int, _, _ bool) bool { return mod(-a, 2)+mod(b, 3) == 1 }},
		{"(taken + 7 % 4) % (2 + 3) % 2 == 0", func(a, _, _ int, _, _ bool) bool { return mod(mod(a+3, 5), 2) == 0 }},
		{"true && (false || taken -1 == 0)", func(a, _, _ int, _, _ bool) bool { return a == 1 }},
		{"((((taken)))) == ((1))", func(a, _, _ int, _, _ bool) bool { return a == 1 }},
	} {
		f, err := Parse(c.text, testScope)
		if err != nil {
			t.Errorf("%s: %v", c.text, err)
			continue
		}
		for i := 0; i < 4*4*4*4; i++ {
			a, b, d := i&3-1, i>>2&3-1, i>>4&3-1
			on, off := i>>6&1 == 1, i>>7&1 == 1
			m := NewModel([]*big.Int{nil, big.NewInt(int64(a)), big.NewInt(int64(b)), big.NewInt(int64(d))}, []bool{false, on, off})
			if got := m.Holds(f); got != c.want(a, b, d, on, off) {
				t.Errorf("%s at taken=%d released=%d starts-ok=%d on=%v off=%v: got %v", c.text, a, b, d, on, off, got)
				break
			}
		}
	}
}

func TestParseErrors(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"", `offset 0: expected a number, a name or "(", found the end`},
		{"taken", `offset 0: expected a truth value (a comparison), found a number`},
		{"taken ==", `offset 8: expected a number, a name or "(", found the end`},
		{"taken == on", `offset 9: expected a number, found a truth value`},
		{"on + 1 == 2", `offset 0: expected a number, found a truth value`},
		{"taken == 1 &&& on", `offset 13: unexpected character '&'`},
		{"taken * released == 1", `offset 8: one side of "*" must be constant`},
		{"taken % released == 1", `offset 8: the right side of "%" must be constant`},
		{"taken % (1-1) == 1", `offset 8: remainder of a division by zero`},
		{"1 < taken != 2", `offset 10: "!=" cannot stand in a chain of comparisons`},
		{"taken != 1 < 2", `offset 11: "!=" cannot stand in a chain of comparisons`},
		{"taken-released == 1", `offset 0: unknown name "taken-released"`},
		{"token == 1", `offset 0: unknown name "token"`},
		{"(taken == 1", `offset 11: expected ")", found the end`},
		{"taken == 1)", `offset 10: expected an operator or the end, found ")"`},
		{"on on", `offset 3: expected an operator or the end, found "on"`},
		{"!taken", `offset 1: expected a truth value (a comparison), found a number`},
		{"\xff", `offset 0: the text is not valid UTF-8`},
		{strings.Repeat("(", 5000), `offset 1000: the formula is nested too deeply (more than 1000 levels)`},
		{strings.Repeat("on=>", 5000) + "on", `offset 4000: the formula is nested too deeply (more than 1000 levels)`},
	} {
		f, err := Parse(c.text, testScope)
		if err == nil {
			t.Errorf("%q: parsed as %v", c.text, f)
		} else if err.Error() != c.want {
			t.Errorf("%q: got error %q, want %q", c.text, err, c.want)
		}
	}
}

// FuzzParse: no text makes the parser panic; what it prints again means the same.
func FuzzParse(f *testing.F) {
	for _, s := range []string{"taken == released && taken % 2 == 1 => starts-ok >= 1", "!on || 1 < taken <= 3", "-(2*taken) % 3 != 1", "on == off", "((", "9_9 * taken > 1"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		g, err := Parse(text, testScope)
		if err != nil {
			if e, ok := err.(*SyntaxError); !ok || e.Offset < 0 || e.Offset > len(text) {
				t.Fatalf("bad error %v", err)
			}
			return
		}
		if len(text) > 300 {
			return
		}
		// Print, with mod and <=> put into the syntax of Parse.
		again := strings.NewReplacer("mod", "%", "<=>", "==").Replace(g.String())
		h, err := Parse(again, func(name string) (Var, Bool, bool) {
			var n int
			if _, err := fmt.Sscanf(name, "x%d", &n); err == nil {
				return Var(n), 0, true
			}
			if _, err := fmt.Sscanf(name, "b%d", &n); err == nil {
				return 0, Bool(n), true
			}
			return 0, 0, false
		})
		if err != nil {
			t.Fatalf("%q prints as %q, which does not parse: %v", text, again, err)
		}
		for i := 0; i < 64; i++ {
			m := NewModel([]*big.Int{nil, big.NewInt(int64(i&3 - 1)), big.NewInt(int64(i>>1&3 - 1)), big.NewInt(int64(i >> 2 & 1))}, []bool{false, i>>4&1 == 1, i>>5&1 == 1})
			if m.Holds(g) != m.Holds(h) {
				t.Fatalf("%q and its print %q differ", text, again)
			}
		}
	})
}

// FuzzSolver decides a random problem, chosen by the fuzzer's seed, with formulas
// over a box and compares with brute force.
func FuzzSolver(f *testing.F) {
	f.Add(int64(1), "taken == released && taken % 2 == 1")
	f.Add(int64(99), "3*taken - 5*released == 1 => on")
	f.Fuzz(func(t *testing.T, seed int64, text string) {
		if len(text) > 80 || strings.Count(text, "%") > 3 {
			return
		}
		p := randomProblem(seed)
		p.nv, p.nb = 3, 2
		for len(p.lo) < 3 {
			p.lo, p.hi = append(p.lo, 0), append(p.hi, 2)
		}
		p.lo, p.hi = p.lo[:3], p.hi[:3]
		if len(p.fs) > 2 {
			p.fs = p.fs[:2]
		}
		for _, g := range p.fs {
			if mentionsBeyond(g.node(), 3) {
				return
			}
		}
		g, err := Parse(text, testScope)
		if err != nil {
			return
		}
		p.fs = append(p.fs, g)
		s := p.solver(Options{MaxPivots: 20000, MaxNodes: 2000})
		for _, g := range p.fs {
			s.Assert("", g)
		}
		r := mustCheck(t, s)
		if r.Status != Unknown && (r.Status == Sat) != p.satisfiable() {
			t.Fatalf("got %v for %v", r.Status, p.fs)
		}
	})
}

func mentionsBeyond(n *node, top Var) bool {
	for _, x := range n.lin.terms {
		if x.v > top {
			return true
		}
	}
	for _, m := range n.lin.mods {
		if mentionsBeyond(&node{lin: *m.of}, top) {
			return true
		}
	}
	for _, k := range n.kids {
		if mentionsBeyond(k, top) {
			return true
		}
	}
	return false
}
