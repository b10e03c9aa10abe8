package report

import (
	"go/ast"
	"go/parser"
	"go/token"
	"slices"
	"strconv"
	"strings"
)

// satisfied evaluates an inequality of counts ("taken - released <= 1") as a
// finding names it; known is false if the text says more than that.
func satisfied(formula string, names []string, counts []int64) (ok, known bool) {
	// Names may hold "-", which Go reads as minus: longest first, they become
	// plain ones.
	order := make([]int, len(names))
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int { return len(names[b]) - len(names[a]) })
	values := map[string]int64{}
	for _, i := range order {
		plain := "count" + strconv.Itoa(i) + "x"
		formula = replaceWord(formula, names[i], plain)
		values[plain] = counts[i]
	}
	e, err := parser.ParseExpr(formula)
	if err != nil {
		return false, false
	}
	return truth(e, values)
}

// replaceWord replaces a name where it stands alone.
func replaceWord(s, name, by string) string {
	if name == "" {
		return s
	}
	var b strings.Builder
	word := func(c byte) bool {
		return c == '_' || c == '-' || c >= '0' && c <= '9' || c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= 0x80
	}
	for i := 0; i < len(s); {
		if strings.HasPrefix(s[i:], name) && (i == 0 || !word(s[i-1])) && (i+len(name) == len(s) || !word(s[i+len(name)])) {
			b.WriteString(by)
			i += len(name)
			continue
		}
		b.WriteByte(s[i])
		i++
	}
	return b.String()
}

func truth(e ast.Expr, values map[string]int64) (ok, known bool) {
	switch e := e.(type) {
	case *ast.ParenExpr:
		return truth(e.X, values)
	case *ast.BinaryExpr:
		if e.Op == token.LAND || e.Op == token.LOR {
			a, k1 := truth(e.X, values)
			b, k2 := truth(e.Y, values)
			return (e.Op == token.LAND && a && b) || (e.Op == token.LOR && (a || b)), k1 && k2
		}
		a, k1 := value(e.X, values)
		b, k2 := value(e.Y, values)
		if !k1 || !k2 {
			return false, false
		}
		switch e.Op {
		case token.EQL:
			return a == b, true
		case token.NEQ:
			return a != b, true
		case token.LSS:
			return a < b, true
		case token.LEQ:
			return a <= b, true
		case token.GTR:
			return a > b, true
		case token.GEQ:
			return a >= b, true
		}
	}
	return false, false
}

func value(e ast.Expr, values map[string]int64) (n int64, known bool) {
	switch e := e.(type) {
	case *ast.ParenExpr:
		return value(e.X, values)
	case *ast.Ident:
		n, known = values[e.Name]
		return n, known
	case *ast.BasicLit:
		n, err := strconv.ParseInt(e.Value, 0, 64)
		return n, err == nil
	case *ast.UnaryExpr:
		n, known = value(e.X, values)
		return -n, known && e.Op == token.SUB
	case *ast.BinaryExpr:
		a, k1 := value(e.X, values)
		b, k2 := value(e.Y, values)
		switch e.Op {
		case token.ADD:
			return a + b, k1 && k2
		case token.SUB:
			return a - b, k1 && k2
		case token.MUL:
			return a * b, k1 && k2
		}
	}
	return 0, false
}
