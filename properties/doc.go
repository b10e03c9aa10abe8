// Package properties holds the rules: what is counted, what must hold of the
// counts, and what the answers mean.
//
// A rule says which events of a program count for an instance (this mutex, that
// file), and claims formulas over the counts at checkpoints:
//
//	rule mutex {
//	  each m *sync.Mutex stays
//	  count taken: call (*sync.Mutex).Lock on m
//	  count released: call (*sync.Mutex).Unlock on m
//	  claim balanced at end: taken == released
//	}
//
// With it, this function is broken (one return passes by the Unlock), and it is
// right with `defer mu.Unlock()` in the second line:
//
//	func add(n int) error {
//		mu.Lock()
//		if n < 0 {
//			return errNegative
//		}
//		mu.Unlock()
//		return nil
//	}
//
// # Words
//
//	rule file    a file of rules: built in (rulesets/*.rules), or pathtally.rules of a module
//	event        what the program does and a rule may count; EventMatch
//	instance     the object a rule is about; EachParam
//	claim        a formula that must hold at a checkpoint; an advice is shown and stops nobody
//	question     weights and a bound: is there a path with Weights·counts > Bound?
//	case         questions that one path must answer yes together to break a claim
//	switch       an enable, disable or soften line
//
// # From text to questions
//
//  1. BuiltInRules and ReadRuleFiles read files (package syntax has the grammar).
//  2. Resolve looks up their names in a Universe, the packages of the build, and
//     gives a RuleBook: events with the objects of go/types that they mean, and
//     for each claim its negation in disjunctive form (formula.go). Where every
//     case is one inequality, the claim is linear and Questions is exact.
//  3. RuleBook.State says whether a claim is on for a package.
//  4. ListRules, LookupRule and ShowRule are for people; Examples gives the code
//     in rules as Go files, to be judged like any other.
//
// The frontend lowers code for a ResolvedRule to a Model (model.go); package
// judge asks the questions of it.
//
// # Limits
//
// The whole grammar is read, not all of it is judged: phases, since, events other
// than calls, data parameters, across goroutines and a few more are errors that
// say "not judged yet" at their place. Nothing is passed over in silence.
package properties
