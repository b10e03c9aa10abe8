package report

import (
	"bufio"
	"bytes"
	"fmt"
	"io"
	"strings"
)

// markdownPaths bounds the paths in a summary: a comment in a merge request has
// room for some 60,000 characters.
const markdownPaths = 10

// Markdown prints a summary for a comment: one sentence, a table with a row per
// finding, and the paths folded below it.
func Markdown(w io.Writer, run *Run, opt Options) error {
	b := bufio.NewWriter(w)
	findings := blocks(run.shown(false), false)
	fmt.Fprintf(b, "**pathtally: %s**\n", Headlined(run))
	if len(findings) > 0 {
		b.WriteString("\n| place | what | claim |\n| --- | --- | --- |\n")
		for i := range findings {
			f := &findings[i]
			advice := ""
			if f.Advice {
				advice = "advice: "
			}
			fmt.Fprintf(b, "| `%s` | %s%s | `%s/%s:%s` |\n", place(run.Headline(&f.Finding)), advice, cell(f.Message), f.Rule, f.Claim, f.ID())
		}
	}
	for i := range findings {
		if i == markdownPaths {
			fmt.Fprintf(b, "\n%s more, without their paths.\n", thousands(int64(len(findings)-i)))
			break
		}
		f := &findings[i]
		var p bytes.Buffer
		pw := bufio.NewWriter(&p)
		t := &texter{w: pw, opt: Options{Width: 100}, run: run}
		t.finding(f)
		if err := pw.Flush(); err != nil {
			return err
		}
		fence := "```"
		for strings.Contains(p.String(), fence) {
			fence += "`"
		}
		fmt.Fprintf(b, "\n<details><summary>%s</summary>\n\n%s\n%s%s\n\n</details>\n", markup(f.Message), fence, p.String(), fence)
	}
	if open := run.openShown(false); len(open) > 0 {
		b.WriteString("\n| undecided | claims | stopped by |\n| --- | --- | --- |\n")
		for _, g := range grouped(open) {
			who := g[0].Root.Name
			if g[0].Instance != "" {
				who += " for " + g[0].Instance
			}
			fmt.Fprintf(b, "| `%s` %s | `%s` | %s |\n", place(g[0].Place), cell(who), claims(g), cell(g[0].StoppedBy))
		}
	}
	if len(run.Stale) > 0 {
		b.WriteString("\n")
		for _, s := range run.Stale {
			fmt.Fprintf(b, "- advice, `%s:%d`: %s\n", s.File, s.Line, cell(s.Text))
		}
	}
	total, parts := Sentence(run.Result)
	fmt.Fprintf(b, "\n%s: %s. %s, build %s.\n", total, parts, plural(run.Packages, "package", "packages"), strings.Join(run.Builds, ", "))
	return b.Flush()
}

// Headlined is the first sentence of a page about the run, without a full stop:
// "2 of 412 questions are broken; 1 finding is new; 1 question is undecided".
func Headlined(run *Run) string {
	y := run.Result.Tally
	verb := func(n int, one, many string) string {
		if n == 1 {
			return one
		}
		return many
	}
	var s string
	switch {
	case y.Questions == 0:
		return "no question was asked: no code here meets an event of a rule"
	case y.Broken == 0 && y.Undecided == 0:
		s = fmt.Sprintf("all %s hold", plural(y.Questions, "question", "questions"))
		if y.Questions == 1 {
			s = "the only question holds"
		}
	case y.Broken == 0:
		s = fmt.Sprintf("nothing is broken in %s", plural(y.Questions, "question", "questions"))
	default:
		s = fmt.Sprintf("%s of %s %s broken", thousands(int64(y.Broken)), plural(y.Questions, "question", "questions"), verb(y.Broken, "is", "are"))
	}
	if run.Gated {
		st := run.Standing()
		n := st.NewBroken + st.NewAdvice
		s += fmt.Sprintf("; %s %s new", plural(n, "finding", "findings"), verb(n, "is", "are"))
		if n == 0 {
			s = strings.TrimSuffix(s, "0 findings are new") + "no finding is new"
		}
	} else if n := len(run.Result.Findings); n != y.Broken && n > 0 {
		s += ", in " + plural(n, "finding", "findings")
	}
	if y.Undecided > 0 {
		s += fmt.Sprintf("; %s undecided", plural(y.Undecided, "question is", "questions are"))
	}
	return s
}

// cell escapes text for a cell of a table.
func cell(s string) string {
	return strings.NewReplacer("|", "\\|", "*", "\\*", "_", "\\_", "<", "&lt;", ">", "&gt;", "`", "\\`", "\n", " ").Replace(s)
}

// markup escapes text inside of an element.
func markup(s string) string {
	return strings.NewReplacer("&", "&amp;", "<", "&lt;", ">", "&gt;", "\n", " ").Replace(s)
}
