package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"pathtally/frontend/load"
	"pathtally/properties"
	"pathtally/properties/judge"
	"pathtally/properties/report"
)

// A build is one choice of files: system, processor and tags.
type build struct {
	env  []string // GOOS=..., GOARCH=...; nil leaves the environment's
	tags string
}

// parseBuilds reads --build OS/ARCH[,tags=a,b]; without it there is one build,
// that of the environment.
func parseBuilds(f *checkFlags) ([]build, error) {
	if len(f.builds) == 0 {
		return []build{{tags: f.tags}}, nil
	}
	var out []build
	for _, text := range f.builds {
		platform, rest, more := strings.Cut(text, ",")
		goos, goarch, ok := strings.Cut(platform, "/")
		tags, isTags := strings.CutPrefix(rest, "tags=")
		if !ok || goos == "" || goarch == "" || strings.Contains(goarch, "/") || (more && (!isTags || tags == "")) {
			return nil, usage("--build %s: write OS/ARCH or OS/ARCH,tags=a,b, such as linux/amd64", text)
		}
		out = append(out, build{env: []string{"GOOS=" + goos, "GOARCH=" + goarch}, tags: tags})
	}
	return out, nil
}

// An analysis is one build, judged.
type analysis struct {
	prog    *load.Program
	book    *properties.RuleBook
	files   []*properties.RuleFile
	results []*judge.RuleResult
	led     ledger
	name    string // "linux/amd64", with its tags
}

// A judged is all builds of a run.
type judged struct {
	builds []*analysis
	result *judge.Result
	in     map[string][]int // by fingerprint: the builds that a finding occurs in
}

// judgeBuilds loads and judges each build, one after the other, so that memory
// holds one program at a time beside the results.
func judgeBuilds(ctx context.Context, f *checkFlags, patterns []string, only onlyList, bar *progress, times *timings) (*judged, error) {
	builds, err := parseBuilds(f)
	if err != nil {
		return nil, err
	}
	out := &judged{in: map[string][]int{}}
	var results []*judge.Result
	for _, b := range builds {
		a, err := judgeOne(ctx, f, f.dir, patterns, b, nil, only, bar, times)
		if err != nil {
			return nil, err
		}
		if slices.ContainsFunc(out.builds, func(o *analysis) bool { return o.name == a.name }) {
			return nil, usage("--build %s is there twice", a.name)
		}
		r := mergeOf(a)
		for i := range r.Findings {
			p := r.Findings[i].Fingerprint
			out.in[p] = append(out.in[p], len(out.builds))
		}
		results = append(results, r)
		out.builds = append(out.builds, a)
	}
	out.result = judge.Union(results)
	return out, nil
}

// judgeOne loads and judges one build of the module around dir. rules, if not
// nil, stand in for the rule files on disk.
func judgeOne(ctx context.Context, f *checkFlags, dir string, patterns []string, b build, rules []*properties.RuleFile, only onlyList, bar *progress, times *timings) (*analysis, error) {
	cfg := load.Config{Dir: dir, Patterns: patterns, Deps: f.deps, Tests: f.tests, Tags: b.tags, Env: b.env, Partial: f.partial, Workers: f.jobs, Progress: bar.stage, Context: ctx}
	prog, book, files, err := loadAll(f, cfg, rules, bar, times)
	if err != nil {
		return nil, err
	}
	if err := only.known(book); err != nil {
		return nil, err
	}
	results, led, err := judgeAll(prog, book, only, f, bar, times)
	if err != nil {
		return nil, err
	}
	name := prog.GOOS + "/" + prog.GOARCH
	if b.tags != "" {
		name += ",tags=" + b.tags
	}
	return &analysis{prog, book, files, results, led, name}, nil
}

// reportRun puts the numbers around the result.
func (j *judged) reportRun(patterns []string) *report.Run {
	run := j.header(patterns)
	run.Result, run.FindingBuilds = j.result, j.in
	var leds []ledger
	for _, a := range j.builds {
		leds = append(leds, a.led)
	}
	met(run, leds)
	return run
}

// met says how many functions meet an event, and which rules of the module meet
// none in any build.
func met(run *report.Run, leds []ledger) {
	functions, idle := map[string]bool{}, map[string]int{}
	run.WithEvents = -1
	for _, l := range leds {
		for _, fn := range l.functions {
			functions[fn] = true
		}
		for _, r := range l.idle {
			idle[r.Name]++
		}
		if l.withEvents >= 0 {
			run.WithEvents = 0
		}
	}
	if run.WithEvents == 0 {
		run.WithEvents = len(functions)
	}
	for _, r := range leds[0].idle {
		if idle[r.Name] == len(leds) {
			run.NotJudged = append(run.NotJudged, report.Left{What: "rule " + r.Name, Why: "no call path meets its events"})
		}
	}
}

// header is the part of a report that does not depend on verdicts. Packages and
// functions of several builds are counted once.
func (j *judged) header(patterns []string) *report.Run {
	first := j.builds[0]
	run := &report.Run{Version: version, Module: first.prog.ModulePath, Source: sourceOf(first.prog), RuleTexts: map[string]report.RuleText{}}
	sets := map[string]bool{}
	packages, functions := map[string]bool{}, map[string]bool{}
	type gap struct{ what, why string }
	gaps := map[string]map[string]bool{} // why, then which
	add := func(why, which string) {
		if gaps[why] == nil {
			gaps[why] = map[string]bool{}
		}
		gaps[why][which] = true
	}
	calls, cut := 0, map[string]bool{}
	for _, a := range j.builds {
		run.Builds = append(run.Builds, a.name)
		for _, rule := range a.book.Rules {
			if rule.Set != "" && !sets[rule.Set] {
				sets[rule.Set] = true
				run.Rulesets = append(run.Rulesets, report.Ruleset{Name: rule.Set, Version: version})
			}
			for _, c := range rule.Claims {
				run.RuleTexts[rule.Name+"/"+c.Name] = report.RuleText{Doc: rule.Doc, Formula: c.Text, Reason: c.Reason, Advice: c.Advice}
			}
		}
		inC := 0
		for _, p := range a.prog.Packages {
			if !p.Bodies {
				continue
			}
			packages[p.Path] = true
			for _, l := range p.LeftOut {
				// Tests that nobody asked for are no gap.
				if l.Why != "tests are not asked for" {
					add(l.Why, l.File)
				}
			}
			inC += p.CCalls
			for _, c := range p.Cut {
				cut[fmt.Sprint(p.Path, c)] = true
			}
		}
		calls = max(calls, inC)
		for _, fn := range a.prog.Functions() {
			functions[fn.String()+fmt.Sprint(a.prog.Fset.Position(fn.Pos()))] = true
		}
	}
	// A file that another build has read is no gap.
	for _, a := range j.builds {
		if len(j.builds) == 1 {
			break
		}
		for _, p := range a.prog.Packages {
			if p.Bodies {
				for _, file := range p.GoFiles {
					for _, files := range gaps {
						delete(files, file)
					}
				}
			}
		}
	}
	run.Packages, run.Functions = len(packages), len(functions)
	if len(j.builds) == 1 {
		run.Functions = len(first.prog.Functions())
	}
	slices.SortFunc(run.Rulesets, func(a, b report.Ruleset) int { return strings.Compare(a.Name, b.Name) })
	left := func(n int, one, many, w string) {
		if n == 1 {
			run.NotJudged = append(run.NotJudged, report.Left{What: "1 " + one, Why: w})
		} else if n > 1 {
			run.NotJudged = append(run.NotJudged, report.Left{What: fmt.Sprintf("%d %s", n, many), Why: w})
		}
	}
	var whys []string
	for w := range gaps {
		whys = append(whys, w)
	}
	slices.Sort(whys)
	for _, w := range whys {
		left(len(gaps[w]), "file", "files", w)
	}
	left(calls, "call into C", "calls into C", "C code is out of sight")
	left(len(cut), "function", "functions", "its dealings with C could not be made out")
	for _, name := range otherModules(first.prog, patterns) {
		run.NotJudged = append(run.NotJudged, report.Left{What: "module " + name, Why: "another module; name it by -C"})
	}
	for _, p := range first.prog.Packages {
		if len(p.Errors) > 0 || p.Broken {
			run.NotJudged = append(run.NotJudged, report.Left{What: "package " + p.Path, Why: "it has errors"})
		}
	}
	if len(patterns) == 1 && !strings.HasSuffix(patterns[0], "...") {
		run.Target = patterns[0]
	}
	return run
}

// sourceOf gives reports the text of files as findings name them.
func sourceOf(prog *load.Program) func(string) ([]byte, error) {
	return func(name string) ([]byte, error) {
		return os.ReadFile(filepath.Join(prog.ModuleDir, filepath.FromSlash(name)))
	}
}

// leftOut lists the packages that --partial left out, with their errors.
func (j *judged) leftOut() string {
	var b strings.Builder
	seen := map[string]bool{}
	for _, a := range j.builds {
		for _, p := range a.prog.Packages {
			if (len(p.Errors) == 0 && !p.Broken) || seen[p.Path] {
				continue
			}
			seen[p.Path] = true
			if b.Len() == 0 {
				b.WriteString("pathtally: not judged, since they have errors or need packages that do:\n")
			}
			fmt.Fprintf(&b, "    %s\n", p.Path)
			for _, e := range p.Errors {
				fmt.Fprintf(&b, "        %s\n", e)
			}
		}
	}
	return b.String()
}

// mergeOf puts the rules of a build together; with --part some were not judged.
func mergeOf(a *analysis) *judge.Result {
	return judge.Merge(slices.DeleteFunc(slices.Clone(a.results), func(r *judge.RuleResult) bool { return r == nil }))
}

// otherModules lists the folders of modules below this one that a pattern for
// everything below does not reach, as the go command has it.
func otherModules(prog *load.Program, patterns []string) []string {
	if prog.ModulePath == "" || !slices.Contains(patterns, "./...") {
		return nil
	}
	left, err := prog.Unjudged()
	if err != nil {
		return nil // what cannot be read is no module that anybody can judge
	}
	var out []string
	for _, u := range left {
		if u.Why == "another module" {
			out = append(out, u.Folder)
		}
	}
	return out
}
