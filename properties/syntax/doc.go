// Package syntax reads rule files: text to tokens, tokens to a tree with
// positions, and the errors that a person sees.
//
// The grammar is the file grammar.ebnf beside this one (Grammar returns it). It
// is written in Go's EBNF over four token classes and its own quoted words:
//
//	Name    letter or _, then letters, digits, _, and - before a letter; the
//	        words of the grammar are reserved, except after a dot
//	Int     decimal digits of any number, _ between digits
//	String  Go's "…"
//	Code    n ≥ 1 back quotes up to the next run of exactly n
//
// Line breaks: a semicolon stands, unwritten, before a line that starts with a
// clause word or with a closing brace, before every closing brace, and at the
// end of the file; none where one stands already or right after an opening
// brace. Everywhere else a line break is space, so that a long event wraps
// freely and an error stays inside its clause.
//
// The parser is written by hand, because that rule and the recovery at clause
// ends are ours: after an error it goes on with the next clause, so that a file
// gives one error per clause. A test proves, with a recogniser that reads
// grammar.ebnf and nothing of the parser, that each rule file of the project has
// exactly one derivation and that parser and grammar accept the same files.
//
// Phases, in order: lex (lex.go), parse (parse.go); the tree is in ast.go, the
// layout of files in format.go, errors in errors.go. Sorts and names are not
// looked at here: package properties does that.
package syntax

import _ "embed"

//go:embed grammar.ebnf
var grammar string

// Grammar is the normative grammar in EBNF; its start is File.
func Grammar() string { return grammar }
