package casetest_test

import (
	"bytes"
	"go/ast"
	"go/format"
	"go/importer"
	"go/parser"
	"go/token"
	"go/types"
	"testing"

	"pathtally/frontend/casetest"
)

// corpus is where the cases live, seen from this package.
const corpus = "../../testdata/cases"

// maxEdit is how many lines the twins of a case may differ by: one line that
// comes counts 1, one that is changed or moved counts 2.
const maxEdit = 6

// minCases keeps the corpus from being lost by a wrong path or a stray delete.
const minCases = 200

func load(t *testing.T) []casetest.Case {
	t.Helper()
	cases, err := casetest.Load(corpus)
	if err != nil {
		t.Fatal(err)
	}
	return cases
}

// TestCorpusCompiles type-checks both programs of every case, and requires that they are
// formatted and that the functions the header and the wants name exist. The importer
// reads the standard library from source, once for all cases.
func TestCorpusCompiles(t *testing.T) {
	cases := load(t)
	fset := token.NewFileSet()
	conf := types.Config{Importer: importer.ForCompiler(fset, "source", nil), GoVersion: "go1.26"}
	check := func(c casetest.Case, name string, src []byte) {
		where := c.String() + "/" + name
		if pretty, err := format.Source(src); err == nil && !bytes.Equal(pretty, src) {
			t.Errorf("%s: not formatted as gofmt does", where)
		}
		f, err := parser.ParseFile(fset, where, src, 0)
		if err != nil {
			t.Error(err)
			return
		}
		if f.Name.Name != "p" && f.Name.Name != "main" {
			t.Errorf("%s: package %s, want p or main", where, f.Name.Name)
		}
		pkg, err := conf.Check("p", fset, []*ast.File{f}, nil)
		if err != nil {
			t.Error(err)
			return
		}
		if name == casetest.BrokenFile {
			checkNames(t, c, pkg)
		}
	}
	for _, c := range cases {
		check(c, casetest.BrokenFile, c.Broken)
		check(c, casetest.CleanFile, c.Clean)
	}
}

// checkNames requires that at least one function of every want is declared.
func checkNames(t *testing.T, c casetest.Case, pkg *types.Package) {
	declared := map[string]bool{"init": true} // not in the package's scope
	for _, name := range pkg.Scope().Names() {
		switch obj := pkg.Scope().Lookup(name).(type) {
		case *types.Func:
			declared[name] = true
		case *types.TypeName:
			named, ok := types.Unalias(obj.Type()).(*types.Named)
			if !ok {
				continue
			}
			for m := range named.Methods() {
				recv := "(" + name + ")"
				if _, ok := m.Signature().Recv().Type().(*types.Pointer); ok {
					recv = "(*" + name + ")"
				}
				declared[recv+"."+m.Name()] = true
			}
		}
	}
	claims := append([]casetest.Claim(nil), c.Undecided...)
	for _, w := range c.Wants {
		claims = append(claims, w.Claim)
	}
	for _, cl := range append(claims, c.May...) {
		for _, f := range cl.Functions {
			if !declared[f] {
				t.Errorf("%s: %s: no function %s in %s", c, cl, f, casetest.BrokenFile)
			}
		}
	}
}

// TestCorpusTwins requires that the twins differ, and by little.
func TestCorpusTwins(t *testing.T) {
	cases := load(t)
	if len(cases) < minCases {
		t.Errorf("%d cases, want at least %d", len(cases), minCases)
	}
	for _, c := range cases {
		if n := c.Edit(); n < 1 || n > maxEdit {
			t.Errorf("%s: the twins differ by %d lines, want 1 to %d", c, n, maxEdit)
		}
	}
}
