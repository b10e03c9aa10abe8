package effects

import (
	"go/ast"
	"go/parser"
	"go/token"
	"go/types"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"pathtally/frontend/load"

	"golang.org/x/tools/go/ssa"
)

// stubs are packages without bodies that test sources import.
var stubs = map[string]string{
	"errors": `package errors
func New(text string) error
func Join(errs ...error) error
func Is(err, target error) bool`,
	"fmt": `package fmt
func Errorf(format string, a ...any) error
func Sprintf(format string, a ...any) string`,
	"os": `package os
type File struct { fd int; Name string }
func Exit(code int)
func Open(name string) (*File, error)
func (f *File) Close() error`,
	"io": `package io
type Writer interface { Write(p []byte) (int, error) }
type Reader interface { Read(p []byte) (int, error) }
func Copy(w Writer, r Reader) (int64, error)
var EOF error`,
	"sort": `package sort
func Slice(x any, less func(i, j int) bool)`,
	"runtime": `package runtime
func Goexit()`,
	"log": `package log
func Fatalf(format string, v ...any)`,
	"strings": `package strings
func ToUpper(s string) string`,
	"sync": `package sync
type Pool struct { New func() any }
func (p *Pool) Put(x any)`,
}

type stubImporter struct {
	fset *token.FileSet
	made map[string]*types.Package
}

func (si *stubImporter) Import(path string) (*types.Package, error) {
	if p := si.made[path]; p != nil {
		return p, nil
	}
	f, err := parser.ParseFile(si.fset, path+".go", stubs[path], parser.SkipObjectResolution)
	if err != nil {
		return nil, err
	}
	p, err := (&types.Config{Importer: si}).Check(path, si.fset, []*ast.File{f}, nil)
	si.made[path] = p
	return p, err
}

// built is a test source with its summaries.
type built struct {
	prog  *ssa.Program
	pkg   *ssa.Package
	table *Table
	file  *ast.File
	fns   []*ssa.Function
}

func build(t *testing.T, name, src string) *built {
	t.Helper()
	fset := token.NewFileSet()
	f, err := parser.ParseFile(fset, name, src, parser.ParseComments|parser.SkipObjectResolution)
	if err != nil {
		t.Fatal(err)
	}
	imp := &stubImporter{fset, map[string]*types.Package{}}
	pkg := types.NewPackage("t", "t")
	info := &types.Info{
		Types: map[ast.Expr]types.TypeAndValue{}, Defs: map[*ast.Ident]types.Object{}, Uses: map[*ast.Ident]types.Object{},
		Implicits: map[ast.Node]types.Object{}, Instances: map[*ast.Ident]types.Instance{}, Scopes: map[ast.Node]*types.Scope{},
		Selections: map[*ast.SelectorExpr]*types.Selection{}, FileVersions: map[*ast.File]string{},
	}
	if err := types.NewChecker(&types.Config{Importer: imp, GoVersion: "go1.26"}, fset, pkg, info).Files([]*ast.File{f}); err != nil {
		t.Fatal(err)
	}
	prog := ssa.NewProgram(fset, ssa.InstantiateGenerics|ssa.SanityCheckFunctions)
	prog.SetNoReturn(func(fn *types.Func) bool { return load.NoReturn(fn) != load.Returns })
	seen := map[*types.Package]bool{}
	var create func(ps []*types.Package)
	create = func(ps []*types.Package) {
		for _, p := range ps {
			if !seen[p] {
				seen[p] = true
				create(p.Imports())
				prog.CreatePackage(p, nil, nil, true)
			}
		}
	}
	create(pkg.Imports())
	sp := prog.CreatePackage(pkg, []*ast.File{f}, info, false)
	prog.Build()
	fns := sortedFunctions(prog)
	r := NewTypeResolver(prog, fns)
	tab := Compute(prog, fns, Options{Callees: r.Callees})
	if errs := tab.sanity(); len(errs) > 0 {
		t.Errorf("%s: %v", name, errs)
	}
	return &built{prog, sp, tab, f, fns}
}

// sortedFunctions lists the functions of all packages, those that their bodies
// refer to, and the methods of the types that they convert, by name.
func sortedFunctions(prog *ssa.Program) []*ssa.Function {
	seen := map[*ssa.Function]bool{}
	var fns []*ssa.Function
	add := func(fn *ssa.Function) {
		if fn != nil && !seen[fn] {
			seen[fn] = true
			fns = append(fns, fn)
		}
	}
	methods := func(typ types.Type) {
		if types.IsInterface(typ) {
			return
		}
		for sel := range prog.MethodSets.MethodSet(typ).Methods() {
			add(prog.MethodValue(sel))
		}
	}
	for _, p := range prog.AllPackages() {
		for _, m := range p.Members {
			switch m := m.(type) {
			case *ssa.Function:
				add(m)
			case *ssa.Type:
				if n, ok := m.Type().(*types.Named); ok && n.TypeParams().Len() > 0 {
					break
				}
				methods(m.Type())
				methods(types.NewPointer(m.Type()))
			}
		}
	}
	var ops []*ssa.Value
	for i := 0; i < len(fns); i++ {
		for _, b := range fns[i].Blocks {
			for _, in := range b.Instrs {
				if mi, ok := in.(*ssa.MakeInterface); ok && !isGenericOriginal(fns[i]) {
					methods(mi.X.Type())
				}
				ops = in.Operands(ops[:0])
				for _, op := range ops {
					if fn, ok := (*op).(*ssa.Function); ok {
						add(fn)
					}
				}
			}
		}
	}
	slices.SortStableFunc(fns, func(a, b *ssa.Function) int {
		if c := strings.Compare(a.String(), b.String()); c != 0 {
			return c
		}
		return int(a.Pos() - b.Pos())
	})
	return fns
}

// find returns a function by its printed name in package t, such as "f",
// "(*T).m", "f$1".
func (b *built) find(name string) *ssa.Function {
	for _, fn := range b.fns {
		if fn.RelString(b.pkg.Pkg) == name {
			return fn
		}
	}
	return nil
}

// TestSources checks the "want" comments of testdata: a line
//
//	// want NAME LINE
//
// says that the summary of function NAME prints LINE; "// want NAME !PREFIX" that
// no line starts with PREFIX.
func TestSources(t *testing.T) {
	files, err := filepath.Glob("testdata/*.go")
	if err != nil || len(files) == 0 {
		t.Fatal("no sources", err)
	}
	for _, name := range files {
		t.Run(filepath.Base(name), func(t *testing.T) {
			src, err := os.ReadFile(name)
			if err != nil {
				t.Fatal(err)
			}
			b := build(t, name, string(src))
			wants := 0
			for _, g := range b.file.Comments {
				for _, c := range g.List {
					rest, ok := strings.CutPrefix(c.Text, "// want ")
					if !ok {
						continue
					}
					wants++
					fname, line, _ := strings.Cut(rest, " ")
					fn := b.find(fname)
					if fn == nil {
						t.Errorf("no function %s", fname)
						continue
					}
					got := b.table.Of(fn).String()
					lines := strings.Split(strings.TrimSpace(got), "\n")
					if bad, ok := strings.CutPrefix(line, "!"); ok {
						for _, l := range lines {
							if strings.HasPrefix(l, bad) {
								t.Errorf("%s: must not say %q:\n%s", fname, bad, got)
							}
						}
					} else if !slices.Contains(lines, line) {
						t.Errorf("%s: want %q, got\n%s", fname, line, got)
					}
				}
			}
			if wants == 0 {
				t.Error("no want comments")
			}
		})
	}
}
