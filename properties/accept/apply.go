package accept

import (
	"cmp"
	"fmt"
	"regexp"
	"slices"
	"strings"

	"pathtally/properties"
	"pathtally/properties/judge"
)

// An Acceptance says why something is accepted, and where that is written.
type Acceptance struct {
	Reason string
	Where  string // pathtally.accepted:12, or file:line:column of a directive
	Source bool   // a directive
}

// A Stale accepts nothing any more.
type Stale struct {
	File        string
	Line        int
	Column      int // 0 in pathtally.accepted
	Claim       string
	Function    string // "" for a directive
	Fingerprint string // "" for a directive
	Text        string // one sentence without a full stop
}

// Scope says what a run judged, so that what it did not look at is not called
// stale.
type Scope struct {
	// Package: what stands in this package was judged, or the package is gone.
	Package func(path string) bool
	// Claim: this claim (RULE/CLAIM) was judged, or there is no such claim.
	Claim func(claim string) bool
	Build string // of the run, as in Entry.Build
}

// Applied is what accepting makes of a result.
type Applied struct {
	Accepted map[string]Acceptance // by fingerprint, of findings and of undecided questions
	Stale    []Stale               // in the order of places
	entries  map[string]bool       // fingerprints of the file that accept something
}

// Apply compares a result with the file and the directives. Neither is changed.
func Apply(r *judge.Result, f *File, ds []Directive, scope Scope) *Applied {
	a := &Applied{Accepted: map[string]Acceptance{}, entries: map[string]bool{}}
	// A directive accepts by place, so that the reason stands beside the code;
	// it comes before the file.
	used := make([]bool, len(ds))
	type key struct {
		file  string
		line  int
		claim string
	}
	at := map[key]int{}
	for i, d := range ds {
		at[key{d.File, d.Line, d.Claim}] = i
	}
	directiveFor := func(p properties.Place, claim string) (int, bool) {
		for _, line := range []int{p.Line, p.Line - 1} {
			if i, ok := at[key{p.File, line, claim}]; ok && p.Line > 0 {
				return i, true
			}
		}
		return 0, false
	}
	for i := range r.Findings {
		x := &r.Findings[i]
		claim := x.Rule + "/" + x.Claim
		for _, p := range []properties.Place{x.Cause.Place, x.Opened.Place} {
			if k, ok := directiveFor(p, claim); ok {
				used[k] = true
				a.Accepted[x.Fingerprint] = Acceptance{Reason: ds[k].Reason, Where: fmt.Sprintf("%s:%d:%d", ds[k].File, ds[k].Line, ds[k].Column), Source: true}
				break
			}
		}
	}
	for i := range r.Open {
		o := &r.Open[i]
		if k, ok := directiveFor(o.Place, o.Rule+"/"+o.Claim); ok {
			used[k] = true
			a.Accepted[o.Fingerprint()] = Acceptance{Reason: ds[k].Reason, Where: fmt.Sprintf("%s:%d:%d", ds[k].File, ds[k].Line, ds[k].Column), Source: true}
		}
	}
	byPrint := map[string]*Entry{}
	for i := range f.Entries {
		byPrint[f.Entries[i].Fingerprint] = &f.Entries[i]
	}
	take := func(print, kind string) {
		e := byPrint[print]
		if e == nil || e.Kind != kind {
			return
		}
		a.entries[print] = true
		if _, ok := a.Accepted[print]; !ok {
			a.Accepted[print] = Acceptance{Reason: e.Reason, Where: fmt.Sprintf("%s:%d", FileName, e.Line)}
		}
	}
	for i := range r.Findings {
		take(r.Findings[i].Fingerprint, Broken)
	}
	for i := range r.Open {
		take(r.Open[i].Fingerprint(), Undecided)
	}
	for i := range f.Entries {
		e := &f.Entries[i]
		if a.entries[e.Fingerprint] || !scope.Package(e.Package) || !scope.Claim(e.Claim) || (e.Build != "" && scope.Build != "" && !slices.Contains(strings.Split(e.Build, ", "), scope.Build)) {
			continue
		}
		what := "is broken in this way"
		if e.Kind == Undecided {
			what = "is undecided"
		}
		a.Stale = append(a.Stale, Stale{File: FileName, Line: e.Line, Claim: e.Claim, Function: e.Function, Fingerprint: e.Fingerprint,
			Text: fmt.Sprintf("nothing %s any more: %s in %s", what, e.Claim, e.Function)})
	}
	for i, d := range ds {
		if !used[i] && scope.Claim(d.Claim) {
			a.Stale = append(a.Stale, Stale{File: d.File, Line: d.Line, Column: d.Column, Claim: d.Claim,
				Text: fmt.Sprintf("this accepts nothing: no finding of %s is opened or lost here", d.Claim)})
		}
	}
	slices.SortStableFunc(a.Stale, func(x, y Stale) int {
		return cmp.Or(strings.Compare(x.File, y.File), cmp.Compare(x.Line, y.Line), cmp.Compare(x.Column, y.Column))
	})
	return a
}

// inLine is what a text says of lines, which move.
var inLine = regexp.MustCompile(` in line [0-9]+|:[0-9]+(:[0-9]+)?\b`)

// EntryOf describes a finding; the reason is the caller's.
func EntryOf(f *judge.Finding, build, reason string) Entry {
	cause := f.Cause.Text
	if cause == "" {
		cause = f.CauseText
	}
	if cause == "" {
		cause = f.Message
	}
	return Entry{Kind: Broken, Claim: f.Rule + "/" + f.Claim, Fingerprint: f.Fingerprint, Package: f.Blame.Package, Function: f.Blame.Name, Instance: f.Instance,
		Cause: f.Cause.Place.File + ": " + f.Cause.Function + ": " + oneLine(inLine.ReplaceAllString(cause, "")), Build: build, Reason: reason}
}

// EntryOfOpen describes an undecided question.
func EntryOfOpen(o *judge.Open, build, reason string) Entry {
	return Entry{Kind: Undecided, Claim: o.Rule + "/" + o.Claim, Fingerprint: o.Fingerprint(), Package: o.Root.Package, Function: o.Root.Name, Instance: o.Instance,
		Cause: oneLine(inLine.ReplaceAllString(o.StoppedBy, "")), Build: build, Reason: reason}
}

func oneLine(s string) string { return strings.Join(strings.Fields(s), " ") }

// Update gives the file with entries added; one that is there keeps its reason
// and the builds that it was seen in, the rest of it is written anew.
func Update(f *File, entries []Entry) *File {
	out := &File{Entries: slices.Clone(f.Entries)}
	for _, e := range entries {
		if i := slices.IndexFunc(out.Entries, func(o Entry) bool { return o.Fingerprint == e.Fingerprint }); i >= 0 {
			old := out.Entries[i]
			e.Reason, e.Build = old.Reason, joined(old.Build, e.Build)
			out.Entries[i] = e
			continue
		}
		out.Entries = append(out.Entries, e)
	}
	out.sort()
	return out
}

func joined(a, b string) string {
	all := strings.Split(a, ", ")
	if a == "" {
		all = nil
	}
	if b != "" {
		all = append(all, b)
	}
	slices.Sort(all)
	return strings.Join(slices.Compact(all), ", ")
}

// Prune gives the file without its stale entries, and how many went.
func Prune(f *File, a *Applied) (*File, int) {
	gone := map[string]bool{}
	for _, s := range a.Stale {
		if s.Fingerprint != "" {
			gone[s.Fingerprint] = true
		}
	}
	out := &File{}
	for _, e := range f.Entries {
		if !gone[e.Fingerprint] {
			out.Entries = append(out.Entries, e)
		}
	}
	return out, len(f.Entries) - len(out.Entries)
}
