package report

import (
	"encoding/json"
	"io"

	"pathtally/properties"
	"pathtally/properties/judge"
)

// The types below are the JSON of `check`. Fields are only ever added.

type jsonTool struct {
	Name     string    `json:"name"`
	Version  string    `json:"version"`
	Rulesets []Ruleset `json:"rulesets"`
}

type jsonSpot struct {
	File     string `json:"file"`
	Line     int    `json:"line"`
	Column   int    `json:"column"`
	Function string `json:"function"`
}

type jsonStep struct {
	File     string           `json:"file"`
	Line     int              `json:"line"`
	Column   int              `json:"column"`
	Function string           `json:"function"`
	Step     string           `json:"step"`
	Text     string           `json:"text"`
	Counts   map[string]int64 `json:"counts"` // encoding/json sorts the keys
}

type jsonFinding struct {
	Rule        string           `json:"rule"`
	Claim       string           `json:"claim"`
	Severity    string           `json:"severity"`
	Verdict     string           `json:"verdict"`
	Message     string           `json:"message"`
	Package     string           `json:"package"`
	Function    string           `json:"function"`
	Instance    string           `json:"instance"`
	Checkpoint  string           `json:"checkpoint"`
	Formula     string           `json:"formula"`
	Reason      string           `json:"reason"`
	File        string           `json:"file"`
	Line        int              `json:"line"`
	Column      int              `json:"column"`
	Opened      *jsonSpot        `json:"opened"`
	Cause       jsonSpot         `json:"cause"`
	Blame       string           `json:"blame"` // the function that the finding stands in
	Counts      map[string]int64 `json:"counts"`
	Accepted    *string          `json:"accepted"`
	Fingerprint string           `json:"fingerprint"`
	Starts      int              `json:"starts"`
	Follows     string           `json:"follows"` // fingerprint of the finding that this one follows from
	Builds      []int            `json:"builds"`
	Assumptions []int            `json:"assumptions"`
	Path        []jsonStep       `json:"path"`
}

type jsonOpen struct {
	Rule      string `json:"rule"`
	Claim     string `json:"claim"`
	Severity  string `json:"severity"`
	Package   string `json:"package"`
	Function  string `json:"function"`
	Instance  string `json:"instance"`
	File      string `json:"file"`
	Line      int    `json:"line"`
	Column    int    `json:"column"`
	StoppedBy string `json:"stoppedBy"`

	Fingerprint string  `json:"fingerprint"`
	Accepted    *string `json:"accepted"`
}

type jsonStale struct {
	File        string `json:"file"`
	Line        int    `json:"line"`
	Column      int    `json:"column"`
	Claim       string `json:"claim"`
	Function    string `json:"function"`
	Fingerprint string `json:"fingerprint"`
	Text        string `json:"text"`
}

// jsonBase says what a base revision has already and is not among the findings.
type jsonBase struct {
	Revision  string `json:"revision"`
	Broken    int    `json:"broken"`
	Undecided int    `json:"undecided"`
}

type jsonNote struct {
	Kind   string `json:"kind"`
	File   string `json:"file"`
	Line   int    `json:"line"`
	Column int    `json:"column"`
	Text   string `json:"text"`
}

type jsonSummary struct {
	Packages            int `json:"packages"`
	Functions           int `json:"functions"`
	FunctionsWithEvents int `json:"functionsWithEvents"`
	Roots               int `json:"roots"`
	Instances           int `json:"instances"`
	Questions           int `json:"questions"`
	Holds               int `json:"holds"`
	Broken              int `json:"broken"`
	Undecided           int `json:"undecided"`
	Advice              int `json:"advice"` // of broken, those of an advice
}

type jsonRun struct {
	Schema      int           `json:"schema"`
	Tool        jsonTool      `json:"tool"`
	Module      string        `json:"module"`
	Builds      []string      `json:"builds"`
	Findings    []jsonFinding `json:"findings"`
	Undecided   []jsonOpen    `json:"undecided"`
	Assumptions []jsonNote    `json:"assumptions"`
	NotJudged   []Left        `json:"notJudged"`
	Stale       []jsonStale   `json:"stale"`
	Base        *jsonBase     `json:"base,omitempty"`
	Cut         []string      `json:"cut"`
	Summary     jsonSummary   `json:"summary"`
}

type jsonError struct {
	Schema int      `json:"schema"`
	Tool   jsonTool `json:"tool"`
	Error  struct {
		Stage   string   `json:"stage"` // "usage", "load", "rules", "internal"
		Message string   `json:"message"`
		Places  []string `json:"places"`
	} `json:"error"`
}

// JSON prints the run as one JSON object. Lists are never null.
func JSON(w io.Writer, run *Run) error {
	r := run.Result
	out := jsonRun{
		Schema:      Schema,
		Tool:        jsonTool{"pathtally", run.Version, orEmpty(run.Rulesets)},
		Module:      run.Module,
		Builds:      orEmpty(run.Builds),
		Findings:    []jsonFinding{},
		Undecided:   []jsonOpen{},
		Assumptions: []jsonNote{},
		NotJudged:   orEmpty(run.NotJudged),
		Stale:       []jsonStale{},
		Cut:         orEmpty(r.Cut),
		Summary: jsonSummary{run.Packages, run.Functions, max(run.WithEvents, 0), r.Tally.Roots, r.Tally.Instances,
			r.Tally.Questions, r.Tally.Holds, r.Tally.Broken, r.Tally.Undecided, r.Tally.Advice},
	}
	index := make(map[properties.Note]int, len(r.Assumptions))
	for i, n := range r.Assumptions {
		index[n] = i
		out.Assumptions = append(out.Assumptions, jsonNote{n.Kind, n.Place.File, n.Place.Line, n.Place.Column, n.Text})
	}
	for i := range r.Findings {
		out.Findings = append(out.Findings, jsonOf(&r.Findings[i], run, index))
	}
	for _, st := range run.Stale {
		out.Stale = append(out.Stale, jsonStale{st.File, st.Line, st.Column, st.Claim, st.Function, st.Fingerprint, st.Text})
	}
	if run.Base != "" {
		out.Base = &jsonBase{run.Base, run.KnownFindings, run.KnownOpen}
	}
	for i := range r.Open {
		o := &r.Open[i]
		out.Undecided = append(out.Undecided, jsonOpen{o.Rule, o.Claim, severity(o.Advice), o.Root.Package, o.Root.Name, o.Instance,
			o.Place.File, o.Place.Line, o.Place.Column, o.StoppedBy, o.Fingerprint(), run.reason(o.Fingerprint())})
	}
	return encode(w, out)
}

func jsonOf(f *judge.Finding, run *Run, index map[properties.Note]int) jsonFinding {
	head := run.Headline(f)
	j := jsonFinding{
		Rule: f.Rule, Claim: f.Claim, Severity: severity(f.Advice), Verdict: "broken", Message: f.Message,
		Package: f.Root.Package, Function: f.Root.Name, Instance: f.Instance, Checkpoint: checkpoint(f.Point), Formula: f.Formula, Reason: f.Reason,
		File: head.File, Line: head.Line, Column: head.Column, Accepted: run.reason(f.Fingerprint),
		Cause: spot(f.Cause), Blame: f.Blame.Name,
		Counts: named(f.CountNames, f.Counts), Fingerprint: f.Fingerprint, Starts: f.Starts, Follows: f.Follows,
		Builds: orEmpty(run.buildsOf(f)), Assumptions: []int{}, Path: []jsonStep{},
	}
	if f.Opened.Place.Line > 0 {
		s := spot(f.Opened)
		j.Opened = &s
	}
	for _, n := range f.Assumptions {
		if i, ok := index[n]; ok {
			j.Assumptions = append(j.Assumptions, i)
		}
	}
	for _, s := range f.Path {
		j.Path = append(j.Path, jsonStep{s.Place.File, s.Place.Line, s.Place.Column, s.Function, string(s.Kind), s.Text, named(f.CountNames, s.Counts)})
	}
	return j
}

// reason is why something is accepted, nil if it is not.
func (r *Run) reason(fingerprint string) *string {
	if a, ok := r.Accepted[fingerprint]; ok {
		return &a.Reason
	}
	return nil
}

// checkpoint is the JSON word of a point: "end" of "at end", "always" of "always".
func checkpoint(point string) string {
	if len(point) > 3 && point[:3] == "at " {
		return point[3:]
	}
	return point
}

// JSONError prints an error that ended the run, so that a program that reads
// the output always finds an object. stage is "usage", "load", "rules" or
// "internal"; places are file:line:column, most useful first.
func JSONError(w io.Writer, version, stage, message string, places []string) error {
	out := jsonError{Schema: Schema, Tool: jsonTool{"pathtally", version, []Ruleset{}}}
	out.Error.Stage, out.Error.Message, out.Error.Places = stage, message, orEmpty(places)
	return encode(w, out)
}

func encode(w io.Writer, v any) error {
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", " ")
	return e.Encode(v)
}

func severity(advice bool) string {
	if advice {
		return "advice"
	}
	return "claim"
}

func spot(s judge.Spot) jsonSpot {
	return jsonSpot{s.Place.File, s.Place.Line, s.Place.Column, s.Function}
}

func named(names []string, counts []int64) map[string]int64 {
	m := make(map[string]int64, len(names))
	for i, n := range names {
		m[n] = counts[i]
	}
	return m
}

func orEmpty[T any](s []T) []T {
	if s == nil {
		return []T{}
	}
	return s
}
