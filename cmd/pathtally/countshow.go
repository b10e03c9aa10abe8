package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math/big"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"pathtally/parikh"
	"pathtally/parikh/lia"
	"pathtally/pds"
	"pathtally/properties"
)

// countResult is what count answers, as JSON. Numbers may pass 64 bits.
type countResult struct {
	Schema   int           `json:"schema"`
	Tool     countTool     `json:"tool"`
	Function string        `json:"function,omitempty"`
	System   string        `json:"system,omitempty"`
	Rule     string        `json:"rule,omitempty"`
	At       string        `json:"at"`
	Ask      string        `json:"ask,omitempty"`
	Images   []*countImage `json:"images"`
}

type countTool struct {
	Name    string `json:"name"`
	Version string `json:"version"`
}

// countImage is the answer about one instance. Vectors are indexed like Counts.
type countImage struct {
	Title    string   `json:"title"`
	Instance string   `json:"instance,omitempty"`
	Counts   []string `json:"counts"`
	// Doubts is the number of steps that may count or not; both are in the image.
	Doubts int `json:"doubts,omitempty"`

	Answer     string              `json:"answer,omitempty"` // yes, no, unknown
	Budget     string              `json:"budget,omitempty"`
	With       map[string]*big.Int `json:"with,omitempty"`
	Parameters []string            `json:"parameters,omitempty"`
	Data       []string            `json:"data,omitempty"`
	Path       []countStep         `json:"path,omitempty"`
	Run        []string            `json:"run,omitempty"` // of a system, or too long for Path
	NoPath     string              `json:"noPath,omitempty"`

	Empty   bool          `json:"empty,omitempty"`
	Sets    []countSet    `json:"sets,omitempty"`
	Whole   bool          `json:"whole,omitempty"` // the sets are the image
	Stopped string        `json:"stoppedBy,omitempty"`
	Bounds  []countBound  `json:"bounds,omitempty"`
	Minimal *countMinimal `json:"minimal,omitempty"`
	Rays    *countRays    `json:"rays,omitempty"`
	Grid    *countGrid    `json:"grid,omitempty"`

	status parikh.Status
	with   []string
}

type countSet struct {
	Base    []*big.Int   `json:"base"`
	Periods [][]*big.Int `json:"periods"`
}

// countBound is the range of a form; nil is without bound.
type countBound struct {
	Form       string   `json:"form"`
	Least      *big.Int `json:"least"`
	Greatest   *big.Int `json:"greatest"`
	LeastKnown bool     `json:"leastKnown"`
	MostKnown  bool     `json:"greatestKnown"`
}

type countMinimal struct {
	Vectors  [][]*big.Int `json:"vectors"`
	Complete bool         `json:"complete"`
	Reason   string       `json:"reason,omitempty"`
}

type countRays struct {
	Rays     [][]*big.Int `json:"rays"`
	Lines    [][]*big.Int `json:"lines"`
	Complete bool         `json:"complete"`
	Budget   string       `json:"budget,omitempty"`
}

// countGrid has Cells[y][x]: yes, no or unknown.
type countGrid struct {
	X      string     `json:"x"`
	Y      string     `json:"y"`
	N      int        `json:"n"`
	Cells  [][]string `json:"cells"`
	Budget string     `json:"budget,omitempty"`
}

type countStep struct {
	File     string              `json:"file"`
	Line     int                 `json:"line"`
	Column   int                 `json:"column"`
	Function string              `json:"function"`
	Step     properties.StepKind `json:"step"`
	Text     string              `json:"text"`
	Doubt    string              `json:"doubt,omitempty"`
	Counts   map[string]int64    `json:"counts"`

	depth   int
	changed bool
	after   []int64
}

func rows(v [][]*big.Int) [][]*big.Int {
	if v == nil {
		return [][]*big.Int{}
	}
	return v
}

func project(v []*big.Int, shown []int) []*big.Int {
	out := make([]*big.Int, len(shown))
	for i, k := range shown {
		out[i] = v[k]
	}
	return out
}

func sameVector(a, b []*big.Int) bool {
	return slices.EqualFunc(a, b, func(x, y *big.Int) bool { return x.Cmp(y) == 0 })
}

// whole finds the linear sets, and how far each count and each difference of two
// goes. Leaving counts out keeps sets linear.
func (im *countImage) whole(ctx context.Context, sys *parikh.System, shown []int) {
	u := sys.LinearSets(ctx, maxSets)
	im.Whole, im.Stopped = u.Complete, u.Budget
	for _, s := range foldSets(u.Sets) {
		set := countSet{Base: project(s.Base, shown), Periods: [][]*big.Int{}}
		for _, p := range s.Periods {
			q := project(p, shown)
			zero := !slices.ContainsFunc(q, func(n *big.Int) bool { return n.Sign() != 0 })
			if !zero && !slices.ContainsFunc(set.Periods, func(o []*big.Int) bool { return sameVector(o, q) }) {
				set.Periods = append(set.Periods, q)
			}
		}
		same := func(o countSet) bool {
			return sameVector(o.Base, set.Base) && slices.EqualFunc(o.Periods, set.Periods, sameVector)
		}
		if !slices.ContainsFunc(im.Sets, same) {
			im.Sets = append(im.Sets, set)
		}
	}
	if !u.Complete && u.Budget != "data" && len(shown) <= parikh.MaxRayCounts {
		im.findRays(ctx, sys, shown)
	}
	form := func(name string, plus, minus int) {
		f := make(parikh.Form, len(sys.Names()))
		f[plus]++
		if minus >= 0 {
			f[minus]--
		}
		b := countBound{Form: name}
		if lo := sys.Least(ctx, f); lo.Status == parikh.Yes {
			b.LeastKnown, b.Least = true, lo.Value
			if lo.Unbounded {
				b.Least = nil
			}
		}
		if hi := sys.Greatest(ctx, f); hi.Status == parikh.Yes {
			b.MostKnown, b.Greatest = true, hi.Value
			if hi.Unbounded {
				b.Greatest = nil
			}
		}
		im.Bounds = append(im.Bounds, b)
	}
	for i, k := range shown {
		form(im.Counts[i], k, -1)
	}
	if len(shown) <= 3 {
		for i := range shown {
			for j := i + 1; j < len(shown); j++ {
				form(im.Counts[i]+" - "+im.Counts[j], shown[i], shown[j])
			}
		}
	}
	im.findMinimal(ctx, sys, shown)
}

// foldSets says the same with fewer sets. A set that lies in another one goes; and
// what a set misses one turn before its base is often a set beside it,
//
//	(b - p + N(P without p)) and (b + N P)   is   b - p + N P
//
// Each turn of the loop takes a set away.
func foldSets(sets []parikh.LinearSet) []parikh.LinearSet {
	within := func(a, b [][]*big.Int) bool {
		return !slices.ContainsFunc(a, func(p []*big.Int) bool {
			return !slices.ContainsFunc(b, func(o []*big.Int) bool { return sameVector(o, p) })
		})
	}
	fold := func(i, j int) bool {
		s, x := sets[i], sets[j]
		if !within(x.Periods, s.Periods) {
			return false
		}
		if s.Contains(x.Base) {
			return true
		}
		for k, p := range s.Periods {
			before := make([]*big.Int, len(p))
			for c := range p {
				before[c] = new(big.Int).Sub(s.Base[c], p[c])
			}
			rest := slices.Concat(s.Periods[:k], s.Periods[k+1:])
			if sameVector(before, x.Base) && within(rest, x.Periods) {
				sets[i].Base = before
				return true
			}
		}
		return false
	}
again:
	for i := range sets {
		for j := range sets {
			if i != j && fold(i, j) {
				sets = slices.Delete(sets, j, j+1)
				goto again
			}
		}
	}
	return sets
}

// findRays finds the directions in which the image extends.
func (im *countImage) findRays(ctx context.Context, sys *parikh.System, shown []int) {
	r := sys.Rays(ctx, shown)
	im.Rays = &countRays{Rays: rows(r.Rays), Lines: rows(r.Lines), Complete: r.Status != parikh.Unknown, Budget: r.Budget}
}

// findMinimal lists minimal vectors. Those of a projection are projections of
// minimal ones.
func (im *countImage) findMinimal(ctx context.Context, sys *parikh.System, shown []int) {
	v, err := sys.Minimal(ctx, lia.And(), maxMinimal)
	m := &countMinimal{Vectors: [][]*big.Int{}, Complete: v.Complete && err == nil, Reason: v.Budget}
	im.Minimal = m
	if errors.Is(err, parikh.ErrNegative) {
		m.Reason = "a count can fall"
		return
	}
	var all [][]*big.Int
	for _, x := range v.List {
		p := project(x, shown)
		if !slices.ContainsFunc(all, func(o []*big.Int) bool { return sameVector(o, p) }) {
			all = append(all, p)
		}
	}
	for i, x := range all {
		below := func(o []*big.Int) bool {
			for k := range o {
				if o[k].Cmp(x[k]) > 0 {
					return false
				}
			}
			return true
		}
		least := true
		for j, o := range all {
			least = least && (i == j || !below(o))
		}
		if least {
			m.Vectors = append(m.Vectors, x)
		}
	}
}

// pathOf lists the steps of a run of the model as a person reads them.
func pathOf(u *subject, run *pds.Run) []countStep {
	names := u.rule.Counts
	sum := make([]int64, len(names))
	var out []countStep
	var walk func(r *pds.Run, depth int, spawned bool)
	walk = func(r *pds.Run, depth int, spawned bool) {
		// bases are the heights of the calls that are open.
		bases := []int{1}
		var owner []properties.Func
		owner = append(owner, u.model.Frame(r.Configs[0].Head).Func)
		for i := 0; i+1 < len(r.Configs); i++ {
			c := &r.Configs[i]
			for len(bases) > 1 && bases[len(bases)-1] > c.Depth {
				bases, owner = bases[:len(bases)-1], owner[:len(owner)-1]
			}
			if i > 0 && r.Configs[i-1].Rule.Kind != pds.Pop {
				if f := u.model.Frame(c.Head); f.Entry && !f.Deferred {
					for len(bases) > 1 && bases[len(bases)-1] >= c.Depth {
						bases, owner = bases[:len(bases)-1], owner[:len(owner)-1]
					}
					bases, owner = append(bases, c.Depth), append(owner, f.Func)
				}
			}
			changed := false
			next := r.Configs[i+1].Counts
			for k := range sum {
				d := next[k] - c.Counts[k]
				changed = changed || d != 0
				sum[k] += d
			}
			// A rule says nothing of whether its doubt was taken; the numbers do.
			doubt := ""
			if c.Rule.Doubt != 0 && c.Rule.Effect != c.Rule.DoubtEffect {
				taken := u.model.Vector(c.Rule.DoubtEffect)
				asDoubt := true
				for k := range sum {
					asDoubt = asDoubt && next[k]-c.Counts[k] == taken[k]
				}
				if asDoubt {
					doubt = u.model.Doubt(c.Rule.Doubt).Text
				}
			}
			st := properties.Step{Kind: properties.StepEvent, Text: "counts", Func: owner[len(owner)-1], Place: owner[len(owner)-1].Place}
			if c.Rule.Label != 0 {
				st = u.model.Step(c.Rule.Label)
				if st.Func.Name == "" {
					st.Func = owner[len(owner)-1]
				}
			}
			if (c.Rule.Label != 0 && st.Text != "") || changed {
				step := countStep{File: st.Place.File, Line: st.Place.Line, Column: st.Place.Column, Function: st.Func.Name, Step: st.Kind, Text: st.Text, Doubt: doubt,
					depth: depth + len(bases) - 1, changed: changed, after: slices.Clone(sum), Counts: map[string]int64{}}
				for k, n := range names {
					step.Counts[n] = sum[k]
				}
				out = append(out, step)
			}
			for k := range c.Spawned {
				walk(&c.Spawned[k], depth+len(bases), true)
			}
		}
	}
	walk(run, 0, false)
	return out
}

func writeCountJSON(w io.Writer, r *countResult) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(r)
}

func vectorLine(v []*big.Int, widths []int) string {
	var b strings.Builder
	for i, n := range v {
		fmt.Fprintf(&b, "  %*s", widths[i], n)
	}
	return b.String()
}

func writeCountText(w io.Writer, r *countResult) error {
	var b strings.Builder
	for i, im := range r.Images {
		if i > 0 {
			b.WriteString("\n")
		}
		where := ""
		if r.System == "" || r.At != "end" {
			where = ", at " + r.At
			if r.At == "always" {
				where = ", at any moment"
			}
		}
		fmt.Fprintf(&b, "%s%s\n", im.Title, where)
		im.text(&b)
	}
	_, err := io.WriteString(w, b.String())
	return err
}

func (im *countImage) text(b *strings.Builder) {
	if im.Doubts > 0 {
		fmt.Fprintf(b, "  in doubt: %s may count or not; both ways are in the answer\n", counted1(im.Doubts, "step"))
	}
	switch im.status {
	case parikh.Yes:
		fmt.Fprintf(b, "  yes: %s\n", strings.Join(im.with, ", "))
	case parikh.No:
		fmt.Fprintf(b, "  no: no path has such counts\n")
	default:
		if im.Answer != "" {
			fmt.Fprintf(b, "  not known: the budget of %s ran out\n", im.Budget)
		}
	}
	for _, p := range im.Parameters {
		fmt.Fprintf(b, "    %s\n", p)
	}
	for _, d := range im.Data {
		fmt.Fprintf(b, "    %s\n", d)
	}
	if im.NoPath != "" {
		fmt.Fprintf(b, "    %s\n", im.NoPath)
	}
	for _, l := range im.Run {
		fmt.Fprintf(b, "    %s\n", l)
	}
	if len(im.Path) > 0 {
		im.pathText(b)
	}
	if im.Empty {
		fmt.Fprintf(b, "  no path ends there: there are no counts\n")
		return
	}
	widths := make([]int, len(im.Counts))
	for i, n := range im.Counts {
		widths[i] = utf8.RuneCountInString(n)
	}
	fit := func(vs ...[]*big.Int) {
		for _, v := range vs {
			for i, n := range v {
				widths[i] = max(widths[i], len(n.String()))
			}
		}
	}
	for _, s := range im.Sets {
		fit(s.Base)
		fit(s.Periods...)
	}
	if im.Minimal != nil {
		fit(im.Minimal.Vectors...)
	}
	if im.Rays != nil {
		fit(im.Rays.Rays...)
		fit(im.Rays.Lines...)
	}
	const side = 14
	if len(im.Sets) > 0 || im.Minimal != nil || im.Rays != nil {
		b.WriteString("  " + strings.Repeat(" ", side))
		for i, n := range im.Counts {
			b.WriteString("  " + padded(n, widths[i]))
		}
		b.WriteString("\n")
	}
	line := func(head string, v []*big.Int, tail string) {
		fmt.Fprintf(b, "  %-*s%s%s\n", side, head, vectorLine(v, widths), tail)
	}
	for i, s := range im.Sets {
		head := "base"
		if len(s.Periods) == 0 {
			head = "exactly"
		}
		if i > 0 {
			head = "or " + head
		}
		line(head, s.Base, "")
		for k, p := range s.Periods {
			line("  + n"+strconv.Itoa(k+1)+" times", p, "")
		}
	}
	if len(im.Sets) == 0 && im.Stopped != "" {
		fmt.Fprintf(b, "  not split into base and periods: %s\n", reasonText(im.Stopped))
	}
	if len(im.Sets) > 0 {
		switch {
		case im.Whole:
			fmt.Fprintf(b, "  these are all\n")
		case im.Stopped == "limit":
			fmt.Fprintf(b, "  there are more; these are the first %d sets\n", len(im.Sets))
		default:
			fmt.Fprintf(b, "  there may be more: the budget of %s ran out\n", im.Stopped)
		}
	}
	if m := im.Minimal; m != nil {
		for i, v := range m.Vectors {
			head := "minimal"
			if i > 0 {
				head = ""
			}
			line(head, v, "")
		}
		switch {
		case m.Complete && len(m.Vectors) == 0:
			fmt.Fprintf(b, "  minimal         none\n")
		case !m.Complete && m.Reason == "limit":
			fmt.Fprintf(b, "  there are more minimal vectors\n")
		case !m.Complete:
			fmt.Fprintf(b, "  minimal vectors are not known: %s\n", reasonText(m.Reason))
		}
	}
	if r := im.Rays; r != nil {
		for i, v := range r.Rays {
			head := "rays"
			if i > 0 {
				head = ""
			}
			line(head, v, "")
		}
		for i, v := range r.Lines {
			head := "both ways"
			if i > 0 {
				head = ""
			}
			line(head, v, "")
		}
		if r.Complete && len(r.Rays)+len(r.Lines) == 0 {
			fmt.Fprintf(b, "  rays            none: every count is bounded\n")
		}
		if !r.Complete {
			fmt.Fprintf(b, "  there may be more rays: %s\n", reasonText(r.Budget))
		}
	}
	wide, known := 0, false
	for _, x := range im.Bounds {
		known = known || x.LeastKnown || x.MostKnown
		wide = max(wide, utf8.RuneCountInString(x.Form))
	}
	if len(im.Bounds) > 0 && !known {
		fmt.Fprintf(b, "  how large the counts get is not known\n")
	}
	for _, x := range im.Bounds {
		if !known {
			break
		}
		fmt.Fprintf(b, "  %s  %s\n", pad1(x.Form, max(wide, side)), x.words())
	}
	if im.Grid != nil {
		im.Grid.text(b)
	}
}

func reasonText(reason string) string {
	switch reason {
	case "", "a count can fall":
		return reason
	case "data":
		return "the system has data; --ask, --member and --grid answer for it"
	case "slots":
		return "outcomes of the data are too many to list"
	}
	return "the budget of " + reason + " ran out"
}

func counted1(n int, one string) string {
	if n == 1 {
		return "1 " + one
	}
	return strconv.Itoa(n) + " " + one + "s"
}

func pad1(s string, n int) string {
	return s + strings.Repeat(" ", max(0, n-utf8.RuneCountInString(s)))
}

func padded(s string, n int) string {
	return strings.Repeat(" ", max(0, n-utf8.RuneCountInString(s))) + s
}

// words says how far a form goes.
func (x *countBound) words() string {
	switch {
	case !x.LeastKnown && !x.MostKnown:
		return "not known"
	case x.LeastKnown && x.MostKnown && x.Least == nil && x.Greatest == nil:
		return "any size, in both directions"
	case x.LeastKnown && x.MostKnown && x.Least != nil && x.Greatest != nil && x.Least.Cmp(x.Greatest) == 0:
		return "always " + x.Least.String()
	}
	lo, hi := "without lower bound", "without bound"
	if !x.LeastKnown {
		lo = "lower bound not known"
	} else if x.Least != nil {
		lo = "at least " + x.Least.String()
	}
	if !x.MostKnown {
		hi = "upper bound not known"
	} else if x.Greatest != nil {
		hi = "at most " + x.Greatest.String()
	}
	return lo + ", " + hi
}

func (g *countGrid) text(b *strings.Builder) {
	wide := max(len(strconv.Itoa(g.N)), 2)
	fmt.Fprintf(b, "  %s upwards, %s to the right: # some path, . none, ? not known\n", g.Y, g.X)
	for y := g.N; y >= 0; y-- {
		fmt.Fprintf(b, "  %*d ", wide, y)
		for x := 0; x <= g.N; x++ {
			fmt.Fprintf(b, "%*s", wide, gridSign(g.Cells[y][x]))
		}
		b.WriteString("\n")
	}
	b.WriteString("  " + strings.Repeat(" ", wide+1))
	for x := 0; x <= g.N; x++ {
		if wide <= 2 && x%2 == 1 && g.N > 9 {
			fmt.Fprintf(b, "%*s", wide, "")
			continue
		}
		fmt.Fprintf(b, "%*d", wide, x)
	}
	b.WriteString("\n")
	if g.Budget != "" {
		fmt.Fprintf(b, "  ?: the budget of %s ran out\n", g.Budget)
	}
}

func gridSign(cell string) string {
	switch cell {
	case "yes":
		return "#"
	case "no":
		return "."
	}
	return "?"
}

// pathText prints the steps of a path: where, in which function, what, and the
// counts when they change.
func (im *countImage) pathText(b *strings.Builder) {
	names := im.Counts
	all := im.Path[0].Counts
	if len(names) != len(all) {
		names = names[:0:0]
		for n := range all {
			names = append(names, n)
		}
		slices.Sort(names)
	}
	place := func(s *countStep) string {
		if s.Line == 0 {
			return ""
		}
		return fmt.Sprintf("%s:%d", s.File[strings.LastIndexByte(s.File, '/')+1:], s.Line)
	}
	who := func(s *countStep) string {
		name := s.Function[strings.LastIndexByte(s.Function, '.')+1:]
		return strings.Repeat("  ", min(s.depth, 6)) + name
	}
	w1, w2, w3 := len("place"), len("function"), 20
	for i := range im.Path {
		s := &im.Path[i]
		w1, w2, w3 = max(w1, utf8.RuneCountInString(place(s))), max(w2, utf8.RuneCountInString(who(s))), max(w3, utf8.RuneCountInString(s.Text))
	}
	w2, w3 = min(w2, 24), min(w3, 44)
	line := func(at, name, text, numbers string) {
		if utf8.RuneCountInString(text) > w3 {
			text = string([]rune(text)[:w3-1]) + "…"
		}
		if utf8.RuneCountInString(name) > w2 {
			name = string([]rune(name)[:w2-1]) + "…"
		}
		b.WriteString(strings.TrimRight("    "+padded(at, w1)+"  "+pad1(name, w2)+"  "+pad1(text, w3)+numbers, " ") + "\n")
	}
	head := ""
	for _, n := range names {
		head += "  " + n
	}
	line("place", "function", "", head)
	for i := range im.Path {
		s := &im.Path[i]
		numbers := ""
		if s.changed || i == len(im.Path)-1 {
			for _, n := range names {
				numbers += fmt.Sprintf("  %*d", utf8.RuneCountInString(n), s.Counts[n])
			}
		}
		line(place(s), who(s), s.Text, numbers)
		if s.Doubt != "" {
			line("", "", "in doubt: "+s.Doubt, "")
		}
	}
}

// gridSVG draws the grid: cells that some path reaches are filled, others
// hollow, unknown ones crossed.
func gridSVG(im *countImage) string {
	const cell, left, top = 22, 56, 34
	g := im.Grid
	var b strings.Builder
	esc := strings.NewReplacer("&", "&amp;", "<", "&lt;", ">", "&gt;", `"`, "&quot;").Replace
	side := cell * (g.N + 1)
	fmt.Fprintf(&b, "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 %d %d\" width=\"%d\" height=\"%d\" font-family=\"sans-serif\" font-size=\"11\">\n", left+side+20, top+side+44, left+side+20, top+side+44)
	fmt.Fprintf(&b, "<title>%s</title>\n<rect width=\"100%%\" height=\"100%%\" fill=\"#fff\"/>\n", esc(im.Title))
	fmt.Fprintf(&b, "<text x=\"%d\" y=\"16\" font-size=\"13\" fill=\"#222\">%s</text>\n", left, esc(im.Title))
	for y := range g.N + 1 {
		py := top + cell*(g.N-y)
		fmt.Fprintf(&b, "<text x=\"%d\" y=\"%d\" text-anchor=\"end\" fill=\"#555\">%d</text>\n", left-8, py+15, y)
		for x := range g.N + 1 {
			px := left + cell*x
			fill := "#fff"
			if g.Cells[y][x] == "yes" {
				fill = "#1f6f8b"
			}
			fmt.Fprintf(&b, "<rect x=\"%d\" y=\"%d\" width=\"%d\" height=\"%d\" rx=\"3\" fill=\"%s\" stroke=\"#b9c4c9\"><title>%s %d, %s %d: %s</title></rect>\n",
				px+2, py+2, cell-4, cell-4, fill, esc(g.X), x, esc(g.Y), y, g.Cells[y][x])
			if g.Cells[y][x] == "unknown" {
				fmt.Fprintf(&b, "<path d=\"M%d %dl%d %dm0 %dl%d %d\" stroke=\"#999\" fill=\"none\"/>\n", px+5, py+5, cell-10, cell-10, 10-cell, 10-cell, cell-10)
			}
		}
	}
	for x := range g.N + 1 {
		fmt.Fprintf(&b, "<text x=\"%d\" y=\"%d\" text-anchor=\"middle\" fill=\"#555\">%d</text>\n", left+cell*x+cell/2, top+side+14, x)
	}
	fmt.Fprintf(&b, "<text x=\"%d\" y=\"%d\" text-anchor=\"middle\" fill=\"#222\">%s</text>\n", left+side/2, top+side+32, esc(g.X))
	fmt.Fprintf(&b, "<text transform=\"translate(16 %d) rotate(-90)\" text-anchor=\"middle\" fill=\"#222\">%s</text>\n</svg>\n", top+side/2, esc(g.Y))
	return b.String()
}
