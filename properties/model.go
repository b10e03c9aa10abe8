package properties

import "pathtally/pds"

// Model is what a frontend hands to the judge for one rule: an implicit
// pushdown system, the heads where paths start, and the meaning of its ids.
type Model interface {
	pds.System
	// Starts lists the starting points, in a fixed order.
	Starts() []Start
	// Exit says what it means that a run empties its stack in state q. Only
	// meaningful for states that a Pop rule leads to.
	Exit(q pds.StateID) Exit
	// Step describes a label.
	Step(l pds.LabelID) Step
	// Frame says in which function a head stands. Heads of deferred-call
	// symbols and bottom symbols stand in the function that owns them.
	Frame(h pds.Head) Frame
	// Doubt describes a doubt.
	Doubt(d pds.DoubtID) Note
	// Assumptions lists what the labels' steps and the starts rest on so far
	// (deduplicated, sorted by place).
	Assumptions() []Note
}

// Ledger is what a model may implement beside Model, so that a run can say how
// much of the code its rules met.
type Ledger interface {
	// WithEvents lists the functions that hold an event of the rule, each once,
	// in a fixed order.
	WithEvents() []Func
}

// BottomUp is a Model that finds its starting points from the events upwards:
// a function that keeps all claims by itself, leaves every count even and gives
// no live instance to its caller is closed, and its callers need not follow it.
// Starts is final when Next has answered false.
type BottomUp interface {
	// Next gives the next start to look at, callees before callers.
	Next() (Start, bool)
	// Settle says what was found of the start that Next gave last.
	Settle(Settled)
}

// Settled is what a start turned out to be.
type Settled uint8

const (
	Closed    Settled = iota // callers need not follow it
	NotClosed                // callers have to follow it
	Spent                    // the budget ran out: it is judged on its own, and callers do not follow it
)

// Place is a position in the source. File is as the user should see it
// (relative to the module root with forward slashes where it is inside).
type Place struct {
	File   string
	Line   int // from 1; 0 is no place
	Column int // from 1, in bytes
}

// Start is a starting point together with one instance: a root, and either an
// instance that exists before the root (Instance names it) or, with Born, all
// instances that are born on the root's paths.
type Start struct {
	Head     pds.Head
	Root     Func
	Kind     string // main, init, goroutine, handler, callback, exported, test, cover
	Instance string // as the root's source would write it ("d.mu"); "" if Born or if the rule has no instance
	Home     string // canonical place ("example/berth.Desk.mu", "global example/berth.mu"); for matching lenders to settlers
	Born     bool
	// Recovered: whoever runs this root recovers its panics (`at end` includes panics).
	Recovered bool
	// Caught: a panic that leaves the root may be recovered by who calls it.
	Caught bool
	// Exported: whoever can import the package can call the root.
	Exported bool
	// Inner: no path starts here; the start is looked at to learn whether callers
	// have to follow the function, and as a possible partner in a contract.
	Inner bool
	// Even: every function below the root that does something to the instance
	// keeps all claims by itself and leaves nothing behind: there is nothing to ask.
	Even bool
}

// Func names a function.
type Func struct {
	ID      int    // dense, from 0, unique in the model
	Name    string // as go/types prints it, without the package path: (*Desk).Book; closures carry the enclosing function's name
	Package string // import path
	Place   Place  // of its declaration
	End     Place  // of its closing brace
}

// Frame is the function a head stands in.
type Frame struct {
	Func Func
	// Entry: the head is the function's entry in some context (the first head
	// after a call).
	Entry bool
	// Deferred: the symbol is a pending deferred call of Func.
	Deferred bool
}

// ExitKind is how a root is left.
type ExitKind uint8

const (
	ExitReturn ExitKind = iota
	ExitPanic
	ExitGoexit
)

// Outcome is what a normal return says.
type Outcome uint8

const (
	OutcomeUnknown Outcome = iota // the last result is an error that may be nil or not
	Success                       // no error result, or a nil one
	Failure                       // the error is not nil
)

// Exit is the meaning of a state in which a run has emptied its stack.
type Exit struct {
	Kind    ExitKind
	Outcome Outcome
	// Outside: the instance can be reached from outside the root (a result, a
	// parameter's memory, a global, an escaped holder): with `moves` the
	// obligation is handed on.
	Outside bool
	// Unborn: no instance was born on this path.
	Unborn bool
	// Named: the instance has a name that whoever is returned to may know it by.
	Named bool
	// Armed: a function value that does something to the instance when it is
	// called leaves the function, or a new name of the instance; callers have to
	// follow it.
	Armed bool
	// True is set if the last result is a bool known to be true, False if known
	// to be false (for contracts like TryTake).
	True, False bool
}

// StepKind is what a step of a path is, in the words of the JSON output.
type StepKind string

const (
	StepCall   StepKind = "call"
	StepEvent  StepKind = "event"
	StepBranch StepKind = "branch"
	StepReturn StepKind = "return"
	StepDefer  StepKind = "defer"
	StepPanic  StepKind = "panic"
	StepSpawn  StepKind = "spawn"
	StepEnd    StepKind = "end"
)

// Step is a step of a path as a person reads it.
type Step struct {
	Place Place
	Func  Func
	Kind  StepKind
	Text  string // short, in source terms: `d.mu.Lock()`, `urgent is true`, `return err`, `the deferred call runs`
	// Assumes lists assumptions that this very step rests on.
	Assumes []Note
}

// Note is an assumption or a doubt with its place.
type Note struct {
	Kind  string // short fixed words: "dynamic call", "no body", "alias", "schedule", …
	Place Place
	Text  string
}
