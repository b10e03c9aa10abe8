package main

import (
	"fmt"
	"path/filepath"
	"slices"
	"strings"

	"pathtally/properties/report"
)

// ledgerText lists what was judged and what was not: tab-separated, sorted, with
// a total per build that adds up, so that two ledgers can be compared line by
// line.
func (j *judged) ledgerText(run *report.Run) string {
	var b strings.Builder
	fmt.Fprintf(&b, "ledger\t1\nmodule\t%s\n", run.Module)
	for _, a := range j.builds {
		prog := a.prog
		fmt.Fprintf(&b, "build\t%s\n", a.name)
		met := map[string]int{}
		for _, fn := range a.led.functions {
			pkg, _, _ := strings.Cut(fn, "\x00")
			met[pkg]++
		}
		functions := map[string]int{}
		for _, fn := range prog.Functions() {
			if fn.Pkg != nil {
				functions[fn.Pkg.Pkg.Path()]++
			} else {
				functions[""]++
			}
		}
		starts, questions := map[string]map[string]bool{}, map[string]int{}
		result := mergeOf(a)
		for i := range result.Questions {
			q := &result.Questions[i]
			if starts[q.Root.Package] == nil {
				starts[q.Root.Package] = map[string]bool{}
			}
			starts[q.Root.Package][fmt.Sprint(q.Root.Name, q.Root.Place)] = true
			questions[q.Root.Package]++
		}
		var lines []string
		total := [6]int{}
		count := func(v [6]int) string {
			for i := range v {
				total[i] += v[i]
			}
			return columns(v, a.led.withEvents >= 0)
		}
		// Functions, starts and questions may belong to packages that hold no file
		// of their own here; what is counted once has one line.
		listed := map[string]bool{}
		rel := func(file string) string {
			if r, err := filepath.Rel(prog.ModuleDir, file); err == nil && !strings.HasPrefix(r, "..") {
				return filepath.ToSlash(r)
			}
			return filepath.Base(file)
		}
		var gaps []string
		packages := 0
		for _, p := range prog.Packages {
			if !p.Bodies {
				if len(p.Errors) > 0 || p.Broken {
					gaps = append(gaps, fmt.Sprintf("left\t%s\t\tit has errors, or needs a package that has", p.Path))
				}
				continue
			}
			if listed[p.Path] {
				continue
			}
			packages++
			listed[p.Path] = true
			lines = append(lines, fmt.Sprintf("package\t%s\t%s", p.Path, count([6]int{len(p.GoFiles), len(p.LeftOut), functions[p.Path], met[p.Path], len(starts[p.Path]), questions[p.Path]})))
			for _, l := range p.LeftOut {
				gaps = append(gaps, fmt.Sprintf("left\t%s\t%s\t%s", p.Path, rel(l.File), l.Why))
			}
			if p.CCalls > 0 {
				gaps = append(gaps, fmt.Sprintf("left\t%s\t\t%d calls into C", p.Path, p.CCalls))
			}
		}
		rest := map[string]bool{}
		for pkg := range functions {
			rest[pkg] = true
		}
		for pkg := range met {
			rest[pkg] = true
		}
		for pkg := range questions {
			rest[pkg] = true
		}
		for pkg := range rest {
			if !listed[pkg] {
				name := pkg
				if name == "" {
					name = "(instances of generics and wrappers)"
				}
				lines = append(lines, fmt.Sprintf("package\t%s\t%s", name, count([6]int{0, 0, functions[pkg], met[pkg], len(starts[pkg]), questions[pkg]})))
			}
		}
		if prog.ModulePath != "" {
			if folders, err := prog.Unjudged(); err == nil {
				for _, u := range folders {
					files := ""
					if u.Files > 0 { // of another module nothing is read
						files = fmt.Sprintf("files %d", u.Files)
					}
					gaps = append(gaps, fmt.Sprintf("folder\t%s\t%s\t%s", u.Folder, files, u.Why))
				}
			}
		}
		slices.Sort(lines)
		slices.Sort(gaps)
		for _, l := range lines {
			b.WriteString(l + "\n")
		}
		for _, l := range gaps {
			b.WriteString(l + "\n")
		}
		fmt.Fprintf(&b, "total\t%d packages\t%s\n", packages, columns(total, a.led.withEvents >= 0))
	}
	return b.String()
}

// columns prints files, files left out, functions, those that meet an event (if
// known), starting points and questions.
func columns(v [6]int, events bool) string {
	met := ""
	if events {
		met = fmt.Sprintf("\twith events %d", v[3])
	}
	return fmt.Sprintf("files %d\tleft out %d\tfunctions %d%s\tstarts %d\tquestions %d", v[0], v[1], v[2], met, v[4], v[5])
}
