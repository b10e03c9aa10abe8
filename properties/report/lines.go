package report

import (
	"bufio"
	"fmt"
	"io"
	"strconv"
	"strings"
)

// Lines prints one line per place, each of which an editor can follow: a
// finding's headline, then the steps of its path that have a place.
func Lines(w io.Writer, run *Run, opt Options) error {
	b := bufio.NewWriter(w)
	findings := run.shown(opt.Verbose)
	for i := range findings {
		f := &findings[i]
		word := "broken"
		if f.Advice {
			word = "advice"
		}
		var counts []string
		for k, n := range f.CountNames {
			counts = append(counts, n+" "+strconv.FormatInt(f.Counts[k], 10))
		}
		fmt.Fprintf(b, "%s: %s %s/%s: %s [%s]\n", place(run.Headline(f)), word, f.Rule, f.Claim, f.Message, strings.Join(counts, ", "))
		n := len(f.Path)
		digits := len(strconv.Itoa(n))
		for k := range f.Path {
			s := &f.Path[k]
			if s.Place.Line == 0 {
				continue
			}
			text := s.Text
			if s.Place == f.Cause.Place && f.CauseText != "" && s.Kind != "event" {
				text = f.CauseText
			}
			var c []string
			for _, v := range s.Counts {
				c = append(c, strconv.FormatInt(v, 10))
			}
			fmt.Fprintf(b, "%s:   %*d/%d %s: %s [%s]\n", place(s.Place), digits, k+1, n, s.Function, text, strings.Join(c, ", "))
		}
	}
	for _, g := range grouped(run.openShown(opt.Verbose)) {
		o := &g[0]
		inst := ""
		if o.Instance != "" {
			inst = " for " + o.Instance
		}
		fmt.Fprintf(b, "%s: undecided %s: %s%s: %s\n", place(o.Place), claims(g), o.Root.Name, inst, o.StoppedBy)
	}
	if !opt.Quiet {
		for _, st := range run.Stale {
			fmt.Fprintf(b, "%s:%d: advice %s: %s\n", st.File, st.Line, st.Claim, st.Text)
		}
		total, parts := Sentence(run.Result)
		if run.Gated {
			s := run.Standing()
			parts += "; new: " + counted(s.NewBroken, s.NewAdvice, s.NewOpen) + "; accepted: " + counted(s.AcceptedBroken, 0, s.AcceptedOpen)
		}
		fmt.Fprintf(b, "%s: %s\n", total, parts)
	}
	return b.Flush()
}
