// Package parikh computes count images: which vectors of counts the derivations
// of a grammar, or the runs of a pushdown system, can have.
//
// # Words
//
//	production p    A -> w B1..Bk: adds the vector w; y_p says how often it is used
//	image           the set of count vectors of all derivations (Parikh image)
//	flow            what enters a nonterminal leaves it; the start has one extra
//	active          a nonterminal with y_p > 0 for one of its productions
//	region          a strongly connected set of the loop nest
//	circulation     numbers y with flow but without the start's extra one
//	pump            a part of a derivation that leads from A to A
//
// A, B nonterminals; p productions; v, w vectors; y numbers of productions.
//
// # Data
//
//	S -> a S b | eps          the image of this grammar is a == b
//
// [Grammar] is the input: written by hand ([ParseGrammar]), built ([Builder]), or
// taken from the runs of a system ([FromSummary]). [Image] answers questions.
//
// # Phases
//
//   - reduce: trim; put in vectors for nonterminals that have only one; inline
//     chains; merge parallel productions and bisimilar nonterminals. Each production
//     that is left remembers what it stands for.
//   - newFlow: one variable per production, one equation per nonterminal.
//   - Ask: the question joins the flow in package lia. A point of the flow is a
//     derivation iff all that is active is reached from the start along active
//     productions; a point that is not is cut off (cut) by the clause of a region or
//     of a set of nonterminals, "unused, or entered from outside"; a region that
//     needs many clauses gets rank variables, which excludes all such points at once.
//   - repair: a disconnected point without what is not reached is often a derivation
//     whose counts answer the question.
//   - cells, addPriced, addSlots: in systems with data ([NewSystem]), what guards and
//     predicates add: outcomes listed, columns on demand, or slots.
//   - Derive: from numbers of productions to a derivation in run-length form.
//
// # What is exact
//
// Yes and No are exact, for numbers of any size; Unknown names the budget that ran
// out. The clauses are complete since flow makes every source component of what is
// active but not reached a set that nothing enters, and there are finitely many
// sets; rank variables by the argument at ranks.
//
// # Sources
//
// Verma, Seidl and Schwentick, On the complexity of equational Horn clauses, CADE
// 2005, for the flow and the published encoding of connectivity;
// Esparza, Petri nets, commutative context-free grammars, and basic parallel
// processes, Fundamenta Informaticae 1997, for flow plus connectivity; Parikh, On
// context-free languages, JACM 1966.
//
// Eisenbrand and Shmonin, Carathéodory bounds for integer cones, 2006, for slots.
//
// # Limits
//
// Linear sets, rays and bounds of systems with data are answered only where no
// parameter decides outcomes (bounds) or not at all (sets, rays). Minimal vectors
// and bounds need listed outcomes. The replay of runs past 10,000 steps executes
// each repeated piece twice.
//
// Read next: image.go, explore.go, then system.go.
package parikh
