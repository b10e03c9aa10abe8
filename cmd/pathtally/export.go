package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"pathtally/parikh"
	"pathtally/parikh/lia"
	"pathtally/pds"
	"pathtally/properties/syntax"
)

const exportHelp = `pathtally export [packages]       the system behind a count, for other programs
pathtally export --system FILE    the same of a system written by hand

  what      --rule RULE  --function FUNCTION  --instance TEXT
            --at end|return|success|failure|panic|always
            -C DIR  --deps  --tags LIST  --rules FILE  --steps N
  form      --format json   the system, as pathtally count --system reads it
            --format dot    the system as a graph for Graphviz
            --format smt2   a question as SMT-LIB 2.6, logic QF_LIA; with --ask FORMULA

  pathtally export ./berth --rule mutex --function '(*Desk).Book' > book.json
  pathtally export --system machine.json --format dot | dot -Tsvg > machine.svg
  pathtally export --system machine.json --format smt2 --ask 'a > b' > question.smt2

A system of several instances has a start for each; smt2 takes one.
exit  0 written   2 could not run
`

var exportFormats = []string{"json", "dot", "smt2"}

func exportCommand(ctx context.Context, s streams) *cobra.Command {
	var f countFlags
	var function string
	c := &cobra.Command{
		Use:  "export [packages]",
		RunE: func(_ *cobra.Command, args []string) error { return export(ctx, s, &f, function, args) },
	}
	fl := c.Flags()
	fl.StringVarP(&f.dir, "dir", "C", "", "run in this folder")
	fl.BoolVar(&f.deps, "deps", false, "bring in the bodies of dependencies")
	fl.StringVar(&f.tags, "tags", "", "build tags")
	fl.StringArrayVar(&f.rules, "rules", nil, "a further rule file")
	fl.Int64Var(&f.steps, "steps", 0, "budget of one start")
	fl.StringVar(&f.system, "system", "", "a system as JSON")
	fl.StringVar(&f.rule, "rule", "", "the rule whose counts are meant")
	fl.StringVar(&function, "function", "", "only the paths of this function")
	fl.StringVar(&f.instance, "instance", "", "only this instance, as the function writes it")
	fl.StringVar(&f.at, "at", "end", "where a path is counted: "+syntax.Enumerate(checkpoints, "or"))
	fl.StringVar(&f.ask, "ask", "", "the question of smt2")
	fl.StringVar(&f.format, "format", "json", syntax.Enumerate(exportFormats, "or"))
	completes(c, "format", func() []string { return exportFormats })
	completes(c, "at", func() []string { return checkpoints })
	setHelp(c, exportHelp)
	return c
}

func exportUsage(format string, args ...any) error {
	m := fmt.Sprintf(format, args...)
	return &failure{stage: "usage", message: m, text: "pathtally: " + m + "\nSee: pathtally export --help"}
}

func export(ctx context.Context, s streams, f *countFlags, function string, args []string) error {
	switch {
	case !slices.Contains(exportFormats, f.format):
		return exportUsage("--format %s: there are %s", f.format, syntax.Enumerate(exportFormats, "and"))
	case !slices.Contains(checkpoints, f.at):
		return exportUsage("--at %s: there are %s", f.at, syntax.Enumerate(checkpoints, "and"))
	case f.format == "smt2" && f.ask == "":
		return exportUsage("--format smt2 writes a question: give it with --ask FORMULA")
	case f.format != "smt2" && f.ask != "":
		return exportUsage("--ask belongs to --format smt2")
	case f.steps < 0:
		return exportUsage("--steps %d: at least 1", f.steps)
	case f.system != "" && (len(args) > 0 || f.rule != "" || function != "" || f.instance != "" || f.deps || f.tags != "" || len(f.rules) > 0):
		return exportUsage("--system takes no packages, --rule, --function, --instance, --deps, --tags or --rules")
	case f.system != "" && f.at != "end" && (f.at != "always" || f.format != "smt2"):
		return exportUsage("--at %s: a system is written as it is; a question of one has end and always", f.at)
	case f.system == "" && f.rule == "" && function == "":
		return exportUsage("export: of which rule? Give --rule, or --function, or a system with --system")
	case f.system == "" && f.at == "always" && f.format != "smt2":
		return exportUsage("--at always: the form of a system says where paths end, not that every moment is one; leave it out and use --at always on reading")
	case slices.Contains(args, ""):
		return exportUsage("a package pattern is empty: write ./... for all packages from here on down")
	}
	var b bytes.Buffer
	var err error
	if f.format == "smt2" {
		err = exportQuestion(ctx, s, f, function, args, &b)
	} else {
		var t *pds.Table
		if f.system != "" {
			t, err = readSystem(f.system)
		} else {
			t, err = exportTable(ctx, s, f, function, args)
		}
		if err == nil && f.format == "dot" {
			err = t.WriteDOT(&b)
		} else if err == nil {
			err = t.WriteJSON(&b)
		}
	}
	if err != nil {
		var ours *failure
		if !errors.As(err, &ours) {
			err = &failure{stage: "internal", message: "writing the result: " + err.Error()}
		}
		return err
	}
	if _, err := s.out.Write(b.Bytes()); err != nil {
		return &failure{stage: "internal", message: "writing the result: " + err.Error()}
	}
	return nil
}

// exportTable makes one system of all starts. Below each start stands a symbol
// of its own that is popped only in the states where a path of it ends.
func exportTable(ctx context.Context, s streams, f *countFlags, function string, args []string) (*pds.Table, error) {
	subjects, err := findSubjects(ctx, s, f, function, args)
	if err != nil {
		return nil, err
	}
	first := subjects[0]
	all := &subject{title: "rule " + first.rule.Name, start: first.start, model: first.model, rule: first.rule}
	b, exits, err := all.builder(subjects, f.at, f.steps)
	if err != nil {
		return nil, err
	}
	for i, u := range subjects {
		accept, _ := u.question(f.at)
		name := fmt.Sprintf("start %d: %s", i+1, u.title)
		bottom := fmt.Sprintf("end %d", i+1)
		run := b.State("run")
		below := b.Symbol(bottom)
		b.Start("run", name)
		b.Add(b.Head("run", name), pds.Rule{Kind: pds.Push, State: u.start.Head.State, Top: u.start.Head.Symbol, Below: below})
		for _, q := range exits {
			if accept(q) {
				b.Add(pds.Head{State: q, Symbol: below}, pds.Rule{Kind: pds.Pop, State: run})
			}
		}
	}
	return b.Table(), nil
}

// exportQuestion writes --ask about one start.
func exportQuestion(ctx context.Context, s streams, f *countFlags, function string, args []string, b *bytes.Buffer) error {
	var subjects []*subject
	var err error
	if f.system != "" {
		subjects, err = systemSubject(f)
	} else {
		subjects, err = findSubjects(ctx, s, f, function, args)
	}
	if err != nil {
		return err
	}
	if len(subjects) > 1 {
		var titles []string
		for _, u := range subjects {
			titles = append(titles, u.title)
		}
		if len(titles) > 6 {
			titles = append(titles[:6], fmt.Sprintf("%d more", len(titles)-6))
		}
		return exportUsage("--format smt2 asks about one start and there are %d; choose with --function and --instance: %s", len(subjects), strings.Join(titles, "; "))
	}
	u := subjects[0]
	if u.sys == nil {
		if err := u.build(f); err != nil {
			return err
		}
	}
	g := u.sys.Grammar()
	if !slices.Equal(g.Counts, u.sys.Names()) {
		return &failure{stage: "usage", message: filepath.ToSlash(f.system) + ": guards: the published encoding has no data, only counts"}
	}
	err = parikh.WriteSMTLIB(b, g, f.ask)
	var se *lia.SyntaxError
	if errors.As(err, &se) {
		return askFailure(f.ask, g.Counts, err)
	}
	return err
}
