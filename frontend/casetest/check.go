package casetest

import (
	"fmt"
	"slices"
	"strings"
)

// The verdicts that Check tells apart. Others ("holds") are no findings.
const (
	Broken    = "broken"
	Undecided = "undecided"
)

// Got is one answer of an analysis about one program of a case.
type Got struct {
	File        string // BrokenFile or CleanFile
	Line        int    // line of the cause; not looked at for undecided answers
	Rule, Claim string
	Function    string // the blame frame, as go/types prints it without the package path
	Verdict     string // Broken, Undecided; answers with another verdict are passed over
}

// String prints the answer as a compiler would.
func (g Got) String() string {
	return fmt.Sprintf("%s:%d: %s %s/%s %s", g.File, g.Line, g.Verdict, g.Rule, g.Claim, g.Function)
}

// is says whether g speaks about the claim, in one of its functions.
func (c Claim) is(g Got) bool {
	return c.Rule == g.Rule && c.Claim == g.Claim && slices.Contains(c.Functions, bareName(g.Function))
}

// at says whether the want may stand in the line.
func (w Want) at(line int) bool { return w.Line == line || slices.Contains(w.Also, line) }

// Check compares what was found in both programs with what the case wants, and
// returns one line per difference, sorted; none means that both sides are
// right. Every want must be met by a finding in one of its lines; every
// finding must meet a want, or be allowed by a may line; clean.go has no
// finding. XFail changes nothing here: the caller decides what it means.
func (c Case) Check(findings []Got) []string {
	var wrong []string
	met := make([]bool, len(c.Wants))
	answered := make([]bool, len(c.Undecided))
	for _, g := range findings {
		if g.Verdict != Broken && g.Verdict != Undecided {
			continue
		}
		if g.File != BrokenFile || !c.expected(g, met, answered) {
			wrong = append(wrong, "unexpected: "+g.String())
		}
	}
	for i, w := range c.Wants {
		if !met[i] {
			wrong = append(wrong, fmt.Sprintf("missing: %s:%s: broken %s", BrokenFile, w.lines(), w.Claim))
		}
	}
	for i, u := range c.Undecided {
		if !answered[i] {
			wrong = append(wrong, fmt.Sprintf("missing: %s: undecided %s", BrokenFile, u))
		}
	}
	slices.Sort(wrong)
	return slices.Compact(wrong)
}

// expected says whether the case has a use for an answer about broken.go, and
// notes which wants it meets. One finding may meet two wants only if they
// differ in nothing but their lines and share the line of the finding.
func (c Case) expected(g Got, met, answered []bool) bool {
	ok := slices.ContainsFunc(c.May, func(m Claim) bool { return m.is(g) })
	if g.Verdict == Undecided {
		for i, u := range c.Undecided {
			if u.is(g) {
				answered[i], ok = true, true
			}
		}
		return ok
	}
	for i, w := range c.Wants {
		if w.is(g) && w.at(g.Line) {
			met[i], ok = true, true
		}
	}
	return ok
}

// lines prints the lines a want may stand in: "12", "12|14|15".
func (w Want) lines() string {
	all := append([]int{w.Line}, w.Also...)
	slices.Sort(all)
	all = slices.Compact(all)
	parts := make([]string, len(all))
	for i, n := range all {
		parts[i] = fmt.Sprint(n)
	}
	return strings.Join(parts, "|")
}

// Edit is the number of lines that must go from broken.go plus the number that
// must come to make clean.go of it. Comments, space at the ends of lines and
// import declarations do not count, nor do lines without anything else.
func (c Case) Edit() int {
	a, b := codeLines(c.Broken), codeLines(c.Clean)
	// Longest common subsequence by the textbook recurrence; the programs are
	// some tens of lines long, so the square does not matter. Row i+1 of the
	// table is in next while row i is filled into row.
	next := make([]int, len(b)+1) // next[j]: longest common subsequence of a[i+1:] and b[j:]
	for i := len(a) - 1; i >= 0; i-- {
		row := make([]int, len(b)+1)
		for j := len(b) - 1; j >= 0; j-- {
			if a[i] == b[j] {
				row[j] = next[j+1] + 1
			} else {
				row[j] = max(next[j], row[j+1])
			}
		}
		next = row
	}
	return len(a) + len(b) - 2*next[0]
}

// codeLines splits src into lines without // comments, import declarations
// (in the form that gofmt gives them) and empty lines.
func codeLines(src []byte) []string {
	bare := slices.Clone(src)
	eachComment(src, func(_, offset int, text string) error {
		for i := range text {
			bare[offset+i] = ' '
		}
		return nil
	})
	var lines []string
	importing := false
	for line := range strings.Lines(string(bare)) {
		line = strings.TrimSpace(line)
		switch {
		case importing:
			importing = line != ")"
		case line == "import (":
			importing = true
		case line != "" && !strings.HasPrefix(line, "import "):
			lines = append(lines, line)
		}
	}
	return lines
}
