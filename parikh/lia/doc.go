// Package lia decides quantifier-free formulas of linear integer arithmetic
// (Presburger arithmetic without quantifiers), exactly.
//
// A formula combines linear comparisons, remainders and Boolean variables with
// and, or, not, implication and equivalence. Variables range over the natural
// numbers, over all integers, or over a given interval. Answers are exact: Sat
// comes with a model that was put back into the formulas as the caller wrote them,
// Unsat holds over all integers, and when a budget runs out the answer is Unknown
// with the budget's name. No floating-point number takes part in any answer.
//
// # Words
//
//	form        an integer combination of variables
//	atom        form <= c; its negation is form >= c+1
//	row, slack  a form that the simplex knows, and its value as a variable
//	structural  a simplex variable that stands for a variable of the formulas
//	reason      the literals that a bound rests on
//	box         |x| <= 2^k for all x, on the strength of one assumed literal
//
// x, y are variables; v, j simplex variables; l literals; ts terms; k constants.
//
// # Data
//
//	6*x1 + 10*x2 - 14*x3 == 1          (no: the left side is even)
//	(x1 <= 3 || b1) && !(x2 == 0)
//
// # Phases
//
// Check runs them in this order:
//
//   - handOver: conjunctions at the top are taken apart; equations, inequalities
//     and bounds among them become facts, the rest goes to the Boolean layer.
//   - presolve (first Check only): greatest common divisors, fixed and implied
//     values, equations used up by substitution, Euclid's algorithm on equations
//     without a coefficient ±1; crash: a triangular basis for the equations.
//   - encode: clauses in gini (both directions of every definition), atoms with
//     canonical forms, remainders by a free quotient each.
//   - solveSAT: a Boolean assignment; justify: of it, only those theory literals
//     that make the formulas true.
//   - theory: simplex over the rationals; a conflict is an infeasible row, made
//     smaller by leaving out literals (at most 30 tries), and becomes a clause.
//   - for a fractional point: the lattice test on all equations that hold, a split
//     of a remainder whose quotient is unbounded, cuts, then the box, then
//     branching: x <= k becomes an atom of the Boolean layer, so that what a branch
//     refutes is learnt like everything else. The union over
//     the leaves of a branching is formed by gini's resolution of these clauses.
//   - an integral point is checked by verify and shown to the OnModel callback,
//     whose lemmas join the formulas.
//   - a refutation that needs the box enlarges it: 2^10, 2^20, 2^40, ...; a
//     refutation that does not is final.
//
// # Numbers
//
// Every number is an exact rational of two machine integers that moves to
// math/big by itself when an operation would overflow, and back.
//
// # Budgets
//
// Options names them: simplex pivots, branching steps, learnt clauses, cuts, bits
// of the box; all are counts of steps, so the same calls give the same answers on
// any machine. One part has no such counter: a single run of gini on the clauses.
// Only the context ends it.
//
// # What is exact and what is not
//
// Sat and Unsat are exact. The procedure is complete within a box; without bounds
// on the variables it may end in Unknown. An optimum is exact when its status is
// Sat.
//
// # Sources
//
// Dutertre and de Moura, A fast linear-arithmetic solver for DPLL(T), CAV 2006,
// and Integrating simplex with DPLL(T), SRI-CSL-06-01, for the bounds, the
// conflicts and the cuts; Barrett, Nieuwenhuis, Oliveras and Tinelli, Splitting on
// demand in SAT modulo theories, LPAR 2006, for branching by new atoms; Pugh, The
// Omega test, 1991, for equations. The files simplex.go, factor.go, lattice.go and
// cuts.go name theirs.
//
// Read next: solver.go (interface), search.go (the loop), simplex.go.
package lia
