package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"pathtally/frontend/load"
	"pathtally/properties"
	"pathtally/properties/judge"
	"pathtally/properties/report"
)

// rulesTry judges the examples of rules: each must break exactly the claims
// that it names.
//
// The examples are compiled in a module of their own, in a temporary folder,
// that sees this module from inside: its path lies below, so that internal
// packages can be imported, and its requirements are the same.
func rulesTry(ctx context.Context, s streams, f *rulesFlags, names []string) error {
	root, files, err := allRules(f)
	if err != nil {
		return err
	}
	infos := properties.ListRules(files)
	for _, n := range names {
		if !slices.ContainsFunc(infos, func(i properties.RuleInfo) bool { return i.Name == n }) {
			return &failure{stage: "usage", message: fmt.Sprintf("there is no rule %s; see pathtally rules list", n)}
		}
	}
	dir, err := os.MkdirTemp("", "pathtally-examples-")
	if err != nil {
		return &failure{stage: "rules", message: "a folder for the examples: " + err.Error()}
	}
	defer os.RemoveAll(dir)
	path, err := exampleModule(dir, root)
	if err != nil {
		return &failure{stage: "rules", message: err.Error()}
	}
	// First the imports alone: they are the build in which names are resolved.
	if err := writeImports(dir, files); err != nil {
		return &failure{stage: "rules", message: err.Error()}
	}
	cfg := load.Config{Dir: dir, Patterns: []string{"./..."}, Context: ctx, Env: []string{"GOWORK=off"}}
	prog, err := load.Load(cfg)
	if err != nil {
		return loadFailure(err)
	}
	book, err := properties.Resolve(files, prog.Universe(), properties.Options{})
	if err != nil {
		return ruleFailure(err)
	}
	rules, err := pick(book.Rules, names)
	if err != nil {
		return err
	}
	examples, err := writeExamples(dir, path, rules)
	if err != nil {
		return &failure{stage: "rules", message: err.Error()}
	}
	if prog, err = load.Load(cfg); err != nil {
		return loadFailure(err)
	}
	if book, err = properties.Resolve(files, prog.Universe(), properties.Options{}); err != nil {
		return ruleFailure(err)
	}
	if rules, err = pick(book.Rules, names); err != nil {
		return err
	}
	low := analyze(prog)
	low.Judge(book.Rules)
	width := 0
	for _, r := range rules {
		width = max(width, utf8.RuneCountInString(r.Name))
	}
	wrong := 0
	for _, r := range rules {
		bad, none := 0, true
		var m properties.Model
		var result *judge.Result
		for i := range examples {
			x := &examples[i]
			if x.rule != r.Name || x.pos != r.Pos {
				continue
			}
			if m == nil {
				m = low.Lower(r)
				result = judge.Merge([]*judge.RuleResult{judge.Judge(r, m, judge.Options{})})
			}
			none = false
			got, open := brokenIn(result, x.pkg)
			if slices.Equal(got, x.broken) && len(open) == 0 {
				continue
			}
			bad++
			fmt.Fprintf(s.out, "%s: %s\n", x.at, mismatch(r.Name, x.broken, got, open))
			if f.verbose {
				one := &judge.Result{}
				for _, fi := range result.Findings {
					if fi.Root.Package == x.pkg {
						one.Findings = append(one.Findings, fi)
					}
				}
				for _, o := range result.Open {
					if o.Root.Package == x.pkg {
						one.Open = append(one.Open, o)
					}
				}
				if err := report.Text(s.out, &report.Run{Result: one}, report.Options{Quiet: true, Verbose: true}); err != nil {
					return &failure{stage: "internal", message: "writing the result: " + err.Error()}
				}
			}
		}
		wrong += bad
		switch {
		case none:
			fmt.Fprintf(s.out, "%-*s  has no example\n", width, r.Name)
		case bad == 0:
			fmt.Fprintf(s.out, "%-*s  its examples come out as they say\n", width, r.Name)
		}
	}
	for _, sk := range book.Skipped {
		fmt.Fprintf(s.out, "%-*s  not tried: %s is not in the build\n", width, sk.Name, sk.Missing)
	}
	if wrong > 0 {
		return status(exitBroken)
	}
	return nil
}

func mismatch(rule string, want, got, open []string) string {
	list := func(l []string) string {
		if len(l) == 0 {
			return "nothing"
		}
		return strings.Join(l, ", ")
	}
	m := fmt.Sprintf("example of %s breaks %s, and says %s", rule, list(got), list(want))
	if len(open) > 0 {
		m += "; undecided: " + list(open)
	}
	return m
}

// brokenIn lists the claims that the roots of a package break, and those that
// are undecided there, sorted.
func brokenIn(r *judge.Result, pkg string) (broken, open []string) {
	for _, q := range r.Questions {
		if q.Root.Package != pkg {
			continue
		}
		switch q.Verdict {
		case judge.Broken:
			broken = append(broken, q.Claim)
		case judge.Undecided:
			open = append(open, q.Claim)
		}
	}
	slices.Sort(broken)
	slices.Sort(open)
	return slices.Compact(broken), slices.Compact(open)
}

var (
	moduleLine      = regexp.MustCompile(`(?m)^module[ \t]+("[^"]+"|\S+)`)
	relativeReplace = regexp.MustCompile(`=>[ \t]*\.\.?(/\S*)?`)
)

// exampleModule writes a go.mod that sees the module at root from inside, and
// gives its path.
func exampleModule(dir, root string) (path string, err error) {
	src := filepath.Join(root, "go.mod")
	data, err := os.ReadFile(src)
	if os.IsNotExist(err) {
		return "examples", os.WriteFile(filepath.Join(dir, "go.mod"), []byte("module examples\n\ngo 1.26\n"), 0o644)
	}
	if err != nil {
		return "", err
	}
	m := moduleLine.FindSubmatchIndex(data)
	if m == nil {
		return "", fmt.Errorf("go.mod: no module line")
	}
	outer := strings.Trim(string(data[m[2]:m[3]]), `"`)
	path = outer + "/pathtallyexamples"
	text := string(data[:m[2]]) + path + string(data[m[3]:])
	text = relativeReplace.ReplaceAllStringFunc(text, func(s string) string {
		rel := strings.TrimSpace(strings.TrimPrefix(s, "=>"))
		return "=> " + strconv.Quote(filepath.Join(root, rel))
	})
	out := []byte(text + fmt.Sprintf("\nrequire %s v0.0.0-00010101000000-000000000000\n\nreplace %s => %s\n", outer, outer, strconv.Quote(root)))
	if err := os.WriteFile(filepath.Join(dir, "go.mod"), out, 0o644); err != nil {
		return "", err
	}
	sum, err := os.ReadFile(filepath.Join(root, "go.sum"))
	if err == nil {
		err = os.WriteFile(filepath.Join(dir, "go.sum"), sum, 0o644)
	} else if os.IsNotExist(err) {
		err = nil
	}
	return path, err
}

// writeImports makes a package that imports all that rule files import, so that
// the names in them are in the build.
func writeImports(dir string, files []*properties.RuleFile) error {
	var paths []string
	for _, f := range files {
		for _, i := range f.Tree.Imports {
			paths = append(paths, i.Path.Value)
		}
	}
	slices.Sort(paths)
	var b strings.Builder
	b.WriteString("package imports\n\n")
	for _, p := range slices.Compact(paths) {
		fmt.Fprintf(&b, "import _ %q\n", p)
	}
	at := filepath.Join(dir, "imports")
	if err := os.Mkdir(at, 0o755); err != nil {
		return err
	}
	return os.WriteFile(filepath.Join(at, "imports.go"), []byte(b.String()), 0o644)
}

// tried is an example and the package that it became.
type tried struct {
	rule   string
	pos    string // of the rule
	at     string // of the example
	pkg    string
	broken []string // sorted
}

func writeExamples(dir, module string, rules []*properties.ResolvedRule) ([]tried, error) {
	var out []tried
	for k, r := range rules {
		for i, e := range properties.Examples(r) {
			name := fmt.Sprintf("rule%d/example%d", k+1, i+1)
			at := filepath.Join(dir, filepath.FromSlash(name))
			if err := os.MkdirAll(at, 0o755); err != nil {
				return nil, err
			}
			if err := os.WriteFile(filepath.Join(at, "example.go"), []byte(e.Source), 0o644); err != nil {
				return nil, err
			}
			broken := slices.Clone(e.Broken)
			slices.Sort(broken)
			out = append(out, tried{rule: r.Name, pos: r.Pos, at: e.Pos, pkg: module + "/" + name, broken: broken})
		}
	}
	return out, nil
}
