package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"pathtally/properties/accept"
	"pathtally/properties/report"
)

// A gate knows what is accepted and what a base revision has already.
type gate struct {
	file    *accept.File
	applied *accept.Applied
	root    string // of the module
	build   string // as entries name it
}

// openGate reads pathtally.accepted and the directives of the judged packages,
// and compares them with the result.
func openGate(j *judged, f *checkFlags, only onlyList) (*gate, error) {
	first := j.builds[0].prog
	g := &gate{file: &accept.File{}, root: first.ModuleDir, build: buildName(j, f)}
	var err error
	if first.ModulePath != "" || first.Workspace != "" {
		if g.file, err = accept.Read(first.ModuleDir); err != nil {
			return nil, acceptFailure(err)
		}
	}
	var ds []accept.Directive
	seen := map[string]bool{}
	claims := map[string]bool{}
	rules := map[string]bool{}
	packages := map[string]bool{}
	modules := map[string]string{} // module path: of the main modules
	for _, a := range j.builds {
		for _, r := range a.book.Rules {
			rules[r.Name] = true
			if r := only.claims(r); r != nil {
				for _, c := range r.Claims {
					claims[r.Name+"/"+c.Name] = true
				}
			}
			if len(only) > 0 {
				continue
			}
		}
		for _, p := range a.prog.Packages {
			if !p.Bodies || !p.Main {
				continue
			}
			packages[p.Path] = true
			modules[p.Module] = p.Module
			for _, file := range p.GoFiles {
				rel, err := filepath.Rel(a.prog.ModuleDir, file)
				if err != nil || seen[file] || strings.HasPrefix(rel, "..") {
					continue
				}
				seen[file] = true
				src, err := os.ReadFile(file)
				if err != nil {
					return nil, &failure{stage: "load", message: err.Error()}
				}
				found, err := accept.Directives(filepath.ToSlash(rel), src)
				if err != nil {
					return nil, acceptFailure(err)
				}
				ds = append(ds, found...)
			}
		}
	}
	scope := accept.Scope{
		Build: g.build,
		Package: func(path string) bool {
			return packages[path] || g.gone(path, first.ModulePath)
		},
		Claim: func(claim string) bool {
			rule, _, _ := strings.Cut(claim, "/")
			// With --only nothing is said of claims that were not asked about, with
			// an ID of one finding nothing of others.
			return !only.byID() && (claims[claim] || (len(only) == 0 && !rules[rule]))
		},
	}
	g.applied = accept.Apply(j.result, g.file, ds, scope)
	return g, nil
}

// gone says that a package of the module has no folder any more.
func (g *gate) gone(path, module string) bool {
	rest, ok := strings.CutPrefix(path, module+"/")
	if !ok {
		return false
	}
	_, err := os.Stat(filepath.Join(g.root, filepath.FromSlash(strings.TrimSuffix(rest, "_test"))))
	return os.IsNotExist(err)
}

// buildName says in entries which run has seen a finding.
func buildName(j *judged, f *checkFlags) string {
	if len(j.builds) != 1 {
		return ""
	}
	name := j.builds[0].name
	if f.tests {
		name += " with tests"
	}
	if f.deps {
		name += " with dependencies"
	}
	return name
}

// acceptFailure is about the file or a directive.
func acceptFailure(err error) error {
	f := &failure{stage: "accept", message: err.Error()}
	var at *accept.Error
	if errors.As(err, &at) {
		f.message = at.Text
		f.text = at.Error()
		f.places = []string{strings.TrimSuffix(at.Error(), ": "+at.Text)}
	}
	return f
}

// mark puts what is accepted and stale into the run.
func (g *gate) mark(run *report.Run) {
	run.Accepted = g.applied.Accepted
	run.Stale = g.applied.Stale
	run.Gated = len(g.file.Entries) > 0 || len(g.applied.Accepted) > 0 || len(g.applied.Stale) > 0 || run.Base != ""
}

// compare judges a base revision and takes what it has already out of the run.
// The rules are those of today, so that a new rule does not stop a change that
// broke nothing; where they mean nothing in the old code, its own rules stand.
func (g *gate) compare(ctx context.Context, f *checkFlags, patterns []string, only onlyList, bar *progress, j *judged, run *report.Run) error {
	bar.stage("base", 0, 1)
	old, err := checkOut(ctx, g.root, f.base)
	if err != nil {
		return err
	}
	defer old.remove()
	builds, err := parseBuilds(f)
	if err != nil {
		return err
	}
	dir, here, err := old.folder(f.dir, patterns)
	if err != nil {
		return err
	}
	known, open := map[string]bool{}, map[string]bool{}
	for i, b := range builds {
		if dir == "" {
			break // nothing of what is asked for was there
		}
		silent := &timings{}
		a, err := judgeOne(ctx, f, dir, here, b, j.builds[i].files, only, bar, silent)
		var fail *failure
		if errors.As(err, &fail) && fail.stage == "rules" {
			a, err = judgeOne(ctx, f, dir, here, b, nil, nil, bar, silent)
		}
		if err != nil {
			if errors.As(err, &fail) {
				text := fail.text
				if text == "" {
					text = fail.message
				}
				return &failure{stage: fail.stage, message: fmt.Sprintf("--base %s cannot be judged: %s", f.base, fail.message), places: fail.places,
					text: fmt.Sprintf("pathtally: --base %s cannot be judged:\n%s", f.base, text)}
			}
			return err
		}
		r := mergeOf(a)
		for i := range r.Findings {
			known[r.Findings[i].Fingerprint] = true
		}
		for i := range r.Open {
			open[r.Open[i].Fingerprint()] = true
		}
	}
	changed, err := old.changes(ctx)
	if err != nil {
		return err
	}
	run.Base = f.base
	run.Headlines = map[string]report.Headline{}
	narrowed := *run.Result
	narrowed.Findings, narrowed.Open = nil, nil
	for _, x := range run.Result.Findings {
		if known[x.Fingerprint] {
			run.KnownFindings++
			continue
		}
		if at, ok := changed.nearest(&x); ok {
			run.Headlines[x.Fingerprint] = at
		}
		narrowed.Findings = append(narrowed.Findings, x)
	}
	for _, o := range run.Result.Open {
		if open[o.Fingerprint()] {
			run.KnownOpen++
			continue
		}
		narrowed.Open = append(narrowed.Open, o)
	}
	run.Result = &narrowed
	return nil
}
