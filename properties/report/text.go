package report

import (
	"bufio"
	"fmt"
	"io"
	"path"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"pathtally/properties/accept"
	"pathtally/properties/judge"
)

// foldAfter is the number of steps from which a path is folded.
const foldAfter = 14

// Text prints findings, undecided questions and the closing summary.
func Text(w io.Writer, run *Run, opt Options) error {
	b := bufio.NewWriter(w)
	t := &texter{w: b, opt: opt, run: run}
	for _, f := range blocks(run.shown(opt.Verbose), opt.Verbose) {
		t.finding(&f)
		t.line("")
	}
	for _, g := range grouped(run.openShown(opt.Verbose)) {
		t.open(g)
		t.line("")
	}
	if !opt.Quiet {
		t.stale()
	}
	if opt.Assumptions && len(run.Result.Assumptions) > 0 {
		t.line("assumptions")
		for _, n := range run.Result.Assumptions {
			t.line("    %s: %s: %s", place(n.Place), n.Kind, n.Text)
		}
		t.line("")
	}
	if !opt.Quiet {
		t.summary()
	}
	return b.Flush()
}

type texter struct {
	w   *bufio.Writer
	opt Options
	run *Run
}

func (t *texter) line(format string, args ...any) {
	s := fmt.Sprintf(format, args...)
	t.w.WriteString(strings.TrimRight(s, " "))
	t.w.WriteByte('\n')
}

// The few styles there are, as SGR parameters.
const (
	bold   = "1"
	red    = "31"
	yellow = "33"
	faint  = "2"
)

func (t *texter) paint(style, s string) string {
	if !t.opt.Colour || s == "" {
		return s
	}
	return "\x1b[" + style + "m" + s + "\x1b[0m"
}

// pad fills s with spaces to n columns; it counts characters, not bytes.
func pad(s string, n int) string {
	if d := n - utf8.RuneCountInString(s); d > 0 {
		return s + strings.Repeat(" ", d)
	}
	return s
}

func padLeft(s string, n int) string {
	if d := n - utf8.RuneCountInString(s); d > 0 {
		return strings.Repeat(" ", d) + s
	}
	return s
}

// cut shortens s to n columns; what is left out shows as an ellipsis.
func cut(s string, n int) string {
	if utf8.RuneCountInString(s) <= n {
		return s
	}
	r := []rune(s)
	return string(r[:max(n-1, 0)]) + "…"
}

// short is the last part of a function's name: Book of (*Desk).Book.
func short(name string) string {
	return name[strings.LastIndexByte(name, '.')+1:]
}

// sameMistake says that one change will mend both: two claims of a rule that
// one function breaks at one place. They are printed as one block.
func sameMistake(a, b *judge.Finding) bool {
	return a.Rule == b.Rule && a.Set == b.Set && a.Claim != b.Claim && a.Advice == b.Advice && a.Cause.Place == b.Cause.Place &&
		a.Blame.Package == b.Blame.Package && a.Blame.Name == b.Blame.Name && a.Opened.Place == b.Opened.Place
}

// finding prints a block.
func (t *texter) finding(bl *block) {
	f := &bl.Finding
	advice := ""
	if f.Advice {
		advice = "advice: "
	}
	headline := t.run.Headline(f)
	t.line("%s: %s%s", t.paint(bold, place(headline)), advice, t.paint(bold, f.Message))

	lostAt := "lost at"
	if !strings.HasPrefix(f.Point, "at ") {
		lostAt = "broken at"
	}
	type fact struct{ label, at, text string }
	var facts []fact
	if h, ok := t.run.Headlines[f.Fingerprint]; ok && h.Place != f.Opened.Place {
		facts = append(facts, fact{"changed", place(h.Place), h.Text})
	}
	if f.Opened.Place.Line > 0 && (f.Opened.Place != f.Cause.Place || f.CauseText == "" || headline != f.Cause.Place) {
		facts = append(facts, fact{f.OpenedVerb, place(f.Opened.Place), f.Opened.Text})
	}
	if f.CauseText != "" {
		facts = append(facts, fact{lostAt, place(f.Cause.Place), f.CauseText})
	} else if headline != f.Cause.Place && f.Opened.Place != f.Cause.Place {
		facts = append(facts, fact{lostAt, place(f.Cause.Place), f.Cause.Text})
	}
	widest := 0
	for _, c := range facts {
		widest = max(widest, len(c.at))
	}
	label := func(name, rest string) {
		t.line("    %s %s", t.paint(faint, pad(name, 11)), rest)
	}
	for _, c := range facts {
		label(c.label, pad(c.at, widest)+"    "+c.text)
	}
	if f.OtherWay != "" {
		label("right way", f.OtherWay)
	}
	label("claim", f.Rule+"/"+f.Claim+", "+f.Point+": "+f.Formula)
	if f.Reason != "" {
		label("reason", f.Reason)
	}
	if a, ok := t.run.Accepted[f.Fingerprint]; ok {
		label("accepted", a.Reason+"  ("+a.Where+")")
	}
	if in := t.run.buildsOf(f); len(in) < len(t.run.Builds) {
		var names []string
		for _, i := range in {
			names = append(names, t.run.Builds[i])
		}
		label("only in", strings.Join(names, ", "))
	}
	for i := range bl.also {
		o := &bl.also[i]
		label("breaks also", fmt.Sprintf("%s/%s:%s, %s: %s", o.Rule, o.Claim, o.ID(), o.Point, o.Formula))
	}
	for i := range bl.leads {
		o := &bl.leads[i]
		label("leads to", fmt.Sprintf("%s    %s  (%s/%s:%s)", place(o.Cause.Place), o.Message, o.Rule, o.Claim, o.ID()))
	}
	if f.Root.Name != f.Blame.Name || f.Root.Package != f.Blame.Package {
		from := f.Root.Name
		if f.Root.Place.Line > 0 {
			from += " in " + place(f.Root.Place)
		}
		if f.Starts > 1 {
			from += fmt.Sprintf(", and from %s", plural(f.Starts-1, "other start", "other starts"))
		}
		label("reached from", from)
	}
	for i, n := range f.Assumptions {
		if i == 3 && !t.opt.Assumptions {
			label("", fmt.Sprintf("and %d more (--assumptions)", len(f.Assumptions)-3))
			break
		}
		name := ""
		if i == 0 {
			name = "assumes"
		}
		label(name, n.Text+"  ("+place(n.Place)+")")
	}
	t.line("")
	t.path(f)
	t.line("")
	target := t.run.Target
	if target == "" {
		target = relative(f.Blame.Package, t.run.Module)
	}
	t.line("    %s", t.paint(faint, fmt.Sprintf("again: pathtally check %s --only %s/%s:%s", target, f.Rule, f.Claim, f.ID())))
}

// relative writes an import path as a pattern for the module's root.
func relative(pkg, module string) string {
	if pkg == module || pkg == "" {
		return "."
	}
	if rest, ok := strings.CutPrefix(pkg, module+"/"); ok && module != "" {
		return "./" + rest
	}
	return pkg
}

// row is one line of the table; step -1 is a fold of skip steps.
type row struct {
	step int
	skip int
}

// fold keeps the first and the last step, steps that count, steps beside them
// that say where one is, and the cause; what is left out becomes one row.
func fold(f *judge.Finding, all bool) []row {
	n := len(f.Path)
	rows := make([]row, 0, n)
	if all || n <= foldAfter {
		for i := range n {
			rows = append(rows, row{step: i})
		}
		return rows
	}
	keep := make([]bool, n)
	keep[0], keep[n-1] = true, true
	for i := range f.Path {
		s := &f.Path[i]
		if s.Changed {
			keep[i] = true
		}
		if s.Place == f.Cause.Place || (s.Place == f.Opened.Place && f.Opened.Place.Line > 0) {
			keep[i] = true
			if i > 0 {
				keep[i-1] = true
			}
		}
		// The call that leads to a kept deeper step tells where one is.
		if s.Changed {
			for j := i - 1; j >= 0; j-- {
				if f.Path[j].Depth < s.Depth {
					keep[j] = true
					break
				}
			}
		}
	}
	for i := 0; i < n; {
		if keep[i] {
			rows = append(rows, row{step: i})
			i++
			continue
		}
		j := i
		for j < n && !keep[j] {
			j++
		}
		if j-i == 1 {
			rows = append(rows, row{step: i})
		} else {
			rows = append(rows, row{step: -1, skip: j - i})
		}
		i = j
	}
	return rows
}

func (t *texter) path(f *judge.Finding) {
	if len(f.Path) == 0 {
		return
	}
	// One file: its lines suffice. Several: each change of file is named.
	several := false
	for _, s := range f.Path {
		if s.Place.File != "" && f.Path[0].Place.File != "" && s.Place.File != f.Path[0].Place.File {
			several = true
		}
	}
	rows := fold(f, t.opt.Verbose)
	at := make([]string, len(rows))
	name := make([]string, len(rows))
	atHead := "line"
	if several {
		atHead = "place"
	}
	atWidth, nameWidth := len(atHead), len("function")
	for i, r := range rows {
		if r.step < 0 {
			continue
		}
		s := &f.Path[r.step]
		if s.Place.Line > 0 {
			at[i] = strconv.Itoa(s.Place.Line)
			if several {
				at[i] = path.Base(s.Place.File) + ":" + at[i]
			}
		}
		name[i] = strings.Repeat("  ", min(s.Depth, 6)) + short(s.Function)
		atWidth = max(atWidth, utf8.RuneCountInString(at[i]))
		nameWidth = max(nameWidth, utf8.RuneCountInString(name[i]))
	}
	nameWidth = min(nameWidth, 24)
	countWidth := make([]int, len(f.CountNames))
	counts := 0
	for i, n := range f.CountNames {
		countWidth[i] = len(n)
		for _, s := range f.Path {
			countWidth[i] = max(countWidth[i], len(strconv.FormatInt(s.Counts[i], 10)))
		}
		counts += countWidth[i] + 2
	}
	used := 4 + atWidth + 2 + nameWidth + 2 + counts
	room := t.opt.width() - used
	textWidth := 0
	for _, r := range rows {
		if r.step >= 0 {
			textWidth = max(textWidth, utf8.RuneCountInString(f.Path[r.step].Text))
		}
	}
	textWidth = min(max(textWidth, 20), max(room, 20))

	head := padLeft(atHead, atWidth) + "  " + pad("function", nameWidth+2+textWidth)
	for i, n := range f.CountNames {
		head += "  " + padLeft(n, countWidth[i])
	}
	t.line("    %s", t.paint(faint, strings.TrimRight(head, " ")))
	for i, r := range rows {
		if r.step < 0 {
			t.line("    %s  %s", strings.Repeat(" ", atWidth), t.paint(faint, fmt.Sprintf("… %d steps, counts unchanged", r.skip)))
			continue
		}
		s := &f.Path[r.step]
		lost := s.Place == f.Cause.Place && s.Place.Line > 0
		body := pad(cut(name[i], nameWidth), nameWidth) + "  " + pad(cut(s.Text, textWidth), textWidth)
		last := r.step == len(f.Path)-1
		numbers := ""
		if s.Changed || last {
			for k, c := range s.Counts {
				numbers += "  " + padLeft(strconv.FormatInt(c, 10), countWidth[k])
			}
		}
		if last && f.Fact != "" {
			if used+textWidth+4+len(f.Fact) <= t.opt.width()+20 {
				numbers += "    " + t.paint(red, f.Fact)
			} else {
				numbers += "\n" + strings.Repeat(" ", 4+atWidth+2) + t.paint(red, f.Fact)
			}
		}
		if lost {
			body = t.paint(bold, body)
		}
		t.line("    %s  %s%s", padLeft(at[i], atWidth), body, numbers)
	}
}

// grouped puts undecided questions that one thing stopped together: the claims
// of a rule at one start.
func grouped(open []judge.Open) [][]judge.Open {
	var out [][]judge.Open
	at := map[string]int{}
	for _, o := range open {
		key := strings.Join([]string{o.Set, o.Rule, o.Root.Package, o.Root.Name, place(o.Root.Place), o.Instance, o.StoppedBy, place(o.Place)}, "\x00")
		i, ok := at[key]
		if !ok {
			i = len(out)
			at[key] = i
			out = append(out, nil)
		}
		out[i] = append(out[i], o)
	}
	return out
}

// claims names the claims of a group: mutex/balanced, not-early.
func claims(g []judge.Open) string {
	var names []string
	for _, o := range g {
		names = append(names, o.Claim)
	}
	return g[0].Rule + "/" + strings.Join(names, ", ")
}

func (t *texter) open(g []judge.Open) {
	o := &g[0]
	keep := o.Formula
	if len(g) > 1 {
		keep = fmt.Sprintf("%d claims of %s", len(g), o.Rule)
	}
	what := fmt.Sprintf("does every path of %s keep %s?", o.Root.Name, keep)
	if o.Instance != "" {
		what = fmt.Sprintf("does every path of %s keep %s for %s?", o.Root.Name, keep, o.Instance)
	}
	t.line("%s: %s: %s", t.paint(bold, place(o.Place)), t.paint(yellow, "undecided"), t.paint(bold, what))
	label := func(name, rest string) {
		t.line("    %s %s", t.paint(faint, pad(name, 11)), rest)
	}
	if len(g) == 1 {
		label("claim", o.Rule+"/"+o.Claim+", "+o.Point+": "+o.Formula)
	} else {
		label("claims", claims(g))
	}
	label("stopped by", o.StoppedBy)
	if o.SoFar != "" {
		label("so far", o.SoFar)
	}
	if o.Steps > 0 {
		target := t.run.Target
		if target == "" {
			target = relative(o.Root.Package, t.run.Module)
		}
		only := o.Rule
		if len(g) == 1 {
			only += "/" + o.Claim
		}
		label("to settle", fmt.Sprintf("pathtally check %s --only %s --steps %d", target, only, o.Steps))
	}
}

// Sentence is the first line of the summary: "412 questions   409 hold, 2 broken, 1 undecided".
func Sentence(r *judge.Result) (total, parts string) {
	y := r.Tally
	total = plural(y.Questions, "question", "questions")
	p := []string{thousands(int64(y.Holds)) + " hold"}
	if y.Broken > 0 {
		s := thousands(int64(y.Broken)) + " broken"
		if n := len(r.Findings); n != y.Broken {
			s += " in " + plural(n, "finding", "findings")
		}
		if y.Advice > 0 {
			s += " (" + thousands(int64(y.Advice)) + " of them advice)"
		}
		p = append(p, s)
	}
	if y.Undecided > 0 {
		p = append(p, thousands(int64(y.Undecided))+" undecided")
	}
	return total, strings.Join(p, ", ")
}

func (t *texter) summary() {
	run, r := t.run, t.run.Result
	total, parts := Sentence(r)
	if r.Tally.Broken > 0 {
		parts = t.paint(red, parts)
	}
	col := max(len(total)+3, 16)
	t.line("%s%s", pad(total, col), parts)
	if run.Gated {
		t.gate(col)
	}
	functions := plural(run.Functions, "function", "functions")
	if run.WithEvents >= 0 {
		functions = thousands(int64(run.WithEvents)) + " of " + functions + " meet an event"
	}
	t.wrap(pad("judged", col), []string{
		plural(run.Packages, "package", "packages"),
		functions,
		plural(r.Tally.Roots, "starting point", "starting points"),
		"build " + strings.Join(run.Builds, ", "),
	})
	if len(run.NotJudged) > 0 {
		var s []string
		for _, l := range run.NotJudged {
			s = append(s, l.What+" ("+l.Why+")")
		}
		t.wrap(pad("not judged", col), s)
	}
	if n := len(r.Assumptions); n > 0 {
		under := map[string]bool{}
		for i := range r.Findings {
			for _, a := range r.Findings[i].Assumptions {
				under[place(a.Place)+a.Kind+a.Text] = true
			}
		}
		s := plural(n, "assumption", "assumptions")
		if len(r.Findings) > 0 {
			s += fmt.Sprintf(", %d of them under a finding", len(under))
		}
		if !t.opt.Assumptions {
			s += "       (--assumptions)"
		}
		t.line("%s%s", pad("rests on", col), s)
	}
	for _, c := range r.Cut {
		t.line("%s%s", pad("cut short", col), c)
		if !t.opt.Verbose {
			if n := len(r.Cut) - 1; n > 0 {
				t.line("%sand %s (--verbose)", pad("", col), plural(n, "other start", "other starts"))
			}
			break
		}
	}
}

// counted prints "1 broken, 2 undecided", "none" for nothing.
func counted(broken, advice, open int) string {
	var p []string
	if broken > 0 {
		p = append(p, thousands(int64(broken))+" broken")
	}
	if advice > 0 {
		p = append(p, thousands(int64(advice))+" advice")
	}
	if open > 0 {
		p = append(p, thousands(int64(open))+" undecided")
	}
	if p == nil {
		return "none"
	}
	return strings.Join(p, ", ")
}

// Standing counts findings and undecided questions as the gate sees them.
type Standing struct {
	NewBroken, NewAdvice, NewOpen int
	AcceptedBroken, AcceptedOpen  int
}

// Standing counts what is new and what is accepted.
func (r *Run) Standing() Standing {
	var s Standing
	for i := range r.Result.Findings {
		f := &r.Result.Findings[i]
		switch {
		case r.IsAccepted(f.Fingerprint):
			s.AcceptedBroken++
		case f.Advice:
			s.NewAdvice++
		default:
			s.NewBroken++
		}
	}
	for i := range r.Result.Open {
		if r.IsAccepted(r.Result.Open[i].Fingerprint()) {
			s.AcceptedOpen++
		} else {
			s.NewOpen++
		}
	}
	return s
}

// gate prints what is new, accepted and stale.
func (t *texter) gate(col int) {
	s := t.run.Standing()
	line := pad("new", col) + counted(s.NewBroken, s.NewAdvice, s.NewOpen)
	if n := s.AcceptedBroken + s.AcceptedOpen; n > 0 {
		line += "     accepted  " + counted(s.AcceptedBroken, 0, s.AcceptedOpen)
	}
	if n := len(t.run.Stale); n > 0 {
		line += fmt.Sprintf("     stale  %d", n)
	}
	t.line("%s", line)
	if t.run.Base != "" {
		t.line("%s%s", pad("known", col), counted(t.run.KnownFindings, 0, t.run.KnownOpen)+" in "+t.run.Base+" already")
	}
}

// stale prints what accepts nothing any more: advice.
func (t *texter) stale() {
	for i, s := range t.run.Stale {
		at := fmt.Sprintf("%s:%d", s.File, s.Line)
		if s.Column > 0 {
			at += ":" + strconv.Itoa(s.Column)
		}
		t.line("%s: advice: %s", t.paint(bold, at), s.Text)
		if i == len(t.run.Stale)-1 {
			if slices.ContainsFunc(t.run.Stale, func(s accept.Stale) bool { return s.Fingerprint != "" }) {
				t.line("    to drop     pathtally accept --prune")
			}
			t.line("")
		}
	}
}

// wrap prints a list with commas, broken into lines that fit.
func (t *texter) wrap(head string, items []string) {
	width := t.opt.width()
	indent := utf8.RuneCountInString(head)
	cur := head
	empty := true
	for i, it := range items {
		if i < len(items)-1 {
			it += ","
		}
		if !empty && utf8.RuneCountInString(cur)+1+utf8.RuneCountInString(it) > width {
			t.line("%s", cur)
			cur, empty = strings.Repeat(" ", indent), true
		}
		if !empty {
			cur += " "
		}
		cur += it
		empty = false
	}
	t.line("%s", cur)
}

// About lists every verdict on functions that match, with its grounds: holds too.
func About(w io.Writer, run *Run, match func(judge.Question) bool, opt Options) error {
	b := bufio.NewWriter(w)
	t := &texter{w: b, opt: opt, run: run}
	var qs []judge.Question
	for _, q := range run.Result.Questions {
		if match(q) {
			qs = append(qs, q)
		}
	}
	if len(qs) == 0 {
		t.line("no question was asked about it: it meets no event of a rule, or it is judged only through its callers")
		return b.Flush()
	}
	w1, w2 := 0, 0
	for _, q := range qs {
		w1 = max(w1, utf8.RuneCountInString(aboutWho(q)))
		w2 = max(w2, len(q.Rule)+1+len(q.Claim))
	}
	slices.SortStableFunc(qs, func(a, b judge.Question) int { return strings.Compare(aboutWho(a), aboutWho(b)) })
	for _, q := range qs {
		v := pad(q.Verdict.String(), 9)
		switch q.Verdict {
		case judge.Broken:
			v = t.paint(red, v)
		case judge.Undecided:
			v = t.paint(yellow, v)
		}
		t.line("%s  %s  %s  %s", v, pad(aboutWho(q), w1), pad(q.Rule+"/"+q.Claim, w2), q.Grounds)
	}
	return b.Flush()
}

func aboutWho(q judge.Question) string {
	if q.Instance == "" {
		return q.Root.Name
	}
	return q.Root.Name + " " + q.Instance
}
