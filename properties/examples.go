package properties

// Examples of rules as complete Go files.

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/scanner"
	"go/token"
	"sort"
	"strings"

	"pathtally/properties/syntax"
)

// An Example is one example of a rule, ready to be loaded and judged.
type Example struct {
	Rule   *ResolvedRule
	Broken []string // claims that the code breaks; empty: it keeps every claim
	// Source is a whole Go file. //line directives lead back to the rule file.
	Source string
	Pos    string // file:line:column of the example
}

// Examples gives the examples of a resolved rule, in source order. Code is one
// of three, tried in this order: a whole file, if its first word is `package`;
// statements, which become the body of func Example; declarations. Statements
// and declarations stand in package example and get those imports of the rule
// file that they use.
func Examples(rule *ResolvedRule) []Example {
	var out []Example
	for _, c := range rule.decl.Clauses {
		e, ok := c.(*syntax.Example)
		if !ok {
			continue
		}
		src, err := exampleSource(rule.file, e)
		if err != nil {
			panic("properties: a resolved rule has a malformed example: " + err.Error())
		}
		ex := Example{Rule: rule, Source: src, Pos: rule.file.Tree.Place(e)}
		for _, b := range e.Broken {
			ex.Broken = append(ex.Broken, b.Text)
		}
		out = append(out, ex)
	}
	return out
}

// exampleSource builds the Go file of an example.
func exampleSource(f *RuleFile, e *syntax.Example) (string, *syntax.Error) {
	code := e.Code.Value
	line, col := f.Tree.Position(e.Code.Inner.From)
	// The directive names the line and column of the character behind it.
	here := fmt.Sprintf("/*line %s:%d:%d*/", f.Name, line, col)
	if firstWord(code) == "package" {
		src := here + code + "\n"
		if _, err := parseGo(src); err != nil {
			return "", goError(f, e, err)
		}
		return src, nil
	}
	body := "package example\n\nfunc Example() {\n" + here + code + "\n}\n"
	file, err := parseGo(body)
	if err != nil {
		decls := "package example\n\n" + here + code + "\n"
		var declErr error
		if file, declErr = parseGo(decls); declErr != nil {
			if starts := firstWord(code); starts == "func" || starts == "type" || starts == "const" {
				err = declErr
			}
			return "", goError(f, e, err)
		}
		body = decls
	}
	imports := exampleImports(f, file)
	return strings.Replace(body, "package example\n", "package example\n"+imports, 1), nil
}

func parseGo(src string) (*ast.File, error) {
	return parser.ParseFile(token.NewFileSet(), "example.go", src, parser.AllErrors)
}

// firstWord is the first token of Go code, comments apart.
func firstWord(code string) string {
	var s scanner.Scanner
	fset := token.NewFileSet()
	s.Init(fset.AddFile("", fset.Base(), len(code)), []byte(code), nil, 0)
	_, tok, lit := s.Scan()
	if tok == token.IDENT {
		return lit
	}
	return tok.String()
}

// goError turns the first error of go/parser into one at its place, or at the
// example if the place is outside of the code (a brace that is missing).
func goError(f *RuleFile, e *syntax.Example, err error) *syntax.Error {
	list, ok := err.(scanner.ErrorList)
	if !ok || len(list) == 0 {
		return f.Tree.Errorf(syntax.Exemplary, e.Code, "", "this is not Go: %v", err)
	}
	inner := e.Code.Inner
	first := list[0]
	for o := inner.From; o <= inner.To; o++ {
		if l, c := f.Tree.Position(o); first.Pos.Filename == f.Name && l == first.Pos.Line && c == first.Pos.Column {
			return f.Tree.Errorf(syntax.Exemplary, syntax.Span{From: o, To: o + 1}, "", "this is not Go: %s", first.Msg)
		}
	}
	return f.Tree.Errorf(syntax.Exemplary, e.Code, "", "this is not Go: %s", first.Msg)
}

// exampleImports writes the import lines that a file needs: imports of the rule
// file whose names stand unresolved before a dot.
func exampleImports(f *RuleFile, file *ast.File) string {
	free := map[*ast.Ident]bool{}
	for _, id := range file.Unresolved {
		free[id] = true
	}
	used := map[string]bool{}
	ast.Inspect(file, func(n ast.Node) bool {
		if s, ok := n.(*ast.SelectorExpr); ok {
			if id, ok := s.X.(*ast.Ident); ok && free[id] {
				used[id.Name] = true
			}
		}
		return true
	})
	var lines []string
	for _, im := range f.Tree.Imports {
		name := importName(im.Path.Value)
		line := fmt.Sprintf("import %q\n", im.Path.Value)
		if im.Name != nil {
			name = im.Name.Text
			line = fmt.Sprintf("import %s %q\n", name, im.Path.Value)
		}
		if used[name] {
			lines = append(lines, line)
		}
	}
	sort.Strings(lines)
	if len(lines) == 0 {
		return ""
	}
	return "\n" + strings.Join(lines, "")
}
