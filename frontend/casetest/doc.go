// Package casetest reads the corpus of small Go programs under testdata/cases:
// one construct per case, a broken program beside its clean twin that differs
// by the least edit. It reads, splits and checks; it analyses nothing.
//
// # A case file
//
// A case is a txtar file, testdata/cases/TOPIC/NAME.txtar. Its comment is the
// header: prose that says which construct and why, and optional keyed lines.
// Its files are broken.go and clean.go, each a whole package p of one file that
// needs the standard library only.
//
//	An early return passes by the Unlock.
//
//	-- broken.go --
//	package p
//
//	import "sync"
//
//	type Desk struct{ mu sync.Mutex }
//
//	func (d *Desk) Book(full bool) bool {
//		d.mu.Lock()
//		if full {
//			return false // want mutex/balanced (*Desk).Book
//		}
//		d.mu.Unlock()
//		return true
//	}
//	-- clean.go --
//	...
//
// # Directives
//
// Directives are trailing comments of broken.go, several may follow each other
// on one line. clean.go has none: every finding there is a failure.
//
//	// want RULE/CLAIM FUNCTION      a finding stands here (its cause), in FUNCTION (its blame frame)
//	// or-here                       the same finding may as well stand here
//	// or-here RULE/CLAIM FUNCTION   the same, where the file has several wants
//
// FUNCTION is written as go/types prints it without the package path; a closure
// carries the name of the function it stands in. `F|G` accepts either. Type
// arguments in brackets are not compared: `(*Box[T]).Put` and `(*Box).Put` are one name.
//
// # Header lines
//
//	may: RULE/CLAIM FUNCTION         broken.go may have this finding as well (or be undecided about it), in any line
//	undecided: RULE/CLAIM FUNCTION   broken.go must be undecided about this, neither broken nor silent
//	rules: TEXT                      rule text to be added to the built-in rules; several lines are joined by line breaks
//	xfail: REASON                    beyond today's reach: run and reported, but no failure
//
// All else in the header is prose.
//
// # Entry points
//
// Load reads a folder, Parse one file, (Case).Check compares what was found
// with what the case wants, Edit counts the lines by which the twins differ.
package casetest
