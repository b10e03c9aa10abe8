// Package gentest checks the lowering against running programs.
//
// It draws random Go programs, runs them with the Go compiler under many
// oracles, and compares every count vector that a run shows with the count
// image that the pushdown system of the program has.
//
// # Programs
//
// A program (Generate) is a package p of one file. Its instances are values of
// the prelude's type Res, whose methods Take and Give are the events of the one
// rule that programs are judged by (ruleText). Programs have helpers that call
// each other, closures, method values, interfaces, fields, loops, switches,
// deferred calls, panics, recovers, Goexit and goroutines. Unknown branches ask
// rt.Flip, whose body the analysis does not see; a known program has none.
//
// # Runs
//
// A batch of programs is one module and one binary. For each exported root,
// package rt (rt.txt) walks depth-first through the tree of flips; a walk that
// came to its end is complete: it has shown everything that the root can do. Runs
// have bounds on flips and events; a run past a bound says nothing.
//
// # Comparison
//
//	missing    a run's vector at an end or at a moment is not in the image
//	refuted    a run breaks a claim that is said to hold
//	spurious   the image has a vector that a complete walk did not show
//	crash      the analysis panicked
//
// Images are enumerated from the trimmed grammar and are exact below side. The
// greatest weights that verdicts rest on are asked as well. What is no error:
// a process ends by a panic (no checkpoint), spawned work is counted elsewhere
// (goroutine bodies may be roots of their own), a contract excuses a root.
//
// # Shrinking
//
// Shrink drops statements, declarations, branches and wrappers as long as the
// first failure stays, many candidates per build.
package gentest
