// Package report prints what a run has found: as text for a person, as lines
// for an editor or a log, and as JSON for a program.
//
// A finding in text opens with the step that loses it, since that is usually
// the line somebody changes. Below stands the path as a table with the counts
// at the right, printed where they change: one sees at which line the numbers
// fail to come back.
//
// Equal runs give equal bytes: nothing here knows the time, the number of
// threads or the machine. Colour is added only when the caller asks for it.
package report
