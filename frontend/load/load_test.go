package load

import (
	"context"
	"errors"
	"fmt"
	"go/token"
	"go/types"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"golang.org/x/tools/go/ssa"
)

// module writes files (name, content, name, content, ...) below a fresh
// folder and returns it. Without a go.mod among them, one is added.
func module(t *testing.T, files ...string) string {
	t.Helper()
	dir := t.TempDir()
	if real, err := filepath.EvalSymlinks(dir); err == nil {
		dir = real
	}
	if len(files)%2 != 0 {
		t.Fatal("odd number of arguments")
	}
	hasMod := false
	for i := 0; i < len(files); i += 2 {
		name := filepath.Join(dir, filepath.FromSlash(files[i]))
		hasMod = hasMod || files[i] == "go.mod" || files[i] == "go.work" || files[i] == "no module"
		if files[i] == "no module" {
			continue
		}
		if err := os.MkdirAll(filepath.Dir(name), 0o777); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(name, []byte(files[i+1]), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	if !hasMod {
		if err := os.WriteFile(filepath.Join(dir, "go.mod"), []byte("module example/harbour\n\ngo 1.24\n"), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

func mustLoad(t *testing.T, cfg Config) *Program {
	t.Helper()
	if cfg.Dir != "" && !cfg.Deps {
		cfg.Mode |= ssa.SanityCheckFunctions // too slow for the standard library
	}
	prog, err := Load(cfg)
	if err != nil {
		t.Fatal(err)
	}
	return prog
}

// describe lists the functions of the module, one "package name line:column" each.
func describe(prog *Program) []string {
	var out []string
	for _, fn := range prog.Functions() {
		file, line, col := prog.Position(fn.Pos())
		s := fmt.Sprintf("%s %s:%d:%d", fn.String(), file, line, col)
		if prog.Uninstantiated(fn) {
			s += " uninstantiated"
		}
		out = append(out, s)
	}
	return out
}

func equal(t *testing.T, what string, got, want []string) {
	t.Helper()
	if !slices.Equal(got, want) {
		t.Errorf("%s:\n got\n\t%s\nwant\n\t%s", what, strings.Join(got, "\n\t"), strings.Join(want, "\n\t"))
	}
}

const berth = `package berth

import (
	"os"
	"strings"
	"sync"
)

type Desk struct{ mu sync.Mutex }

var first = open()

func open() *Desk { return new(Desk) }

func init() {}
func init() { _ = strings.ToUpper("") }

func (d *Desk) Book(urgent bool) error {
	d.mu.Lock()
	defer func() {
		if urgent {
			d.mu.Unlock()
		}
	}()
	f := d.settle
	f()
	return nil
}

func (d *Desk) settle() {}

func Each[T any](xs []T, f func(T)) {
	for _, x := range xs {
		func() { f(x) }()
	}
}

func Unused[T any](x T) func() T { return func() T { return x } }

type List[T any] struct{ xs []T }

func (l *List[T]) Add(x T) { l.xs = append(l.xs, x) }
func (l *List[T]) Len() int { return len(l.xs) }

type lener interface{ Len() int }

func measure() int {
	Each([]int{1}, func(int) {})
	var l lener = &List[string]{}
	if l.Len() > 3 {
		os.Exit(1)
	}
	return l.Len()
}
`

func TestFunctions(t *testing.T) {
	dir := module(t, "berth/desk.go", berth, "main.go", "package main\n\nimport \"example/harbour/berth\"\n\nfunc main() { _ = (&berth.Desk{}).Book(true) }\n")
	prog := mustLoad(t, Config{Dir: dir, Patterns: []string{"./..."}})
	equal(t, "functions", describe(prog), []string{
		"example/harbour.init :0:0",
		"example/harbour.main main.go:5:6",
		"example/harbour/berth.init :0:0",
		"example/harbour/berth.open berth/desk.go:13:6",
		"example/harbour/berth.init#1 berth/desk.go:15:6",
		"example/harbour/berth.init#2 berth/desk.go:16:6",
		"(*example/harbour/berth.Desk).Book berth/desk.go:18:16",
		"(*example/harbour/berth.Desk).Book$1 berth/desk.go:20:8",
		"(*example/harbour/berth.Desk).settle berth/desk.go:30:16",
		"example/harbour/berth.Each[int] berth/desk.go:32:6",
		"example/harbour/berth.Each[int]$1 berth/desk.go:34:3",
		"example/harbour/berth.Unused berth/desk.go:38:6 uninstantiated",
		"example/harbour/berth.Unused$1 berth/desk.go:38:43 uninstantiated",
		"(*example/harbour/berth.List[string]).Add berth/desk.go:42:19",
		"(*example/harbour/berth.List[string]).Len berth/desk.go:43:19",
		"example/harbour/berth.measure berth/desk.go:47:6",
		"example/harbour/berth.measure$1 berth/desk.go:48:17",
	})
	var wrappers []string
	for _, fn := range prog.Wrappers() {
		wrappers = append(wrappers, fn.String())
	}
	equal(t, "wrappers", wrappers, []string{"(*example/harbour/berth.Desk).settle$bound"})

	if prog.ModulePath != "example/harbour" || prog.ModuleDir != dir {
		t.Errorf("module %q in %q, want example/harbour in %q", prog.ModulePath, prog.ModuleDir, dir)
	}
	desk := prog.Package("example/harbour/berth")
	if !desk.Bodies || !desk.Named || !desk.Main || desk.Module != "example/harbour" || !ImportableByOthers(desk) {
		t.Errorf("wrong marks on %+v", desk)
	}
	if ImportableByOthers(prog.Package("example/harbour")) || ImportableByOthers(prog.Package("internal/abi")) {
		t.Error("a command or an internal package counts as importable")
	}
	strs := prog.Package("strings")
	if strs.Bodies || strs.Named || !strs.Standard || strs.Module != "std" {
		t.Errorf("wrong marks on %+v", strs)
	}
	if fn := strs.SSA.Func("ToUpper"); fn == nil || len(fn.Blocks) != 0 {
		t.Error("strings.ToUpper must exist without blocks")
	}
	if prog.Package("unsafe").Types != types.Unsafe {
		t.Error("unsafe is not types.Unsafe")
	}

	// os.Exit ends its block.
	var measure *ssa.Function
	for _, fn := range prog.Functions() {
		if fn.Name() == "measure" {
			measure = fn
		}
	}
	ends := 0
	for _, b := range measure.Blocks {
		if p, ok := b.Instrs[len(b.Instrs)-1].(*ssa.Panic); ok && strings.Contains(p.X.String(), "noreturn") {
			ends++
		}
	}
	if ends != 1 {
		t.Errorf("%d blocks of measure end in noreturn, want 1", ends)
	}

	u := prog.Universe()
	if u.Package("sync") == nil || u.Package("no/such") != nil || len(u.Packages()) != len(prog.Packages) {
		t.Error("the universe does not show the packages")
	}
}

func TestDeps(t *testing.T) {
	dir := module(t, "main.go", "package main\n\nimport \"strings\"\n\nfunc main() { _ = strings.ToUpper(\"\") }\n")
	prog := mustLoad(t, Config{Dir: dir, Deps: true})
	if fn := prog.Package("strings").SSA.Func("ToUpper"); len(fn.Blocks) == 0 {
		t.Error("with Deps strings.ToUpper must have blocks")
	}
	if prog.Stats.WithBodies != prog.Stats.Packages-1 { // all but unsafe
		t.Errorf("%d of %d packages have bodies", prog.Stats.WithBodies, prog.Stats.Packages)
	}
}

// The module's own packages get bodies even if no pattern names them; other
// modules do not.
func TestBodiesOfModule(t *testing.T) {
	dir := module(t,
		"go.mod", "module example/harbour\n\ngo 1.24\n\nrequire example/crane v1.0.0\n\nreplace example/crane => ./crane\n",
		"a/a.go", "package a\n\nimport (\n\t\"example/harbour/b\"\n\t\"example/crane\"\n)\n\nfunc A() { b.B(); crane.Lift() }\n",
		"b/b.go", "package b\n\nfunc B() {}\n",
		"c/c.go", "package c\n\nfunc C() {}\n",
		"crane/go.mod", "module example/crane\n\ngo 1.22\n",
		"crane/crane.go", "package crane\n\nfunc Lift() { hook() }\n\nfunc hook() {}\n",
	)
	prog := mustLoad(t, Config{Dir: dir, Patterns: []string{"./a"}})
	var got []string
	for _, p := range prog.Packages {
		if strings.HasPrefix(p.Path, "example/") {
			got = append(got, fmt.Sprint(p.Path, " bodies ", p.Bodies, " named ", p.Named))
		}
	}
	equal(t, "packages", got, []string{
		"example/crane bodies false named false",
		"example/harbour/a bodies true named true",
		"example/harbour/b bodies true named false",
	})

	prog = mustLoad(t, Config{Dir: dir, Patterns: []string{"example/crane/..."}})
	equal(t, "another module", describe(prog), []string{
		"example/crane.init :0:0",
		"example/crane.Lift crane/crane.go:3:6",
		"example/crane.hook crane/crane.go:5:6",
	})
}

func TestErrors(t *testing.T) {
	for _, tt := range []struct {
		name     string
		files    []string
		patterns string
		kind     Kind
		place    string // suffix, with slashes
		message  string // part
	}{
		{"type error", []string{"a.go", "package a\n\nfunc f() int { return x }\n"}, "./...", TypeError, "a.go:3:23", "undefined: x"},
		{"type error in a package that is needed", []string{"a/a.go", "package a\n\nimport _ \"example/harbour/b\"\n", "b/b.go", "package b\n\nvar x int = \"\"\n"}, "./a", TypeError, "b/b.go:3:13", "cannot use"},
		{"syntax error", []string{"a.go", "package a\n\nfunc f( {\n"}, "./...", SyntaxError, "a.go:3:9", "expected"},
		{"no module", []string{"no module", "", "a.go", "package a\n"}, "./...", NoModule, "", "no go.mod in this folder"},
		{"no match", []string{"a.go", "package a\n", "sub/readme", ""}, "./sub/...", NoMatch, "", "pattern ./sub/... names no package"},
		{"no folder", []string{"a.go", "package a\n"}, "./quay", NoDirectory, "/quay", "directory not found"},
		{"no folder, wildcard", []string{"a.go", "package a\n"}, "./quay/...", NoDirectory, "/quay", "no such file or directory"},
		{"newer Go", []string{"go.mod", "module m\n\ngo 1.999\n", "a.go", "package a\n"}, "./...", NewerGo, "/go.mod", "asks for Go 1.999"},
		{"module not required", []string{"a.go", "package a\n\nimport _ \"example.com/nowhere\"\n"}, "./...", MissingModule, "a.go:3:8", "run `go mod tidy` here"},
		{"module not downloaded", []string{"go.mod", "module m\n\ngo 1.24\n\nrequire example.com/nowhere v1.0.0\n", "go.sum", "example.com/nowhere v1.0.0 h1:AAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAA=\nexample.com/nowhere v1.0.0/go.mod h1:AAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAA=\n", "a.go", "package a\n\nimport _ \"example.com/nowhere\"\n"}, "./...", MissingModule, "a.go:3:8", "example.com/nowhere is not in the module cache; run `go mod download` here"},
		{"bad go.mod", []string{"go.mod", "modul m\n", "a.go", "package a\n"}, "./...", BadModule, "go.mod:1", "unknown directive"},
		{"cycle", []string{"a/a.go", "package a\n\nimport _ \"example/harbour/b\"\n", "b/b.go", "package b\n\nimport _ \"example/harbour/a\"\n"}, "./a", BadPackage, "", "import cycle: example/harbour/a imports example/harbour/b imports example/harbour/a"},
		{"two packages in a folder", []string{"a.go", "package a\n", "b.go", "package b\n"}, ".", BadPackage, "", "found packages a (a.go) and b (b.go)"},
		{"outside", []string{"a.go", "package a\n"}, "../...", NoMatch, "", "../... is outside of the module in "},
		{"no such package", []string{"a.go", "package a\n"}, "fmtt", NoMatch, "", "package fmtt is not in std"},
		{"dash", []string{"a.go", "package a\n"}, "-exec=true", NoMatch, "", "begins with a dash"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			dir := module(t, tt.files...)
			_, err := Load(Config{Dir: dir, Patterns: strings.Fields(tt.patterns)})
			var list Errors
			if !errors.As(err, &list) || len(list) == 0 {
				t.Fatalf("got %v, want Errors", err)
			}
			var e *Error
			if !errors.As(err, &e) {
				t.Fatal("no *Error found below Errors")
			}
			if e.Kind != tt.kind || !strings.HasSuffix(filepath.ToSlash(e.Place), tt.place) || !strings.Contains(e.Message, tt.message) {
				t.Errorf("got  %s | %s | %s\nwant %s | %s | %s", e.Kind, e.Place, e.Message, tt.kind, tt.place, tt.message)
			}
			if strings.ContainsAny(e.Error(), "\n\t") {
				t.Errorf("not one line: %q", e.Error())
			}
			t.Log(err)
		})
	}
	if _, err := Load(Config{Dir: filepath.Join(t.TempDir(), "none")}); err == nil {
		t.Error("a folder that does not exist is no error")
	}
}

// Places are relative to the module root, wherever the command runs.
func TestErrorPlaces(t *testing.T) {
	dir := module(t, "a/a.go", "package a\n\nimport _ \"example.com/nowhere\"\n", "b/b.go", "package b\n\nvar x = y\n", "c/c.go", "package c\n\nfunc f( {\n")
	for _, tt := range []struct{ pattern, want string }{{"../a", "a/a.go:3:8"}, {".", "b/b.go:3:9"}, {"../c", "c/c.go:3:9"}} {
		_, err := Load(Config{Dir: filepath.Join(dir, "b"), Patterns: []string{tt.pattern}})
		var e *Error
		if !errors.As(err, &e) || e.Place != tt.want {
			t.Errorf("%s: got %v, want it at %s", tt.pattern, err, tt.want)
		}
	}
}

func TestNewerGo(t *testing.T) {
	dir := module(t, "go.mod", "module m\n\ngo 1.999\n", "a/a.go", "package a\n")
	for _, toolchain := range []string{"local", "auto"} {
		_, err := Load(Config{Dir: filepath.Join(dir, "a"), Env: []string{"GOTOOLCHAIN=" + toolchain, "GOWORK=off"}})
		var e *Error
		if !errors.As(err, &e) || e.Kind != NewerGo {
			t.Fatalf("GOTOOLCHAIN=%s: got %v", toolchain, err)
		}
		if e.Place != filepath.Join(dir, "go.mod") || !strings.Contains(e.Message, "asks for Go 1.999") || !strings.Contains(e.Message, "built with 1.") {
			t.Errorf("GOTOOLCHAIN=%s: got %v", toolchain, e)
		}
	}
}

func TestPartial(t *testing.T) {
	dir := module(t,
		"good/good.go", "package good\n\nfunc F() {}\n",
		"bad/bad.go", "package bad\n\nfunc G() { x }\n",
		"odd/odd.go", "package odd\n\nfunc H() {\n",
		"lost/lost.go", "package lost\n\nimport \"example.com/nowhere\"\n\nfunc L() { nowhere.X() }\n",
		"user/user.go", "package user\n\nimport \"example/harbour/bad\"\n\nfunc U() { bad.G() }\n",
	)
	prog := mustLoad(t, Config{Dir: dir, Patterns: []string{"./..."}, Partial: true})
	equal(t, "functions", describe(prog), []string{"example/harbour/good.init :0:0", "example/harbour/good.F good/good.go:3:6"})
	var got []string
	for _, p := range prog.Packages {
		if p.Broken {
			got = append(got, fmt.Sprint(p.Path, " ", p.Errors))
		}
	}
	equal(t, "broken", got, []string{
		"example.com/nowhere [lost/lost.go:3:8: no required module provides package example.com/nowhere; run `go mod tidy` here]",
		"example/harbour/bad [bad/bad.go:3:12: undefined: x]",
		"example/harbour/lost []",
		"example/harbour/odd [odd/odd.go:3:12: expected '}', found 'EOF']",
		"example/harbour/user []",
	})
}

func TestTests(t *testing.T) {
	dir := module(t,
		"a/a.go", "package a\n\nfunc A() {}\n",
		"a/in_test.go", "package a\n\nimport \"testing\"\n\nfunc TestIn(t *testing.T) { B() }\n\nfunc B() {}\n",
		"a/ex_test.go", "package a_test\n\nimport (\n\t\"testing\"\n\n\t\"example/harbour/a\"\n\t\"example/harbour/b\"\n)\n\nfunc TestEx(t *testing.T) { a.B(); b.Use() }\n",
		"b/b.go", "package b\n\nimport \"example/harbour/a\"\n\nfunc Use() { a.A() }\n",
		// Only tests need util, and it needs what they test.
		"util/util.go", "package util\n\nimport \"example/harbour/a\"\n\nfunc Util() { a.A() }\n",
		"a/more_test.go", "package a_test\n\nimport \"example/harbour/util\"\n\nfunc more() { util.Util() }\n",
		"only/only_test.go", "package only\n\nimport \"testing\"\n\nfunc TestOnly(t *testing.T) {}\n",
		// The tests of p need q, and those of q need p.
		"p/p.go", "package p\n", "p/p_test.go", "package p\n\nimport _ \"example/harbour/q\"\n\nfunc helpP() {}\n",
		"q/q.go", "package q\n", "q/q_test.go", "package q\n\nimport _ \"example/harbour/p\"\n\nfunc helpQ() {}\n",
	)
	without := mustLoad(t, Config{Dir: dir, Patterns: []string{"./..."}})
	equal(t, "left out", leftOut(without), []string{"ex_test.go: tests are not asked for", "in_test.go: tests are not asked for", "more_test.go: tests are not asked for",
		"p_test.go: tests are not asked for", "q_test.go: tests are not asked for"})
	equal(t, "without tests", withoutInit(describe(without)), []string{"example/harbour/a.A a/a.go:3:6", "example/harbour/b.Use b/b.go:5:6", "example/harbour/util.Util util/util.go:5:6"})

	prog := mustLoad(t, Config{Dir: dir, Patterns: []string{"./..."}, Tests: true})
	equal(t, "with tests", withoutInit(describe(prog)), []string{
		"example/harbour/a.A a/a.go:3:6",
		"example/harbour/a.TestIn a/in_test.go:5:6",
		"example/harbour/a.B a/in_test.go:7:6",
		"example/harbour/a_test.TestEx a/ex_test.go:10:6",
		"example/harbour/a_test.more a/more_test.go:5:6",
		"example/harbour/b.Use b/b.go:5:6",
		"example/harbour/only.TestOnly only/only_test.go:5:6",
		"example/harbour/p.helpP p/p_test.go:5:6",
		"example/harbour/util.Util util/util.go:5:6",
	})
	alone := mustLoad(t, Config{Dir: dir, Patterns: []string{"./a"}, Tests: true})
	equal(t, "a alone", withoutInit(describe(alone)), []string{
		"example/harbour/a.A a/a.go:3:6",
		"example/harbour/a.TestIn a/in_test.go:5:6",
		"example/harbour/a.B a/in_test.go:7:6",
		"example/harbour/a_test.TestEx a/ex_test.go:10:6",
		"example/harbour/a_test.more a/more_test.go:5:6",
		"example/harbour/b.Use b/b.go:5:6",
		"example/harbour/util.Util util/util.go:5:6",
	})
	if v := prog.Package("example/harbour/a").TestVariant; v != WithTests {
		t.Errorf("a is %s", v)
	}
	if p := prog.Package("example/harbour/a_test"); p.TestVariant != ExternalTests || ImportableByOthers(p) {
		t.Errorf("a_test is %s", p.TestVariant)
	}
	q := prog.Package("example/harbour/q")
	if len(q.LeftOut) != 1 || filepath.Base(q.LeftOut[0].File) != "q_test.go" {
		t.Errorf("q leaves out %v, want q_test.go", q.LeftOut)
	}
}

func leftOut(prog *Program) (out []string) {
	for _, p := range prog.Packages {
		if p.Main {
			for _, l := range p.LeftOut {
				out = append(out, filepath.Base(l.File)+": "+l.Why)
			}
		}
	}
	return out
}

func withoutInit(list []string) []string {
	return slices.DeleteFunc(list, func(s string) bool { return strings.Contains(s, ".init :0:0") })
}

func TestBuilds(t *testing.T) {
	dir := module(t,
		"a.go", "package a\n",
		"a_linux.go", "package a\n\nfunc linux() {}\n",
		"a_windows.go", "package a\n\nfunc windows() {}\n",
		"tag.go", "//go:build crane\n\npackage a\n\nfunc crane() {}\n",
		"c.go", "package a\n\nimport \"C\"\n\nfunc cgo() {}\n",
		"none/none_plan9.go", "package none\n",
	)
	load := func(tags string, env ...string) (funcs, out []string) {
		prog := mustLoad(t, Config{Dir: dir, Patterns: []string{"./..."}, Tags: tags, Env: env})
		return withoutInit(describe(prog)), leftOut(prog)
	}
	funcs, out := load("", "GOOS=windows", "GOARCH=arm64", "CGO_ENABLED=0")
	equal(t, "windows", funcs, []string{"example/harbour.windows a_windows.go:3:6"})
	equal(t, "windows, left out", out, []string{"a_linux.go: build constraints", "c.go: cgo is off", "tag.go: build constraints"})
	funcs, _ = load("crane", "GOOS=linux", "GOARCH=amd64", "CGO_ENABLED=0")
	equal(t, "linux", funcs, []string{"example/harbour.linux a_linux.go:3:6", "example/harbour.crane tag.go:5:6"})
}

func TestCgo(t *testing.T) {
	dir := module(t, "a.go", `package a

// #include <nowhere.h>
import "C"

import (
	"sync"
	"unsafe"
)

type DB struct {
	mu  sync.Mutex
	ptr *C.db
}

func (d *DB) Close() {
	d.mu.Lock()
	C.db_close(d.ptr)
	d.mu.Unlock()
}

func (d *DB) Exec(q string) error {
	s := C.CString(q)
	defer C.free(unsafe.Pointer(s))
	if rc, err := C.db_exec(d.ptr, s, C.int(len(q))); rc != 0 {
		return err
	}
	return nil
}

func (d *DB) Field() int { return int(d.ptr.field.other) }

func (d *DB) Plain() { d.mu.Lock() }
`, "b.go", "package a\n\nfunc Pure(d *DB) { d.Close() }\n")
	prog := mustLoad(t, Config{Dir: dir, Env: []string{"CGO_ENABLED=1", "CC=/nonexistent/cc"}})
	equal(t, "functions", withoutInit(describe(prog)), []string{
		"(*example/harbour.DB).Close a.go:16:14",
		"(*example/harbour.DB).Exec a.go:22:14",
		"(*example/harbour.DB).Plain a.go:33:14",
		"example/harbour.Pure b.go:3:6",
	})
	p := prog.Package("example/harbour")
	if p.CCalls != 4 || len(p.Cut) != 1 || p.Cut[0].Name != "Field" {
		t.Errorf("%d calls into C, cut %v; want 4 and Field", p.CCalls, p.Cut)
	}

	// An honest error beside it stays one.
	dir = module(t, "a.go", "package a\n\nimport \"C\"\n\nfunc f() { C.g() }\n", "b.go", "package a\n\nfunc h() { undefinedName() }\n")
	_, err := Load(Config{Dir: dir, Env: []string{"CGO_ENABLED=1"}})
	if err == nil || !strings.Contains(err.Error(), "b.go:3:12: undefined: undefinedName") {
		t.Errorf("got %v", err)
	}
}

func TestWorkspace(t *testing.T) {
	dir := module(t,
		"go.work", "go 1.24\n\nuse (\n\t./a\n\t./b\n)\n",
		"a/go.mod", "module example/a\n\ngo 1.24\n", "a/a.go", "package a\n\nimport \"example/b\"\n\nfunc A() { b.B() }\n",
		"b/go.mod", "module example/b\n\ngo 1.24\n", "b/b.go", "package b\n\nfunc B() {}\n",
	)
	prog := mustLoad(t, Config{Dir: dir, Patterns: []string{"./a/..."}, Env: []string{"GOWORK="}})
	equal(t, "functions", withoutInit(describe(prog)), []string{"example/a.A a/a.go:5:6", "example/b.B b/b.go:3:6"})
	dirs, err := MainModules(Config{Dir: dir, Env: []string{"GOWORK="}})
	if err != nil {
		t.Fatal(err)
	}
	equal(t, "main modules", dirs, []string{filepath.Join(dir, "a"), filepath.Join(dir, "b")})
	_, err = Load(Config{Dir: dir, Patterns: []string{"./..."}, Env: []string{"GOWORK="}})
	var e *Error
	if !errors.As(err, &e) || e.Kind != NoMatch || !strings.Contains(e.Message, "name its modules, as in ./a/... (there are 2)") {
		t.Errorf("at the root of the workspace: %v", err)
	}
	prog = mustLoad(t, Config{Dir: filepath.Join(dir, "a"), Env: []string{"GOWORK="}})
	equal(t, "functions from inside", withoutInit(describe(prog)), []string{"example/a.A a.go:5:6", "example/b.B example/b/b.go:3:6"})
	equal(t, "modules", prog.Modules, []string{"example/a", "example/b"})
	if prog.ModulePath != "example/a" || prog.Workspace != filepath.Join(dir, "go.work") {
		t.Errorf("module %q, workspace %q", prog.ModulePath, prog.Workspace)
	}
}

func TestVendor(t *testing.T) {
	dir := module(t,
		"go.mod", "module example/harbour\n\ngo 1.24\n\nrequire example.com/crane v1.0.0\n",
		"a.go", "package a\n\nimport \"example.com/crane\"\n\nfunc A() { crane.Lift() }\n",
		"vendor/modules.txt", "# example.com/crane v1.0.0\n## explicit; go 1.22\nexample.com/crane\n",
		"vendor/example.com/crane/crane.go", "package crane\n\nfunc Lift() {}\n",
	)
	prog := mustLoad(t, Config{Dir: dir, Patterns: []string{"./..."}})
	if p := prog.Package("example.com/crane"); !p.Vendored || p.Bodies {
		t.Errorf("wrong marks on the vendored package: vendored %v, bodies %v", p.Vendored, p.Bodies)
	}
}

// What judges must not change what it judges.
func TestNoWrites(t *testing.T) {
	gomod := "module example/harbour\n\ngo 1.24\n\nrequire example/crane v1.0.0\n\nreplace example/crane => ./crane\n"
	dir := module(t, "go.mod", gomod, "a.go", "package a\n", "crane/go.mod", "module example/crane\n")
	if err := os.Chmod(dir, 0o777); err != nil {
		t.Fatal(err)
	}
	mustLoad(t, Config{Dir: dir, Env: []string{"GOFLAGS=-mod=mod"}})
	after, err := os.ReadFile(filepath.Join(dir, "go.mod"))
	if err != nil || string(after) != gomod {
		t.Errorf("go.mod is now %q (%v)", after, err)
	}
	entries, _ := os.ReadDir(dir)
	if len(entries) != 3 {
		t.Errorf("the folder holds %v", entries)
	}
}

func TestNoNetwork(t *testing.T) {
	last := func(env []string, name string) string {
		value := "unset"
		for _, e := range env {
			if v, ok := strings.CutPrefix(e, name+"="); ok {
				value = v
			}
		}
		return value
	}
	env := environment(&Config{Env: []string{"GOPROXY=https://example.com", "GOPRIVATE=*", "GONOPROXY=*"}})
	if last(env, "GOPROXY") != "off" || last(env, "GONOPROXY") != "none" || last(env, "GOVCS") != "*:off" {
		t.Error("a way to the network stays open")
	}
	env = environment(&Config{AllowDownload: true, Env: []string{"GOPROXY=https://example.com"}})
	if last(env, "GOPROXY") != "https://example.com" {
		t.Error("AllowDownload does not leave GOPROXY alone")
	}
}

func TestGeneratedAndText(t *testing.T) {
	dir := module(t,
		"a.go", "package a\r\n\r\nfunc A() {\r\n\tb(\r\n\t\t1,\r\n\t\t2,\r\n\t)\t\r\n}\r\n",
		"b.go", "// Code generated by hand. DO NOT EDIT.\n\npackage a\n\n//line other.y:10\nfunc b(x, y int) {}\n")
	prog := mustLoad(t, Config{Dir: dir})
	fns := map[string]*ssa.Function{}
	for _, fn := range prog.Functions() {
		fns[fn.Name()] = fn
	}
	if prog.IsGenerated(fns["A"].Pos()) || !prog.IsGenerated(fns["b"].Pos()) {
		t.Error("the generated file is not told from the other")
	}
	if file, line, _ := prog.Position(fns["b"].Pos()); file != "b.go" || line != 6 {
		t.Errorf("b is at %s:%d; //line must not be followed", file, line)
	}
	var call *ssa.Call
	for _, instr := range fns["A"].Blocks[0].Instrs {
		if c, ok := instr.(*ssa.Call); ok {
			call = c
		}
	}
	if got := prog.SourceLine(call.Pos()); got != "\tb(" {
		t.Errorf("line %q", got)
	}
	start := call.Pos() - 1 // the call's position is its parenthesis
	body := fns["A"].Syntax().End() - 1
	if got := prog.SourceText(start, body); got != "b(1, 2)" {
		t.Errorf("text %q, want b(1, 2)", got)
	}
	if prog.SourceText(body, start) != "" || prog.SourceLine(token.NoPos) != "" {
		t.Error("text without a place")
	}
	if got := Shorten(strings.Repeat("a", 30) + strings.Repeat("ü", 100) + strings.Repeat("z", 20)); len([]rune(got)) != maxText || !strings.HasSuffix(got, "…"+strings.Repeat("z", 20)) {
		t.Errorf("shortened to %q", got)
	}
}

// The same input gives the same functions at the same positions, whatever the
// number of workers.
func TestDeterminism(t *testing.T) {
	dump := func(workers int) string {
		prog := mustLoad(t, Config{Patterns: []string{"golang.org/x/tools/go/ssa", "golang.org/x/tools/go/cfg"}, Workers: workers})
		var b strings.Builder
		for _, fn := range slices.Concat(prog.Functions(), prog.Wrappers()) {
			fmt.Fprintln(&b, fn.String(), fn.Pos())
		}
		for _, p := range prog.Packages {
			fmt.Fprintln(&b, p.Path, p.GoFiles, p.Imports, p.LeftOut)
		}
		return b.String()
	}
	one := dump(1)
	if dump(4) != one {
		t.Fatal("four workers give another result than one")
	}
}

func TestStandardLibrary(t *testing.T) {
	prog := mustLoad(t, Config{Patterns: []string{"sync", "cmd/internal/pathcache", "vendor/golang.org/x/net/http/httpguts"}})
	for _, path := range []string{"sync", "runtime", "cmd/internal/pathcache"} {
		p := prog.Package(path)
		if p == nil || !p.Bodies || p.SSA == nil {
			t.Fatalf("%s was not loaded with bodies", path)
		}
	}
	if n := len(prog.Functions()); n < 3000 {
		t.Errorf("%d functions, want more than 3000", n)
	}
	fn := prog.SSA.LookupMethod(types.NewPointer(prog.Package("sync").Types.Scope().Lookup("Mutex").Type()), prog.Package("sync").Types, "Lock")
	if file, _, _ := prog.Position(fn.Pos()); file != "sync/mutex.go" {
		t.Errorf("(*sync.Mutex).Lock is in %q", file)
	}
	// Vendored packages of std are found through the import map.
	if p := prog.Package("vendor/golang.org/x/net/idna"); p == nil || !p.Vendored || !p.Bodies {
		t.Error("the vendored idna was not loaded with bodies")
	}
}

func TestCancel(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cfg := Config{Patterns: []string{"net/http"}, Context: ctx, Progress: func(stage string, done, total int) {
		if stage == "reading" && done == 3 {
			cancel()
		}
	}}
	if _, err := Load(cfg); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v", err)
	}
}

func TestProgress(t *testing.T) {
	var stages []string
	last := map[string][2]int{}
	mustLoad(t, Config{Dir: module(t, "a.go", "package a\n\nimport _ \"errors\"\n"), Progress: func(stage string, done, total int) {
		if len(stages) == 0 || stages[len(stages)-1] != stage {
			stages = append(stages, stage)
		}
		if done < last[stage][0] {
			t.Errorf("%s goes back from %d to %d", stage, last[stage][0], done)
		}
		last[stage] = [2]int{done, total}
	}})
	equal(t, "stages", stages, []string{"listing", "reading", "building"})
	for stage, l := range last {
		if l[0] != l[1] {
			t.Errorf("%s ends at %d of %d", stage, l[0], l[1])
		}
	}
}

func TestNoReturn(t *testing.T) {
	prog := mustLoad(t, Config{Dir: module(t, "a.go", "package a\n\nimport (\n\t_ \"log\"\n\t_ \"testing\"\n)\n")})
	find := func(path, typ, name string) *types.Func {
		pkg := prog.Package(path).Types
		if typ == "" {
			fn, _ := pkg.Scope().Lookup(name).(*types.Func)
			return fn
		}
		obj, _, _ := types.LookupFieldOrMethod(pkg.Scope().Lookup(typ).Type(), true, pkg, name)
		fn, _ := obj.(*types.Func)
		return fn
	}
	for _, tt := range []struct {
		path, typ, name string
		want            NoReturnKind
	}{
		{"os", "", "Exit", Exits},
		{"log", "", "Fatalf", Exits},
		{"log", "Logger", "Fatal", Exits},
		{"log", "Logger", "Panicln", Panics},
		{"log", "", "Println", Returns},
		{"runtime", "", "Goexit", Goexits},
		{"runtime", "", "Gosched", Returns},
		{"testing", "T", "FailNow", Goexits},
		{"testing", "TB", "Skip", Goexits},
		{"testing", "B", "Fatalf", Goexits},
		{"testing", "T", "Fail", Returns},
		{"testing", "T", "Errorf", Returns},
	} {
		fn := find(tt.path, tt.typ, tt.name)
		if fn == nil {
			t.Errorf("%s.%s.%s is not there", tt.path, tt.typ, tt.name)
		} else if got := NoReturn(fn); got != tt.want {
			t.Errorf("%s %s, want %s", fn.FullName(), got, tt.want)
		}
	}
	if NoReturn(nil) != Returns {
		t.Error("NoReturn(nil)")
	}
}

func TestUnjudged(t *testing.T) {
	dir := module(t,
		"a/a.go", "package a\n",
		"b/b.go", "package b\n",
		"bad/bad.go", "package bad\n\nvar x = y\n",
		"plan/p_plan9.go", "package plan\n",
		"tag/t.go", "//go:build crane\n\npackage tag\n",
		"tests/t_test.go", "package tests\n",
		"tools/gen/go.mod", "module gen\n", "tools/gen/main.go", "package main\n", "tools/gen/sub/s.go", "package sub\n",
		"testdata/x.go", "package x\n", "_old/x.go", "package x\n", ".git/x.go", "package x\n", "vendor/x/x.go", "package x\n",
	)
	prog := mustLoad(t, Config{Dir: dir, Patterns: []string{"./a", "./bad"}, Partial: true, Tags: "crane,other", BuildFlags: []string{"-mod=mod"}, Env: []string{"GOOS=linux"}})
	list, err := prog.Unjudged()
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, u := range list {
		got = append(got, fmt.Sprint(u.Folder, " ", u.Files, " ", u.Why))
	}
	equal(t, "unjudged", got, []string{
		"b 1 not named",
		"bad 1 has errors",
		"plan 1 build constraints",
		"tag 1 not named",
		"tests 1 only tests",
		"tools/gen 0 another module",
	})
}
