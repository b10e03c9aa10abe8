// Executing a run rule by rule.

package pds

import (
	"fmt"
	"slices"
)

// A Choice is one step of a run: which rule of the head that the run stands at.
type Choice struct {
	Rule int // index into Rules(head)
	// Doubt: the step's doubt is taken: it counts DoubtEffect.
	Doubt bool
	// Spawned holds, for each head in the rule's Spawn, how far that work runs
	// and how; nil, or a nil element: it does not run at all.
	Spawned [][]Choice
}

// Choices turns rule indices into choices without doubts and spawned runs.
func Choices(rules ...int) []Choice {
	cs := make([]Choice, len(rules))
	for i, r := range rules {
		cs[i].Rule = r
	}
	return cs
}

// End is how a run ends.
type End uint8

const (
	// EndMiddle: the choices ran out with symbols on the stack.
	EndMiddle End = iota
	// EndEmpty: the stack is empty.
	EndEmpty
	// EndStop: a Stop rule was executed.
	EndStop
)

// String gives middle, empty or stop.
func (e End) String() string { return [...]string{"middle", "empty", "stop"}[e] }

// A Config is a configuration of a run together with the step that leaves it.
type Config struct {
	Head   Head    // Symbol is 0 if the stack is empty
	Depth  int     // number of symbols on the stack
	Counts []int64 // of this run up to here, without spawned work; len = NumCounts
	// Rule is the step that leaves this configuration; meaningless in the last
	// configuration of a run. Choice is its index.
	Rule    Rule
	Choice  int
	Spawned []Run // runs of what Rule spawns; len = len(Rule.Spawn)
}

// A Run is an executed run.
type Run struct {
	Configs []Config // len = number of choices + 1
	End     End
	State   StateID // the state in which the run ended
	// Own is what the run counts without spawned work, Total with all of it,
	// nested runs included; len = NumCounts.
	Own, Total []int64
}

// A ReplayError says which step of a run cannot be executed.
type ReplayError struct {
	Step int // index of the choice
	Head Head
	Text string
}

func (e *ReplayError) Error() string {
	return fmt.Sprintf("step %d at state %d, symbol %d: %s", e.Step, e.Head.State, e.Head.Symbol, e.Text)
}

// Replay executes choices from a stack that holds start's symbol alone, with a
// real stack, and adds the counts up exactly: a sum past 64 bits is an error.
// Errors are *ReplayError: a choice that no rule answers to, choices behind the
// end of the run, a doubt or spawned runs that the rule does not have.
//
// It asks sys for nothing but Rules and Vector and shares no code with any
// search, so a run that it confirms is a run of the model.
func Replay(sys System, start Head, choices []Choice) (Run, error) {
	n := sys.NumCounts()
	stack := []SymbolID{start.Symbol}
	state := start.State
	own := make([]int64, n)
	spawned := make([]int64, n)
	run := Run{End: EndMiddle, Configs: make([]Config, 0, len(choices)+1)}
	var rules []Rule
	here := func() Config {
		c := Config{Head: Head{State: state}, Depth: len(stack), Counts: slices.Clone(own)}
		if len(stack) > 0 {
			c.Head.Symbol = stack[len(stack)-1]
		}
		return c
	}
	for i, ch := range choices {
		c := here()
		fail := func(format string, args ...any) (Run, error) {
			return Run{}, &ReplayError{Step: i, Head: c.Head, Text: fmt.Sprintf(format, args...)}
		}
		if run.End == EndStop {
			return fail("the run has ended at a stop")
		}
		if len(stack) == 0 {
			return fail("the stack is empty")
		}
		rules = sys.Rules(c.Head, rules[:0])
		if ch.Rule < 0 || ch.Rule >= len(rules) {
			return fail("no rule %d among %d", ch.Rule, len(rules))
		}
		r := rules[ch.Rule]
		c.Rule, c.Choice = r, ch.Rule
		effect := r.Effect
		if ch.Doubt {
			if r.Doubt == 0 {
				return fail("rule %d carries no doubt", ch.Rule)
			}
			effect = r.DoubtEffect
		}
		if k, ok := addVector(own, sys.Vector(effect)); !ok {
			return fail("count %d passes 64 bits", k)
		}
		if len(ch.Spawned) != 0 && len(ch.Spawned) != len(r.Spawn) {
			return fail("%d spawned runs for a rule that spawns %d", len(ch.Spawned), len(r.Spawn))
		}
		for k, h := range r.Spawn {
			var sub []Choice
			if len(ch.Spawned) != 0 {
				sub = ch.Spawned[k]
			}
			child, err := Replay(sys, h, sub)
			if err != nil {
				return Run{}, fmt.Errorf("step %d, spawned run %d: %w", i, k, err)
			}
			if k, ok := addVector(spawned, child.Total); !ok {
				return fail("count %d passes 64 bits in spawned work", k)
			}
			c.Spawned = append(c.Spawned, child)
		}
		run.Configs = append(run.Configs, c)
		stack = stack[:len(stack)-1]
		switch r.Kind {
		case Stop:
			// The stack stays as it was: the run ends with its frames on it.
			stack = stack[:len(stack)+1]
			run.End = EndStop
			continue
		case Pop:
		case Step:
			stack = append(stack, r.Top)
		case Push:
			stack = append(stack, r.Below, r.Top)
		default:
			return fail("rule %d has kind %d", ch.Rule, r.Kind)
		}
		state = r.State
	}
	run.Configs = append(run.Configs, here())
	if len(stack) == 0 {
		run.End = EndEmpty
	}
	run.State = state
	run.Own = own
	run.Total = slices.Clone(own)
	if k, ok := addVector(run.Total, spawned); !ok {
		return Run{}, &ReplayError{Step: len(choices), Head: Head{State: state}, Text: fmt.Sprintf("count %d passes 64 bits in spawned work", k)}
	}
	return run, nil
}

// addVector adds v to sum; if a number passes 64 bits, it gives its index.
func addVector(sum, v []int64) (bad int, ok bool) {
	for i, n := range v {
		s, ok := safeAdd(sum[i], n)
		if !ok {
			return i, false
		}
		sum[i] = s
	}
	return 0, true
}
