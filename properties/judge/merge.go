package judge

import (
	"cmp"
	"slices"
	"strings"

	"pathtally/properties"
)

func comparePlace(a, b properties.Place) int {
	return cmp.Or(strings.Compare(a.File, b.File), cmp.Compare(a.Line, b.Line), cmp.Compare(a.Column, b.Column))
}

func compareNote(a, b properties.Note) int {
	return cmp.Or(comparePlace(a.Place, b.Place), strings.Compare(a.Kind, b.Kind), strings.Compare(a.Text, b.Text))
}

func sortedNotes(n []properties.Note) []properties.Note {
	slices.SortFunc(n, compareNote)
	return slices.Compact(n)
}

// compareFinding orders findings by cause; two of one place by rule and claim.
func compareFinding(a, b Finding) int {
	return cmp.Or(
		comparePlace(a.Cause.Place, b.Cause.Place),
		strings.Compare(a.Rule, b.Rule), strings.Compare(a.Claim, b.Claim), strings.Compare(a.Set, b.Set),
		strings.Compare(a.Blame.Package, b.Blame.Package), strings.Compare(a.Blame.Name, b.Blame.Name),
		comparePlace(a.Opened.Place, b.Opened.Place),
		strings.Compare(a.Instance, b.Instance), strings.Compare(a.Home, b.Home), strings.Compare(a.Message, b.Message))
}

func compareOpen(a, b Open) int {
	return cmp.Or(comparePlace(a.Place, b.Place), strings.Compare(a.Rule, b.Rule), strings.Compare(a.Claim, b.Claim), strings.Compare(a.Set, b.Set),
		strings.Compare(a.Root.Package, b.Root.Package), strings.Compare(a.Root.Name, b.Root.Name), strings.Compare(a.Instance, b.Instance), strings.Compare(a.StoppedBy, b.StoppedBy))
}

func compareQuestion(a, b Question) int {
	return cmp.Or(strings.Compare(a.Root.Package, b.Root.Package), comparePlace(a.Root.Place, b.Root.Place), strings.Compare(a.Root.Name, b.Root.Name),
		strings.Compare(a.Rule, b.Rule), strings.Compare(a.Set, b.Set), strings.Compare(a.Claim, b.Claim), strings.Compare(a.Instance, b.Instance))
}

// mergeFinding puts b, which is lost in the same way as a, into a: the shortest
// path wins, ties go by the place of the root.
func mergeFinding(a *Finding, b Finding) {
	starts := a.Starts + b.Starts
	better := cmp.Or(
		cmp.Compare(len(b.Path), len(a.Path)),
		comparePlace(b.Root.Place, a.Root.Place), strings.Compare(b.Root.Package, a.Root.Package), strings.Compare(b.Root.Name, a.Root.Name),
		strings.Compare(b.Instance, a.Instance))
	if better < 0 {
		*a = b
	}
	a.Starts = starts
}

// Merge puts the results of all rules together. The order of the argument and
// how the work was spread over threads do not matter.
func Merge(results []*RuleResult) *Result {
	out := &Result{}
	roots := map[string]bool{}
	for _, r := range results {
		out.Findings = append(out.Findings, r.findings...)
		out.Open = append(out.Open, r.open...)
		out.Questions = append(out.Questions, r.questions...)
		out.Assumptions = append(out.Assumptions, r.assumptions...)
		out.Cut = append(out.Cut, r.cut...)
		out.Tally.Instances += r.instances
		for _, root := range r.roots {
			roots[root] = true
		}
	}
	out.Tally.Roots = len(roots)
	for i := range out.Findings {
		out.Assumptions = append(out.Assumptions, out.Findings[i].Assumptions...)
	}
	out.settle()
	for i := range out.Findings {
		identify(&out.Findings[i])
	}
	unique(out.Findings)
	follow(out.Findings)
	return out
}

// follow finds breaks of moments (a second Lock) on paths that have lost the
// instance before, in a way that is a finding of its own.
func follow(fs []Finding) {
	for i := range fs {
		f := &fs[i]
		if strings.HasPrefix(f.Point, "at ") {
			continue
		}
		for k := range fs {
			if g := &fs[k]; g.Set == f.Set && g.Rule == f.Rule && strings.HasPrefix(g.Point, "at ") && g.Cause.Place != f.Cause.Place && comesThrough(f.Path, g) {
				f.Follows = g.Fingerprint
				break
			}
		}
	}
}

// comesThrough says that a path opens and loses the instance where g does.
func comesThrough(path []PathStep, g *Finding) bool {
	opened := false
	for i := range path[:max(len(path)-1, 0)] {
		opened = opened || (g.Opened.Place.Line > 0 && path[i].Place == g.Opened.Place && path[i].Changed)
		if opened && path[i].Place == g.Cause.Place && path[i].Kind != properties.StepEvent {
			return true
		}
	}
	return false
}

// unique makes equal fingerprints differ by their order of appearance, so that
// two equal returns of one function have two names.
func unique(fs []Finding) {
	seen := map[string]int{}
	for i := range fs {
		print := fs[i].Fingerprint
		seen[print]++
		if n := seen[print]; n > 1 {
			fs[i].Fingerprint = fingerprint(print, strings.Repeat("+", n-1))
		}
	}
}
