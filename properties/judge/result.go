package judge

import "pathtally/properties"

// Verdict is the answer to one question.
type Verdict uint8

const (
	Holds Verdict = iota
	Broken
	Undecided
)

// String gives the word that a user reads.
func (v Verdict) String() string {
	switch v {
	case Holds:
		return "holds"
	case Broken:
		return "broken"
	default:
		return "undecided"
	}
}

// Spot is a step of a path that a finding points at.
type Spot struct {
	Place    properties.Place
	Function string // as properties.Func.Name
	Text     string // what happens there, in source terms; may be empty
}

// PathStep is one printed step of a witness.
type PathStep struct {
	Place    properties.Place
	Function string // as properties.Func.Name
	Kind     properties.StepKind
	Text     string
	Depth    int     // calls below the root's frame; 0 is the root
	Counts   []int64 // after the step; indexed like Finding.CountNames
	Changed  bool    // the step counted something
}

// Finding is one broken claim, as a person reads it. One finding stands for
// all paths that are lost in the same way: see Key.
type Finding struct {
	Set     string // rule set, "" for the module's own rules
	Rule    string
	Claim   string
	Advice  bool   // shown, never stops
	Point   string // checkpoint as written: "at end", "always", "before"
	Formula string // the claim's formula as written
	Broken  string // the inequality that this path breaks, as a person reads it
	Reason  string // from the rule; "" if none

	Message  string // one sentence without a full stop: "(*Desk).Book can return with d.mu still taken"
	Root     properties.Func
	RootKind string // properties.Start.Kind
	Blame    properties.Func
	Instance string // as the root's source writes it; "" for an instance born on the path
	Home     string // canonical place of the instance; "" if it has none

	Opened     Spot // the event that opens the imbalance; Place.Line 0 if none does
	OpenedVerb string
	Cause      Spot
	CauseText  string // why it is lost there: "this return passes by d.mu.Unlock() in line 59"
	OtherWay   string // the right way out beside it, if there is one

	CountNames []string
	Counts     []int64 // at the checkpoint; indexed like CountNames
	Path       []PathStep
	Fact       string // the formula with the numbers in it: "1 == 0 is false"; "" if it cannot be written so

	Assumptions []properties.Note // what this path and its verdict rest on
	Fingerprint string            // 16 hexadecimal digits; free of line numbers
	Starts      int               // how many starts have a path that is lost in this way
	// Follows is the fingerprint of a finding that this path comes through: what
	// was lost there is missed here, so that mending it may mend both. "" if none.
	Follows string
}

// ID is the short form of the fingerprint that commands accept.
func (f *Finding) ID() string { return f.Fingerprint[:8] }

// Open is one undecided question.
type Open struct {
	Set       string
	Rule      string
	Claim     string
	Advice    bool
	Point     string
	Formula   string
	Root      properties.Func
	Instance  string
	Place     properties.Place // where the search stopped or the doubt stands; else the root's declaration
	StoppedBy string           // "steps, 200,000 for one start", "doubt: …", "form of the claim: …"
	SoFar     string           // what was found until then
	Steps     int64            // budget that may settle it; 0 if no budget does
	// Doubt is the step that the answer hangs on; Kind "" if it is not a doubt.
	Doubt properties.Note
}

// Question is the verdict on one claim at one start.
type Question struct {
	Set      string
	Rule     string
	Claim    string
	Advice   bool
	Root     properties.Func
	RootKind string
	Instance string
	Verdict  Verdict
	Grounds  string // one line: why it holds; the message or what stopped it otherwise
	// Blame lists the functions that the findings of a broken question stand in.
	Blame []properties.Func
}

// Tally counts questions. Questions = Holds + Broken + Undecided.
type Tally struct {
	Roots     int // distinct root functions
	Instances int // distinct pairs of a root and an instance, per rule; instances born on a path count once per root
	Questions int
	Holds     int
	Broken    int
	Undecided int
	Advice    int // of Broken, those of an advice, which never stop
	// UndecidedAdvice counts, of Undecided, those of an advice.
	UndecidedAdvice int
}

// Result is what one run has found. Its order is fixed: by place, rule, claim.
type Result struct {
	Findings    []Finding
	Open        []Open
	Questions   []Question
	Assumptions []properties.Note
	Tally       Tally
	// Cut lists starts at which the search for further causes ended early.
	Cut []string
}
