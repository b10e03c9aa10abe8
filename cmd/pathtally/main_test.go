package main

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/spf13/pflag"

	"pathtally/frontend/load"
	"pathtally/pds"
	"pathtally/properties"
)

// start runs the command and gives its status and outputs.
func start(t *testing.T, args ...string) (status int, out, errs string) {
	t.Helper()
	var o, e bytes.Buffer
	status = run(context.Background(), args, streams{out: &o, err: &e})
	return status, o.String(), e.String()
}

// module writes a module into a temporary folder.
func module(t *testing.T, files map[string]string) string {
	t.Helper()
	dir := t.TempDir()
	if _, ok := files["go.mod"]; !ok {
		files["go.mod"] = "module example/m\n\ngo 1.26\n"
	}
	for name, text := range files {
		at := filepath.Join(dir, filepath.FromSlash(name))
		if err := os.MkdirAll(filepath.Dir(at), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(at, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

// canned is a model with one start, whose path takes once and whose exit gives
// back or not; it stands in for the frontend where a test is about the command.
type canned struct {
	*pds.Table
	starts []properties.Start
}

func (c canned) Starts() []properties.Start { return c.starts }
func (c canned) Exit(pds.StateID) properties.Exit {
	return properties.Exit{Outcome: properties.Success}
}
func (c canned) Frame(pds.Head) properties.Frame {
	return properties.Frame{Func: c.starts[0].Root, Entry: true}
}
func (c canned) Doubt(pds.DoubtID) properties.Note {
	return properties.Note{Kind: "alias", Text: "which one"}
}
func (c canned) Assumptions() []properties.Note { return nil }
func (c canned) Step(pds.LabelID) properties.Step {
	return properties.Step{Kind: properties.StepEvent, Text: "mu.Lock()", Place: properties.Place{File: "m.go", Line: 5, Column: 2}}
}

type cannedLowerer struct{ kind string }

func (cannedLowerer) Judge([]*properties.ResolvedRule) {}

func (l cannedLowerer) Lower(r *properties.ResolvedRule) properties.Model {
	b := pds.NewBuilder(r.Counts...)
	root := properties.Func{Name: "F", Package: "example/m", Place: properties.Place{File: "m.go", Line: 4, Column: 1}}
	c := canned{starts: []properties.Start{{Head: b.Head("run", "F"), Root: root, Kind: "exported", Instance: "mu"}}}
	switch {
	case r.Name != "mutex":
		c.starts = nil
	case l.kind == "holds":
		b.Pop("run", "F", "ok")
	case l.kind == "broken":
		b.Pop("run", "F", "ok", pds.Adds("taken", 1), pds.Labelled("lock"))
	case l.kind == "undecided":
		b.Pop("run", "F", "ok", pds.Adds("taken", 1), pds.Labelled("lock"), pds.Doubts("which"))
	case l.kind == "bug":
		panic("no such thing")
	}
	c.Table = b.Table()
	return c
}

func withModel(t *testing.T, kind string) {
	t.Helper()
	old := analyze
	analyze = func(*load.Program) lowerer { return cannedLowerer{kind} }
	t.Cleanup(func() { analyze = old })
}

var smallModule = map[string]string{"m.go": "package m\n\nimport \"sync\"\n\nfunc F(mu *sync.Mutex) { mu.Lock() }\n"}

func TestExitStatuses(t *testing.T) {
	for _, c := range []struct {
		kind string
		args []string
		want int
	}{
		{"holds", nil, exitHolds},
		{"broken", nil, exitBroken},
		{"undecided", nil, exitUndecided},
		{"undecided", []string{"--undecided", "note"}, exitHolds},
		{"undecided", []string{"--undecided", "never"}, exitFailed},
		{"holds", []string{"--format", "xml"}, exitFailed},
		{"holds", []string{"--no-such-flag"}, exitFailed},
		{"holds", []string{"--only", "mutx"}, exitFailed},
		{"holds", []string{"--only", "mutex/even"}, exitFailed},
		{"holds", []string{"--only", "mutex/"}, exitFailed},
		{"broken", []string{"--only", "mutex/not-early"}, exitHolds},
		{"broken", []string{"--only", "mutex/balanced:ffffffffffffffff"}, exitHolds},
		{"broken", []string{"--about", "F"}, exitBroken},
		{"bug", nil, exitFailed},
	} {
		withModel(t, c.kind)
		dir := module(t, smallModule)
		for _, format := range []string{"text", "json"} {
			if slices.Contains(c.args, "--format") || (slices.Contains(c.args, "--about") && format == "json") {
				continue
			}
			args := append([]string{"check", "-C", dir, "--format", format}, c.args...)
			got, out, errs := start(t, args...)
			if got != c.want {
				t.Errorf("%s %v: status %d, want %d\n%s%s", c.kind, args, got, c.want, out, errs)
			}
			if (errs != "") != (got == exitFailed) && !strings.Contains(errs, "is not among the findings") {
				t.Errorf("%s %v: status %d and standard error %q", c.kind, args, got, errs)
			}
			if format == "json" {
				var v map[string]any
				if err := json.Unmarshal([]byte(out), &v); err != nil {
					t.Errorf("%v: output is no JSON: %v\n%s", args, err, out)
				} else if _, isError := v["error"]; isError != (got == exitFailed) {
					t.Errorf("%v: status %d and error member %v", args, got, isError)
				}
			}
		}
	}
}

func TestErrorsNameTheirPlace(t *testing.T) {
	withModel(t, "holds")
	for _, c := range []struct {
		name  string
		files map[string]string
		want  string
		stage string
	}{
		{"type error", map[string]string{"m.go": "package m\n\nvar x int = \"one\"\n"}, "m.go:3:13", "load"},
		{"syntax error", map[string]string{"m.go": "package m\n\nfunc {\n"}, "m.go:3:6", "load"},
		{"rule error", map[string]string{"m.go": smallModule["m.go"], "pathtally.rules": "import \"sync\"\n\nrule r {\n  each m *sync.Mutex stays\n  count a: call (*sync.Mutex).Lok on m\n  claim c at end: a == 0\n}\n"}, "pathtally.rules:5:", "rules"},
	} {
		dir := module(t, c.files)
		got, out, errs := start(t, "check", "-C", dir, "--format", "json")
		if got != exitFailed || !strings.Contains(errs, c.want) {
			t.Errorf("%s: status %d, standard error without %s:\n%s", c.name, got, c.want, errs)
		}
		var v struct {
			Error struct {
				Stage  string
				Places []string
			}
		}
		if err := json.Unmarshal([]byte(out), &v); err != nil {
			t.Fatalf("%s: %v\n%s", c.name, err, out)
		}
		if v.Error.Stage != c.stage || len(v.Error.Places) == 0 || !strings.HasPrefix(v.Error.Places[0], c.want) {
			t.Errorf("%s: %+v", c.name, v.Error)
		}
	}
}

// Each flag is in the help text and each flag of the text exists.
func TestHelpNamesTheFlags(t *testing.T) {
	root := command(context.Background(), streams{})
	for _, c := range []struct {
		path []string
		text string
	}{{[]string{"check"}, checkHelp}, {[]string{"accept"}, acceptHelp}, {[]string{"count"}, countHelp}, {[]string{"export"}, exportHelp}, {[]string{"join"}, joinHelp}, {[]string{"rules", "try"}, rulesHelp}} {
		cmd, _, err := root.Find(c.path)
		if err != nil {
			t.Fatal(err)
		}
		// Examples may show another command.
		var own []string
		for _, line := range strings.Split(c.text, "\n") {
			if example := strings.Fields(line); len(example) < 2 || example[0] != "pathtally" || example[1] == c.path[0] {
				own = append(own, line)
			}
		}
		words := strings.FieldsFunc(strings.Join(own, "\n"), func(r rune) bool { return !(r == '-' || r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z') })
		cmd.Flags().VisitAll(func(f *pflag.Flag) {
			if f.Hidden || f.Name == "help" {
				return
			}
			if !slices.Contains(words, "--"+f.Name) && (f.Shorthand == "" || !slices.Contains(words, "-"+f.Shorthand)) {
				t.Errorf("%v: help has no --%s", c.path, f.Name)
			}
		})
		for _, w := range words {
			if name, ok := strings.CutPrefix(w, "--"); ok && name != "" && cmd.Flags().Lookup(name) == nil {
				t.Errorf("%v: help has --%s, which is no flag", c.path, name)
			}
		}
	}
	for _, name := range []string{"check", "accept", "rules", "join", "completion"} {
		if !strings.Contains(rootHelp, "pathtally "+name) {
			t.Errorf("the help has no command %s", name)
		}
	}
	for _, c := range root.Commands() {
		if !c.Hidden && !strings.Contains(rootHelp, "pathtally "+c.Name()) {
			t.Errorf("command %s is in no help", c.Name())
		}
	}
}

func TestJobsDoNotChangeTheOutput(t *testing.T) {
	withModel(t, "broken")
	dir := module(t, smallModule)
	var first string
	for _, jobs := range []string{"1", "2", "8"} {
		_, out, _ := start(t, "check", "-C", dir, "--jobs", jobs)
		if first == "" {
			first = out
		}
		if out != first {
			t.Errorf("--jobs %s:\n%s\nwant:\n%s", jobs, out, first)
		}
	}
	if !strings.Contains(first, "F can return with mu still taken") {
		t.Errorf("no finding:\n%s", first)
	}
}

func TestSameFunction(t *testing.T) {
	fn := properties.Func{Name: "(*Desk).Book", Package: "example/harbour/berth"}
	for name, want := range map[string]bool{
		"Book": true, "Desk.Book": true, "(*Desk).Book": true, "berth.(*Desk).Book": true, "example/harbour/berth.(*Desk).Book": true,
		"ook": false, "Desk": false, "(*Desk).Boo": false, "other.(*Desk).Book": false,
	} {
		if got := sameFunction(name, fn); got != want {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
	}
}

func TestExampleModule(t *testing.T) {
	root := module(t, map[string]string{"go.mod": "module example/m // home\n\ngo 1.26\n\nreplace example/x => ../x\n", "m.go": "package m\n"})
	dir := t.TempDir()
	path, err := exampleModule(dir, root)
	if err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(filepath.Join(dir, "go.mod"))
	if err != nil {
		t.Fatal(err)
	}
	if path != "example/m/pathtallyexamples" || !strings.Contains(string(text), "module example/m/pathtallyexamples") ||
		strings.Contains(string(text), "../x") || !strings.Contains(string(text), "replace example/m => ") {
		t.Errorf("path %s, go.mod:\n%s", path, text)
	}
}

func TestRulesCommands(t *testing.T) {
	dir := module(t, map[string]string{"m.go": smallModule["m.go"], "pathtally.rules": "import \"sync\"\n\n// Locks are even.\nrule own {\n  each m *sync.Mutex stays\n  count a: call (*sync.Mutex).Lock on m\n  count b: call (*sync.Mutex).Unlock on m\n  claim c at end: a == b\n}\n"})
	status, out, errs := start(t, "rules", "list", "-C", dir)
	if status != exitHolds || !strings.Contains(out, "own") || !strings.Contains(out, "Locks are even.") || !strings.Contains(out, "mutex") {
		t.Errorf("list: %d\n%s%s", status, out, errs)
	}
	if status, out, _ = start(t, "rules", "show", "own", "-C", dir); status != exitHolds || !strings.Contains(out, "claim c at end: a == b") {
		t.Errorf("show: %d\n%s", status, out)
	}
	if status, _, errs = start(t, "rules", "show", "mutx", "-C", dir); status != exitFailed || !strings.Contains(errs, "there is mutex") {
		t.Errorf("show of an unknown rule: %d %s", status, errs)
	}
	if status, _, errs = start(t, "rules", "try", "nosuch", "-C", dir); status != exitFailed || !strings.Contains(errs, "nosuch") {
		t.Errorf("try of an unknown rule: %d %s", status, errs)
	}
}
