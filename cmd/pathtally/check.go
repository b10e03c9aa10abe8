package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"runtime/debug"
	"runtime/pprof"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"pathtally/frontend/load"
	"pathtally/properties"
	"pathtally/properties/judge"
	"pathtally/properties/report"
	"pathtally/properties/syntax"
)

const checkHelp = `pathtally check [packages]      judge every rule on every call path

  what      --tests  --deps  --build OS/ARCH[,tags=a,b]  --tags LIST  -C DIR
  which     --only RULE[/CLAIM[:ID]]  --about FUNCTION  --base REV  --rules FILE
  answers   --format text|lines|json|sarif|html|markdown  --output FORMAT=FILE
            --assumptions  --ledger FILE
  limits    --steps N  --jobs N  --part I/N  --undecided stop|note  --partial
  comfort   --quiet  --verbose  --timings FILE

  pathtally check ./...                          the module
  pathtally check ./... --base origin/main       only what a revision does not have yet
  pathtally check ./berth --only mutex           one package, one rule
  pathtally check ./... --about '(*Desk).Book'   every verdict on a function

What pathtally.accepted and //pathtally:accept comments accept does not stop a run.
exit  0 nothing new is broken or undecided   1 broken   2 could not run   3 undecided only
`

// showFlags say how to answer; check and join share them.
type showFlags struct {
	format      string
	outputs     []string
	assumptions bool
	undecided   string
	quiet       bool
	verbose     bool
}

func (f *showFlags) register(fl *pflag.FlagSet) {
	fl.StringVar(&f.format, "format", "text", "what to print: "+syntax.Enumerate(printed, "or"))
	fl.StringArrayVar(&f.outputs, "output", nil, "write FORMAT=FILE as well")
	fl.BoolVar(&f.assumptions, "assumptions", false, "list every assumption")
	fl.StringVar(&f.undecided, "undecided", "stop", "stop or note")
	fl.BoolVar(&f.quiet, "quiet", false, "findings only")
	fl.BoolVar(&f.verbose, "verbose", false, "whole paths, accepted findings too")
}

func (f *showFlags) validate() error {
	if !slices.Contains(printed, f.format) {
		return usage("--format %s: there are %s", f.format, syntax.Enumerate(printed, "and"))
	}
	if f.undecided != "stop" && f.undecided != "note" {
		return usage("--undecided %s: there are stop and note", f.undecided)
	}
	_, err := parseOutputs(f.outputs)
	return err
}

// checkFlags are the flags of check.
type checkFlags struct {
	showFlags
	dir         string
	tests, deps bool
	tags        string
	builds      []string
	only        []string
	about       string
	base        string
	rules       []string
	steps       int64
	jobs        int
	partial     bool
	part        string
	ledger      string
	timings     string
	cpuProfile  string
}

// whatFlags says what to read and judge; check and accept share them.
func (f *checkFlags) whatFlags(fl *pflag.FlagSet) {
	fl.StringVarP(&f.dir, "dir", "C", "", "run in this folder")
	fl.BoolVar(&f.tests, "tests", false, "judge test files too")
	fl.BoolVar(&f.deps, "deps", false, "bring in the bodies of dependencies")
	fl.StringVar(&f.tags, "tags", "", "build tags")
	fl.StringArrayVar(&f.builds, "build", nil, "judge this build, OS/ARCH or OS/ARCH,tags=a,b")
	fl.StringArrayVar(&f.only, "only", nil, "judge only this rule, claim or finding")
	fl.StringArrayVar(&f.rules, "rules", nil, "a further rule file")
	fl.Int64Var(&f.steps, "steps", 0, "budget of one start")
	fl.IntVar(&f.jobs, "jobs", 0, "rules judged at a time")
}

func checkCommand(ctx context.Context, s streams) *cobra.Command {
	var f checkFlags
	c := &cobra.Command{
		Use:  "check [packages]",
		RunE: func(_ *cobra.Command, args []string) error { return check(ctx, s, &f, args) },
	}
	fl := c.Flags()
	f.whatFlags(fl)
	f.register(fl)
	completes(c, "format", func() []string { return printed })
	completes(c, "undecided", func() []string { return []string{"stop", "note"} })
	completes(c, "only", builtInNames)
	fl.StringVar(&f.about, "about", "", "list every verdict on a function")
	fl.StringVar(&f.base, "base", "", "report only what this git revision does not have")
	fl.BoolVar(&f.partial, "partial", false, "judge the rest when packages have errors")
	fl.StringVar(&f.part, "part", "", "judge part I of N; see pathtally join")
	fl.StringVar(&f.ledger, "ledger", "", "write what was judged and what was not to a file")
	fl.StringVar(&f.timings, "timings", "", "write times and memory to a file")
	fl.StringVar(&f.cpuProfile, "cpuprofile", "", "write a CPU profile")
	if err := fl.MarkHidden("cpuprofile"); err != nil {
		panic(err)
	}
	setHelp(c, checkHelp)
	return c
}

func usage(format string, args ...any) error {
	m := fmt.Sprintf(format, args...)
	return &failure{stage: "usage", message: m, text: "pathtally: " + m + "\nSee: pathtally check --help"}
}

func (f *checkFlags) validate() error {
	if err := f.showFlags.validate(); err != nil {
		return err
	}
	if f.about != "" && f.format != "text" {
		return usage("--about prints text: leave --format %s out", f.format)
	}
	if f.part != "" {
		if _, err := parsePart(f.part); err != nil {
			return err
		}
		if f.format != "text" || len(f.outputs) > 0 || f.about != "" || f.ledger != "" {
			return usage("--part prints what pathtally join reads: give --format, --output and --ledger to join or to a whole run")
		}
		if f.partial {
			return usage("--part with --partial: a run that leaves something out cannot be joined")
		}
	}
	return f.validateWhat()
}

func (f *checkFlags) validateWhat() error {
	if f.steps < 0 {
		return usage("--steps %d: at least 1", f.steps)
	}
	if f.jobs < 0 {
		return usage("--jobs %d: at least 1", f.jobs)
	}
	if f.tags != "" && len(f.builds) > 0 {
		return usage("--tags with --build: write the tags behind the build, --build linux/amd64,tags=%s", f.tags)
	}
	_, err := parseBuilds(f)
	return err
}

// check runs the command.
func check(ctx context.Context, s streams, f *checkFlags, patterns []string) (err error) {
	if err := f.validate(); err != nil {
		return err
	}
	if slices.Contains(patterns, "") {
		return usage("a package pattern is empty: write ./... for all packages from here on down")
	}
	only, err := parseOnly(f.only)
	if err != nil {
		return err
	}
	outputs, err := parseOutputs(f.outputs)
	if err != nil {
		return err
	}
	if f.cpuProfile != "" {
		stop, err := profile(f.cpuProfile)
		if err != nil {
			return err
		}
		defer stop()
	}
	times := &timings{began: time.Now()}
	bar := newProgress(s.err, s.errTerminal, f.quiet)
	defer bar.clear()

	whole, err := judgeBuilds(ctx, f, patterns, only, bar, times)
	if err != nil {
		return err
	}
	gd, err := readGate(whole, f, only)
	if err != nil {
		return err
	}
	if f.base != "" {
		from := time.Now()
		if gd.Base, err = baseOf(ctx, f, patterns, only, bar, whole); err != nil {
			return err
		}
		times.done("base", from)
	}
	bar.clear()
	if f.timings != "" {
		if err := times.write(f.timings); err != nil {
			return &failure{stage: "usage", message: err.Error()}
		}
	}
	if f.part != "" {
		return writePart(s.out, f, whole, patterns, gd)
	}
	run := whole.reportRun(patterns)
	if f.ledger != "" {
		if err := replaceFile(f.ledger, []byte(whole.ledgerText(run))); err != nil {
			return &failure{stage: "usage", message: "--ledger: " + err.Error()}
		}
	}
	if _, err := gd.apply(run); err != nil {
		return err
	}
	missing := only.keep(run.Result)
	if err := show(s, &f.showFlags, run, outputs, f.about); err != nil {
		return err
	}
	if missing != "" {
		fmt.Fprintf(s.err, "pathtally: finding %s is not among the findings of this run\n", missing)
	}
	if left := whole.leftOut(); left != "" {
		fmt.Fprint(s.err, left)
		return status(exitFailed)
	}
	return statusOf(run, f.undecided == "note")
}

// show prints a run and writes the outputs beside it.
func show(s streams, f *showFlags, run *report.Run, outputs []output, about string) error {
	opt := report.Options{Colour: s.outTerminal && !s.noColour, Width: s.width, Assumptions: f.assumptions, Quiet: f.quiet, Verbose: f.verbose}
	var err error
	if about != "" {
		err = report.About(s.out, run, func(q judge.Question) bool {
			return sameFunction(about, q.Root) || slices.ContainsFunc(q.Blame, func(fn properties.Func) bool { return sameFunction(about, fn) })
		}, opt)
	} else {
		err = writers[f.format](s.out, run, opt)
	}
	if err != nil {
		return &failure{stage: "internal", message: "writing the result: " + err.Error()}
	}
	return writeOutputs(outputs, run, opt)
}

// statusOf gives the exit status: a new finding of a claim stops, and so does a
// new undecided question; advice and what is accepted never do.
func statusOf(run *report.Run, note bool) error {
	for i := range run.Result.Findings {
		if x := &run.Result.Findings[i]; !x.Advice && !run.IsAccepted(x.Fingerprint) {
			return status(exitBroken)
		}
	}
	for i := range run.Result.Open {
		if x := &run.Result.Open[i]; !x.Advice && !run.IsAccepted(x.Fingerprint()) && !note {
			return status(exitUndecided)
		}
	}
	return nil
}

func profile(file string) (stop func(), err error) {
	w, err := os.Create(file)
	if err != nil {
		return nil, &failure{stage: "usage", message: "--cpuprofile: " + err.Error()}
	}
	if err := pprof.StartCPUProfile(w); err != nil {
		w.Close()
		return nil, &failure{stage: "usage", message: "--cpuprofile: " + err.Error()}
	}
	return func() { pprof.StopCPUProfile(); w.Close() }, nil
}

// loadAll reads the packages and the rules that apply to them. With rules, those
// are judged and not the ones on disk.
func loadAll(f *checkFlags, cfg load.Config, rules []*properties.RuleFile, bar *progress, times *timings) (*load.Program, *properties.RuleBook, []*properties.RuleFile, error) {
	from := time.Now()
	prog, err := load.Load(cfg)
	if err != nil {
		return nil, nil, nil, loadFailure(err)
	}
	files := rules
	if files == nil {
		if files, err = ruleFiles(prog, f.rules); err != nil {
			return nil, nil, nil, err
		}
	}
	// A rule is right or wrong whatever packages are asked for: what its file
	// imports must be in the build. That is nearly always so already.
	if missing := missingImports(prog, files); len(missing) > 0 {
		if len(cfg.Patterns) == 0 {
			cfg.Patterns = []string{"."}
		}
		cfg.Patterns = append(slices.Clone(cfg.Patterns), missing...)
		if prog, err = load.Load(cfg); err != nil {
			return nil, nil, nil, loadFailure(err)
		}
	}
	times.done("load", from)
	bar.clear()
	from = time.Now()
	book, err := properties.Resolve(files, prog.Universe(), properties.Options{})
	times.done("rules", from)
	if err != nil {
		return nil, nil, nil, ruleFailure(err)
	}
	return prog, book, files, nil
}

// missingImports lists what the rule files of the module import and the build
// does not hold.
func missingImports(prog *load.Program, files []*properties.RuleFile) []string {
	var missing []string
	for _, p := range properties.RuleImports(files) {
		if prog.Universe().Package(p) == nil {
			missing = append(missing, p)
		}
	}
	return missing
}

// loadFailure turns what is wrong with the packages into a failure.
func loadFailure(err error) error {
	f := &failure{stage: "load", message: err.Error(), text: "pathtally: " + err.Error()}
	var list load.Errors
	if errors.As(err, &list) {
		f.text = err.Error()
		f.message = list[0].Message
		for _, e := range list {
			if e.Place != "" {
				f.places = append(f.places, e.Place)
			}
		}
	}
	return f
}

func ruleFiles(prog *load.Program, extra []string) ([]*properties.RuleFile, error) {
	var dirs []string
	for _, p := range prog.Packages {
		if p.Bodies && p.Main {
			dirs = append(dirs, dirOf(prog, p))
		}
	}
	slices.Sort(dirs)
	return readRules(prog.ModuleDir, slices.Compact(dirs), extra)
}

// dirOf is a package's folder relative to the module root, "." outside of it.
func dirOf(prog *load.Program, p *load.Package) string {
	rel, err := filepath.Rel(prog.ModuleDir, p.Dir)
	if err != nil || rel == ".." || strings.HasPrefix(rel, ".."+string(filepath.Separator)) {
		return "."
	}
	return filepath.ToSlash(rel)
}

func readRules(root string, dirs, extra []string) ([]*properties.RuleFile, error) {
	own, err := properties.ReadRuleFiles(root, dirs)
	if err != nil {
		return nil, ruleFailure(err)
	}
	files := append(properties.BuiltInRules(), own...)
	for _, name := range extra {
		src, err := os.ReadFile(name)
		if err != nil {
			return nil, &failure{stage: "rules", message: "--rules: " + err.Error(), places: []string{filepath.ToSlash(name)}}
		}
		files = append(files, properties.ParseRuleFile(filepath.ToSlash(name), ".", string(src)))
	}
	return files, nil
}

func ruleFailure(err error) error {
	f := &failure{stage: "rules", message: err.Error()}
	var list syntax.Errors
	if errors.As(err, &list) {
		f.text = list.Text()
		for _, e := range list {
			f.places = append(f.places, fmt.Sprintf("%s:%d:%d", e.File, e.Line, e.Column))
		}
	}
	return f
}

// ledger counts what was looked at.
type ledger struct {
	withEvents int        // functions; below 0 if the models do not say
	functions  []string   // that meet an event: package, NUL, name and place; sorted
	idle       []idleRule // rules of the module whose events are met nowhere
}

// An idleRule is a rule that met nothing; Index is its place among the rules.
type idleRule struct {
	Index int
	Name  string
}

// judgeAll makes the model of each rule and judges it, several at a time.
func judgeAll(prog *load.Program, book *properties.RuleBook, only onlyList, f *checkFlags, bar *progress, times *timings) ([]*judge.RuleResult, ledger, error) {
	from := time.Now()
	low := analyze(prog)
	low.Judge(book.Rules)
	times.done("analyze", from)
	from = time.Now()
	refs := map[string]properties.PackageRef{}
	for _, p := range prog.Packages {
		if p.Bodies {
			refs[p.Path] = properties.PackageRef{Path: p.Path, Dir: dirOf(prog, p)}
		}
	}
	var rules []*properties.ResolvedRule
	for _, r := range book.Rules {
		if r := only.claims(r); r != nil {
			rules = append(rules, r)
		}
	}
	// With --part each rule is judged by one of the parts; the others stay nil.
	pick, err := parsePart(f.part)
	if err != nil {
		return nil, ledger{}, err
	}
	var mine []int
	for i := range rules {
		if pick.has(i) {
			mine = append(mine, i)
		}
	}
	jobs := f.jobs
	if jobs == 0 {
		jobs = runtime.GOMAXPROCS(0)
	}
	results := make([]*judge.RuleResult, len(rules))
	failures := make([]error, len(rules))
	met := make([][]properties.Func, len(rules))
	idle := make([]bool, len(rules))
	var next, finished atomic.Int32
	one := func(i int) {
		defer func() {
			if p := recover(); p != nil {
				failures[i] = internal(rules[i], p)
			}
		}()
		rule := rules[i]
		m := low.Lower(rule)
		results[i] = judge.Judge(rule, m, judge.Options{
			Steps: f.steps,
			State: func(claim, pkg string) properties.State {
				ref, ok := refs[pkg]
				if !ok {
					ref = properties.PackageRef{Path: pkg, Dir: "."}
				}
				return book.State(rule, claim, ref)
			},
			Asked: func(v judge.Verdict) { bar.judged(v == judge.Broken, int(finished.Load()), len(mine)) },
		})
		idle[i] = !rule.BuiltIn && len(m.Starts()) == 0
		if l, ok := m.(properties.Ledger); ok {
			met[i] = l.WithEvents()
		}
		finished.Add(1)
	}
	var wg sync.WaitGroup
	for range min(jobs, max(len(mine), 1)) {
		wg.Go(func() {
			for {
				i := int(next.Add(1)) - 1
				if i >= len(mine) {
					return
				}
				one(mine[i])
			}
		})
	}
	wg.Wait()
	// The first rule in the order of the files speaks, whichever failed first.
	for _, err := range failures {
		if err != nil {
			return nil, ledger{}, err
		}
	}
	times.done("judge", from)
	var led ledger
	seen := map[string]bool{}
	for i := range rules {
		for _, fn := range met[i] {
			seen[fmt.Sprint(fn.Package, "\x00", fn.Name, fn.Place)] = true
		}
		if idle[i] {
			led.idle = append(led.idle, idleRule{i, rules[i].Name})
		}
	}
	led.withEvents = len(seen)
	for fn := range seen {
		led.functions = append(led.functions, fn)
	}
	slices.Sort(led.functions)
	if len(seen) == 0 && !slices.ContainsFunc(met, func(f []properties.Func) bool { return f != nil }) {
		led.withEvents = -1 // the models do not say
	}
	return results, led, nil
}

// internal describes a bug: the stage, the rule, and a stack for who mends it.
func internal(rule *properties.ResolvedRule, p any) error {
	var bug *judge.Bug
	if err, ok := p.(error); ok && errors.As(err, &bug) {
		return &failure{stage: "internal", message: "a bug of pathtally: " + bug.Error(),
			text: "pathtally: this is a bug of pathtally, not of your code\n    while       " + bug.Stage + "\n    rule        " + bug.Rule + "\n    at          " + bug.Where + "\n    found       " + bug.Text}
	}
	m := fmt.Sprintf("a bug of pathtally: judging rule %s: %v", rule.Name, p)
	return &failure{stage: "internal", message: m, places: []string{rule.Pos},
		text: fmt.Sprintf("pathtally: this is a bug of pathtally, not of your code\n    while       judging rule %s\n    found       %v\n\n%s", rule.Name, p, debug.Stack())}
}

// sameFunction compares a name that a person wrote with a function: Book,
// Desk.Book, (*Desk).Book, berth.Book and the import path before it all do.
func sameFunction(given string, fn properties.Func) bool {
	bare := strings.NewReplacer("(", "", ")", "", "*", "").Replace
	g, name := bare(given), bare(fn.Name)
	full := fn.Package + "." + name
	return g == name || g == full || strings.HasSuffix(full, "/"+g) || strings.HasSuffix(full, "."+g)
}
