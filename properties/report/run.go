package report

import (
	"slices"
	"strconv"
	"strings"

	"pathtally/properties"
	"pathtally/properties/accept"
	"pathtally/properties/judge"
)

// Schema is the number of the JSON schema. Additions do not change it.
const Schema = 1

// Ruleset names a rule set that was judged.
type Ruleset struct {
	Name    string `json:"name"`
	Version string `json:"version"`
}

// Left is something that was not judged.
type Left struct {
	What string `json:"what"`
	Why  string `json:"why"`
}

// Run is a finished run: the result and what was read for it.
type Run struct {
	Version  string
	Rulesets []Ruleset
	Module   string   // module path
	Builds   []string // "linux/amd64"
	// Target is the package pattern that is printed in commands to run again.
	// "" lets the finding's own package stand there.
	Target string

	Packages   int // packages judged
	Functions  int // functions with bodies in them
	WithEvents int // functions that meet an event of some rule; below 0 if not known
	NotJudged  []Left

	Result *judge.Result

	// What is accepted, by fingerprint of a finding or an undecided question.
	Accepted map[string]accept.Acceptance
	Stale    []accept.Stale
	// Base is the revision that the run is compared with, "" if with none; what
	// it has already is no longer in Result, and counted here.
	Base          string
	KnownFindings int
	KnownOpen     int
	// Headlines are the changed lines that findings are headed with, by
	// fingerprint; a finding without one is headed with its cause.
	Headlines map[string]Headline
	// Gated: something is accepted, stale or compared, and the summary says so.
	Gated bool

	// FindingBuilds gives, by fingerprint, the builds (indexes into Builds) that a
	// finding occurs in; one that is not there occurs in all.
	FindingBuilds map[string][]int
	// RuleTexts describes claims, by RULE/CLAIM.
	RuleTexts map[string]RuleText
	// Source reads a file as findings name it; nil if there is no source.
	Source func(file string) ([]byte, error) `json:"-"`
}

// Headline is a place that stands in for a finding's cause in its first line.
type Headline struct {
	Place properties.Place
	Text  string // what happens there
}

// RuleText is what a person reads about a claim.
type RuleText struct {
	Doc     string // of the rule, first sentence first
	Formula string
	Reason  string
	Advice  bool
}

// IsAccepted says that a fingerprint is accepted.
func (r *Run) IsAccepted(fingerprint string) bool {
	_, ok := r.Accepted[fingerprint]
	return ok
}

// Headline is the place that a finding is headed with.
func (r *Run) Headline(f *judge.Finding) properties.Place {
	if h, ok := r.Headlines[f.Fingerprint]; ok {
		return h.Place
	}
	return f.Cause.Place
}

// shown are the findings that a person is to see: those that nobody has
// accepted, and the others too with all.
func (r *Run) shown(all bool) []judge.Finding {
	var out []judge.Finding
	for _, f := range r.Result.Findings {
		if all || !r.IsAccepted(f.Fingerprint) {
			out = append(out, f)
		}
	}
	return out
}

// openShown are the undecided questions that a person is to see.
func (r *Run) openShown(all bool) []judge.Open {
	var out []judge.Open
	for _, o := range r.Result.Open {
		if all || !r.IsAccepted(o.Fingerprint()) {
			out = append(out, o)
		}
	}
	return out
}

// buildsOf names the builds of a finding if it is not in all of them.
func (r *Run) buildsOf(f *judge.Finding) []int {
	if in, ok := r.FindingBuilds[f.Fingerprint]; ok {
		return in
	}
	all := make([]int, len(r.Builds))
	for i := range all {
		all[i] = i
	}
	return all
}

// Options says how to print.
type Options struct {
	Colour      bool
	Width       int  // columns; 0 is 100. Text is cut for 80 to 120.
	Assumptions bool // list every assumption
	Quiet       bool // no closing summary
	Verbose     bool // no folding of long paths, names of cut starts
}

func (o Options) width() int {
	switch {
	case o.Width == 0:
		return 100
	case o.Width < 80:
		return 80
	case o.Width > 120:
		return 120
	}
	return o.Width
}

// place prints a position as path:line:column, leaving out what is unknown.
func place(p properties.Place) string {
	if p.File == "" {
		return "?"
	}
	if p.Line == 0 {
		return p.File
	}
	s := p.File + ":" + strconv.Itoa(p.Line)
	if p.Column > 0 {
		s += ":" + strconv.Itoa(p.Column)
	}
	return s
}

// thousands prints n with commas.
func thousands(n int64) string {
	s := strconv.FormatInt(n, 10)
	neg := strings.HasPrefix(s, "-")
	s = strings.TrimPrefix(s, "-")
	for i := len(s) - 3; i > 0; i -= 3 {
		s = s[:i] + "," + s[i:]
	}
	if neg {
		return "-" + s
	}
	return s
}

// plural prints "1 file", "3 files", "none" is left to the caller.
func plural(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return thousands(int64(n)) + " " + many
}

// A block is what a person reads as one: a finding, other claims that the same
// mistake breaks, and findings that follow from it.
type block struct {
	judge.Finding
	also  []judge.Finding
	leads []judge.Finding
}

// blocks puts findings together; with all, each stands for itself.
func blocks(findings []judge.Finding, all bool) []block {
	var out []block
	at := map[string]int{} // fingerprint: the block that holds it
	for i := 0; i < len(findings); {
		f := &findings[i]
		if !all && slices.ContainsFunc(findings, func(g judge.Finding) bool { return g.Fingerprint == f.Follows }) {
			i++
			continue
		}
		n := i + 1
		for !all && n < len(findings) && sameMistake(f, &findings[n]) {
			at[findings[n].Fingerprint] = len(out)
			n++
		}
		at[f.Fingerprint] = len(out)
		out = append(out, block{Finding: *f, also: findings[i+1 : n]})
		i = n
	}
	for i := range findings {
		if k, ok := at[findings[i].Follows]; ok {
			out[k].leads = append(out[k].leads, findings[i])
		}
	}
	return out
}
