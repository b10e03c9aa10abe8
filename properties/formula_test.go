package properties

import (
	"fmt"
	"math/rand"
	"strings"
	"testing"

	"pathtally/properties/syntax"
)

// randomFormula writes a formula over counts a, b, c.
func randomFormula(r *rand.Rand, depth int) string {
	if depth == 0 || r.Intn(4) == 0 {
		ops := []string{"==", "<", "<=", ">", ">=", "!="}
		s := randomTerm(r, 2) + " " + ops[r.Intn(6)] + " " + randomTerm(r, 2)
		if !strings.Contains(s, "!=") && r.Intn(4) == 0 {
			s += " " + ops[r.Intn(5)] + " " + randomTerm(r, 1)
		}
		return s
	}
	x, y := randomFormula(r, depth-1), randomFormula(r, depth-1)
	switch r.Intn(5) {
	case 0:
		return "(" + x + ") && (" + y + ")"
	case 1:
		return "(" + x + ") || (" + y + ")"
	case 2:
		return "(" + x + ") => (" + y + ")"
	case 3:
		return "!(" + x + ")"
	}
	return x
}

func randomTerm(r *rand.Rand, depth int) string {
	if depth == 0 || r.Intn(2) == 0 {
		return []string{"a", "b", "c", "0", "1", "2", "3"}[r.Intn(7)]
	}
	x := randomTerm(r, depth-1)
	switch r.Intn(4) {
	case 0:
		return x + " + " + randomTerm(r, depth-1)
	case 1:
		return x + " - (" + randomTerm(r, depth-1) + ")"
	case 2:
		return fmt.Sprintf("%d * (%s)", r.Intn(4), x)
	}
	return "-(" + x + ")"
}

// truth and number evaluate a formula at counts, by the meaning of its signs alone.
func truth(f syntax.Formula, at map[string]int64) bool {
	switch f := f.(type) {
	case *syntax.Paren:
		return truth(f.X, at)
	case *syntax.Unary:
		return !truth(f.X, at)
	case *syntax.Binary:
		x, y := truth(f.X, at), truth(f.Y, at)
		switch f.Op {
		case "&&":
			return x && y
		case "||":
			return x || y
		}
		return !x || y
	case *syntax.Chain:
		for i, op := range f.Ops {
			x, y := number(f.Terms[i], at), number(f.Terms[i+1], at)
			if !map[string]bool{"==": x == y, "!=": x != y, "<": x < y, "<=": x <= y, ">": x > y, ">=": x >= y}[op.Text] {
				return false
			}
		}
		return true
	}
	panic(fmt.Sprintf("%T is no truth value", f))
}

func number(f syntax.Formula, at map[string]int64) int64 {
	switch f := f.(type) {
	case *syntax.Paren:
		return number(f.X, at)
	case *syntax.Unary:
		return -number(f.X, at)
	case *syntax.IntLit:
		return f.Value.Int64()
	case *syntax.Subject:
		return at[f.String()]
	case *syntax.Binary:
		x, y := number(f.X, at), number(f.Y, at)
		switch f.Op {
		case "+":
			return x + y
		case "-":
			return x - y
		}
		return x * y
	}
	panic(fmt.Sprintf("%T is no number", f))
}

// TestCasesAreTheNegation: at all small counts, a claim is false iff all atoms
// of one of its cases hold. "No path can break it" and "every path breaks it"
// are right about all small counts, too.
func TestCasesAreTheNegation(t *testing.T) {
	const seed = 7
	rnd := rand.New(rand.NewSource(seed))
	u := testUniverse(t, "sync")
	said := map[string]int{}
	for range 400 {
		claim := randomFormula(rnd, 2)
		f := parseRules(t, "x.rules", ".", "import \"sync\"\nrule x { each m *sync.Mutex stays; count a: call (*sync.Mutex).Lock on m\ncount b: call (*sync.Mutex).Unlock on m\ncount c by -1: call (*sync.Mutex).TryLock on m\nclaim k at end: "+claim+"\n}")
		rule := f.Tree.Decls[0].(*syntax.Rule)
		formula := rule.Clauses[len(rule.Clauses)-1].(*syntax.Claim).Formula
		book, err := Resolve([]*RuleFile{f}, u, Options{})
		never, always := false, false
		if err != nil {
			msg := err.(syntax.Errors)[0].Msg
			never, always = strings.HasPrefix(msg, "no path"), strings.HasPrefix(msg, "every path")
			if !never && !always {
				if !strings.Contains(msg, "more than 64 ways") {
					t.Errorf("%s: %v", claim, err)
				}
				said["too many"]++
				continue
			}
			said[msg]++
		} else {
			said["linear "+fmt.Sprint(book.Rules[0].Claims[0].Linear)]++
		}
		for n := range int64(5 * 5 * 5) {
			at := map[string]int64{"a": n % 5, "b": n / 5 % 5, "c": -(n / 25)}
			want := !truth(formula, at)
			got := always
			if err == nil {
				for _, qs := range book.Rules[0].Claims[0].Cases {
					all := true
					for _, q := range qs {
						all = all && q.Weights[0]*at["a"]+q.Weights[1]*at["b"]+q.Weights[2]*at["c"] > q.Bound
					}
					got = got || all
				}
			}
			if got != want {
				t.Errorf("%s at %v: broken is %v, the cases say %v (seed %d)", claim, at, want, got, seed)
				break
			}
		}
	}
	for _, kind := range []string{"linear true", "linear false", "no path can break this claim"} {
		if said[kind] < 5 {
			t.Errorf("%q occurred %d times: the test sees too little of it (%v)", kind, said[kind], said)
		}
	}
}
