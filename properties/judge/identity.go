package judge

import (
	"go/scanner"
	"go/token"
	"strings"

	"pathtally/properties"
)

// What identifies a finding from one revision to the next: rule, claim and
// broken inequality, the function it stands in, the event that opens it, the
// step that loses it, and the shape of the path in that function (the events
// that count, and the functions they happen in). No line numbers, no names of
// locals and no texts of messages are in it: a finding is the same after code
// was moved, functions were reordered and variables renamed, and another one
// when something else happens on its way.

// identify gives a finding its fingerprint.
func identify(f *Finding) {
	opened := "none"
	if f.Opened.Place.Line > 0 {
		opened = f.Opened.Function + "\x01" + shapeOf(f.Opened.Text)
	} else if f.Home != "" {
		opened = "home\x01" + f.Home
	}
	f.Fingerprint = fingerprint(f.Rule, f.Claim, f.Broken, f.Blame.Package, f.Blame.Name, opened,
		f.Cause.Function, shapeOf(f.Cause.Text), shape(f))
}

// shape lists the counting steps from where the function that the finding
// stands in begins, up to the step that loses the instance. What happens before
// it, on the way from a start, is left out: there may be many ways to come here.
func shape(f *Finding) string {
	first, depth := 0, 0
	for i := range f.Path {
		if f.Path[i].Function == f.Blame.Name {
			first, depth = i, f.Path[i].Depth
			break
		}
	}
	last := len(f.Path) - 1
	for i := last; i >= first; i-- {
		if f.Path[i].Place == f.Cause.Place {
			last = i
			break
		}
	}
	var b strings.Builder
	for i := first; i <= last; i++ {
		if s := &f.Path[i]; s.Changed && s.Depth >= depth && s.Kind != properties.StepEnd {
			b.WriteString(s.Function + "\x01" + shapeOf(s.Text) + "\x02")
		}
	}
	return b.String()
}

// shapeOf leaves out of a text what a renaming changes: each name that is not
// selected from something becomes "_", so that d.mu.Lock() and desk.mu.Lock()
// are one text; strings become "". Names of packages and functions go too:
// nothing in the text tells them from variables.
func shapeOf(text string) string {
	var b strings.Builder
	var s scanner.Scanner
	fset := token.NewFileSet()
	src := []byte(text)
	s.Init(fset.AddFile("", -1, len(src)), src, func(token.Position, string) {}, 0)
	for prev := token.ILLEGAL; ; {
		_, tok, lit := s.Scan()
		switch {
		case tok == token.EOF:
			return b.String()
		case tok == token.SEMICOLON && lit == "\n":
			continue
		case tok == token.IDENT && prev != token.PERIOD && lit != "nil" && lit != "true" && lit != "false":
			b.WriteString("_ ")
		case tok == token.STRING:
			b.WriteString(`"" `)
		case lit != "":
			b.WriteString(lit + " ")
		default:
			b.WriteString(tok.String() + " ")
		}
		prev = tok
	}
}

// Fingerprint identifies an undecided question, as a finding's does: free of
// line numbers and names of locals.
func (o *Open) Fingerprint() string {
	return fingerprint("undecided", o.Set, o.Rule, o.Claim, o.Root.Package, o.Root.Name, shapeOf(o.Instance))
}
