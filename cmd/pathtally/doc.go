// Pathtally asks, for all call paths of a Go module, whether things that belong
// in pairs come out even: locks, files, transactions, slots of a pool.
//
// This package holds the command: flags, terminal, files and exit statuses. It
// analyses nothing itself.
//
//	pathtally check [packages]      judge the rules
//	pathtally accept [packages]     record findings with a reason; see package accept
//	pathtally rules list|show|try   look at the rules, run their examples
//	pathtally count FUNCTION        the count image of a function or system (count.go)
//	pathtally export [packages]     the system or the question behind count (export.go)
//	pathtally join FILES            put the parts of a run together (part.go)
//	pathtally completion SHELL      for bash, zsh, fish and powershell
//
// # Exit statuses of check
//
//	0  nothing new is broken or undecided; advice and what is accepted never stop
//	1  something is broken (wins over 3)
//	2  it could not run: usage, load or rule error, or a bug; or --partial left something out
//	3  nothing is broken, something is undecided (not with --undecided note)
//
// Results go to standard output, everything else to standard error. With
// --format json standard output holds exactly one JSON object, whatever
// happens.
//
// # How a run goes
//
// loading (package frontend/load), rule files (package properties), one shared
// analysis of the program, then one model and one judge per rule, several rules
// at a time (--jobs), and the report. Work is spread over threads by rule; the
// output does not depend on it.
package main
