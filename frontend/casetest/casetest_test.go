package casetest_test

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"pathtally/frontend/casetest"
)

// sample has every directive and every header line once.
const sample = `Two ways out.
Second line of prose: with a colon.

may: mutex/not-early (*Desk).Leave
undecided: file/closed Open|open
rules: disable mutex/not-twice
rules: reason "none"
xfail: some day

-- broken.go --
package p

const s = "// want a/b c"

func (d *Desk) Book() {
	d.mu.Lock() // or-here
	d.n++       // plain words // want mutex/balanced (*Box[K, V]).Book|Run // or-here
} // or-here mutex/balanced (*Box).Book|Run
-- clean.go --
package p
`

func parse(t *testing.T, text string) casetest.Case {
	t.Helper()
	c, err := casetest.Parse("cases/topic/name.txtar", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func TestParse(t *testing.T) {
	got := parse(t, sample)
	if len(got.Broken) == 0 || string(got.Clean) != "package p\n" {
		t.Errorf("sources: broken %q, clean %q", got.Broken, got.Clean)
	}
	got.Broken, got.Clean = nil, nil
	want := casetest.Case{
		Topic: "topic", Name: "name", Path: "cases/topic/name.txtar",
		Doc: "Two ways out.\nSecond line of prose: with a colon.",
		Wants: []casetest.Want{{
			Claim: casetest.Claim{Rule: "mutex", Claim: "balanced", Functions: []string{"(*Box).Book", "Run"}},
			Line:  7, Also: []int{6, 7, 8},
		}},
		May:       []casetest.Claim{{Rule: "mutex", Claim: "not-early", Functions: []string{"(*Desk).Leave"}}},
		Undecided: []casetest.Claim{{Rule: "file", Claim: "closed", Functions: []string{"Open", "open"}}},
		Rules:     "disable mutex/not-twice\nreason \"none\"",
		XFail:     "some day",
	}
	if diff := cmp.Diff(want, got); diff != "" {
		t.Errorf("Parse (-want +got):\n%s", diff)
	}
}

func TestParseErrors(t *testing.T) {
	const clean = "-- clean.go --\npackage p\n"
	for _, test := range []struct{ name, text, want string }{
		{"no doc", "-- broken.go --\nx // want a/b c\n" + clean, "does not say"},
		{"no clean", "doc\n-- broken.go --\nx // want a/b c\n", "needs both"},
		{"twice", "doc\n" + clean + clean, "two files clean.go"},
		{"other file", "doc\n-- more.go --\n", `"more.go"`},
		{"no want", "doc\n-- broken.go --\npackage p\n" + clean, "no want"},
		{"half a want", "doc\n-- broken.go --\n\nx // want a/b\n" + clean, "broken.go:2: want"},
		{"no claim", "doc\n-- broken.go --\nx // want a c\n" + clean, "RULE/CLAIM"},
		{"empty function", "doc\n-- broken.go --\nx // want a/b c|\n" + clean, "empty function"},
		{"or-here alone", "doc\nundecided: a/b c\n-- broken.go --\nx // or-here\n" + clean, "broken.go:1: or-here: no want"},
		{"or-here of two", "doc\n-- broken.go --\nx // want a/b c\ny // want a/d c\nz // or-here\n" + clean, "broken.go:3: or-here: two wants"},
		{"clean wants", "doc\n-- broken.go --\nx // want a/b c\n" + clean + "x // want a/b c\n", "clean.go:2: a clean program"},
		{"bad may", "doc\nmay: a/b\n-- broken.go --\nx // want a/b c\n" + clean, "line 2: may"},
		{"bare xfail", "doc\nxfail:\n-- broken.go --\nx // want a/b c\n" + clean, "xfail without a reason"},
	} {
		_, err := casetest.Parse("t/n.txtar", []byte(test.text))
		if err == nil || !strings.Contains(err.Error(), test.want) || !strings.HasPrefix(err.Error(), "t/n.txtar: ") {
			t.Errorf("%s: error %v, want one with %q and the file", test.name, err, test.want)
		}
	}
}

func TestLoad(t *testing.T) {
	dir := t.TempDir()
	if _, err := casetest.Load(dir); err == nil {
		t.Error("an empty folder is no corpus, but Load says nothing")
	}
	write := func(name, text string) {
		path := filepath.Join(dir, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	write("b/two.txtar", sample)
	write("a/one.txtar", sample)
	write("a/note.txt", "no case")
	cases, err := casetest.Load(dir)
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, c := range cases {
		names = append(names, c.String())
	}
	if diff := cmp.Diff([]string{"a/one", "b/two"}, names); diff != "" {
		t.Errorf("Load (-want +got):\n%s", diff)
	}
	write("c/bad.txtar", "nothing")
	if _, err := casetest.Load(dir); err == nil || !strings.Contains(err.Error(), "bad.txtar") {
		t.Errorf("Load with a bad file: %v", err)
	}
}

func TestCheck(t *testing.T) {
	c := parse(t, sample)
	const broken, clean = casetest.BrokenFile, casetest.CleanFile
	hit := casetest.Got{File: broken, Line: 7, Rule: "mutex", Claim: "balanced", Function: "(*Box[int, string]).Book", Verdict: casetest.Broken}
	open := casetest.Got{File: broken, Line: 1, Rule: "file", Claim: "closed", Function: "open", Verdict: casetest.Undecided}
	with := func(g casetest.Got, edit func(*casetest.Got)) casetest.Got { edit(&g); return g }
	const (
		noHit  = "missing: broken.go:6|7|8: broken mutex/balanced (*Box).Book|Run"
		noOpen = "missing: broken.go: undecided file/closed Open|open"
	)
	for _, test := range []struct {
		name string
		got  []casetest.Got
		want []string
	}{
		{"right", []casetest.Got{hit, open}, nil},
		{"twice is one", []casetest.Got{hit, hit, open}, nil},
		{"nothing", nil, []string{noOpen, noHit}},
		{"other line", []casetest.Got{with(hit, func(g *casetest.Got) { g.Line = 8 }), open}, nil},
		{"other function", []casetest.Got{with(hit, func(g *casetest.Got) { g.Function = "Run" }), open}, nil},
		{"holds is no finding", []casetest.Got{hit, open, with(hit, func(g *casetest.Got) { g.File, g.Verdict = clean, "holds" })}, nil},
		{"wrong line", []casetest.Got{with(hit, func(g *casetest.Got) { g.Line = 5 }), open},
			[]string{noHit, "unexpected: broken.go:5: broken mutex/balanced (*Box[int, string]).Book"}},
		{"wrong function", []casetest.Got{with(hit, func(g *casetest.Got) { g.Function = "Box.Book" }), open},
			[]string{noHit, "unexpected: broken.go:7: broken mutex/balanced Box.Book"}},
		{"wrong claim", []casetest.Got{with(hit, func(g *casetest.Got) { g.Claim = "not-early" }), open},
			[]string{noHit, "unexpected: broken.go:7: broken mutex/not-early (*Box[int, string]).Book"}},
		{"undecided is no finding", []casetest.Got{with(hit, func(g *casetest.Got) { g.Verdict = casetest.Undecided }), open},
			[]string{noHit, "unexpected: broken.go:7: undecided mutex/balanced (*Box[int, string]).Book"}},
		{"broken is not undecided", []casetest.Got{hit, with(open, func(g *casetest.Got) { g.Verdict = casetest.Broken })},
			[]string{noOpen, "unexpected: broken.go:1: broken file/closed open"}},
		{"may", []casetest.Got{hit, open, {File: broken, Line: 99, Rule: "mutex", Claim: "not-early", Function: "(*Desk).Leave", Verdict: casetest.Broken}}, nil},
		{"may is for broken.go", []casetest.Got{hit, open, {File: clean, Line: 9, Rule: "mutex", Claim: "not-early", Function: "(*Desk).Leave", Verdict: casetest.Broken}},
			[]string{"unexpected: clean.go:9: broken mutex/not-early (*Desk).Leave"}},
		{"finding in clean", []casetest.Got{hit, open, with(hit, func(g *casetest.Got) { g.File = clean })},
			[]string{"unexpected: clean.go:7: broken mutex/balanced (*Box[int, string]).Book"}},
	} {
		if diff := cmp.Diff(test.want, c.Check(test.got)); diff != "" {
			t.Errorf("%s (-want +got):\n%s", test.name, diff)
		}
	}
}

func TestEdit(t *testing.T) {
	const a = "package p\n\nimport \"os\"\n\nvar x = 1 // one\nvar y = 2\nvar z = 3\n"
	for _, test := range []struct {
		name, clean string
		want        int
	}{
		{"same", a, 0},
		{"comments, space and imports", "package p\nimport (\n\t\"io\"\n\t\"os\"\n)\nvar x = 1\n\n// more\nvar y = 2  \nvar z = 3\n", 0},
		{"one more", a + "var w = 4\n", 1},
		{"one less", "package p\nvar x = 1\nvar z = 3\n", 1},
		{"changed", "package p\nvar x = 1\nvar y = 5\nvar z = 3\n", 2},
		{"moved", "package p\nvar y = 2\nvar x = 1\nvar z = 3\n", 2},
		{"all", "package q\n", 5},
	} {
		c := casetest.Case{Broken: []byte(a), Clean: []byte(test.clean)}
		if got := c.Edit(); got != test.want {
			t.Errorf("%s: Edit = %d, want %d", test.name, got, test.want)
		}
	}
}
