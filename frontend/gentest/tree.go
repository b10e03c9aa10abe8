package gentest

import (
	"fmt"
	"go/ast"
	"go/format"
	"go/parser"
	"go/token"
	"go/types"
	"strings"
)

// A node is a statement or a declaration: text with blocks of further nodes in
// it. It is as much of a syntax tree as shrinking needs.
type node struct {
	parts []part
	// alts are simpler forms of the node that share its blocks.
	alts []*node
}

// part is text, or a block if text is "".
type part struct {
	text  string
	block []*node
}

func text(format string, args ...any) *node {
	return &node{parts: []part{{text: fmt.Sprintf(format, args...)}}}
}

// tree makes a node of strings and blocks.
func tree(parts ...any) *node {
	n := &node{}
	for _, p := range parts {
		switch p := p.(type) {
		case string:
			n.parts = append(n.parts, part{text: p})
		case []*node:
			n.parts = append(n.parts, part{block: p})
		}
	}
	return n
}

func (n *node) write(b *strings.Builder) {
	for _, p := range n.parts {
		if p.text != "" {
			b.WriteString(p.text)
			continue
		}
		b.WriteByte('\n')
		for _, c := range p.block {
			c.write(b)
			b.WriteByte('\n')
		}
	}
}

// A Program is a generated package p of one file.
type Program struct {
	Seed  int64
	Known bool // no branch is unknown
	decls []*node
}

// size is a measure for shrinking: the length of the text.
func (p *Program) size() int {
	var b strings.Builder
	for _, d := range p.decls {
		d.write(&b)
	}
	return b.Len()
}

// A Root is an entry point of a program: its name as the analysis prints it.
type Root struct {
	Name   string
	Method bool
	Params []string // types of the parameters: *Box, *Res, bool
}

// Source prints the program, as gofmt would if it is Go.
func (p *Program) Source() string {
	var body strings.Builder
	for _, d := range p.decls {
		d.write(&body)
		body.WriteString("\n\n")
	}
	text := body.String()
	var b strings.Builder
	fmt.Fprintf(&b, "package p\n\nimport (\n")
	if strings.Contains(text, "runtime.") {
		b.WriteString("\t\"runtime\"\n")
	}
	b.WriteString("\n\t\"gen/rt\"\n)\n")
	b.WriteString(prelude)
	b.WriteString(text)
	out, err := format.Source([]byte(b.String()))
	if err != nil {
		return b.String() // a candidate of shrinking that is no Go: Check will say so
	}
	return string(out)
}

// prelude declares what every program counts on.
const prelude = `
type Res struct{ N int }

func (r *Res) Take() { rt.Event(r, r == nil, 0) }
func (r *Res) Give() { rt.Event(r, r == nil, 1) }

type Taker interface {
	Take()
	Give()
}

type Nop struct{ N int }

func (n *Nop) Take() {}
func (n *Nop) Give() {}

type Box struct {
	A, C Res
	P    *Res
	F    bool
	G    func()
}

var Glob Res

`

// stubs stands in for the packages that programs import.
var stubs = map[string]string{
	"runtime": "package runtime\nfunc Goexit() {}",
	"gen/rt": "package rt\nfunc Flip() bool { return false }\nfunc Pick() int { return 0 }\n" +
		"func Event(p any, isNil bool, kind int) {}\nfunc Add() {}\nfunc Done() {}\nfunc Wait() {}",
}

type stubImporter struct{ done map[string]*types.Package }

func (s *stubImporter) Import(path string) (*types.Package, error) {
	if p := s.done[path]; p != nil {
		return p, nil
	}
	src, ok := stubs[path]
	if !ok {
		return nil, fmt.Errorf("no package %s", path)
	}
	fset := token.NewFileSet()
	f, err := parser.ParseFile(fset, path, src, 0)
	if err != nil {
		return nil, err
	}
	p, err := (&types.Config{}).Check(path, fset, []*ast.File{f}, nil)
	if err == nil {
		s.done[path] = p
	}
	return p, err
}

var importStubs = &stubImporter{done: map[string]*types.Package{}}

// Check says whether the program compiles, and lists its roots: its exported
// functions and methods but for those of the prelude.
func (p *Program) Check() ([]Root, error) {
	fset := token.NewFileSet()
	f, err := parser.ParseFile(fset, "p.go", p.Source(), 0)
	if err != nil {
		return nil, err
	}
	if _, err := (&types.Config{Importer: importStubs}).Check("p", fset, []*ast.File{f}, nil); err != nil {
		return nil, err
	}
	var roots []Root
	for _, d := range f.Decls {
		fd, ok := d.(*ast.FuncDecl)
		if !ok || !strings.HasPrefix(fd.Name.Name, "Root") {
			continue
		}
		r := Root{Name: fd.Name.Name, Method: fd.Recv != nil}
		if r.Method {
			r.Name = "(*Box)." + r.Name
		}
		for _, q := range fd.Type.Params.List {
			for _, n := range q.Names {
				r.Params = append(r.Params, n.Name+" "+types.ExprString(q.Type))
			}
		}
		roots = append(roots, r)
	}
	return roots, nil
}

// Smaller lists programs that lack something of p, largest cuts first. Not all
// of them compile.
func (p *Program) Smaller() []*Program {
	var out []*Program
	add := func(decls []*node) { out = append(out, &Program{Seed: p.Seed, Known: p.Known, decls: decls}) }
	shrinkList(p.decls, add)
	return out
}

// shrinkList gives every list that is one step smaller than l.
func shrinkList(l []*node, give func([]*node)) {
	with := func(i, n int, by ...*node) []*node {
		out := append([]*node(nil), l[:i]...)
		out = append(out, by...)
		return append(out, l[i+n:]...)
	}
	for n := len(l); n > 1; n /= 2 {
		for i := 0; i+n <= len(l); i += n {
			give(with(i, n))
		}
	}
	for i := range l {
		give(with(i, 1))
	}
	for i, n := range l {
		for _, a := range n.alts {
			give(with(i, 1, a))
		}
		for _, q := range n.parts {
			if q.text == "" {
				give(with(i, 1, q.block...))
			}
		}
		for k, q := range n.parts {
			if q.text != "" {
				continue
			}
			shrinkList(q.block, func(b []*node) {
				c := &node{parts: append([]part(nil), n.parts...)}
				c.parts[k].block = b
				give(with(i, 1, c))
			})
		}
	}
}
