// Package pds holds pushdown systems whose steps carry counted events.
//
// # Words
//
// A pushdown system has a finite set of control states p, q, a finite set of
// stack symbols g, h, and rules ⟨q, g⟩ —effect→ ⟨q', w⟩ with |w| ≤ 2: the top
// symbol is popped (w empty), replaced (one symbol) or replaced by two, the
// first of which is on top. A configuration is a state and a stack; a head is a
// state with the symbol on top; a run is a sequence of rules. The effect of a
// rule is a vector of numbers, one per count of the rule under judgement, that
// is added up along the run. A [Stop] rule ends the run where it stands.
//
// Naming: p, q states; g, h symbols; r rules; plural for slices.
//
// # One Go function as a system
//
//	func drain(n int) { mu.Lock(); mu.Unlock(); if n > 0 { drain(n - 1) } }
//
// is, in the form that [Table.String] prints,
//
//	run drain -> run unlock         [taken 1]
//	run unlock -> run fork          [released 1]
//	run fork -> back
//	run fork -> run drain, leave
//	back leave -> back
//
// # Data
//
// [System] is the interface that the rest of the program works on: a system
// given on demand, which is never listed as a whole. [Table] is a system listed
// in full, made by a [Builder] or read from JSON with [Read]; [Table.WriteJSON]
// writes it, and [List] and [Explore] list parts of any System.
//
// # Checks
//
// [Sanity] asks a system whether it keeps the promises of System. [Replay]
// executes a run rule by rule with a real stack; it shares nothing with the
// searches that find runs, and what it says is exact for the model.
//
// # The JSON form
//
// Every state, symbol and count is declared before it is used, so that a
// misspelt name is an error and not a new state. Names are unique per list.
//
//	{
//	  "format": "pathtally-system", "version": 1,
//	  "counts": ["taken", "released"],
//	  "states": ["run", "back"], "symbols": ["f", "g"],
//	  "starts": [{"state": "run", "symbol": "f"}],
//	  "rules": [
//	    {"from": {"state": "run", "symbol": "f"}, "kind": "push", "state": "run", "top": "f", "below": "g",
//	     "effect": {"taken": 1}, "label": "f calls itself"}
//	  ]
//	}
//
// A rule's kind is stop, pop, step or push; "doubt" names a doubt and
// "doubtEffect" what the step counts if the doubt is taken; "marks" lists names
// of points of interest ("loss" is [MarkLoss]); "spawn" lists heads. An unknown
// member is an error.
//
// # Parameters and data
//
// A parametric system ([Data]) has parameters whose values are chosen once, before
// the run; events that carry data of the sorts ref, int, string and bool; and
// predicates, which add to counts when an event happens with data that satisfy
// them. A rule may carry an event and a guard ([ParseGuard]) over its data and the
// parameters; it can be taken with any data that satisfy the guard. Data of
// different steps are independent. In the JSON form:
//
//	"parameters": [{"name": "limit", "sort": "int"}],
//	"events": [{"name": "send", "data": [{"name": "n", "sort": "int"}]}],
//	"predicates": [{"count": "big", "event": "send", "where": "n > limit"},
//	               {"count": "bytes", "event": "send", "by": "n"}],
//	"rules": [{"from": ..., "event": "send", "guard": "n >= 1 && n <= 512"}]
//
// What a Table says as a [System] are the counts without predicates, with every
// guard taken as true; package parikh decides the rest.
package pds
