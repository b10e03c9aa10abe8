package judge

import (
	"go/scanner"
	"go/token"
	"strings"

	"pathtally/properties"
)

// What identifies a finding from one revision to the next: rule, claim and
// broken inequality, the function it stands in, the event that opens it, the
// step that loses it, and the shape of the path between the two (the events
// that count, and the functions they stand in). No line numbers, no names of
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
		f.Cause.Function, shapeOf(f.Cause.Text), between(f))
}

// between lists the counting steps behind the one that opens the imbalance, up
// to the one that loses it.
func between(f *Finding) string {
	first, last := 0, len(f.Path)
	for i := range f.Path {
		if f.Opened.Place.Line > 0 && f.Path[i].Place == f.Opened.Place && f.Path[i].Changed {
			first = i + 1
			break
		}
	}
	for i := len(f.Path) - 1; i >= first; i-- {
		if f.Path[i].Place == f.Cause.Place {
			last = i + 1
			break
		}
	}
	var b strings.Builder
	for i := first; i < min(last, len(f.Path)); i++ {
		if s := &f.Path[i]; s.Changed && s.Kind != properties.StepEnd {
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
