package properties

import (
	"flag"
	"go/ast"
	"go/importer"
	"go/parser"
	"go/token"
	"go/types"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"sync"
	"testing"

	"pathtally/properties/syntax"
)

var update = flag.Bool("update", false, "write golden files instead of comparing")

// universe is the standard library from source, plus packages given as text.
type universe map[string]*types.Package

func (u universe) Package(path string) *types.Package { return u[path] }

func (u universe) Packages() []*types.Package {
	var out []*types.Package
	for _, p := range u {
		out = append(out, p)
	}
	return out
}

// harbour is a package with types of its own for rules.
const harbour = `package depot
import "errors"
type Pool[T any] struct{ free []T; Log *Logbook }
func (p *Pool[T]) Get() (T, error) { var x T; return x, errors.New("none") }
func (p *Pool[T]) Put(x T) { p.free = append(p.free, x) }
func (p *Pool[T]) PutAll(xs ...T) {}
type Logbook struct{ Page *Page }
type Page struct{}
func (p *Page) Write(text string, urgent bool) (int, error) { return 0, nil }
func (p *Page) Seal() {}
func (p *Page) Tear() error { return nil }
func Open(name string) (*Page, error) { return nil, nil }
func OpenLog(name string) (*Logbook, error) { return nil, nil }
func Openly() {}
func Each(f func(int)) {}
func Fatal(code int) {}
var Default Pool[int]
const Most = 3
type Sealer interface{ Seal() }
type Box struct{ Page }
`

var stdlib = sync.OnceValues(func() (*token.FileSet, types.Importer) {
	fset := token.NewFileSet()
	return fset, importer.ForCompiler(fset, "source", nil)
})

// testUniverse type-checks packages; names with "example/" are harbour.
func testUniverse(t testing.TB, paths ...string) universe {
	t.Helper()
	fset, imp := stdlib()
	u := universe{}
	for _, p := range paths {
		if p == "example/depot" {
			f, err := parser.ParseFile(fset, "depot.go", harbour, 0)
			if err != nil {
				t.Fatal(err)
			}
			conf := types.Config{Importer: imp}
			pkg, err := conf.Check(p, fset, []*ast.File{f}, nil)
			if err != nil {
				t.Fatal(err)
			}
			u[p] = pkg
			continue
		}
		pkg, err := imp.Import(p)
		if err != nil {
			t.Fatal(err)
		}
		u[p] = pkg
	}
	return u
}

var everything = []string{"sync", "os", "io", "net/http", "context", "errors", "fmt", "example/depot"}

func parseRules(t testing.TB, name, dir, src string) *RuleFile {
	t.Helper()
	f := ParseRuleFile(name, dir, src)
	if len(f.Errs) > 0 {
		t.Fatal(f.Errs.Text())
	}
	return f
}

func resolveText(t testing.TB, src string) *RuleBook {
	t.Helper()
	book, err := Resolve([]*RuleFile{parseRules(t, "pathtally.rules", ".", src)}, testUniverse(t, everything...), Options{FollowModels: true})
	if err != nil {
		t.Fatal(err.(syntax.Errors).Text())
	}
	return book
}

// TestBuiltIn: all built-in rules resolve, with documentation, what they rest
// on, and for each claim code that breaks it and code that keeps it.
func TestBuiltIn(t *testing.T) {
	book, err := Resolve(BuiltInRules(), testUniverse(t, everything...), Options{})
	if err != nil {
		t.Fatal(err.(syntax.Errors).Text())
	}
	var names []string
	for _, r := range book.Rules {
		names = append(names, r.Set+"/"+r.Name)
		if !strings.Contains(r.Doc, "Rests on") {
			t.Errorf("%s does not say what it rests on", r.Name)
		}
		if !r.BuiltIn || r.Dir != "." {
			t.Errorf("%s: BuiltIn %v, Dir %q", r.Name, r.BuiltIn, r.Dir)
		}
		if len(r.Absent) > 0 {
			t.Errorf("%s names what the standard library does not have: %v", r.Name, r.Absent)
		}
		broken := map[string]bool{}
		holds := false
		for _, e := range Examples(r) {
			holds = holds || len(e.Broken) == 0
			for _, b := range e.Broken {
				broken[b] = true
			}
		}
		if !holds {
			t.Errorf("%s has no code that keeps its claims", r.Name)
		}
		for _, c := range r.Claims {
			if !broken[c.Name] {
				t.Errorf("%s has no code that breaks %s", r.Name, c.Name)
			}
			if c.Reason == "" {
				t.Errorf("%s/%s gives no reason", r.Name, c.Name)
			}
			if !c.Linear || len(c.Questions) == 0 {
				t.Errorf("%s/%s is not linear", r.Name, c.Name)
			}
		}
	}
	if want := []string{"context/cancel", "http/body", "os/file", "sync/mutex", "sync/rwmutex"}; !reflect.DeepEqual(names, want) {
		t.Errorf("rules %v, want %v", names, want)
	}
	if len(book.Skipped) != 0 {
		t.Errorf("skipped %v", book.Skipped)
	}
}

// TestNotApplicable: built-in rules whose packages are missing are skipped,
// without an error.
func TestNotApplicable(t *testing.T) {
	book, err := Resolve(BuiltInRules(), testUniverse(t, "sync", "os", "io"), Options{})
	if err != nil {
		t.Fatal(err)
	}
	if want := []SkippedRule{{"context", "cancel", "context"}, {"http", "body", "net/http"}}; !reflect.DeepEqual(book.Skipped, want) {
		t.Errorf("skipped %v, want %v", book.Skipped, want)
	}
	if len(book.Rules) != 3 {
		t.Errorf("%d rules, want 3", len(book.Rules))
	}
}

// TestOlderLibrary: built-in rules live with a standard library that lacks some
// of their names; rules of a module do not.
func TestOlderLibrary(t *testing.T) {
	u := testUniverse(t, "sync", "os", "io")
	old := types.NewPackage("context", "context")
	scope := old.Scope()
	sig := types.NewSignatureType(nil, nil, nil, nil, nil, false)
	cancel := types.NewNamed(types.NewTypeName(0, old, "CancelFunc", nil), sig, nil)
	scope.Insert(cancel.Obj())
	anything := types.NewInterfaceType(nil, nil)
	with := types.NewSignatureType(nil, nil, nil, types.NewTuple(types.NewVar(0, old, "parent", anything)),
		types.NewTuple(types.NewVar(0, old, "ctx", anything), types.NewVar(0, old, "cancel", cancel)), false)
	scope.Insert(types.NewFunc(0, old, "WithCancel", with))
	u["context"] = old
	book, err := Resolve(BuiltInRules(), u, Options{})
	if err != nil {
		t.Fatal(err.(syntax.Errors).Text())
	}
	r := book.Rules[0]
	if r.Name != "cancel" || len(r.Events) != 2 || len(r.Events[0].Callees) != 1 || len(r.Each.Types) != 1 || len(r.Claims) != 1 {
		t.Errorf("%+v", r)
	}
	if want := []string{"CancelCauseFunc", "WithCancelCause", "WithTimeout", "WithTimeoutCause", "WithDeadline", "WithDeadlineCause"}; !reflect.DeepEqual(r.Absent, want) {
		t.Errorf("absent %v, want %v", r.Absent, want)
	}
	own := parseRules(t, "pathtally.rules", ".", "import \"context\"\nrule x { each f context.CancelFunc stays; count n: call context.WithTimeout returning (_, f); claim k always: n <= 1 }")
	if _, err := Resolve([]*RuleFile{own}, u, Options{}); err == nil || !strings.Contains(err.Error(), "package context has no function WithTimeout") {
		t.Errorf("error %v", err)
	}
}

// TestPrefix: a prefix skips functions that do not fit the event.
func TestPrefix(t *testing.T) {
	f := parseRules(t, "x.rules", ".", `import "database/sql"
rule rows { each r *sql.Rows moves
  count got: call (*sql.DB).Query*, (*sql.Stmt).Query* returning (r, nil)
  count closed: call (*sql.Rows).Close on r
  claim closed at return: got <= closed }
`)
	book, err := Resolve([]*RuleFile{f}, testUniverse(t, "database/sql"), Options{})
	if err != nil {
		t.Fatal(err.(syntax.Errors).Text())
	}
	var got []string
	for _, c := range book.Rules[0].Events[0].Callees {
		got = append(got, c.String())
	}
	if want := []string{"(*sql.DB).Query", "(*sql.DB).QueryContext", "(*sql.Stmt).Query", "(*sql.Stmt).QueryContext"}; !reflect.DeepEqual(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
}

// clauseSpans gives the places of all clauses and declarations without clauses.
func clauseSpans(f *syntax.File) []syntax.Span {
	var out []syntax.Span
	for _, im := range f.Imports {
		out = append(out, im.Span)
	}
	for _, d := range f.Decls {
		r, ok := d.(*syntax.Rule)
		if !ok {
			out = append(out, d.Pos())
			continue
		}
		for _, c := range r.Clauses {
			out = append(out, c.Pos())
		}
	}
	return out
}

// checkErrors checks what holds of every error list: sorted, a text for each,
// at most one for each clause.
func checkErrors(t testing.TB, f *syntax.File, errs syntax.Errors) {
	t.Helper()
	for i, e := range errs {
		if e.Msg == "" || e.Line < 1 || e.Column < 1 || e.Column > len(e.Source)+1 || strings.Count(e.Text(), "\n") < 3 {
			t.Errorf("malformed error %+v", e)
		}
		if i > 0 && errs[i-1].Stage > e.Stage {
			t.Errorf("%v stands before %v", errs[i-1], e)
		}
	}
	for _, s := range clauseSpans(f) {
		fromLine, fromCol := f.Position(s.From)
		toLine, toCol := f.Position(s.To)
		n := 0
		for _, e := range errs {
			after := e.Line > fromLine || e.Line == fromLine && e.Column >= fromCol
			before := e.Line < toLine || e.Line == toLine && e.Column < toCol // what stands at its end may be the next one's
			if after && before && !strings.HasSuffix(e.Msg, "has no closing }") {
				n++
			}
		}
		if n > 1 {
			t.Errorf("%d errors in the clause at %d:%d:\n%s", n, fromLine, fromCol, errs.Text())
		}
	}
}

// FuzzResolve: no rule file makes Resolve panic, and its errors are as promised.
// See FuzzParse for how to run it.
func FuzzResolve(f *testing.F) {
	var names []string
	for _, glob := range []string{"testdata/*.rules", "testdata/bad/*.rules", "rulesets/*.rules"} {
		m, err := filepath.Glob(glob)
		if err != nil {
			f.Fatal(err)
		}
		names = append(names, m...)
	}
	for _, name := range names {
		src, err := os.ReadFile(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(string(src))
	}
	u := testUniverse(f, everything...)
	f.Fuzz(func(t *testing.T, src string) {
		file := ParseRuleFile("x.rules", ".", src)
		for _, models := range []bool{false, true} {
			book, err := Resolve([]*RuleFile{file}, u, Options{FollowModels: models})
			if err != nil {
				checkErrors(t, file.Tree, err.(syntax.Errors))
				continue
			}
			for _, r := range book.Rules {
				Examples(r)
				for _, c := range r.Claims {
					if len(c.Cases) == 0 || c.Linear != (len(c.Questions) > 0) {
						t.Errorf("claim %+v", c)
					}
				}
			}
		}
		for _, i := range ListRules([]*RuleFile{file}) {
			ShowRule([]*RuleFile{file}, i, nil)
		}
	})
}

// TestExamplesCompile: each example of a built-in rule is a Go file that the
// type checker accepts, and its positions lead into the rule file.
func TestExamplesCompile(t *testing.T) {
	fset, imp := stdlib()
	book, err := Resolve(BuiltInRules(), testUniverse(t, everything...), Options{})
	if err != nil {
		t.Fatal(err.(syntax.Errors).Text())
	}
	n := 0
	for _, r := range book.Rules {
		for _, e := range Examples(r) {
			n++
			f, err := parser.ParseFile(fset, "x.go", e.Source, parser.SkipObjectResolution)
			if err != nil {
				t.Errorf("%s: %v", e.Pos, err)
				continue
			}
			conf := types.Config{Importer: imp}
			if _, err := conf.Check("example", fset, []*ast.File{f}, nil); err != nil {
				t.Errorf("%s: %v", e.Pos, err)
			}
			last := fset.Position(f.Decls[len(f.Decls)-1].Pos())
			if !strings.HasSuffix(last.Filename, ".rules") || last.Line <= 1 {
				t.Errorf("%s: the last declaration stands at %s", e.Pos, last)
			}
		}
	}
	if n < 15 {
		t.Errorf("%d examples seen", n)
	}
}

// TestExampleKinds: statements, declarations and whole files.
func TestExampleKinds(t *testing.T) {
	book := resolveText(t, strings.Join([]string{
		`import "sync"; import str "errors"`,
		`rule a { each m *sync.Mutex stays; count n: call (*sync.Mutex).Lock on m; claim few always: n <= 1`,
		"  holds `var mu sync.Mutex; mu.Lock()`",
		"  broken few `func F(errors sync.Mutex) { _ = str.New }`",
		"  holds `package p; import \"sync\"; var M sync.Mutex`",
		"  holds ``x := `raw`; _ = x``",
		"}"}, "\n"))
	var got []string
	for _, e := range Examples(book.Rules[0]) {
		got = append(got, e.Source)
	}
	want := []string{
		"package example\n\nimport \"sync\"\n\nfunc Example() {\n/*line pathtally.rules:3:10*/var mu sync.Mutex; mu.Lock()\n}\n",
		"package example\n\nimport \"sync\"\nimport str \"errors\"\n\n/*line pathtally.rules:4:15*/func F(errors sync.Mutex) { _ = str.New }\n",
		"/*line pathtally.rules:5:10*/package p; import \"sync\"; var M sync.Mutex\n",
		"package example\n\nfunc Example() {\n/*line pathtally.rules:6:11*/x := `raw`; _ = x\n}\n",
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("got\n%q\nwant\n%q", got, want)
	}
}

// TestBad compares the errors of malformed files with golden files: every rule
// file in testdata/bad has its messages beside it.
func TestBad(t *testing.T) {
	files, err := filepath.Glob("testdata/bad/*.rules")
	if err != nil {
		t.Fatal(err)
	}
	if len(files) < 20 {
		t.Fatalf("%d malformed files", len(files))
	}
	u := testUniverse(t, everything...)
	for _, name := range files {
		src, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		f := ParseRuleFile("pathtally.rules", ".", string(src))
		_, err = Resolve(append(BuiltInRules(), f), u, Options{})
		if err == nil {
			t.Errorf("%s has no error", name)
			continue
		}
		checkErrors(t, f.Tree, err.(syntax.Errors))
		got := err.(syntax.Errors).Text()
		compareGolden(t, strings.TrimSuffix(name, ".rules")+".want", got)
	}
}

// TestQuestions compares the questions of claims over counts a, b, c.
func TestQuestions(t *testing.T) {
	for _, c := range []struct {
		claim  string
		linear bool
		want   string // cases joined by |, atoms by &: weights>bound
	}{
		{"a == b", true, "1,-1,0>0|-1,1,0>0"},
		{"a <= b <= c", true, "1,-1,0>0|0,1,-1>0"},
		{"a - b <= 1", true, "1,-1,0>1"},
		{"a < b + 3", true, "1,-1,0>2"},
		{"!(a > 2)", true, "1,0,0>2"},
		{"a == b && b == c", true, "1,-1,0>0|-1,1,0>0|0,1,-1>0|0,-1,1>0"},
		{"2 * a <= 3", true, "1,0,0>1"},
		{"2 * a + 1 <= 4 * b", true, "1,-2,0>-1"},
		{"a >= 1", true, "-1,0,0>-1"},
		{"a >= 1 => b >= 1", false, "1,0,0>0&0,-1,0>-1"},
		{"a == 0 || b == 0", false, "1,0,0>0&0,1,0>0"},
		{"a != b", false, "1,-1,0>-1&-1,1,0>-1"},
		{"a <= 1 && a <= 1", true, "1,0,0>1"},
		{"a >= 0 && a <= 1", true, "1,0,0>1"},
		{"5 % 3 + a <= -(-4)", true, "1,0,0>2"},
		{"(a <= 1) && true", true, "1,0,0>1"},
		{"(a + b) * 2 < 2 * (3 + c)", true, "1,1,-1>2"},
	} {
		book := resolveText(t, "import \"sync\"\nrule x { each m *sync.Mutex stays; count a: call (*sync.Mutex).Lock on m\ncount b: call (*sync.Mutex).Unlock on m\ncount c: call (*sync.Mutex).TryLock on m\nclaim k at end: "+c.claim+"\n}")
		k := book.Rules[0].Claims[0]
		var cases []string
		for _, qs := range k.Cases {
			var atoms []string
			for _, q := range qs {
				var ws []string
				for _, w := range q.Weights {
					ws = append(ws, itoa(w))
				}
				atoms = append(atoms, strings.Join(ws, ",")+">"+itoa(q.Bound))
			}
			cases = append(cases, strings.Join(atoms, "&"))
		}
		if got := strings.Join(cases, "|"); got != c.want || k.Linear != c.linear || k.Text != c.claim {
			t.Errorf("%s: linear %v %s, want %v %s (text %q)", c.claim, k.Linear, got, c.linear, c.want, k.Text)
		}
		if k.Linear != (len(k.Questions) > 0) {
			t.Errorf("%s: linear %v with %d questions", c.claim, k.Linear, len(k.Questions))
		}
	}
}

func itoa(n int64) string {
	var b []byte
	neg := n < 0
	if neg {
		n = -n
	}
	for {
		b = append([]byte{byte('0' + n%10)}, b...)
		if n /= 10; n == 0 {
			break
		}
	}
	if neg {
		return "-" + string(b)
	}
	return string(b)
}

// TestEvents looks at what events resolve to.
func TestEvents(t *testing.T) {
	book := resolveText(t, `import "example/depot"; import "context"
rule page {
  each p *depot.Page | depot.Sealer moves
  count opened by 2: call depot.Open* returning (p, nil)
  count opened: call depot.OpenLog returning (l, nil) where l.Page == p
  count closed: call (depot.Sealer).Seal, (*depot.Page).Seal on p
  count wrote: call (*depot.Page).Write on p with ("x", ...) returning (_, nil)
  count wrote: call (*depot.Page).Write on p with (_, true)
  claim a before call (*depot.Page).Seal on p: wrote <= opened
  claim b after call (*depot.Page).Seal on p: wrote <= opened
  claim c after call (*depot.Page).Tear on p returning nil: wrote <= opened
  model depot.Each calls arg 1
}
rule stop { each f context.CancelFunc stays; count n: call f; claim k always: n <= 1 }
rule all { count opened: call depot.OpenLog returning (_, nil); claim few always: opened <= 8 }
rule any { each x _ moves; count out: call (*depot.Pool[_]).Get returning (x, nil); count home: call (*depot.Pool[_]).Put with x; claim home at end: out == home }
model depot.Fatal never returns
`)
	page := book.Rules[0]
	if !page.Moves || page.Stays || page.Each.Name != "p" || len(page.Each.Types) != 2 {
		t.Errorf("each: %+v", page.Each)
	}
	var got []string
	for _, e := range page.Events {
		var names []string
		for _, c := range e.Callees {
			names = append(names, c.String())
		}
		got = append(got, itoa(int64(e.Count))+" "+itoa(int64(e.Mark))+" "+itoa(e.Weight)+" "+strings.Join(names, ","))
	}
	want := []string{
		"0 0 2 depot.Open",
		"0 0 1 depot.OpenLog",
		"1 0 1 (depot.Sealer).Seal,(*depot.Page).Seal",
		"2 0 1 (*depot.Page).Write",
		"2 0 1 (*depot.Page).Write",
		"-1 2 0 (*depot.Page).Seal",
		"-1 4 0 (*depot.Page).Tear",
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("events\n%q\nwant\n%q", got, want)
	}
	if e := page.Events[1]; !reflect.DeepEqual(e.Where, []WherePath{{"l", []string{"Page"}}}) || !reflect.DeepEqual(e.Giving, []Pat{PatName{"l"}, PatConst{Nil: true}}) {
		t.Errorf("where %+v giving %+v", e.Where, e.Giving)
	}
	if e := page.Events[3]; e.WithAll || len(e.With) != 1 || !reflect.DeepEqual(e.With[0], PatConst{Value: "x"}) || e.Giving[0] != nil {
		t.Errorf("with %+v all %v", e.With, e.WithAll)
	}
	if c := page.Events[2].Callees; !c[0].Interface || c[1].Interface {
		t.Errorf("interface %v %v", c[0].Interface, c[1].Interface)
	}
	if c := page.Claims; c[0].Point != Before || c[1].Point != After || c[0].Mark != c[1].Mark || c[2].Mark == c[0].Mark {
		t.Errorf("marks %+v", c)
	}
	if m := page.Models; len(m) != 1 || m[0].Effect != Calls || m[0].Arg != 1 {
		t.Errorf("models %+v", m)
	}
	if m := book.Models; len(m) != 1 || m[0].Effect != NeverReturns {
		t.Errorf("models %+v", m)
	}
	if e := book.Rules[1].Events[0]; !e.CallsInstance || len(e.Callees) != 0 {
		t.Errorf("call of the instance: %+v", e)
	}
	if book.Rules[2].Each != nil {
		t.Error("a rule without each has an instance")
	}
	get := book.Rules[3].Events[0].Callees[0].Obj
	if get != get.Origin() || get.Name() != "Get" {
		t.Errorf("%v is not the origin", get)
	}
	if len(book.Rules[3].Each.Types) != 0 {
		t.Error("_ is not any type")
	}
}

// TestTypeFits: instances against alternatives.
func TestTypeFits(t *testing.T) {
	u := testUniverse(t, everything...)
	typ := func(pkg, name string) types.Type { return u[pkg].Scope().Lookup(name).Type() }
	pool := typ("example/depot", "Pool")
	inst, err := types.Instantiate(nil, pool, []types.Type{types.Typ[types.Int]}, true)
	if err != nil {
		t.Fatal(err)
	}
	ptr := func(t types.Type) types.Type { return types.NewPointer(t) }
	for i, c := range []struct {
		pattern, t types.Type
		want       bool
	}{
		{ptr(typ("sync", "Mutex")), ptr(typ("sync", "Mutex")), true},
		{ptr(typ("sync", "Mutex")), ptr(typ("sync", "RWMutex")), false},
		{ptr(pool), ptr(inst), true},
		{ptr(inst), ptr(inst), true},
		{ptr(pool), ptr(typ("sync", "Mutex")), false},
		{typ("io", "ReadCloser"), typ("io", "Closer"), true},
		{typ("io", "ReadCloser"), ptr(typ("os", "File")), true},
		{typ("io", "ReadCloser"), ptr(typ("sync", "Mutex")), false},
		{typ("context", "CancelFunc"), typ("context", "CancelCauseFunc"), false},
		{typ("context", "CancelFunc"), types.NewSignatureType(nil, nil, nil, nil, nil, false), true},
	} {
		if got := TypeFits(c.pattern, c.t); got != c.want {
			t.Errorf("%d: TypeFits(%v, %v) = %v", i, c.pattern, c.t, got)
		}
	}
}

// TestSwitches: nearest file wins, then the last line.
func TestSwitches(t *testing.T) {
	files := append(BuiltInRules(),
		parseRules(t, "pathtally.rules", ".", `disable mutex/not-twice reason "old code"
disable os in "./tools/...", "example/x/gen..." reason "scripts"
soften body reason "being mended"
`),
		parseRules(t, "depot/pathtally.rules", "depot", `import "sync"
rule own { each m *sync.Mutex stays; count n: call (*sync.Mutex).Lock on m; claim few always: n <= 3 }
enable mutex/not-twice, body
disable sync in "./old" reason "moves out"
noroot sync.OnceFunc
`))
	book, err := Resolve(files, testUniverse(t, everything...), Options{})
	if err != nil {
		t.Fatal(err.(syntax.Errors).Text())
	}
	rules := map[string]*ResolvedRule{}
	for _, r := range book.Rules {
		rules[r.Name] = r
	}
	for _, c := range []struct {
		rule, claim, dir, path string
		want                   State
	}{
		{"mutex", "not-twice", ".", "example/x", Off},
		{"mutex", "balanced", ".", "example/x", On},
		{"mutex", "not-twice", "depot", "example/x/depot", On},
		{"mutex", "not-twice", "depot/in", "example/x/depot/in", On},
		{"mutex", "not-twice", "depots", "example/x/depots", Off},
		{"mutex", "balanced", "depot/old", "example/x/depot/old", Off},
		{"rwmutex", "even", "depot/old", "example/x/depot/old", Off},
		{"rwmutex", "even", "depot/old/more", "example/x/depot/old/more", On},
		{"file", "closed", "tools", "example/x/tools", Off},
		{"file", "closed", "tools/a/b", "example/x/tools/a/b", Off},
		{"file", "closed", "toolshed", "example/x/toolshed", On},
		{"file", "closed", "gen2", "example/x/gen2", Off},
		{"body", "closed", "a", "example/x/a", Softened},
		{"body", "closed", "depot", "example/x/depot", On},
		{"own", "few", "depot/in", "example/x/depot/in", On},
		{"own", "few", "a", "example/x/a", Off},
		{"cancel", "called", "a", "example/x/a", On},
	} {
		if got := book.State(rules[c.rule], c.claim, PackageRef{Path: c.path, Dir: c.dir}); got != c.want {
			t.Errorf("%s/%s in %s: state %d, want %d", c.rule, c.claim, c.dir, got, c.want)
		}
	}
	if len(book.NoRoots) != 1 || book.NoRoots[0].Callees[0].Obj.Name() != "OnceFunc" || book.NoRoots[0].Dir != "depot" {
		t.Errorf("noroot: %+v", book.NoRoots)
	}
}

// TestReadRuleFiles: files of the folders above packages, outer ones first.
func TestReadRuleFiles(t *testing.T) {
	root := t.TempDir()
	for _, p := range []string{"pathtally.rules", "a/pathtally.rules", "a/b/c/pathtally.rules", "z/pathtally.rules"} {
		full := filepath.Join(root, filepath.FromSlash(p))
		if err := os.MkdirAll(filepath.Dir(full), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(full, []byte("noroot x.Y\r\n"), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	got, err := RuleFilePaths(root, "a/b/c")
	if want := []string{"a/b/c/pathtally.rules", "a/pathtally.rules", "pathtally.rules"}; err != nil || !reflect.DeepEqual(got, want) {
		t.Errorf("got %v, %v, want %v", got, err, want)
	}
	files, err := ReadRuleFiles(root, []string{"a/b", "a/b/c", "z", "none"})
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, f := range files {
		names = append(names, f.Name+" in "+f.Dir)
	}
	if want := []string{"pathtally.rules in .", "a/pathtally.rules in a", "z/pathtally.rules in z", "a/b/c/pathtally.rules in a/b/c"}; !reflect.DeepEqual(names, want) {
		t.Errorf("got %v, want %v", names, want)
	}
	if _, err := RuleFilePaths(root, "../x"); err == nil {
		t.Error("a folder outside of the module is accepted")
	}
}

// TestWorked: the worked rules that are about the standard library resolve, but
// for clauses that are not judged yet; each of those is said at its place.
func TestWorked(t *testing.T) {
	src, err := os.ReadFile("testdata/worked.rules")
	if err != nil {
		t.Fatal(err)
	}
	f := parseRules(t, "worked.rules", ".", string(src))
	infos := ListRules([]*RuleFile{f})
	if len(infos) != 28 {
		t.Errorf("%d worked rules, want 28", len(infos))
	}
	if i := infos[len(infos)-1]; i.Name != "asked-first" || i.Sentence == "" {
		t.Errorf("last: %+v", i)
	}
	u := testUniverse(t, "sync", "os", "io", "net", "net/http", "database/sql", "context", "time", "os/exec", "bufio",
		"compress/gzip", "archive/zip", "archive/tar", "runtime/pprof")
	_, err = Resolve([]*RuleFile{f}, u, Options{FollowModels: true})
	if err == nil {
		t.Fatal("no error")
	}
	var b strings.Builder
	for _, e := range err.(syntax.Errors) {
		b.WriteString(e.Error() + "\n")
	}
	compareGolden(t, "testdata/worked.want", b.String())
}

// compareGolden compares with a golden file, or writes it with -update.
func compareGolden(t *testing.T, name, got string) {
	t.Helper()
	if *update {
		if err := os.WriteFile(name, []byte(got), 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	want, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	if got != string(want) {
		t.Errorf("%s: got\n%s\nwant\n%s", name, got, want)
	}
}

// TestShow compares the listing of a rule with a golden file.
func TestShow(t *testing.T) {
	files := append(BuiltInRules(), parseRules(t, "pathtally.rules", ".", `import "example/depot"
// A page that was opened is sealed. More is in the handbook.
rule page {
  each p *depot.Page moves
  count opened: call depot.Open*
    returning (p, nil) // wraps
  count sealed: call (*depot.Page).Se* on p
  claim sealed at end: opened == sealed reason "it fades"
  advice soon always: opened - sealed <= 2
  holds `+"`\n    depot.Openly()\n  `"+`
  broken sealed `+"`func F() (err error) { _, err = depot.Open(\"a\"); return }`"+`
}
soften page/sealed reason "old"
disable http reason "no clients here"
`))
	book, err := Resolve(files, testUniverse(t, everything...), Options{})
	if err != nil {
		t.Fatal(err.(syntax.Errors).Text())
	}
	var b strings.Builder
	for _, i := range ListRules(files) {
		on := "off"
		if i.On {
			on = "on"
		}
		b.WriteString(strings.Join([]string{i.Set, i.Name, on, i.Sentence, strings.Join(i.Claims, ","), strings.Join(i.Advice, ",")}, " | ") + "\n")
	}
	found := LookupRule(files, "page")
	if len(found) != 1 || len(LookupRule(files, "nothing")) != 0 {
		t.Fatalf("found %v", found)
	}
	b.WriteString("\n" + ShowRule(files, found[0], book))
	compareGolden(t, "testdata/show.want", b.String())
}
