package load

import (
	"fmt"
	"strings"
)

// Kind says what is wrong with the input.
type Kind uint8

const (
	_             Kind = iota
	NoModule           // no go.mod around Dir, and the patterns need one
	NoMatch            // a pattern that names no package
	NoDirectory        // a directory that does not exist or cannot be read
	NewerGo            // go.mod or go.work asks for a newer Go
	MissingModule      // a module is not in the module cache, or nothing requires it
	BadModule          // go.mod, go.work or go.sum cannot be used as it stands
	BadPackage         // import cycle, several packages in one folder, missing package
	SyntaxError
	TypeError
	GoCommand // the go command failed in another way, or is not there
)

var kindNames = [...]string{
	NoModule: "no module", NoMatch: "no match", NoDirectory: "no directory", NewerGo: "newer Go",
	MissingModule: "missing module", BadModule: "bad module", BadPackage: "bad package",
	SyntaxError: "syntax error", TypeError: "type error", GoCommand: "go command",
}

func (k Kind) String() string {
	if int(k) < len(kindNames) && kindNames[k] != "" {
		return kindNames[k]
	}
	return fmt.Sprintf("Kind(%d)", uint8(k))
}

// Error is one thing that is wrong with the input.
type Error struct {
	Kind    Kind
	Package string // import path, "" if it belongs to none
	Place   string // "file:line:column", a file or a folder; as Program.Position writes files
	Message string // one line, without the place
}

func (e *Error) Error() string {
	if e.Place == "" {
		return e.Message
	}
	return e.Place + ": " + e.Message
}

// Errors is what Load returns if the input is to blame: at least one entry,
// in a fixed order (by package, then as the checker reports them).
type Errors []*Error

// Error shows the first few, one a line.
func (es Errors) Error() string {
	const shown = 10
	var b strings.Builder
	for i, e := range es {
		if i == shown {
			fmt.Fprintf(&b, "\nand %d more", len(es)-shown)
			break
		}
		if i > 0 {
			b.WriteByte('\n')
		}
		b.WriteString(e.Error())
	}
	return b.String()
}

// Unwrap lets errors.As find an *Error.
func (es Errors) Unwrap() []error {
	out := make([]error, len(es))
	for i, e := range es {
		out[i] = e
	}
	return out
}
