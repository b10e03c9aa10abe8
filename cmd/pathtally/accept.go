package main

import (
	"context"
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"pathtally/properties/accept"
	"pathtally/properties/report"
)

const acceptHelp = `pathtally accept [packages]     record today's findings; later runs stop only for new ones

  what      --tests  --deps  --build OS/ARCH[,tags=a,b]  --tags LIST  -C DIR
  which     --only RULE[/CLAIM[:ID]]  --rules FILE
  how       --reason TEXT  --review  --prune
  limits    --steps N  --jobs N

  pathtally accept ./... --reason "older than the gate"
  pathtally accept ./berth --only mutex/balanced:51a1d426 --reason "Close unlocks"
  pathtally accept ./... --review     what is accepted, new and stale; writes nothing
  pathtally accept ./... --prune      drop what is gone; accepts nothing new

They go to pathtally.accepted at the module root: commit it. In source, a comment
does the same for a finding of its line or the next: //pathtally:accept RULE/CLAIM: reason

exit  0 done (with --review: nothing is new)   1 with --review: something is new   2 could not run
`

type acceptFlags struct {
	checkFlags
	reason        string
	review, prune bool
}

func acceptCommand(ctx context.Context, s streams) *cobra.Command {
	var f acceptFlags
	c := &cobra.Command{
		Use:  "accept [packages]",
		RunE: func(_ *cobra.Command, args []string) error { return acceptFindings(ctx, s, &f, args) },
	}
	fl := c.Flags()
	f.whatFlags(fl)
	fl.StringVar(&f.reason, "reason", "", "why they are accepted")
	fl.BoolVar(&f.review, "review", false, "show, write nothing")
	fl.BoolVar(&f.prune, "prune", false, "drop stale entries")
	setHelp(c, acceptHelp)
	return c
}

// acceptFindings runs the command.
func acceptFindings(ctx context.Context, s streams, f *acceptFlags, patterns []string) error {
	if err := f.validateWhat(); err != nil {
		return err
	}
	reason := strings.Join(strings.Fields(f.reason), " ")
	switch {
	case slices.Contains(patterns, ""):
		return usage("a package pattern is empty: write ./... for all packages from here on down")
	case f.review && f.prune:
		return usage("--review writes nothing: leave --prune out")
	case (f.review || f.prune) && reason != "":
		return usage("--reason is for what is accepted now: leave --review and --prune out")
	}
	only, err := parseOnly(f.only)
	if err != nil {
		return err
	}
	bar := newProgress(s.err, s.errTerminal, false)
	defer bar.clear()
	whole, err := judgeBuilds(ctx, &f.checkFlags, patterns, only, bar, &timings{began: time.Now()})
	if err != nil {
		return err
	}
	bar.clear()
	data, err := readGate(whole, &f.checkFlags, only)
	if err != nil {
		return err
	}
	run := whole.reportRun(patterns)
	g, err := data.apply(run)
	if err != nil {
		return err
	}
	g.root = whole.builds[0].prog.ModuleDir
	missing := only.keep(run.Result)
	if missing != "" {
		return &failure{stage: "usage", message: fmt.Sprintf("finding %s is not among the findings of this run", missing), text: fmt.Sprintf("pathtally: finding %s is not among the findings of this run", missing)}
	}
	if whole.builds[0].prog.ModulePath == "" && whole.builds[0].prog.Workspace == "" {
		return usage("there is no module here to keep a %s in", accept.FileName)
	}
	switch {
	case f.review:
		return review(s, run, g)
	case f.prune:
		return prune(s, g)
	}
	return record(s, run, g, reason, only.byID())
}

// record adds what is new to the file. With one finding named by its ID,
// undecided questions are not meant.
func record(s streams, run *report.Run, g *gate, reason string, byID bool) error {
	var add, again []accept.Entry
	put := func(print string, e accept.Entry) {
		switch a, ok := run.Accepted[print]; {
		case !ok:
			add = append(add, e)
		case !a.Source:
			again = append(again, e)
		}
	}
	for i := range run.Result.Findings {
		if x := &run.Result.Findings[i]; !x.Advice {
			put(x.Fingerprint, accept.EntryOf(x, g.build, reason))
		}
	}
	for i := range run.Result.Open {
		if x := &run.Result.Open[i]; !x.Advice && !byID {
			put(x.Fingerprint(), accept.EntryOfOpen(x, g.build, reason))
		}
	}
	add = slices.CompactFunc(add, func(a, b accept.Entry) bool { return a.Fingerprint == b.Fingerprint })
	if len(add) > 0 && reason == "" {
		n := fmt.Sprintf("%d are", len(add))
		if len(add) == 1 {
			n = "1 is"
		}
		return usage("%s new; accepting needs a reason: --reason \"why this may stay\"", n)
	}
	next := accept.Update(g.file, append(again, add...))
	if err := save(g, next); err != nil {
		return err
	}
	for _, e := range add {
		fmt.Fprintf(s.out, "accepted    %-9s  %s  %s  in %s of %s\n", e.Kind, e.Claim, e.Fingerprint[:8], e.Function, e.Package)
	}
	fmt.Fprintf(s.out, "%s   %s, %s\n", accept.FileName, countOf(len(add), "new entry", "new entries"), countOf(len(next.Entries), "entry in all", "entries in all"))
	stale(s, g)
	return nil
}

func save(g *gate, next *accept.File) error {
	if next.String() == g.file.String() || (len(next.Entries) == 0 && len(g.file.Entries) == 0) {
		return nil
	}
	if err := next.Write(g.root); err != nil {
		return &failure{stage: "accept", message: "writing " + accept.FileName + ": " + err.Error(), text: "pathtally: writing " + accept.FileName + ": " + err.Error()}
	}
	return nil
}

func countOf(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %s", n, many)
}

func stale(s streams, g *gate) {
	for _, st := range g.applied.Stale {
		at := fmt.Sprintf("%s:%d", st.File, st.Line)
		if st.Column > 0 {
			at += fmt.Sprintf(":%d", st.Column)
		}
		fmt.Fprintf(s.out, "stale       %s: %s\n", at, st.Text)
	}
}

// prune drops stale entries.
func prune(s streams, g *gate) error {
	next, n := accept.Prune(g.file, g.applied)
	if err := save(g, next); err != nil {
		return err
	}
	for _, st := range g.applied.Stale {
		if st.Fingerprint != "" {
			fmt.Fprintf(s.out, "dropped     %s  %s  in %s\n", st.Claim, st.Fingerprint[:8], st.Function)
		} else {
			fmt.Fprintf(s.out, "stale       %s:%d:%d: %s; take it out by hand\n", st.File, st.Line, st.Column, st.Text)
		}
	}
	fmt.Fprintf(s.out, "%s   %s dropped, %s\n", accept.FileName, countOf(n, "entry", "entries"), countOf(len(next.Entries), "left", "left"))
	return nil
}

// review shows what is accepted with its place today, what is new, and what is
// stale.
func review(s streams, run *report.Run, g *gate) error {
	fresh := 0
	show := func(at, kind, claim, print, function, message string, a accept.Acceptance, ok bool) {
		if ok {
			fmt.Fprintf(s.out, "%s: accepted: %s  (%s:%s)\n    reason      %s  (%s)\n", at, message, claim, print[:8], a.Reason, a.Where)
			return
		}
		fresh++
		fmt.Fprintf(s.out, "%s: new, %s: %s  (%s:%s)\n", at, kind, message, claim, print[:8])
	}
	for i := range run.Result.Findings {
		x := &run.Result.Findings[i]
		if x.Advice {
			continue
		}
		a, ok := run.Accepted[x.Fingerprint]
		show(fmt.Sprintf("%s:%d:%d", x.Cause.Place.File, x.Cause.Place.Line, x.Cause.Place.Column), accept.Broken, x.Rule+"/"+x.Claim, x.Fingerprint, x.Blame.Name, x.Message, a, ok)
	}
	for i := range run.Result.Open {
		x := &run.Result.Open[i]
		if x.Advice {
			continue
		}
		a, ok := run.Accepted[x.Fingerprint()]
		show(fmt.Sprintf("%s:%d:%d", x.Place.File, x.Place.Line, x.Place.Column), accept.Undecided, x.Rule+"/"+x.Claim, x.Fingerprint(), x.Root.Name, x.Root.Name+" stopped by "+x.StoppedBy, a, ok)
	}
	stale(s, g)
	fmt.Fprintf(s.out, "%s new, %s accepted, %s\n", number(fresh), number(len(run.Accepted)), countOf(len(g.applied.Stale), "stale", "stale"))
	if fresh > 0 {
		return status(exitBroken)
	}
	return nil
}

func number(n int) string { return fmt.Sprintf("%d", n) }
