package properties

import (
	"go/types"

	"pathtally/pds"
	"pathtally/properties/syntax"
)

// A ResolvedRule is a rule whose names were found in the packages of the build. It is all that
// a frontend needs to lower code for the rule and all that the judge needs to ask questions.
type ResolvedRule struct {
	Set    string // name of the rule set, "" for the module's own file
	Name   string
	Doc    string // comment block, first sentence first
	Pos    string // file:line:column of the rule
	Stays  bool
	Moves  bool
	Across bool // across goroutines
	// Each is the instance parameter (the first reference-typed each), nil if the rule has none.
	Each   *EachParam
	Counts []string     // names; index = index into count vectors
	Events []EventMatch // in source order; for one call the first match of each count counts (union of lines)
	Claims []Claim
	// Models are the rule's own models of code out of sight, for this rule only.
	Models []CallModel
	// BuiltIn: the rule comes with the tool.
	BuiltIn bool
	// Absent are names of a built-in rule that the build's standard library, being older, does not have.
	// What names them is left out of the rule.
	Absent []string
	// Dir is the folder, relative to the module root with forward slashes, to whose packages (and those
	// below it) the rule applies; "." for the whole module.
	Dir string

	decl *syntax.Rule // never nil in a rule that Resolve made
	file *RuleFile
}

// An Effect is what a model says of code out of sight.
type Effect uint8

const (
	Calls        Effect = iota + 1 // the function calls its argument Arg
	Spawns                         // the function starts its argument Arg in a goroutine
	Keeps                          // the function keeps its argument Arg: it is reachable from outside afterwards
	Yields                         // the result is another name of the argument Arg
	NeverReturns                   // the function does not return
)

// CallModel is a resolved `model` line: each of Callees has the effect.
type CallModel struct {
	Callees []Callee
	Effect  Effect
	Arg     int // 0 the receiver, from 1 the arguments; meaningless for NeverReturns
	Pos     string
	Text    string // the line as written
}

// EachParam is an instance parameter.
type EachParam struct {
	Name  string
	Types []types.Type // alternatives; empty = any type (`_`)
}

// EventMatch is one `count` line (or the event of a `before`/`after` checkpoint).
type EventMatch struct {
	Count         int      // index into Counts, -1 if the line only marks a checkpoint
	Mark          pds.Mark // bit of a `before`/`after` checkpoint, 0 if none
	Weight        int64    // what one event adds (1 without `by`)
	Callees       []Callee // any of these
	CallsInstance bool     // `call stop`: the instance itself is the function called
	On            Pat      // receiver; nil if absent
	With          []Pat    // arguments, without receiver; nil = not looked at
	WithAll       bool     // With must fit the whole list; false if it ends in "..." or is absent
	Giving        []Pat    // results; nil = the event happens when the call begins
	Where         []WherePath
	Pos           string
	Text          string // the line as written
}

// Callee is a resolved function or method.
type Callee struct {
	Obj       *types.Func // origin (generic) object
	Interface bool        // Obj is a method of an interface: matches calls through it and implementations of it
	// Recv is the receiver's type as the rule names it, nil for a function. With Interface it can be larger
	// than the interface that declares Obj: (io.ReadCloser).Close is declared by io.Closer.
	Recv types.Type
}

// Pat is a pattern for one value; nil matches anything.
type Pat interface{ pat() }

// PatInstance: the value is the instance.
type PatInstance struct{}

// PatConst: the value equals a constant: nil, true, false, an integer or a string.
type PatConst struct {
	Nil   bool
	Value any // bool, int64, string; nil if Nil
}

// PatName binds a name for Where (`returning (r, nil) where r.Body == b`).
type PatName struct{ Name string }

func (PatInstance) pat() {}
func (PatConst) pat()    {}
func (PatName) pat()     {}

// WherePath says that the value reached from a bound name by fields is the instance
// (`where r.Body == b`: Name r, Fields [Body]).
type WherePath struct {
	Name   string
	Fields []string
}

// Point is where a claim is judged.
type Point uint8

const (
	AtReturn Point = iota
	AtSuccess
	AtFailure
	AtPanic
	AtEnd
	Always
	Before // before the event that carries Claim.Mark
	After
)

// Claim is a claim or an advice of a rule.
type Claim struct {
	Name   string
	Advice bool
	Point  Point
	Mark   pds.Mark // for Before and After
	Text   string   // the formula as written
	Reason string
	// Questions: the claim is broken iff for some question a path to the checkpoint has Weights·counts > Bound.
	// Exact for a conjunction of linear inequalities. Empty if the claim needs the count image (Linear false).
	Questions []Question
	Linear    bool
	// Cases is the negation of the claim in disjunctive form, exact in every case: the claim is broken iff
	// some path to the checkpoint has Weights·counts > Bound for all questions of one of the cases. Never empty.
	Cases [][]Question
	Pos   string
}

// Question asks for a path with Weights·counts > Bound.
type Question struct {
	Weights []int64 // len = number of counts
	Bound   int64
	Text    string // the inequality that such a path breaks, as a person reads it ("taken == released", "released <= taken")
}
