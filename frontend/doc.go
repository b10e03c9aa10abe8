// Package frontend lowers Go packages to pushdown systems, one per rule.
//
// # What a system denotes
//
// A run of the system of a rule is a call path of the program from a starting
// point, seen by one instance of the rule (one mutex, one file): the steps that
// call, return, branch on something that matters, defer, panic or spawn, and
// the events that the rule counts, with what they count. Code that bears on
// nothing is walked over in silence.
//
//	⟨run, at (*Desk).Book:0.3 {0.mu}⟩ —taken→ ⟨run, at (*Desk).Book:0.4 {0.mu}⟩
//
// # Words
//
//	name      an expression over a frame that is known to equal the instance:
//	          0.mu (field mu of what parameter 0 points to), t3.f.* (what field
//	          f of register t3 holds), cap1.* (a captured variable's value);
//	          x… is something from which the instance can be reached, x? a
//	          value that may be it (a doubt)
//	key       an expression of which a fact is known: (2 == 10) true
//	subject   what an event of a function or its callees is about, written over
//	          the function's parameters, captures and globals
//	birth     where an instance comes into being for the path: an event that
//	          gives it (os.Open), or the first time a value is met
//	unit      a function with an instance that exists before it, or with all
//	          that are born below it; see units.go
//
// # Phases
//
//	Analyze     call graph by types, effect summaries (package effects)
//	buildCone   functions with events, who reaches them, subjects, births
//	buildFlows  which branches bear on anything, which facts are asked for
//	findStarts  units where events and births stand; Next and Settle climb
//	Rules       on demand: walk from a head to the next step that matters
//
// # Stack symbols and states
//
// A symbol is a point of a function with the names and facts of its frame. A
// running path has the state run; what a callee leaves behind travels in the
// state of its exit: how it ended, names under results, parameters and globals,
// facts about results and memory. A function that defers pushes a bottom symbol
// first; `defer` pushes the call between the rest of the body and what lies
// beneath; leaving the function pops into a state that carries the frame's
// names and facts and runs the pending calls one by one, normally, panicking or
// by Goexit. recover is seen only by a function that the unwinding itself called.
//
// # Instructions
//
//	Alloc               a fresh object: zero facts for its places
//	UnOp *              names and facts of the place go to the register
//	Store               names through the place end, the value's names are added
//	                    under it; in an object from elsewhere it is handed on
//	FieldAddr, Field,   address arithmetic and conversions are looked through
//	ChangeType, ChangeInterface, MakeInterface, TypeAssert
//	IndexAddr, Index,   an element: the same index is the same element, another
//	Lookup, Range, Next one is a doubt; loops over a whole container meet all
//	Phi                 takes the names and facts of the edge that is walked
//	If                  decided by facts, else forked if its sides differ
//	Call                event, or entered if it concerns the instance, or an
//	                    effect summary: may panic, not return, overwrite, hand on
//	Go                  a body that only gives back or only takes is counted for
//	                    the spawner; others are starting points of their own
//	Defer, RunDefers,   the pushdown stack is the defer stack
//	Panic, Recover
//	Send, MapUpdate     the value is handed to a container or out of sight
//	Select              one branch per case; sends only in the chosen one
//	MakeClosure         captures are names inside the closure value
//	BinOp, UnOp         conditions: pure operations on equal operands are one key
//	Return              names and facts of the results go to the caller
//	DebugRef, others    nothing
//
// # Limits
//
// Exact on the model but for: names deeper than nine selectors become holders;
// the sets of facts told apart at a point and at a function's exits are bounded
// (lower.go), past which facts are dropped: that only adds paths; facts are
// passed by arguments between functions of one package or one module; panics
// are followed to recovers in the same package; dynamic calls with more than
// eight candidates are not followed (their candidates are judged on their own);
// generic functions that nothing instantiates are left out.
//
// Not sound yet, and no assumption says so where it happens: an unknown function
// value that no name of the instance leads to; an instance stored under a
// parameter's field in some shapes; Goexit through interfaces. Package gentest
// lists them (`open`).
//
// SSA is built with ssa.InstantiateGenerics. Read units.go next for where paths
// start, lower.go for the walk, calls.go for what a call does.
package frontend
