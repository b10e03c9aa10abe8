package report

import (
	"bufio"
	_ "embed"
	"fmt"
	"html"
	"io"
	"path"
	"strconv"
	"strings"

	"pathtally/properties"
	"pathtally/properties/judge"
)

//go:embed page.css
var pageStyle string

// HTML prints the run as one page that needs nothing else: no script, no
// network, no other file. Links between a picture and its line are anchors.
//
// Order: one sentence, findings by cause with a small picture each, then each
// finding with its source, chart and table, then undecided, accepted and stale
// ones, the assumptions, and what was judged.
func HTML(w io.Writer, run *Run) error {
	p := &page{w: bufio.NewWriter(w), run: run, lines: map[string][][]byte{}}
	p.findings = blocks(run.shown(false), false)
	p.head()
	p.list()
	for i := range p.findings {
		p.finding(i)
	}
	p.undecided()
	p.accepted()
	p.notes()
	p.ledger()
	p.out("</main></body></html>\n")
	return p.w.Flush()
}

type page struct {
	w        *bufio.Writer
	run      *Run
	findings []block
	lines    map[string][][]byte // source by file, split
}

func (p *page) out(format string, args ...any) { fmt.Fprintf(p.w, format, args...) }

func esc(s string) string { return html.EscapeString(s) }

func (p *page) head() {
	p.out("<!doctype html>\n<html lang=\"en\"><head><meta charset=\"utf-8\">\n<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n")
	p.out("<meta name=\"color-scheme\" content=\"light dark\"><title>%s: %s</title>\n<style>\n%s</style></head>\n<body><main>\n", esc(p.run.Module), esc(Headlined(p.run)), pageStyle)
	p.out("<header><p class=\"where\">pathtally · %s · %s</p>\n<h1>%s.</h1>\n", esc(p.run.Module), esc(strings.Join(p.run.Builds, ", ")), esc(upper(Headlined(p.run))))
	for i := range p.findings {
		f := &p.findings[i]
		if !f.Advice {
			p.out("<p class=\"first\"><a href=\"#f%d\">%s</a>, at <code>%s</code>.</p>\n", i+1, esc(f.Message), esc(place(p.run.Headline(&f.Finding))))
			break
		}
	}
	p.out("</header>\n")
}

func upper(s string) string {
	if s == "" {
		return s
	}
	return strings.ToUpper(s[:1]) + s[1:]
}

// list has one row per finding, grouped by the file of the cause.
func (p *page) list() {
	if len(p.findings) == 0 {
		return
	}
	p.out("<section aria-labelledby=\"causes\"><h2 id=\"causes\">By cause</h2>\n<table class=\"causes\"><thead><tr><th>place</th><th>what</th><th>claim</th><th>counts on the way</th></tr></thead>\n<tbody>\n")
	for i := range p.findings {
		f := &p.findings[i]
		class := ""
		if f.Advice {
			class = " class=\"advice\""
		}
		p.out("<tr%s><td><code>%s</code></td><td><a href=\"#f%d\">%s</a></td><td><code>%s/%s</code></td><td>", class, esc(place(p.run.Headline(&f.Finding))), i+1, esc(f.Message), esc(f.Rule), esc(f.Claim))
		p.spark(&f.Finding)
		p.out("</td></tr>\n")
	}
	p.out("</tbody></table></section>\n")
}

// spark is the small picture: each count's way up, side by side with the rest.
func (p *page) spark(f *judge.Finding) {
	steps := kept(f)
	if len(steps) == 0 || len(f.CountNames) == 0 {
		return
	}
	const w, h = 96, 26
	top := max(greatest(f, steps), 1)
	x := func(i int) float64 { return 3 + float64(i)*float64(w-12)/float64(max(len(steps)-1, 1)) }
	y := func(v int64) float64 { return h - 4 - float64(v)*float64(h-8)/float64(top) }
	p.out("<svg class=\"spark\" width=\"%d\" height=\"%d\" viewBox=\"0 0 %d %d\" role=\"img\" aria-label=\"%s\">", w, h, w, h, esc(finalCounts(f)))
	for k := range f.CountNames {
		p.out("<path class=\"c%d\" d=\"%s\"/>", k%palette, stairs(f, steps, k, x, y))
		last := f.Path[steps[len(steps)-1].step].Counts[k]
		p.mark(k, x(len(steps)-1)+2, y(last), 3)
	}
	p.out("</svg>")
}

// palette is the number of colours and marks; further counts begin again.
const palette = 4

// mark draws the sign of a count, so that colour is not all that tells counts
// apart: disc, square, triangle, diamond.
func (p *page) mark(k int, x, y, r float64) {
	switch k % palette {
	case 0:
		p.out("<circle class=\"m0\" cx=\"%s\" cy=\"%s\" r=\"%s\"/>", num(x), num(y), num(r))
	case 1:
		p.out("<rect class=\"m1\" x=\"%s\" y=\"%s\" width=\"%s\" height=\"%s\"/>", num(x-r), num(y-r), num(2*r), num(2*r))
	case 2:
		p.out("<path class=\"m2\" d=\"M%s %sl%s %sh%sz\"/>", num(x), num(y-r), num(r), num(2*r), num(-2*r))
	default:
		p.out("<path class=\"m3\" d=\"M%s %sl%s %sl%s %sl%s %sz\"/>", num(x), num(y-r), num(r), num(r), num(-r), num(r), num(-r), num(-r))
	}
}

// num prints a length with one decimal at most; pictures need no more, and equal
// runs give equal bytes.
func num(v float64) string {
	return strconv.FormatFloat(float64(int64(v*10+0.5*sign(v)))/10, 'f', -1, 64)
}

func sign(v float64) float64 {
	if v < 0 {
		return -1
	}
	return 1
}

// kept are the rows of a path that are drawn: folded like in text.
func kept(f *judge.Finding) []row {
	var out []row
	for _, r := range fold(f, false) {
		if r.step >= 0 {
			out = append(out, r)
		}
	}
	return out
}

func greatest(f *judge.Finding, steps []row) int64 {
	var top int64
	for _, r := range steps {
		for _, c := range f.Path[r.step].Counts {
			top = max(top, c)
		}
	}
	return top
}

func finalCounts(f *judge.Finding) string {
	var s []string
	for k, n := range f.CountNames {
		s = append(s, fmt.Sprintf("%s %d", n, f.Counts[k]))
	}
	return strings.Join(s, ", ")
}

// stairs is the path of one count: level, then up where it changes.
func stairs(f *judge.Finding, steps []row, k int, x func(int) float64, y func(int64) float64) string {
	var b strings.Builder
	// Counts with one value lie a little apart.
	d := float64(k%palette) * 1.5
	for i, r := range steps {
		v := f.Path[r.step].Counts[k]
		if i == 0 {
			fmt.Fprintf(&b, "M%s %s", num(x(0)), num(y(0)-d))
			fmt.Fprintf(&b, "V%s", num(y(v)-d))
			continue
		}
		fmt.Fprintf(&b, "H%sV%s", num(x(i)), num(y(v)-d))
	}
	return b.String()
}

func (p *page) finding(i int) {
	bl := &p.findings[i]
	f := &bl.Finding
	id := "f" + strconv.Itoa(i+1)
	class := "finding"
	if f.Advice {
		class += " advice"
	}
	p.out("<article class=\"%s\" id=\"%s\"><h2>%s</h2>\n<dl class=\"facts\">\n", class, id, esc(f.Message))
	fact := func(label, value string) { p.out("<div><dt>%s</dt><dd>%s</dd></div>\n", label, value) }
	code := func(s string) string { return "<code>" + esc(s) + "</code>" }
	if h, ok := p.run.Headlines[f.Fingerprint]; ok {
		fact("changed", code(place(h.Place))+" "+code(h.Text))
	}
	if f.Opened.Place.Line > 0 {
		fact(esc(f.OpenedVerb), code(place(f.Opened.Place))+" "+code(f.Opened.Text))
	}
	lost := "lost at"
	if !strings.HasPrefix(f.Point, "at ") {
		lost = "broken at"
	}
	text := f.CauseText
	if text == "" {
		text = f.Cause.Text
	}
	fact(lost, code(place(f.Cause.Place))+" "+esc(text))
	if f.OtherWay != "" {
		fact("right way", esc(f.OtherWay))
	}
	if f.Root.Name != f.Blame.Name || f.Root.Package != f.Blame.Package {
		from := code(f.Root.Name)
		if f.Starts > 1 {
			from += " and " + plural(f.Starts-1, "other start", "other starts")
		}
		fact("reached from", from)
	}
	if in := p.run.buildsOf(f); len(in) < len(p.run.Builds) {
		var names []string
		for _, b := range in {
			names = append(names, p.run.Builds[b])
		}
		fact("only in", esc(strings.Join(names, ", ")))
	}
	for k := range bl.also {
		o := &bl.also[k]
		fact("breaks also", code(o.Rule+"/"+o.Claim)+" "+esc(o.Point)+": "+code(o.Formula))
	}
	for k := range bl.leads {
		o := &bl.leads[k]
		fact("leads to", code(place(o.Cause.Place))+" "+esc(o.Message))
	}
	p.out("</dl>\n<div class=\"sides\">\n")
	p.source(f, id)
	p.out("<div class=\"right\">\n")
	p.chart(f, id)
	p.table(f, id)
	p.out("</div></div>\n")
	doc := p.run.RuleTexts[f.Rule+"/"+f.Claim].Doc
	p.out("<div class=\"claim\"><h3>The claim</h3>\n<p>%s <code>%s/%s</code>, %s: <code>%s</code></p>\n", esc(sentence(doc)), esc(f.Rule), esc(f.Claim), esc(f.Point), esc(f.Formula))
	if f.Reason != "" {
		p.out("<p>%s.</p>\n", esc(upper(f.Reason)))
	}
	if len(f.Assumptions) > 0 {
		p.out("<h3>It assumes</h3><ul>\n")
		for _, n := range f.Assumptions {
			p.out("<li>%s <code>%s</code></li>\n", esc(n.Text), esc(place(n.Place)))
		}
		p.out("</ul>\n")
	}
	p.out("<p class=\"again\"><code>pathtally check %s --only %s/%s:%s</code></p></div></article>\n", esc(relative(f.Blame.Package, p.run.Module)), esc(f.Rule), esc(f.Claim), f.ID())
}

func sentence(doc string) string {
	if s := firstSentence(doc); s != "" {
		return s + "."
	}
	return ""
}

// A stretch is a part of a path whose lines can stand one below the other.
type stretch struct {
	file, function string
	steps          []int // indexes into Path, lines not falling
}

func stretches(f *judge.Finding) []stretch {
	var out []stretch
	for _, r := range kept(f) {
		s := &f.Path[r.step]
		if s.Place.Line == 0 {
			continue
		}
		if n := len(out); n > 0 {
			last := &out[n-1]
			before := f.Path[last.steps[len(last.steps)-1]]
			if last.file == s.Place.File && last.function == s.Function && before.Place.Line <= s.Place.Line {
				last.steps = append(last.steps, r.step)
				continue
			}
		}
		out = append(out, stretch{s.Place.File, s.Function, []int{r.step}})
	}
	return out
}

// source shows the lines of the path and two around each, in the order of the
// path, with the tally strip in the margin.
func (p *page) source(f *judge.Finding, id string) {
	p.out("<div class=\"source\" role=\"group\" aria-label=\"the source in the order of the path\">\n")
	counts := make([]int64, len(f.CountNames))
	top := max(greatest(f, kept(f)), 1)
	for _, st := range stretches(f) {
		first := f.Path[st.steps[0]].Place.Line
		final := f.Path[st.steps[len(st.steps)-1]].Place.Line
		lines := sourceLines(p.run, p.lines, st.file)
		p.out("<p class=\"file\"><code>%s</code> in <code>%s</code></p>\n<table class=\"lines\"><tbody>\n", esc(st.file), esc(st.function))
		next := 0 // index into st.steps
		shown := first - 3
		for line := max(first-2, 1); line <= final+2; line++ {
			near := false
			for _, s := range st.steps {
				if d := f.Path[s].Place.Line - line; d >= -2 && d <= 2 {
					near = true
					break
				}
			}
			if !near || (lines != nil && line > len(lines)) {
				continue
			}
			if shown < line-1 && shown >= first-2 {
				p.out("<tr class=\"gap\"><td class=\"strip\">")
				p.strip(counts, counts, top)
				p.out("</td><td></td><td></td><td>⋯</td></tr>\n")
			}
			shown = line
			before := append([]int64(nil), counts...)
			var badges, why []string
			lost := false
			for next < len(st.steps) && f.Path[st.steps[next]].Place.Line == line {
				s := st.steps[next]
				counts = f.Path[s].Counts
				badges = append(badges, fmt.Sprintf("<a id=\"%s-s%d\" href=\"#%s-t%d\" title=\"step %d\">%d</a>", id, s+1, id, s+1, s+1, s+1))
				why = append(why, f.Path[s].Text)
				lost = lost || f.Path[s].Place == f.Cause.Place
				next++
			}
			class := ""
			switch {
			case lost:
				class = " class=\"lost\""
			case badges != nil:
				class = " class=\"on\""
			}
			text := strings.Join(why, "; ")
			if lines != nil && line <= len(lines) {
				text = strings.ReplaceAll(strings.TrimRight(string(lines[line-1]), "\r"), "\t", "    ")
			}
			p.out("<tr%s><td class=\"strip\">", class)
			p.strip(before, counts, top)
			p.out("</td><td class=\"n\">%d</td><td class=\"s\">%s</td><td><code>%s</code></td></tr>\n", line, strings.Join(badges, " "), esc(text))
		}
		p.out("</tbody></table>\n")
	}
	p.out("<p class=\"verdict\">%s</p></div>\n", esc(verdict(f)))
}

func verdict(f *judge.Finding) string {
	s := f.Path[len(f.Path)-1].Function + " " + f.Path[len(f.Path)-1].Text
	if f.Fact != "" {
		s += ": " + f.Fact
	}
	return s
}

// Sizes of the tally strip, in pixels.
const (
	stripWidth  = 64
	stripHeight = 20
)

// strip draws the counts beside one line: offset from the margin is the count.
func (p *page) strip(before, after []int64, top int64) {
	unit := min(14, float64(stripWidth-16)/float64(top))
	p.out("<svg width=\"%d\" height=\"%d\" aria-hidden=\"true\">", stripWidth, stripHeight)
	for k := range after {
		x := func(v int64) string { return num(5 + float64(v)*unit + float64(k%palette)*3) }
		if before[k] == after[k] {
			p.out("<path class=\"c%d\" d=\"M%s 0V%d\"/>", k%palette, x(after[k]), stripHeight)
		} else {
			p.out("<path class=\"c%d\" d=\"M%s 0V%dH%sV%d\"/>", k%palette, x(before[k]), stripHeight/2, x(after[k]), stripHeight)
		}
	}
	p.out("</svg>")
}

// chart draws the counts against the steps; where the claim is judged and false
// the column is shaded.
func (p *page) chart(f *judge.Finding, id string) {
	steps := kept(f)
	if len(steps) == 0 || len(f.CountNames) == 0 {
		return
	}
	const left, right, upTo, h = 26.0, 14.0, 14.0, 150.0
	w := min(max(float64(len(steps))*26, 220), 460) + left + right
	top := max(greatest(f, steps), 1)
	x := func(i int) float64 { return left + float64(i)*(w-left-right)/float64(max(len(steps)-1, 1)) }
	y := func(v int64) float64 { return h - 24 - float64(v)*(h-24-upTo)/float64(top) }
	p.out("<figure><svg class=\"chart\" width=\"%s\" height=\"%s\" viewBox=\"0 0 %s %s\" role=\"img\" aria-label=\"%s\">\n", num(w), num(h), num(w), num(h), esc("counts along the path; at the end "+finalCounts(f)))
	always := !strings.HasPrefix(f.Point, "at ")
	half := (w - left - right) / float64(max(len(steps)-1, 1)) / 2
	for i, r := range steps {
		last := i == len(steps)-1
		if !last && !always {
			continue
		}
		if ok, known := satisfied(f.Broken, f.CountNames, f.Path[r.step].Counts); last || (known && !ok) {
			from := max(x(i)-half, left)
			p.out("<rect class=\"forbidden\" x=\"%s\" y=\"%s\" width=\"%s\" height=\"%s\"/>", num(from), num(upTo-8), num(min(x(i)+half, w-2)-from), num(h-24-upTo+8))
		}
	}
	stride := int64(1)
	for top/stride > 6 {
		stride *= 2
	}
	for v := int64(0); v <= top; v += stride {
		p.out("<path class=\"grid\" d=\"M%s %sH%s\"/><text x=\"%s\" y=\"%s\" class=\"axis\" text-anchor=\"end\">%d</text>", num(left), num(y(v)), num(w-right), num(left-7), num(y(v)+4), v)
	}
	for k := range f.CountNames {
		p.out("<path class=\"c%d\" d=\"%s\"/>", k%palette, stairs(f, steps, k, x, y))
	}
	for i, r := range steps {
		s := &f.Path[r.step]
		for k := range f.CountNames {
			if i == len(steps)-1 || changedAt(f, r.step, k) {
				p.mark(k, x(i), y(s.Counts[k])-float64(k%palette)*1.5, 4)
			}
		}
		target := "s" + strconv.Itoa(r.step+1)
		if s.Place.Line == 0 {
			target = "t" + strconv.Itoa(r.step+1)
		}
		p.out("<a href=\"#%s-%s\"><title>step %d: %s</title><rect class=\"hit\" x=\"%s\" y=\"0\" width=\"%s\" height=\"%s\"/><text class=\"axis\" x=\"%s\" y=\"%s\" text-anchor=\"middle\">%d</text></a>\n",
			id, target, r.step+1, esc(s.Function+": "+s.Text), num(x(i)-half), num(2*half), num(h), num(x(i)), num(h-8), r.step+1)
	}
	p.out("</svg>\n<figcaption>")
	for k, n := range f.CountNames {
		p.out("<span class=\"key\"><svg width=\"12\" height=\"12\" aria-hidden=\"true\">")
		p.mark(k, 6, 6, 4)
		p.out("</svg> %s</span> ", esc(n))
	}
	if f.Fact != "" {
		p.out("<span class=\"false\">%s</span>", esc(f.Fact))
	}
	p.out("</figcaption></figure>\n")
}

// changedAt says that a step changed a count.
func changedAt(f *judge.Finding, step, k int) bool {
	var before int64
	if step > 0 {
		before = f.Path[step-1].Counts[k]
	}
	return f.Path[step].Counts[k] != before
}

// table says what the pictures show.
func (p *page) table(f *judge.Finding, id string) {
	p.out("<table class=\"steps\"><caption>The path, step by step</caption><thead><tr><th>step</th><th>line</th><th>function</th><th>what happens</th>")
	for _, n := range f.CountNames {
		p.out("<th>%s</th>", esc(n))
	}
	p.out("</tr></thead>\n<tbody>\n")
	for _, r := range fold(f, false) {
		if r.step < 0 {
			p.out("<tr class=\"fold\"><td></td><td></td><td></td><td colspan=\"%d\">… %d steps, counts unchanged</td></tr>\n", 1+len(f.CountNames), r.skip)
			continue
		}
		s := &f.Path[r.step]
		line := ""
		if s.Place.Line > 0 {
			line = fmt.Sprintf("<a href=\"#%s-s%d\">%s:%d</a>", id, r.step+1, esc(path.Base(s.Place.File)), s.Place.Line)
		}
		class := ""
		if s.Place == f.Cause.Place && s.Place.Line > 0 {
			class = " class=\"lost\""
		}
		p.out("<tr%s id=\"%s-t%d\"><td>%d</td><td>%s</td><td style=\"padding-left:%dem\">%s</td><td><code>%s</code></td>", class, id, r.step+1, r.step+1, line, 1+min(s.Depth, 6), esc(short(s.Function)), esc(s.Text))
		for k := range f.CountNames {
			changed := ""
			if changedAt(f, r.step, k) {
				changed = " class=\"changed\""
			}
			p.out("<td%s>%d</td>", changed, s.Counts[k])
		}
		p.out("</tr>\n")
	}
	p.out("</tbody></table>\n")
}

func (p *page) undecided() {
	open := grouped(p.run.openShown(false))
	if len(open) == 0 {
		return
	}
	p.out("<section aria-labelledby=\"undecided\"><h2 id=\"undecided\">Undecided</h2>\n<p>Nothing is said about these: the search was stopped. They are not counted as holding.</p>\n<table><thead><tr><th>place</th><th>who</th><th>claims</th><th>stopped by</th></tr></thead><tbody>\n")
	for _, g := range open {
		who := g[0].Root.Name
		if g[0].Instance != "" {
			who += " for " + g[0].Instance
		}
		p.out("<tr><td><code>%s</code></td><td>%s</td><td><code>%s</code></td><td>%s</td></tr>\n", esc(place(g[0].Place)), esc(who), esc(claims(g)), esc(g[0].StoppedBy))
	}
	p.out("</tbody></table></section>\n")
}

func (p *page) accepted() {
	if !p.run.Gated || len(p.run.Accepted)+len(p.run.Stale) == 0 {
		return
	}
	p.out("<section aria-labelledby=\"accepted\"><h2 id=\"accepted\">Accepted</h2>\n<table><thead><tr><th>place</th><th>what</th><th>reason</th><th>written in</th></tr></thead><tbody>\n")
	line := func(at properties.Place, what, print string) {
		if a, ok := p.run.Accepted[print]; ok {
			p.out("<tr><td><code>%s</code></td><td>%s</td><td>%s</td><td><code>%s</code></td></tr>\n", esc(place(at)), esc(what), esc(a.Reason), esc(a.Where))
		}
	}
	for i := range p.run.Result.Findings {
		f := &p.run.Result.Findings[i]
		line(f.Cause.Place, f.Message, f.Fingerprint)
	}
	for i := range p.run.Result.Open {
		o := &p.run.Result.Open[i]
		line(o.Place, "undecided: "+o.Rule+"/"+o.Claim+" of "+o.Root.Name, o.Fingerprint())
	}
	for _, s := range p.run.Stale {
		p.out("<tr><td><code>%s:%d</code></td><td colspan=\"3\">%s</td></tr>\n", esc(s.File), s.Line, esc(s.Text))
	}
	p.out("</tbody></table></section>\n")
}

func (p *page) notes() {
	if len(p.run.Result.Assumptions) == 0 {
		return
	}
	p.out("<section aria-labelledby=\"assumed\"><h2 id=\"assumed\">What all of it rests on</h2>\n<details><summary>%s</summary><ul>\n", plural(len(p.run.Result.Assumptions), "assumption", "assumptions"))
	for _, n := range p.run.Result.Assumptions {
		p.out("<li><code>%s</code> %s: %s</li>\n", esc(place(n.Place)), esc(n.Kind), esc(n.Text))
	}
	p.out("</ul></details></section>\n")
}

func (p *page) ledger() {
	y := p.run.Result.Tally
	p.out("<section aria-labelledby=\"ledger\"><h2 id=\"ledger\">What was judged</h2>\n<table class=\"ledger\"><tbody>\n")
	entry := func(name string, n int) {
		p.out("<tr><th>%s</th><td>%s</td></tr>\n", name, thousands(int64(n)))
	}
	entry("packages", p.run.Packages)
	entry("functions", p.run.Functions)
	if p.run.WithEvents >= 0 {
		entry("of these, meet an event", p.run.WithEvents)
	}
	entry("starting points", y.Roots)
	entry("questions", y.Questions)
	entry("hold", y.Holds)
	entry("broken", y.Broken)
	entry("undecided", y.Undecided)
	if p.run.Base != "" {
		entry("findings in "+esc(p.run.Base)+" already", p.run.KnownFindings)
	}
	for _, l := range p.run.NotJudged {
		p.out("<tr><th>not judged</th><td>%s (%s)</td></tr>\n", esc(l.What), esc(l.Why))
	}
	for _, c := range p.run.Result.Cut {
		p.out("<tr><th>cut short</th><td>%s</td></tr>\n", esc(c))
	}
	p.out("</tbody></table>\n<p class=\"small\">A verdict speaks of counts in a model of the source, under the assumptions above; it is no safety certificate. pathtally %s.</p></section>\n", esc(p.run.Version))
}
