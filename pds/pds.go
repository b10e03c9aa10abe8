// This file holds the types that the rooms hand to each other.

package pds

// StateID names a control state; 0 is no state.
type StateID int32

// SymbolID names a stack symbol; 0 is no symbol.
type SymbolID int32

// EffectID names a hash-consed count vector of a System; 0 is the zero vector.
type EffectID int32

// LabelID is the producer's name for a step (a place in the source and a
// text); 0 is a step that is never shown.
type LabelID int32

// DoubtID is the producer's name for a doubt (a step of which the model cannot
// tell whether it concerns the instance); 0 is no doubt.
type DoubtID int32

// Kind is the shape of a rule.
type Kind uint8

const (
	// Stop has no successor: the run ends here (a process exit, a loss).
	Stop Kind = iota
	// Pop removes the top symbol.
	Pop
	// Step replaces the top symbol by Rule.Top.
	Step
	// Push replaces the top symbol by Rule.Top above Rule.Below.
	Push
)

// Head is a state with the symbol on top of the stack.
type Head struct {
	State  StateID
	Symbol SymbolID
}

// Mark is a set of points of interest at which a run may be asked to stop
// *before* the rule that carries the mark. Bit 0 is MarkLoss; the others are
// the producer's (one per `before` event of a claim).
type Mark uint32

// MarkLoss marks a Stop rule at which the instance is lost: its counts are
// final, and the claims at ends are judged there.
const MarkLoss Mark = 1

// Rule is one transition from a head.
type Rule struct {
	Kind   Kind
	State  StateID  // q'
	Top    SymbolID // Step, Push
	Below  SymbolID // Push
	Effect EffectID // what the step counts; must alias
	// DoubtEffect replaces Effect if Doubt is taken; meaningless if Doubt is 0.
	DoubtEffect EffectID
	Doubt       DoubtID
	Label       LabelID
	Mark        Mark
	// Spawn lists what this step starts in goroutines of their own whose counts
	// belong to the same claim (folded bodies). Nil for nearly every rule.
	Spawn []Head
}

// System is a pushdown system given on demand.
//
// Rules must be deterministic: equal heads give equal rules in equal order,
// however often and in whatever order they are asked. A head without rules is
// a dead end. Symbols and states are dense small integers from 1 on.
type System interface {
	// Rules appends the rules of h to dst and returns it.
	Rules(h Head, dst []Rule) []Rule
	// Vector gives the counts of an effect; len = NumCounts. The caller must
	// not change it. Vector(0) is zero.
	Vector(e EffectID) []int64
	// NumCounts is the number of counts (the length of every vector).
	NumCounts() int
}
