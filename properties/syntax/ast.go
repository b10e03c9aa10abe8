package syntax

// The tree of a rule file.

import (
	"fmt"
	"math/big"
	"sort"
	"strings"
)

// Span is a piece of the source: bytes From up to, not including, To.
type Span struct{ From, To int }

// Pos gives the span itself; it makes every node that embeds a Span a Node.
func (s Span) Pos() Span { return s }

// Node is anything with a place.
type Node interface{ Pos() Span }

// File is a rule file.
type File struct {
	Name     string // as the user should see it
	Src      string
	RuleSet  *Ident // nil without `ruleset`
	Imports  []*Import
	Decls    []Decl // *Rule, *Model, *Setting, in source order
	Comments []Comment
	// BadImport: an import line has an error, so that names may be missing.
	BadImport bool

	lines []int // offsets of line starts
}

// Comment is one // comment, without its line break.
type Comment struct {
	Span
	Text string
	Own  bool // nothing stands before it in its line
}

// Decl is a declaration of a file.
type Decl interface{ Node }

// Clause is a clause of a rule: *Each, *Scope, *Count, *Phase, *Claim, *Model, *Example or *Bad.
type Clause interface{ Node }

// Ident is a name.
type Ident struct {
	Span
	Text string
}

// Import is an import line.
type Import struct {
	Span
	Name *Ident // nil: the package's own name
	Path *StrLit
}

// Rule is a rule.
type Rule struct {
	Span
	Name    *Ident
	Doc     string // the comment block that touches it, without slashes; "" for none
	Clauses []Clause
}

// Bad stands for a clause with an error; Declares is the name it would have
// declared, nil if unknown.
type Bad struct {
	Span
	Declares *Ident
	Claim    bool // the name is a claim's
}

// Each is an instance or data parameter.
type Each struct {
	Span
	Name  *Ident
	Types []TypeExpr
	In    []*Subject
	Hand  *Ident  // stays, moves; nil if absent
	Where Formula // nil if absent
}

// Scope is `within goroutine` or `across goroutines`.
type Scope struct {
	Span
	Across bool
}

// Count is one line of a count.
type Count struct {
	Span
	Name  *Ident
	By    Formula // nil if absent
	Event *Event
	Since *Event // nil if absent
}

// Phase is a stretch of a path.
type Phase struct {
	Span
	Name  *Ident
	From  *Event
	Until *Event // nil: it lasts
}

// Claim is a claim or an advice.
type Claim struct {
	Span
	Advice  bool
	Name    *Ident
	Point   *Point
	Formula Formula
	Reason  *StrLit // nil if absent
}

// Point is where a claim is judged. Word is always, return, success, failure,
// panic, end, before or after; Event goes with the last two.
type Point struct {
	Span
	Word  string
	Event *Event
}

// Example is code that keeps every claim, or that breaks the claims named.
type Example struct {
	Span
	Broken []*Ident // nil: holds
	Code   *CodeLit
}

// Model says what code out of sight does. Effect is calls, spawns, keeps,
// yields (with Arg), never returns or repeats (Arg nil).
type Model struct {
	Span
	Callees []*Callee
	Effect  string
	Arg     *IntLit
}

// Setting is a switch, a root or a pin. Word is its first word.
type Setting struct {
	Span
	Word    string
	Targets []*Target // enable, disable, soften
	In      []*StrLit
	Reason  *StrLit
	Callees []*Callee // root, noroot
	Name    *Ident    // pin
	Version *StrLit   // pin
}

// Target is a rule, a rule set, or a claim of a rule.
type Target struct {
	Span
	Name  *Ident
	Claim *Ident // nil: all of it
}

// Event is something the program does.
type Event struct {
	Span
	Act     string // call, spawn, send, receive, close, make
	Callees []*Callee
	On      *Subject
	With    *Patterns
	Giving  *Patterns
	Where   []Formula
	Within  []*Side
}

// Side is `inside PHASE` or `outside PHASE`.
type Side struct {
	Span
	Outside bool
	Name    *Ident
}

// Patterns is a list of patterns; List is nil for ().
type Patterns struct {
	Span
	List []*Pattern
}

// Pattern is a pattern for a value. Kind is "_", "...", "nil", "true", "false",
// "int", "string" or "subject".
type Pattern struct {
	Span
	Kind    string
	Int     *big.Int
	String  string
	Subject *Subject
}

// Subject is a name with selectors; len(Parts) ≥ 1.
type Subject struct {
	Span
	Parts []*Ident
}

// String gives the subject as it is written without spaces.
func (s *Subject) String() string {
	var parts []string
	for _, p := range s.Parts {
		parts = append(parts, p.Text)
	}
	return strings.Join(parts, ".")
}

// Callee is a function, a method (Recv), or a value that an each binds.
type Callee struct {
	Span
	Recv    bool
	Pointer bool     // (*T).M
	Subject *Subject // the function or the receiver's type
	Args    []TypeExpr
	Method  *Ident // nil without Recv
	Prefix  bool   // ends in *
}

// TypeExpr is a type: *AnyType, *PointerType, *ArrayType, *MapType, *ChanType,
// *FuncType, *StructType, *NamedType.
type TypeExpr interface{ Node }

type (
	// AnyType is _.
	AnyType struct{ Span }
	// PointerType is *Elem.
	PointerType struct {
		Span
		Elem TypeExpr
	}
	// ArrayType is [Len]Elem, a slice if Len is nil.
	ArrayType struct {
		Span
		Len  *IntLit
		Elem TypeExpr
	}
	// MapType is map[Key]Elem.
	MapType struct {
		Span
		Key, Elem TypeExpr
	}
	// ChanType is a channel; Word is chan, <-chan or chan<-.
	ChanType struct {
		Span
		Word string
		Elem TypeExpr
	}
	// FuncType is a function type without results.
	FuncType struct {
		Span
		Params []TypeExpr
	}
	// StructType is struct{}.
	StructType struct{ Span }
	// NamedType is a named type.
	NamedType struct {
		Span
		Subject *Subject
		Args    []TypeExpr
	}
)

// Formula is a formula or a term; which of them is a question of sorts, not of
// syntax: *Binary, *Chain, *Unary, *IntLit, *StrLit, *WordLit, *Size, *Subject, *Paren.
type Formula interface{ Node }

type (
	// Binary is X Op Y for =>, ||, &&, +, -, *, %.
	Binary struct {
		Span
		Op   string
		At   Span // of the operator
		X, Y Formula
	}
	// Chain is a comparison: Terms[0] Ops[0] Terms[1] Ops[1] …; len(Ops) ≥ 1.
	Chain struct {
		Span
		Terms []Formula
		Ops   []*Ident
	}
	// Unary is !X or -X.
	Unary struct {
		Span
		Op string
		X  Formula
	}
	// IntLit is a number.
	IntLit struct {
		Span
		Value *big.Int
	}
	// StrLit is a string.
	StrLit struct {
		Span
		Value string
	}
	// WordLit is true, false or nil.
	WordLit struct {
		Span
		Word string
	}
	// Size is len(Of) or cap(Of).
	Size struct {
		Span
		Word string
		Of   *Subject
	}
	// Paren is (X).
	Paren struct {
		Span
		X Formula
	}
)

// CodeLit is code between back quotes. Inner is the place of Value.
type CodeLit struct {
	Span
	Inner Span
	Value string
}

func newFile(name, src string) *File {
	f := &File{Name: name, Src: src, lines: []int{0}}
	for i := 0; i < len(src); i++ {
		if src[i] == '\n' {
			f.lines = append(f.lines, i+1)
		}
	}
	return f
}

// Position gives the line and the column, both from 1, of a byte of the source.
func (f *File) Position(offset int) (line, column int) {
	line = sort.SearchInts(f.lines, offset+1)
	return line, offset - f.lines[line-1] + 1
}

// Place writes a node's place as file:line:column.
func (f *File) Place(n Node) string {
	l, c := f.Position(n.Pos().From)
	return fmt.Sprintf("%s:%d:%d", f.Name, l, c)
}

// Text is the source of a node, each run of space and comments outside of
// strings and code as one space.
func (f *File) Text(n Node) string {
	s := n.Pos()
	var b strings.Builder
	end := -1
	for _, t := range lex(newFile(f.Name, f.Src[s.From:s.To])) {
		if t.Kind == EOF || t.auto {
			continue
		}
		if end >= 0 && t.From > end {
			b.WriteByte(' ')
		}
		b.WriteString(t.Text)
		end = t.To
	}
	return b.String()
}

// Errorf makes an error at a node.
func (f *File) Errorf(stage Stage, n Node, hint, format string, args ...any) *Error {
	s := n.Pos()
	line, col := f.Position(s.From)
	src := f.Src[f.lines[line-1]:]
	if i := strings.IndexByte(src, '\n'); i >= 0 {
		src = src[:i]
	}
	src = strings.TrimRight(src, "\r")
	return &Error{Stage: stage, File: f.Name, Line: line, Column: col, Source: src, Width: s.To - s.From,
		Msg: fmt.Sprintf(format, args...), Hint: hint}
}
