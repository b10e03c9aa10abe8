package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"pathtally/properties/judge"
	"pathtally/properties/report"
)

// A run is divided by rules: each part loads everything and judges every N-th
// rule. Rules do not know of each other, so that the parts together are exactly
// the undivided run.

// partOf is I of N; the zero value is the whole.
type partOf struct{ I, N int }

func (p partOf) has(rule int) bool { return p.N == 0 || rule%p.N == p.I-1 }

func parsePart(text string) (partOf, error) {
	if text == "" {
		return partOf{}, nil
	}
	a, b, _ := strings.Cut(text, "/")
	i, err1 := strconv.Atoi(a)
	n, err2 := strconv.Atoi(b)
	if err1 != nil || err2 != nil || n < 1 || i < 1 || i > n {
		return partOf{}, usage("--part %s: write I/N, such as 1/3, with I from 1 to N", text)
	}
	return partOf{i, n}, nil
}

const partFormat = "pathtally-part"

// part is what a run with --part prints, as JSON.
type part struct {
	Format  string
	Version int
	Tool    string
	Part    partOf
	// Run and Gate are equal in all parts of a run.
	Run    *report.Run
	Gate   *gateData
	Builds []partBuild
	// Known and Open of the base differ by part and stand here.
	Known, Open []string
}

// partBuild is one build in a part.
type partBuild struct {
	Name       string
	Results    []*judge.RuleResult // by rule; null for rules of other parts
	WithEvents int
	Functions  []string
	Idle       []idleRule
}

// writePart prints a part.
func writePart(w io.Writer, f *checkFlags, j *judged, patterns []string, gate *gateData) error {
	which, err := parsePart(f.part)
	if err != nil {
		return err
	}
	p := part{Format: partFormat, Version: 1, Tool: version, Part: which, Run: j.header(patterns), Gate: gate}
	if gate.Base != nil {
		p.Known, p.Open = gate.Base.Known, gate.Base.Open
		gate.Base.Known, gate.Base.Open = nil, nil
	}
	for _, a := range j.builds {
		p.Builds = append(p.Builds, partBuild{a.name, a.results, a.led.withEvents, a.led.functions, a.led.idle})
	}
	if err := json.NewEncoder(w).Encode(p); err != nil {
		return &failure{stage: "internal", message: "writing the part: " + err.Error()}
	}
	return nil
}

const joinHelp = `pathtally join FILES            one result out of the parts of a run

  answers   --format text|lines|json|sarif|html|markdown  --output FORMAT=FILE
            --assumptions
  limits    --undecided stop|note
  comfort   --quiet  --verbose  -C DIR

  pathtally check ./... --part 1/3 > 1.part      on one machine, 2/3 and 3/3 on others
  pathtally join 1.part 2.part 3.part            exactly what the undivided run prints

exit  0 nothing new is broken or undecided   1 broken   2 could not run   3 undecided only
`

type joinFlags struct {
	showFlags
	dir string
}

func joinCommand(s streams) *cobra.Command {
	var f joinFlags
	c := &cobra.Command{Use: "join FILES", RunE: func(_ *cobra.Command, args []string) error { return join(s, &f, args) }}
	f.register(c.Flags())
	c.Flags().StringVarP(&f.dir, "dir", "C", "", "the module, whose source html and sarif show")
	completes(c, "format", func() []string { return printed })
	setHelp(c, joinHelp)
	return c
}

func joinFailure(file, format string, args ...any) error {
	m := fmt.Sprintf(format, args...)
	return &failure{stage: "join", message: m, text: "pathtally: " + file + ": " + m, places: []string{filepath.ToSlash(file)}}
}

// join puts parts together.
func join(s streams, f *joinFlags, files []string) error {
	if err := f.validate(); err != nil {
		return err
	}
	outputs, err := parseOutputs(f.outputs)
	if err != nil {
		return err
	}
	if len(files) == 0 {
		return usage("join: which parts? Make them by pathtally check --part 1/N > 1.part")
	}
	var parts []*part
	for _, name := range files {
		p, err := readPart(name)
		if err != nil {
			return err
		}
		parts = append(parts, p)
	}
	first := parts[0]
	same := func(p *part) []byte {
		// Cannot fail: it was read from JSON.
		text, _ := json.Marshal([]any{p.Tool, p.Part.N, p.Run, p.Gate})
		return text
	}
	from := make([]string, first.Part.N+1)
	for i, p := range parts {
		switch {
		case p.Tool != first.Tool:
			return joinFailure(files[i], "made by version %s, %s by %s", p.Tool, files[0], first.Tool)
		case p.Part.N != first.Part.N:
			return joinFailure(files[i], "one of %d parts, %s is one of %d", p.Part.N, files[0], first.Part.N)
		case from[p.Part.I] != "":
			return joinFailure(files[i], "part %d is in %s already", p.Part.I, from[p.Part.I])
		case !bytes.Equal(same(p), same(first)) || len(p.Builds) != len(first.Builds):
			return joinFailure(files[i], "not of the same run as %s: the sources, the flags or %s differ", files[0], "pathtally.accepted")
		}
		from[p.Part.I] = files[i]
	}
	for i := 1; i <= first.Part.N; i++ {
		if from[i] == "" {
			return joinFailure(files[0], "part %d of %d is missing", i, first.Part.N)
		}
	}
	run := first.Run
	in := map[string][]int{}
	var results []*judge.Result
	var leds []ledger
	for b := range first.Builds {
		whole := &analysis{results: make([]*judge.RuleResult, len(first.Builds[b].Results))}
		led := ledger{withEvents: -1}
		for i, p := range parts {
			x := p.Builds[b]
			if x.Name != first.Builds[b].Name || len(x.Results) != len(whole.results) {
				return joinFailure(files[i], "not of the same run as %s: build %s", files[0], x.Name)
			}
			for k, r := range x.Results {
				if (r != nil) != p.Part.has(k) {
					return joinFailure(files[i], "the file is damaged: rule %d", k)
				}
				if r != nil {
					whole.results[k] = r
				}
			}
			led.withEvents = max(led.withEvents, x.WithEvents)
			led.functions = append(led.functions, x.Functions...)
			led.idle = append(led.idle, x.Idle...)
		}
		slices.SortFunc(led.idle, func(a, b idleRule) int { return a.Index - b.Index })
		r := mergeOf(whole)
		for i := range r.Findings {
			in[r.Findings[i].Fingerprint] = append(in[r.Findings[i].Fingerprint], b)
		}
		results = append(results, r)
		leds = append(leds, led)
	}
	run.Result, run.FindingBuilds = judge.Union(results), in
	met(run, leds)
	root, _, err := moduleRoot(f.dir)
	if err != nil {
		return &failure{stage: "usage", message: err.Error()}
	}
	run.Source = func(name string) ([]byte, error) { return os.ReadFile(filepath.Join(root, filepath.FromSlash(name))) }
	if base := first.Gate.Base; base != nil {
		for _, p := range parts {
			base.Known = append(base.Known, p.Known...)
			base.Open = append(base.Open, p.Open...)
		}
		slices.Sort(base.Known)
		slices.Sort(base.Open)
	}
	if _, err := first.Gate.apply(run); err != nil {
		return err
	}
	if err := show(s, &f.showFlags, run, outputs, ""); err != nil {
		return err
	}
	return statusOf(run, f.undecided == "note")
}

func readPart(name string) (*part, error) {
	text, err := os.ReadFile(name)
	if err != nil {
		return nil, &failure{stage: "join", message: err.Error(), text: "pathtally: " + err.Error(), places: []string{filepath.ToSlash(name)}}
	}
	var p part
	if err := json.Unmarshal(text, &p); err != nil {
		return nil, joinFailure(name, "this is no whole part: %v", err)
	}
	if p.Format != partFormat || p.Run == nil || p.Gate == nil || len(p.Builds) == 0 || p.Part.N < 1 || p.Part.I < 1 || p.Part.I > p.Part.N {
		return nil, joinFailure(name, "this is no part; make one by pathtally check --part 1/N")
	}
	if p.Version != 1 {
		return nil, joinFailure(name, "a part of version %d, this pathtally reads version 1", p.Version)
	}
	return &p, nil
}
