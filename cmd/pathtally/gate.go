package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"pathtally/properties/accept"
	"pathtally/properties/report"
)

// gateData is all that decides what is accepted and what is known, apart from
// the result itself. Parts of a run carry it to join.
type gateData struct {
	File       string // pathtally.accepted as text, "" without one
	Directives []accept.Directive
	Build      string   // as entries name it
	Packages   []string // judged, or gone; sorted
	Claims     []string // RULE/CLAIM that were judged; sorted
	Rules      []string // names of all rules; sorted
	Narrow     bool     // --only names something: nothing is said of other claims
	ByID       bool     // --only names single findings
	Base       *baseData
}

// baseData is what a base revision has already, and which lines differ from it.
type baseData struct {
	Revision    string
	Known, Open []string // fingerprints, sorted
	Changed     changes
}

// readGate reads pathtally.accepted and the directives of the judged packages.
func readGate(j *judged, f *checkFlags, only onlyList) (*gateData, error) {
	first := j.builds[0].prog
	d := &gateData{Build: buildName(j, f), Narrow: len(only) > 0, ByID: only.byID()}
	file := &accept.File{}
	if first.ModulePath != "" || first.Workspace != "" {
		var err error
		if file, err = accept.Read(first.ModuleDir); err != nil {
			return nil, acceptFailure(err)
		}
	}
	if len(file.Entries) > 0 {
		text, err := os.ReadFile(filepath.Join(first.ModuleDir, accept.FileName))
		if err != nil {
			return nil, acceptFailure(err)
		}
		d.File = string(text)
	}
	seen := map[string]bool{}
	for _, a := range j.builds {
		for _, r := range a.book.Rules {
			d.Rules = append(d.Rules, r.Name)
			if r := only.claims(r); r != nil {
				for _, c := range r.Claims {
					d.Claims = append(d.Claims, r.Name+"/"+c.Name)
				}
			}
		}
		for _, p := range a.prog.Packages {
			if !p.Bodies || !p.Main {
				continue
			}
			d.Packages = append(d.Packages, p.Path)
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
				d.Directives = append(d.Directives, found...)
			}
		}
	}
	for _, e := range file.Entries {
		if gone(first.ModuleDir, e.Package, first.ModulePath) {
			d.Packages = append(d.Packages, e.Package)
		}
	}
	for _, list := range []*[]string{&d.Packages, &d.Claims, &d.Rules} {
		slices.Sort(*list)
		*list = slices.Compact(*list)
	}
	return d, nil
}

// apply marks what is accepted, stale and known in a run.
func (d *gateData) apply(run *report.Run) (*gate, error) {
	file, err := accept.Parse(accept.FileName, d.File)
	if err != nil {
		return nil, acceptFailure(err)
	}
	has := func(list []string, s string) bool { _, ok := slices.BinarySearch(list, s); return ok }
	g := &gate{file: file, build: d.Build}
	g.applied = accept.Apply(run.Result, file, d.Directives, accept.Scope{
		Build:   d.Build,
		Package: func(path string) bool { return has(d.Packages, path) },
		Claim: func(claim string) bool {
			// With --only nothing is said of claims that were not asked about, with
			// the ID of one finding nothing of others. A rule that is gone is stale.
			rule, _, _ := strings.Cut(claim, "/")
			return !d.ByID && (has(d.Claims, claim) || (!d.Narrow && !has(d.Rules, rule)))
		},
	})
	run.Accepted, run.Stale = g.applied.Accepted, g.applied.Stale
	run.Gated = len(file.Entries) > 0 || len(run.Accepted) > 0 || len(run.Stale) > 0 || d.Base != nil
	if d.Base != nil {
		d.Base.apply(run)
	}
	return g, nil
}

// apply takes what the base has already out of a run, and heads what is left
// with the changed line nearest to its cause.
func (b *baseData) apply(run *report.Run) {
	has := func(list []string, s string) bool { _, ok := slices.BinarySearch(list, s); return ok }
	run.Base = b.Revision
	run.Headlines = map[string]report.Headline{}
	narrowed := *run.Result
	narrowed.Findings, narrowed.Open = nil, nil
	for _, x := range run.Result.Findings {
		if has(b.Known, x.Fingerprint) {
			run.KnownFindings++
			continue
		}
		if at, ok := b.Changed.nearest(&x); ok {
			run.Headlines[x.Fingerprint] = at
		}
		narrowed.Findings = append(narrowed.Findings, x)
	}
	for _, o := range run.Result.Open {
		if has(b.Open, o.Fingerprint()) {
			run.KnownOpen++
			continue
		}
		narrowed.Open = append(narrowed.Open, o)
	}
	run.Result = &narrowed
}

// A gate is what is accepted in a run.
type gate struct {
	file    *accept.File
	applied *accept.Applied
	root    string // of the module; set where the file is written
	build   string // as entries name it
}

// gone says that a package of the module has no folder any more.
func gone(root, path, module string) bool {
	rest, ok := strings.CutPrefix(path, module+"/")
	if !ok {
		return false
	}
	_, err := os.Stat(filepath.Join(root, filepath.FromSlash(strings.TrimSuffix(rest, "_test"))))
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

// baseOf judges a base revision. The rules are those of today, so that a new
// rule does not stop a change that broke nothing; where they mean nothing in the
// old code, its own rules stand. The answer is nil without --base.
func baseOf(ctx context.Context, f *checkFlags, patterns []string, only onlyList, bar *progress, j *judged) (*baseData, error) {
	bar.stage("base", 0, 1)
	old, err := checkOut(ctx, j.builds[0].prog.ModuleDir, f.base)
	if err != nil {
		return nil, err
	}
	defer old.remove()
	builds, err := parseBuilds(f)
	if err != nil {
		return nil, err
	}
	dir, here, err := old.folder(f.dir, patterns)
	if err != nil {
		return nil, err
	}
	out := &baseData{Revision: f.base}
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
				return nil, &failure{stage: fail.stage, message: fmt.Sprintf("--base %s cannot be judged: %s", f.base, fail.message), places: fail.places,
					text: fmt.Sprintf("pathtally: --base %s cannot be judged:\n%s", f.base, text)}
			}
			return nil, err
		}
		r := mergeOf(a)
		for i := range r.Findings {
			out.Known = append(out.Known, r.Findings[i].Fingerprint)
		}
		for i := range r.Open {
			out.Open = append(out.Open, r.Open[i].Fingerprint())
		}
	}
	slices.Sort(out.Known)
	slices.Sort(out.Open)
	if out.Changed, err = old.changes(ctx); err != nil {
		return nil, err
	}
	return out, nil
}
