package frontend_test

import (
	"fmt"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"

	"pathtally/frontend"
	"pathtally/frontend/load"
	"pathtally/pds"
	"pathtally/properties"
	"pathtally/properties/judge"
)

type bottomUp interface {
	properties.Model
	properties.BottomUp
}

// asked is a model that compares each answer with the first one to the same
// question, and asks each question twice.
type asked struct {
	bottomUp
	t     *testing.T
	first map[pds.Head][]pds.Rule
}

func (a *asked) Rules(h pds.Head, dst []pds.Rule) []pds.Rule {
	got := a.bottomUp.Rules(h, nil)
	want, known := a.first[h]
	if !known {
		want = a.bottomUp.Rules(h, nil)
		a.first[h] = slices.Clone(want)
		for _, r := range want {
			if r.Label != 0 {
				a.checkStep(a.Step(r.Label))
			}
		}
	}
	if !slices.EqualFunc(got, want, func(x, y pds.Rule) bool { return reflect.DeepEqual(x, y) }) {
		a.t.Errorf("head %v: rules %v, and before %v", h, got, want)
	}
	return append(dst, got...)
}

func (a *asked) checkStep(s properties.Step) {
	if strings.TrimSpace(s.Text) == "" || s.Kind == "" || s.Place.Line == 0 {
		a.t.Errorf("step without text, kind or place: %+v", s)
	}
	if strings.Contains(s.Text, "$") || strings.Contains(s.Text, "\n") {
		a.t.Errorf("step text that is not from the source: %q", s.Text)
	}
}

// TestRulesDeterministic: equal heads have equal rules whenever they are asked
// about, two runs over one program give the same answers, and every step that
// is shown has a text and a place.
func TestRulesDeterministic(t *testing.T) {
	dir, err := filepath.Abs("../testdata/harbour")
	if err != nil {
		t.Fatal(err)
	}
	prog, err := load.Load(load.Config{Dir: dir, Patterns: []string{"./..."}})
	if err != nil {
		t.Fatal(err)
	}
	run := func() (string, int) {
		var b strings.Builder
		heads := 0
		var results []*judge.RuleResult
		sh := frontend.Analyze(prog)
		book, err := properties.Resolve(properties.BuiltInRules(), prog.Universe(), properties.Options{})
		if err != nil {
			t.Fatal(err)
		}
		for _, r := range book.Rules {
			m := &asked{bottomUp: sh.Lower(r).(bottomUp), t: t, first: map[pds.Head][]pds.Rule{}}
			results = append(results, judge.Judge(r, m, judge.Options{State: func(claim, pkg string) properties.State {
				return book.State(r, claim, properties.PackageRef{Path: pkg, Dir: "."})
			}}))
			heads += len(m.first)
		}
		for _, f := range judge.Merge(results).Findings {
			fmt.Fprintf(&b, "%s %s %s %v %v\n", f.Rule, f.Claim, f.Blame.Name, f.Cause, f.Path)
		}
		return b.String(), heads
	}
	one, heads := run()
	two, _ := run()
	if one != two {
		t.Errorf("two runs differ:\n%s\n%s", one, two)
	}
	if heads < 1000 || strings.Count(one, "\n") < 20 {
		t.Errorf("only %d heads and %d findings: the test looks at too little", heads, strings.Count(one, "\n"))
	}
}
