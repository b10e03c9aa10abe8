package frontend_test

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"sort"
	"strings"
	"testing"

	"pathtally/frontend"
	"pathtally/frontend/casetest"
	"pathtally/frontend/load"
	"pathtally/properties"
	"pathtally/properties/judge"
)

var onlyCase = flag.String("case", "", "run only cases whose name contains this")

// TestCases runs every pair of twins: the broken one must have its findings in
// the right function and on the right line, the clean one none.
func TestCases(t *testing.T) {
	cases, err := casetest.Load("../testdata/cases")
	if err != nil {
		t.Fatal(err)
	}
	// One module with a package a program: they share the loading of the
	// standard library, and are analysed one by one.
	dir := t.TempDir()
	write := func(name, text string) {
		path := filepath.Join(dir, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	write("go.mod", "module cases\n\ngo 1.26\n")
	id := func(c casetest.Case) string { return c.Topic + "/" + c.Name }
	var run []casetest.Case
	for _, c := range cases {
		if *onlyCase != "" && !strings.Contains(id(c), *onlyCase) {
			continue
		}
		run = append(run, c)
		write(id(c)+"/broken/broken.go", string(c.Broken))
		write(id(c)+"/clean/clean.go", string(c.Clean))
	}
	prog, err := load.Load(load.Config{Dir: dir, Patterns: []string{"./..."}})
	if err != nil {
		t.Fatal(err)
	}
	passed, expected := 0, 0
	for _, c := range run {
		t.Run(id(c), func(t *testing.T) {
			var got []casetest.Got
			for _, side := range []string{"broken", "clean"} {
				got = append(got, judgeCase(t, prog, c, "cases/"+id(c)+"/"+side, side+".go")...)
			}
			diff := c.Check(got)
			switch {
			case len(diff) == 0 && c.XFail != "":
				t.Errorf("passes now: remove its xfail (%s)", c.XFail)
			case len(diff) == 0:
				passed++
			case c.XFail != "":
				expected++
				t.Logf("expected failure (%s):\n%s", c.XFail, strings.Join(diff, "\n"))
			default:
				t.Errorf("%s", strings.Join(diff, "\n"))
			}
		})
	}
	t.Logf("%d of %d cases pass, %d expected to fail", passed, len(run), expected)
}

func judgeCase(t *testing.T, prog *load.Program, c casetest.Case, path, file string) []casetest.Got {
	t.Helper()
	sh := frontend.Analyze(prog, path)
	files := properties.BuiltInRules()
	if c.Rules != "" {
		files = append([]*properties.RuleFile{properties.ParseRuleFile("case.rules", prog.ModuleDir, c.Rules)}, files...)
	}
	book, err := properties.Resolve(files, prog.Universe(), properties.Options{})
	if err != nil {
		t.Fatal(err)
	}
	var results []*judge.RuleResult
	for _, r := range book.Rules {
		switch r.Name {
		case "mutex", "rwmutex", "file", "body", "cancel":
			results = append(results, judge.Judge(r, sh.Lower(r), judge.Options{
				State: func(claim, pkg string) properties.State {
					return book.State(r, claim, properties.PackageRef{Path: pkg, Dir: "."})
				},
			}))
		}
	}
	res := judge.Merge(results)
	var got []casetest.Got
	for _, f := range res.Findings {
		got = append(got, casetest.Got{File: filepath.Base(f.Cause.Place.File), Line: f.Cause.Place.Line, Rule: f.Rule, Claim: f.Claim, Function: f.Blame.Name, Verdict: casetest.Broken})
	}
	for _, o := range res.Open {
		got = append(got, casetest.Got{File: file, Line: o.Place.Line, Rule: o.Rule, Claim: o.Claim, Function: o.Root.Name, Verdict: casetest.Undecided})
	}
	sort.Slice(got, func(i, j int) bool { return fmt.Sprint(got[i]) < fmt.Sprint(got[j]) })
	return got
}
