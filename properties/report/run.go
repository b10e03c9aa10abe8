package report

import (
	"strconv"
	"strings"

	"pathtally/properties"
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
