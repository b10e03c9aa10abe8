package casetest

import (
	"fmt"
	"go/scanner"
	"go/token"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"golang.org/x/tools/txtar"
)

// The names of the two programs of a case.
const (
	BrokenFile = "broken.go"
	CleanFile  = "clean.go"
)

// Case is one construct: a broken program and its clean twin.
type Case struct {
	Topic     string // the folder: "defer"
	Name      string // the file without its ending: "loop-of-files"
	Path      string // where it was read
	Doc       string // the prose of the header, trimmed
	Broken    []byte // source of broken.go, directives included (line numbers are those of the wants)
	Clean     []byte // source of clean.go
	Wants     []Want // in source order
	May       []Claim
	Undecided []Claim
	Rules     string // extra rule text, "" if none
	XFail     string // why today's code cannot do it, "" if it can
}

// String is the case's name as a test prints it: "defer/loop-of-files".
func (c Case) String() string { return c.Topic + "/" + c.Name }

// Claim names a claim of a rule and the functions that a finding about it may stand in.
type Claim struct {
	Rule, Claim string
	Functions   []string // alternatives, at least one, without type arguments
}

// String prints the claim in the form it is read from.
func (c Claim) String() string {
	return c.Rule + "/" + c.Claim + " " + strings.Join(c.Functions, "|")
}

// Want is a finding that broken.go must have.
type Want struct {
	Claim
	Line int   // line of the want comment, from 1
	Also []int // other lines that will do, ascending
}

// Load reads every *.txtar below dir, in lexical order of their paths. An error
// names the file (and the line in broken.go) that is not a well-formed case.
// A folder without cases is an error: a test over nothing cannot fail.
func Load(dir string) ([]Case, error) {
	var cases []Case
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() || filepath.Ext(path) != ".txtar" {
			return err
		}
		data, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		c, err := Parse(path, data)
		if err != nil {
			return err
		}
		cases = append(cases, c)
		return nil
	})
	if err != nil {
		return nil, err
	}
	if len(cases) == 0 {
		return nil, fmt.Errorf("%s: no *.txtar files", dir)
	}
	return cases, nil
}

// Parse reads one case from data; path gives its topic (the folder) and name.
func Parse(path string, data []byte) (Case, error) {
	c := Case{
		Topic: filepath.Base(filepath.Dir(path)),
		Name:  strings.TrimSuffix(filepath.Base(path), ".txtar"),
		Path:  path,
	}
	ar := txtar.Parse(data)
	if err := c.header(string(ar.Comment)); err != nil {
		return Case{}, fmt.Errorf("%s: %v", path, err)
	}
	for _, f := range ar.Files {
		into := &c.Broken
		switch f.Name {
		case BrokenFile:
		case CleanFile:
			into = &c.Clean
		default:
			return Case{}, fmt.Errorf("%s: file %q: a case has %s and %s only", path, f.Name, BrokenFile, CleanFile)
		}
		if *into != nil {
			return Case{}, fmt.Errorf("%s: two files %s", path, f.Name)
		}
		*into = f.Data
	}
	if c.Broken == nil || c.Clean == nil {
		return Case{}, fmt.Errorf("%s: a case needs both %s and %s", path, BrokenFile, CleanFile)
	}
	marks, err := directives(c.Broken)
	if err != nil {
		return Case{}, fmt.Errorf("%s: %s:%v", path, BrokenFile, err)
	}
	if err := c.place(marks); err != nil {
		return Case{}, fmt.Errorf("%s: %s:%v", path, BrokenFile, err)
	}
	marks, err = directives(c.Clean)
	if err != nil {
		return Case{}, fmt.Errorf("%s: %s:%v", path, CleanFile, err)
	}
	if len(marks) > 0 {
		return Case{}, fmt.Errorf("%s: %s:%d: a clean program wants nothing", path, CleanFile, marks[0].line)
	}
	if len(c.Wants) == 0 && len(c.Undecided) == 0 {
		return Case{}, fmt.Errorf("%s: %s has no want and the header no undecided line", path, BrokenFile)
	}
	return c, nil
}

// header splits the comment of the archive into keyed lines and prose.
func (c *Case) header(text string) error {
	var doc, rules []string
	for i, line := range strings.Split(text, "\n") {
		key, rest, _ := strings.Cut(line, ":")
		rest = strings.TrimSpace(rest)
		switch key {
		case "may", "undecided":
			claim, err := parseClaim(rest)
			if err != nil {
				return fmt.Errorf("line %d: %s: %v", i+1, key, err)
			}
			if key == "may" {
				c.May = append(c.May, claim)
			} else {
				c.Undecided = append(c.Undecided, claim)
			}
		case "rules":
			rules = append(rules, rest)
		case "xfail":
			if rest == "" {
				return fmt.Errorf("line %d: xfail without a reason", i+1)
			}
			c.XFail = rest
		default:
			doc = append(doc, line)
		}
	}
	c.Rules = strings.Join(rules, "\n")
	c.Doc = strings.TrimSpace(strings.Join(doc, "\n"))
	if c.Doc == "" {
		return fmt.Errorf("the header does not say what the case is about")
	}
	return nil
}

// parseClaim reads "RULE/CLAIM FUNCTION[|FUNCTION]".
func parseClaim(s string) (Claim, error) {
	name, fns, ok := strings.Cut(strings.TrimSpace(s), " ")
	rule, claim, slash := strings.Cut(name, "/")
	if !ok || !slash || rule == "" || claim == "" || strings.TrimSpace(fns) == "" {
		return Claim{}, fmt.Errorf("%q is not RULE/CLAIM FUNCTION", s)
	}
	c := Claim{Rule: rule, Claim: claim}
	for _, f := range strings.Split(fns, "|") {
		f = bareName(f)
		if f == "" {
			return Claim{}, fmt.Errorf("%q has an empty function name", s)
		}
		c.Functions = append(c.Functions, f)
	}
	return c, nil
}

// bareName is a function name without spaces at its ends and type arguments.
func bareName(s string) string {
	var b strings.Builder
	depth := 0
	for _, r := range s {
		switch {
		case r == '[':
			depth++
		case r == ']' && depth > 0:
			depth--
		case depth == 0:
			b.WriteRune(r)
		}
	}
	return strings.TrimSpace(b.String())
}

// mark is one directive as it stands in the source.
type mark struct {
	line   int
	orHere bool
	claim  *Claim // nil for a bare or-here
}

// directives finds the directives of a source by its comments (never inside
// strings). The error begins with the line.
func directives(src []byte) ([]mark, error) {
	var marks []mark
	err := eachComment(src, func(line, _ int, text string) error {
		for _, part := range strings.Split(text, "//") {
			part = strings.TrimSpace(part)
			word, rest, _ := strings.Cut(part, " ")
			if word != "want" && word != "or-here" {
				continue
			}
			m := mark{line: line, orHere: word == "or-here"}
			if !m.orHere || rest != "" {
				claim, err := parseClaim(rest)
				if err != nil {
					return fmt.Errorf("%d: %s: %v", line, word, err)
				}
				m.claim = &claim
			}
			marks = append(marks, m)
		}
		return nil
	})
	return marks, err
}

// eachComment calls f with the line, the byte offset and the text of every // comment of src.
func eachComment(src []byte, f func(line, offset int, text string) error) error {
	fset := token.NewFileSet()
	file := fset.AddFile("", -1, len(src))
	var s scanner.Scanner
	s.Init(file, src, nil, scanner.ScanComments)
	for {
		pos, tok, lit := s.Scan()
		if tok == token.EOF {
			return nil
		}
		if tok != token.COMMENT || !strings.HasPrefix(lit, "//") {
			continue
		}
		if err := f(file.Line(pos), file.Offset(pos), lit); err != nil {
			return err
		}
	}
}

// place turns the marks of broken.go into wants. The error begins with the line.
func (c *Case) place(marks []mark) error {
	for _, m := range marks {
		if !m.orHere {
			c.Wants = append(c.Wants, Want{Claim: *m.claim, Line: m.line})
		}
	}
	for _, m := range marks {
		if !m.orHere {
			continue
		}
		hit := -1
		for i, w := range c.Wants {
			if m.claim != nil && m.claim.String() != w.Claim.String() {
				continue
			}
			if hit >= 0 {
				return fmt.Errorf("%d: or-here: two wants it may belong to (lines %d and %d)", m.line, c.Wants[hit].Line, w.Line)
			}
			hit = i
		}
		if hit < 0 {
			return fmt.Errorf("%d: or-here: no want it belongs to", m.line)
		}
		c.Wants[hit].Also = append(c.Wants[hit].Also, m.line)
	}
	return nil
}
