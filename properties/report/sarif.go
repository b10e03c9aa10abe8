package report

import (
	"bytes"
	"fmt"
	"io"
	"net/url"
	"path"
	"slices"
	"strings"
	"unicode/utf8"

	"pathtally/properties"
	"pathtally/properties/judge"
)

// The types below are the part of SARIF 2.1.0 (OASIS standard, section numbers
// in comments) that a run needs. It is the format that code hosts and editors
// read.

type sarifText struct {
	Text string `json:"text"`
}

type sarifLog struct {
	Schema  string     `json:"$schema"`
	Version string     `json:"version"`
	Runs    []sarifRun `json:"runs"`
}

type sarifRun struct { // 3.14
	Tool        sarifTool                 `json:"tool"`
	Invocations []sarifInvocation         `json:"invocations"`
	Bases       map[string]sarifLocatedAt `json:"originalUriBaseIds"`
	Automation  *sarifAutomation          `json:"automationDetails,omitempty"`
	ColumnKind  string                    `json:"columnKind"`
	Results     []sarifResult             `json:"results"`
}

type sarifTool struct {
	Driver sarifDriver `json:"driver"`
}

type sarifDriver struct { // 3.19
	Name    string      `json:"name"`
	Version string      `json:"version"`
	Rules   []sarifRule `json:"rules"`
}

type sarifRule struct { // 3.49
	ID      string         `json:"id"`
	Short   sarifText      `json:"shortDescription"`
	Full    sarifText      `json:"fullDescription"`
	Help    sarifText      `json:"help"`
	Default sarifConfigure `json:"defaultConfiguration"`
}

type sarifConfigure struct {
	Level string `json:"level"`
}

type sarifInvocation struct { // 3.20
	Successful    bool          `json:"executionSuccessful"`
	Notifications []sarifNotice `json:"toolExecutionNotifications,omitempty"`
}

type sarifNotice struct { // 3.58
	Level     string          `json:"level"`
	Message   sarifText       `json:"message"`
	Locations []sarifLocation `json:"locations,omitempty"`
}

type sarifAutomation struct {
	ID string `json:"id"`
}

type sarifLocatedAt struct {
	URI         string     `json:"uri,omitempty"`
	Base        string     `json:"uriBaseId,omitempty"`
	Description *sarifText `json:"description,omitempty"`
}

type sarifResult struct { // 3.27
	Rule         string             `json:"ruleId"`
	RuleIndex    int                `json:"ruleIndex"`
	Kind         string             `json:"kind"`
	Level        string             `json:"level"`
	Message      sarifText          `json:"message"`
	Locations    []sarifLocation    `json:"locations"`
	Related      []sarifLocation    `json:"relatedLocations,omitempty"`
	Flows        []sarifFlow        `json:"codeFlows,omitempty"`
	Fingerprints map[string]string  `json:"partialFingerprints"`
	Suppressions []sarifSuppression `json:"suppressions"`
	Baseline     string             `json:"baselineState,omitempty"`
	Properties   map[string]any     `json:"properties,omitempty"`
}

type sarifLocation struct { // 3.28
	ID       int            `json:"id,omitempty"`
	Physical *sarifPhysical `json:"physicalLocation,omitempty"`
	Logical  []sarifLogical `json:"logicalLocations,omitempty"`
	Message  *sarifText     `json:"message,omitempty"`
}

type sarifPhysical struct {
	Artifact sarifLocatedAt `json:"artifactLocation"`
	Region   *sarifRegion   `json:"region,omitempty"`
}

type sarifRegion struct {
	Line   int `json:"startLine"`
	Column int `json:"startColumn,omitempty"`
}

type sarifLogical struct {
	Name     string `json:"name"`
	FullName string `json:"fullyQualifiedName"`
	Kind     string `json:"kind"`
}

type sarifFlow struct { // 3.36
	Message sarifText     `json:"message"`
	Threads []sarifThread `json:"threadFlows"`
}

type sarifThread struct {
	Locations []sarifStep `json:"locations"`
}

type sarifStep struct { // 3.38
	Location   sarifLocation        `json:"location"`
	Kinds      []string             `json:"kinds,omitempty"`
	Nesting    int                  `json:"nestingLevel"`
	Order      int                  `json:"executionOrder"`
	Importance string               `json:"importance"`
	State      map[string]sarifText `json:"state,omitempty"`
}

type sarifSuppression struct { // 3.35
	Kind   string `json:"kind"`
	Status string `json:"status"`
	Why    string `json:"justification"`
}

const (
	sarifSchema = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json"
	// sarifBase stands for the module root.
	sarifBase = "%SRCROOT%"
)

// SARIF prints the run as a SARIF 2.1.0 log: one result per finding with its
// path as a code flow, undecided questions as results of kind open, accepted
// ones with a suppression.
func SARIF(w io.Writer, run *Run) error {
	s := &sarifer{run: run, index: map[string]int{}, lines: map[string][][]byte{}}
	s.rules()
	out := sarifRun{
		Tool:        sarifTool{sarifDriver{Name: "pathtally", Version: run.Version, Rules: s.list}},
		Bases:       map[string]sarifLocatedAt{sarifBase: {Description: &sarifText{"the root of module " + run.Module}}},
		Automation:  &sarifAutomation{"pathtally/" + strings.Join(run.Builds, "+") + "/"},
		ColumnKind:  "unicodeCodePoints",
		Results:     []sarifResult{},
		Invocations: []sarifInvocation{{Successful: true}},
	}
	notice := &out.Invocations[0].Notifications
	for _, l := range run.NotJudged {
		*notice = append(*notice, sarifNotice{Level: "note", Message: sarifText{"not judged: " + l.What + " (" + l.Why + ")"}})
	}
	for _, st := range run.Stale {
		*notice = append(*notice, sarifNotice{Level: "note", Message: sarifText{st.Text},
			Locations: []sarifLocation{s.location(properties.Place{File: st.File, Line: st.Line, Column: st.Column}, properties.Func{}, "")}})
	}
	for i := range run.Result.Findings {
		out.Results = append(out.Results, s.finding(&run.Result.Findings[i]))
	}
	for i := range run.Result.Open {
		out.Results = append(out.Results, s.open(&run.Result.Open[i]))
	}
	return encode(w, sarifLog{sarifSchema, "2.1.0", []sarifRun{out}})
}

type sarifer struct {
	run   *Run
	list  []sarifRule
	index map[string]int // RULE/CLAIM: index into list
	lines map[string][][]byte
}

// rules lists the claims that results name, in alphabetical order.
func (s *sarifer) rules() {
	formula := map[string]RuleText{}
	for i := range s.run.Result.Findings {
		f := &s.run.Result.Findings[i]
		formula[f.Rule+"/"+f.Claim] = RuleText{Formula: f.Point + ": " + f.Formula, Reason: f.Reason, Advice: f.Advice}
	}
	for i := range s.run.Result.Open {
		o := &s.run.Result.Open[i]
		if id := o.Rule + "/" + o.Claim; formula[id].Formula == "" {
			formula[id] = RuleText{Formula: o.Point + ": " + o.Formula, Advice: o.Advice}
		}
	}
	var ids []string
	for id := range formula {
		ids = append(ids, id)
	}
	slices.Sort(ids)
	for i, id := range ids {
		t := formula[id]
		known := s.run.RuleTexts[id]
		short := firstSentence(known.Doc)
		if short == "" {
			short = id
		}
		full := "claim " + id + ", " + t.Formula
		why := t.Reason
		if why == "" {
			why = known.Reason
		}
		if why != "" {
			full += ". " + strings.ToUpper(why[:1]) + why[1:]
		}
		level := "error"
		if known.Advice || (known.Formula == "" && t.Advice) {
			level = "note"
		}
		s.list = append(s.list, sarifRule{ID: id, Short: sarifText{short}, Full: sarifText{full},
			Help: sarifText{full + "\n\nShow the rule: pathtally rules show " + strings.SplitN(id, "/", 2)[0]}, Default: sarifConfigure{level}})
		s.index[id] = i
	}
}

// firstSentence of a comment, without its full stop.
func firstSentence(doc string) string {
	doc = strings.Join(strings.Fields(doc), " ")
	if i := strings.Index(doc, ". "); i >= 0 {
		doc = doc[:i]
	}
	return strings.TrimSuffix(doc, ".")
}

func (s *sarifer) finding(f *judge.Finding) sarifResult {
	level := "error"
	if f.Advice {
		level = "note"
	}
	r := sarifResult{Rule: f.Rule + "/" + f.Claim, RuleIndex: s.index[f.Rule+"/"+f.Claim], Kind: "fail", Level: level, Message: sarifText{f.Message},
		Locations:    []sarifLocation{s.location(s.run.Headline(f), f.Blame, "")},
		Fingerprints: map[string]string{"pathtally/v1": f.Fingerprint}, Suppressions: s.suppressed(f.Fingerprint)}
	if s.run.Base != "" {
		r.Baseline = "new"
	}
	if f.Opened.Place.Line > 0 {
		l := s.location(f.Opened.Place, properties.Func{}, f.OpenedVerb+" "+path.Base(f.Opened.Place.File)+": "+f.Opened.Text)
		l.ID = 1
		r.Related = append(r.Related, l)
	}
	if s.run.Headline(f) != f.Cause.Place || f.CauseText != "" {
		text := f.CauseText
		if text == "" {
			text = "lost here"
		}
		l := s.location(f.Cause.Place, properties.Func{}, text)
		l.ID = 2
		r.Related = append(r.Related, l)
	}
	var thread sarifThread
	for i := range f.Path {
		p := &f.Path[i]
		at := p.Place
		if at.Line == 0 && i > 0 {
			at = lastPlace(f.Path[:i]) // a reader wants to go somewhere
		}
		st := sarifStep{Location: s.location(at, properties.Func{}, p.Function+": "+p.Text), Nesting: p.Depth, Order: i + 1, Importance: "important", Kinds: stepKinds(p.Kind), State: map[string]sarifText{}}
		if p.Changed || i == 0 || i == len(f.Path)-1 || p.Place == f.Cause.Place {
			st.Importance = "essential"
		}
		for k, n := range f.CountNames {
			st.State[n] = sarifText{fmt.Sprint(p.Counts[k])}
		}
		thread.Locations = append(thread.Locations, st)
	}
	if len(thread.Locations) > 0 {
		r.Flows = []sarifFlow{{Message: sarifText{f.Fact}, Threads: []sarifThread{thread}}}
		if f.Fact == "" {
			r.Flows[0].Message.Text = f.Formula + " is false"
		}
	}
	var assumes []string
	for _, n := range f.Assumptions {
		assumes = append(assumes, place(n.Place)+": "+n.Text)
	}
	r.Properties = map[string]any{"instance": f.Instance, "formula": f.Formula, "checkpoint": checkpoint(f.Point), "assumptions": orEmpty(assumes)}
	return r
}

func lastPlace(steps []judge.PathStep) properties.Place {
	for i := len(steps) - 1; i >= 0; i-- {
		if steps[i].Place.Line > 0 {
			return steps[i].Place
		}
	}
	return properties.Place{}
}

// stepKinds gives the standard's words (3.38.8) for a kind of step.
func stepKinds(k properties.StepKind) []string {
	switch k {
	case properties.StepCall, properties.StepDefer, properties.StepSpawn:
		return []string{"call", "function"}
	case properties.StepReturn:
		return []string{"exit", "function"}
	case properties.StepEvent:
		return []string{"resource"}
	case properties.StepBranch:
		return []string{"branch"}
	case properties.StepPanic:
		return []string{"danger"}
	}
	return nil
}

func (s *sarifer) open(o *judge.Open) sarifResult {
	what := "undecided: does every path of " + o.Root.Name + " keep " + o.Formula
	if o.Instance != "" {
		what += " for " + o.Instance
	}
	// A result of another kind than fail has no level (3.27.10).
	r := sarifResult{Rule: o.Rule + "/" + o.Claim, RuleIndex: s.index[o.Rule+"/"+o.Claim], Kind: "open", Level: "none", Message: sarifText{what + "? Stopped by " + o.StoppedBy},
		Locations:    []sarifLocation{s.location(o.Place, o.Root, "")},
		Fingerprints: map[string]string{"pathtally/v1": o.Fingerprint()}, Suppressions: s.suppressed(o.Fingerprint())}
	if s.run.Base != "" {
		r.Baseline = "new"
	}
	return r
}

func (s *sarifer) suppressed(fingerprint string) []sarifSuppression {
	a, ok := s.run.Accepted[fingerprint]
	if !ok {
		return []sarifSuppression{} // said, not left out: nothing is accepted here
	}
	kind := "external"
	if a.Source {
		kind = "inSource"
	}
	return []sarifSuppression{{kind, "accepted", a.Reason}}
}

func (s *sarifer) location(p properties.Place, fn properties.Func, message string) sarifLocation {
	var l sarifLocation
	if p.File != "" {
		u := url.URL{Path: p.File}
		l.Physical = &sarifPhysical{Artifact: sarifLocatedAt{URI: strings.TrimPrefix(u.EscapedPath(), "/"), Base: sarifBase}}
		if p.Line > 0 {
			l.Physical.Region = &sarifRegion{Line: p.Line, Column: s.column(p)}
		}
	}
	if fn.Name != "" {
		l.Logical = []sarifLogical{{Name: fn.Name, FullName: fn.Package + "." + fn.Name, Kind: "function"}}
	}
	if message != "" {
		l.Message = &sarifText{message}
	}
	return l
}

// column counts characters where the source can be read; places count bytes.
func (s *sarifer) column(p properties.Place) int {
	lines := sourceLines(s.run, s.lines, p.File)
	if p.Line > len(lines) || p.Column < 1 || p.Column-1 > len(lines[p.Line-1]) {
		return p.Column
	}
	return utf8.RuneCount(lines[p.Line-1][:p.Column-1]) + 1
}

// sourceLines reads a file once; nil if there is none.
func sourceLines(run *Run, cache map[string][][]byte, file string) [][]byte {
	if lines, ok := cache[file]; ok {
		return lines
	}
	var lines [][]byte
	if run.Source != nil {
		if src, err := run.Source(file); err == nil {
			lines = bytes.Split(src, []byte("\n"))
		}
	}
	cache[file] = lines
	return lines
}
