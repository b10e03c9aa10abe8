package load

// This file answers questions about places in the source.

import (
	"bytes"
	"go/ast"
	"go/token"
	"go/types"
	"os"
	"path"
	"path/filepath"
	"strings"
	"sync"

	"golang.org/x/tools/go/ssa"
)

// fileInfo is what is known of a file that was parsed.
type fileInfo struct {
	pkg       *Package
	display   string
	generated bool // known for packages with bodies only
}

// textCache keeps the lines of the files that were asked for.
type textCache struct {
	mu    sync.Mutex
	bytes map[string][]byte
}

// indexFiles notes how each file is shown.
func (prog *Program) indexFiles() {
	prog.files = make(map[string]*fileInfo, prog.Stats.Files)
	for _, p := range prog.Packages {
		for _, f := range p.files {
			prog.files[f.path] = &fileInfo{pkg: p, display: prog.displayName(p, f.path)}
		}
		for _, f := range p.Syntax {
			if tf := prog.Fset.File(f.FileStart); tf != nil && ast.IsGenerated(f) {
				if info := prog.files[tf.Name()]; info != nil {
					info.generated = true
				}
			}
		}
	}
}

// displayName is the path relative to the module root with forward slashes,
// or, outside of it, the import path and the file's own name.
func (prog *Program) displayName(p *Package, file string) string {
	if rel, ok := inside(prog.ModuleDir, file); ok {
		return rel
	}
	return path.Join(strings.TrimSuffix(p.Path, "_test"), filepath.Base(file))
}

// Position says where pos is: the file as Place.File of package properties
// has it, line and column from 1, column in bytes. The line is the one in the
// file itself; "//line" comments are not followed, as the text they name is
// not what is judged. No position gives "", 0, 0.
func (prog *Program) Position(pos token.Pos) (file string, line, column int) {
	if !pos.IsValid() {
		return "", 0, 0
	}
	p := prog.Fset.PositionFor(pos, false)
	if !p.IsValid() {
		return "", 0, 0
	}
	if info := prog.files[p.Filename]; info != nil {
		return info.display, p.Line, p.Column
	}
	return filepath.ToSlash(p.Filename), p.Line, p.Column
}

// FileOf returns the absolute path of the file that pos is in, "" if none.
func (prog *Program) FileOf(pos token.Pos) string {
	if !pos.IsValid() {
		return ""
	}
	if f := prog.Fset.File(pos); f != nil {
		return f.Name()
	}
	return ""
}

// DisplayName writes an absolute path as Position does.
func (prog *Program) DisplayName(file string) string {
	if info := prog.files[file]; info != nil {
		return info.display
	}
	if rel, ok := inside(prog.ModuleDir, file); ok {
		return rel
	}
	return filepath.ToSlash(file)
}

// InModule reports whether pos is in a file below the module root.
func (prog *Program) InModule(pos token.Pos) bool {
	_, ok := inside(prog.ModuleDir, prog.FileOf(pos))
	return ok
}

// IsGenerated reports whether the file that pos is in says at its head that
// it was generated. It is known for packages with bodies only.
func (prog *Program) IsGenerated(pos token.Pos) bool {
	info := prog.files[prog.FileOf(pos)]
	return info != nil && info.generated
}

// source returns the bytes of a file; nil if it cannot be read any more.
func (prog *Program) source(file string) []byte {
	prog.texts.mu.Lock()
	defer prog.texts.mu.Unlock()
	if b, ok := prog.texts.bytes[file]; ok {
		return b
	}
	b, err := os.ReadFile(file)
	if err != nil {
		b = nil
	}
	if prog.texts.bytes == nil {
		prog.texts.bytes = map[string][]byte{}
	}
	prog.texts.bytes[file] = b
	return b
}

// SourceLine returns the line that pos is in, without its end and without
// space at its end; "" if the file cannot be read.
func (prog *Program) SourceLine(pos token.Pos) string {
	f := prog.Fset.File(pos)
	if f == nil {
		return ""
	}
	src := prog.source(f.Name())
	start := f.Offset(f.LineStart(f.PositionFor(pos, false).Line))
	if len(src) != f.Size() || start > len(src) {
		return ""
	}
	line, _, _ := bytes.Cut(src[start:], []byte("\n"))
	return strings.TrimRight(string(line), " \t\r")
}

// SourceText returns the text from from up to, not including, to, as one
// line: runs of space become one space, comments stay, and what is longer
// than maxText runes loses its middle to "…". It is "" if the two are not in
// order in one file that can be read.
func (prog *Program) SourceText(from, to token.Pos) string {
	f := prog.Fset.File(from)
	if f == nil || to <= from || int(to) > f.Base()+f.Size() {
		return ""
	}
	src := prog.source(f.Name())
	if len(src) != f.Size() {
		return ""
	}
	return Shorten(string(src[f.Offset(from):f.Offset(to)]))
}

// maxText bounds the text of an expression in a step of a path, in runes.
const maxText = 80

// Shorten makes one line of a piece of source, as SourceText does.
func Shorten(text string) string {
	text = strings.Join(strings.Fields(text), " ")
	// What gofmt broke over lines reads better without the marks of the break.
	text = strings.NewReplacer("( ", "(", ", )", ")", "{ }", "{}").Replace(text)
	runes := []rune(text)
	if len(runes) <= maxText {
		return text
	}
	const tail = 20
	return string(runes[:maxText-tail-1]) + "…" + string(runes[len(runes)-tail:])
}

// PackageOf returns the package of a type-checked package, nil if it is not
// of this program.
func (prog *Program) PackageOf(t *types.Package) *Package { return prog.byTypes[t] }

// Package returns the package with the import path, nil if there is none.
func (prog *Program) Package(path string) *Package { return prog.byPath[path] }

// PackageOfFunction returns the package whose source holds fn: that of the
// generic function for an instance, of the enclosing function for a closure,
// of the method for a wrapper. nil for functions without a source.
func (prog *Program) PackageOfFunction(fn *ssa.Function) *Package {
	for fn.Parent() != nil {
		fn = fn.Parent()
	}
	if o := fn.Origin(); o != nil {
		fn = o
	}
	if fn.Pkg != nil {
		return prog.byTypes[fn.Pkg.Pkg]
	}
	if obj := fn.Object(); obj != nil && obj.Pkg() != nil {
		return prog.byTypes[obj.Pkg()]
	}
	return nil
}

// ImportableByOthers reports whether packages outside of the module can
// import p: it is no command, no test, and not under a folder "internal"
// or "vendor".
func ImportableByOthers(p *Package) bool {
	if p.Name == "main" || p.TestVariant == ExternalTests || p.Vendored {
		return false
	}
	for _, part := range strings.Split(p.Path, "/") {
		if part == "internal" {
			return false
		}
	}
	return true
}
