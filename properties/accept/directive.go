package accept

import (
	"bytes"
	"go/scanner"
	"go/token"
	"strings"
)

const directive = "//pathtally:accept"

// A Directive is a comment that accepts a finding at its place.
type Directive struct {
	File   string // as findings name it
	Line   int
	Column int
	Claim  string // RULE/CLAIM
	Reason string // never empty
}

// Directives lists the directives of a Go file in source order; name is the
// file as findings name it. A comment that begins like a directive and cannot be
// read as one is an *Error: it would look as if it accepted something.
func Directives(name string, src []byte) ([]Directive, error) {
	if !bytes.Contains(src, []byte(directive)) {
		return nil, nil // nearly always so
	}
	var out []Directive
	fset := token.NewFileSet()
	file := fset.AddFile(name, -1, len(src))
	var s scanner.Scanner
	s.Init(file, src, nil, scanner.ScanComments)
	for {
		pos, tok, lit := s.Scan()
		if tok == token.EOF {
			return out, nil
		}
		if tok != token.COMMENT || !strings.HasPrefix(lit, directive) {
			continue
		}
		rest := lit[len(directive):]
		if rest != "" && rest[0] != ' ' && rest[0] != '\t' {
			continue // another word that begins alike
		}
		at := file.PositionFor(pos, false)
		claim, reason, _ := strings.Cut(strings.TrimSpace(rest), ":")
		claim, reason = strings.TrimSpace(claim), strings.TrimSpace(reason)
		d := Directive{File: name, Line: at.Line, Column: at.Column, Claim: claim, Reason: reason}
		rule, c, ok := strings.Cut(claim, "/")
		switch {
		case !ok || rule == "" || c == "" || strings.ContainsAny(claim, " \t"):
			return nil, &Error{File: name, Line: at.Line, Column: at.Column, Text: "write " + directive + " RULE/CLAIM: the reason"}
		case reason == "":
			return nil, &Error{File: name, Line: at.Line, Column: at.Column, Text: "accepting " + claim + " needs a reason: " + directive + " " + claim + ": the reason"}
		}
		out = append(out, d)
	}
}
