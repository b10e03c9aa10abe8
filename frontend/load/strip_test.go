package load

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"os"
	"path/filepath"
	"reflect"
	"runtime"
	"slices"
	"testing"
)

// outline lists the nodes of a file outside of function bodies, with their
// kinds, positions and identifiers.
func outline(f *ast.File) []string {
	var out []string
	ast.Inspect(f, func(n ast.Node) bool {
		switch n := n.(type) {
		case nil:
			return false
		case *ast.FuncDecl:
			if n.Body != nil {
				out = append(out, fmt.Sprint("body ", n.Body.Lbrace, n.Body.Rbrace))
			}
			walk := []ast.Node{n.Name, n.Type}
			if n.Recv != nil {
				walk = append(walk, n.Recv)
			}
			for _, w := range walk {
				ast.Inspect(w, func(n ast.Node) bool {
					if n != nil {
						out = append(out, describeNode(n))
					}
					return true
				})
			}
			return false
		case *ast.BlockStmt: // of a function literal in a declaration
			out = append(out, fmt.Sprint("block ", n.Lbrace, n.Rbrace))
			return false
		}
		out = append(out, describeNode(n))
		return true
	})
	return out
}

func describeNode(n ast.Node) string {
	s := fmt.Sprint(reflect.TypeOf(n), n.Pos(), n.End())
	if id, ok := n.(*ast.Ident); ok {
		s += id.Name
	}
	return s
}

func parseOutline(src []byte) ([]string, int, error) {
	fset := token.NewFileSet()
	f, err := parser.ParseFile(fset, "x.go", src, parser.SkipObjectResolution)
	if err != nil {
		return nil, 0, err
	}
	return outline(f), fset.File(f.FileStart).LineCount(), nil
}

func checkStrip(t *testing.T, name string, src []byte) (blank int) {
	t.Helper()
	want, lines, err := parseOutline(src)
	if err != nil {
		return 0 // not Go: stripBodies promises nothing but to return
	}
	stripped := stripBodies(src)
	got, gotLines, err := parseOutline(stripped)
	if err != nil {
		t.Fatalf("%s: stripped source does not parse: %v\n%s", name, err, stripped)
	}
	if lines != gotLines || !slices.Equal(got, want) {
		t.Fatalf("%s: declarations are not what they were\n%s", name, stripped)
	}
	for i := range src {
		if src[i] != stripped[i] {
			blank++
		}
	}
	return blank
}

func TestStripBodies(t *testing.T) {
	for _, src := range []string{
		"package a\nfunc f() { x := '{'; y := \"}\"; z := `}`; /* } */ _, _, _ = x, y, z } // }\nfunc g() {}\n",
		"package a\nfunc f() struct{ x int } { return struct{ x int }{1} }\nvar x = 1\n",
		"package a\nfunc f[T interface{ ~int | []struct{} }](x T) interface{ F() } { return nil }\n",
		"package a\nfunc asm(x int) (y int)\nfunc asm2()\nfunc g() { }\n",
		"package a\ntype F func(int) func() struct{}\nvar f = func() { g() }\nvar h = []func(){func() { g() }, nil}\nfunc g() {}\n",
		"package a\nfunc (t *T[K]) m(func() interface{}) (a, b func(struct{})) {\n\tif true {\n\t}\n\treturn\n}\ntype T[K any] struct{ f func() }\n",
		"package a\nvar h = [...]func(){func() { g() }, nil}\nvar i =\nfunc() { g() }\nfunc g() {}\n",
		"package a\nfunc f(\n\tx int,\n) (\n\ty int,\n) {\n\treturn x\n}",
		"package a\nfunc f() chan struct{} { return nil }\nfunc g() map[interface{}]struct{} { return nil }\nfunc h() (func()) { return nil }\n",
		"package a; func f() {}; func g() { f() }; var x = func() int { return '\\'' }()\n",
		"package a\nfunc f() /* { */ { f() }\n",
	} {
		checkStrip(t, src, []byte(src))
	}
	total, blank := 0, 0
	for _, pkg := range []string{"net/http", "go/types", "runtime", "reflect", "encoding/json", "text/template", "slices"} {
		names, err := filepath.Glob(filepath.Join(runtime.GOROOT(), "src", filepath.FromSlash(pkg), "*.go"))
		if err != nil || len(names) == 0 {
			t.Fatalf("no files of %s: %v", pkg, err)
		}
		for _, name := range names {
			src, err := os.ReadFile(name)
			if err != nil {
				t.Fatal(err)
			}
			total += len(src)
			blank += checkStrip(t, name, src)
		}
	}
	if blank < total/3 {
		t.Errorf("only %d of %d bytes are blanked out", blank, total)
	}
}

func FuzzStripBodies(f *testing.F) {
	f.Add([]byte("package a\nfunc f() struct{ x int } { return struct{ x int }{1} }\n"))
	f.Add([]byte("package a\nfunc f() { '\\"))
	f.Fuzz(func(t *testing.T, src []byte) {
		if len(stripBodies(src)) != len(src) {
			t.Fatal("the length changed")
		}
		checkStrip(t, "fuzz", src)
	})
}
