// Package summary finds what the runs of a pushdown system can weigh.
//
// It works on a [pds.System] given on demand and touches only what can be
// reached from the heads that it is asked about. All answers are exact for the
// system, or say that the budget ran out; there is no floating point and no
// dependence on the order of maps.
//
// # Words
//
//   - head ⟨q, g⟩: a state with the symbol on top of the stack; node: a head that
//     was met
//   - exit of a head: a state r with ⟨q, g⟩ ⇒* ⟨r, ε⟩, that is, in which g can be
//     popped, with all that was pushed above it
//   - run, ended: until the stack is empty; open: stopped before that
//   - weight: the numbers of a [Question] times the counts of a run
//   - pump: a part of a run that leads back to where it began and can be repeated
//
// Naming: p, q, r states; g, h symbols; a, b nonterminals in grammar code; n
// nodes; p productions, pairs.
//
// # Phases
//
//  1. Saturation ([Engine.Saturate]): which heads are reached, and their exits.
//
//  2. Grammar (grammar.go): nonterminals and productions, built when first used;
//     see below.
//
//  3. Greatest weights ([Solution]): what has no run is dropped; then, component
//     by component, values rise from nothing over (max, +); a cycle among the best
//     productions is a pump with a gain, and the component and all that uses it are
//     unbounded. [Solution.Without] asks again with rules taken out.
//
//  4. Witnesses ([Solution.Witness]): not the heaviest run but a shortest one past
//     a bound, as choices that [pds.Replay] executes.
//
//  5. Blame ([Solution.AlongPath]): what could still have come of each
//     configuration of a run.
//
// # The grammar
//
//	C[q g r]  from ⟨q, g⟩ until g is popped in r         closed
//	O[q g]    from ⟨q, g⟩, stopped before g is popped    open
//	K, P      like C and O, stopped anywhere, spawned work too
//	L[q g]    from ⟨q, g⟩, stopped before a loss
//	S[q g]    spawned work that has ended: C[q g r] for any r, L[q g], or B[q g] if it can never end
//	B[q g]    spawned work stopped anywhere: P[q g] or K[q g r]
//
//	⟨q, g⟩ → ⟨r, ε⟩        C[q g r] → e
//	⟨q, g⟩ → ⟨p, h⟩        C[q g r] → e C[p h r];           O[q g] → e O[p h]
//	⟨q, g⟩ → ⟨p, h k⟩      C[q g r] → e C[p h s] C[s k r];  O[q g] → e O[p h] | e C[p h s] O[s k]
//
// e is the rule's effect, followed by an S (in K and P: a B) for everything that the
// rule spawns. O stops where the question says: O → ε, anywhere or before a mark.
//
// Open nonterminals come from the system itself and not from the grammar of ended
// runs: for { mu.Lock() } has no ended run, and still every moment of it counts.
//
// [Engine.Grammar] hands the trimmed grammar to engines that ask for more than
// weights.
//
// # Spawned work
//
// A rule may spawn work whose counts belong to the same claim. Questions about
// ends count it by totals when it has ended; work that can never end counts at any
// moment of it, which [Engine.Endless] lists since it is an assumption. Questions
// about moments count the least that any of its prefixes weighs: its events may or
// may not have happened, whichever keeps the claim. Question.Prefixes lets it count
// at any prefix, whichever breaks the claim. Order between a run and what
// it spawned is not modelled. (Ganty, Majumdar, Algorithmic verification of
// asynchronous programs, 2012.)
//
// # Limits
//
// A saturation may spend a number of rule steps and then says exhausted, never a
// wrong "no". Paths are written out up to [MaxPath] steps. Sums are machine
// integers that become big ones when they must.
package summary
