// Package accept keeps what a team has looked at and decided to live with, so
// that a gate stops only for what is new.
//
// There are two places for it. The file pathtally.accepted at the module root
// has a block for each finding:
//
//	package example/harbour/berth
//
//	broken mutex/balanced 51a1d4262b7c8d90
//	    function  (*Desk).Book
//	    instance  d.mu
//	    cause     berth/desk.go: (*Desk).settle: return
//	    build     linux/amd64
//	    reason    the night shift calls Close, which unlocks
//
// and a comment in the source accepts a finding of the line it stands on, or of
// the line below it:
//
//	return nil //pathtally:accept mutex/balanced: handed to the reaper
//
// Both need a reason. What identifies a finding is its fingerprint, which has no
// line numbers and no names of locals in it (package judge, identity.go); the
// other lines of a block are there to be read, and accept writes them anew.
//
// # Words
//
//	entry       a block of the file
//	directive   a comment in the source
//	stale       an entry or directive that accepts nothing although what it is
//	            about was judged; advice, since mending something must not stop a gate
//
// # From files to an answer
//
//  1. Parse reads the file, Directives a source file; errors carry places.
//  2. Apply compares them with a result and a Scope (what was judged), and says
//     which findings and questions are accepted, and what is stale.
//  3. Update and Prune make the next file; Write puts it in the old one's place
//     in one step, so that an interrupted run loses nothing.
package accept
