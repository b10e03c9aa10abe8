package load

// This file parses and type-checks the packages, in parallel over the import
// graph.

import (
	"bytes"
	"errors"
	"fmt"
	"go/ast"
	"go/parser"
	"go/scanner"
	"go/token"
	"go/types"
	"os"
	"path"
	"path/filepath"
	"runtime/debug"
	"strconv"
	"strings"
	"sync"
)

// reader hands packages to workers. Two kinds of work: parse a package (needs
// nothing) and check it (needs its own parse and its imports). Checks come
// first, as they free memory and unblock others; parses go in an order that
// puts imports before importers.
type reader struct {
	prog     *Program
	cfg      *Config
	sizes    types.Sizes
	progress func(string, int, int)

	mu      sync.Mutex
	wake    *sync.Cond
	toParse []*Package // from the end
	toCheck []*Package // from the end
	waits   map[*Package]int
	users   map[*Package][]*Package
	syntax  map[*Package][]*ast.File
	left    int // packages not checked yet
	busy    int
	stopped error
}

func (prog *Program) read(cfg *Config, progress func(string, int, int)) error {
	r := &reader{prog: prog, cfg: cfg, progress: progress, sizes: types.SizesFor("gc", prog.GOARCH),
		waits: map[*Package]int{}, users: map[*Package][]*Package{}, syntax: map[*Package][]*ast.File{}, left: len(prog.Packages)}
	r.wake = sync.NewCond(&r.mu)
	for _, p := range prog.Packages {
		r.waits[p] = 1 + len(p.deps)
		for _, d := range p.deps {
			r.users[d] = append(r.users[d], p)
		}
	}
	order := importsFirst(prog.Packages)
	if len(order) < len(prog.Packages) {
		return Errors{{Kind: BadPackage, Message: "the import graph has a cycle that the go command did not report"}}
	}
	for i := len(order) - 1; i >= 0; i-- {
		r.toParse = append(r.toParse, order[i])
	}
	stop := make(chan struct{})
	defer close(stop)
	go func() {
		select {
		case <-cfg.Context.Done():
			r.stop(cfg.Context.Err())
		case <-stop:
		}
	}()

	var wg sync.WaitGroup
	for range cfg.Workers {
		wg.Go(r.work)
	}
	wg.Wait()
	if r.stopped != nil {
		return r.stopped
	}
	return prog.collectErrors(cfg)
}

// importsFirst sorts topologically; ties keep the given order. Packages on a
// cycle are missing from the result.
func importsFirst(ps []*Package) []*Package {
	const (
		fresh = iota
		open
		done
	)
	state := map[*Package]int{}
	var out []*Package
	var visit func(p *Package) bool
	visit = func(p *Package) bool {
		switch state[p] {
		case open:
			return false
		case done:
			return true
		}
		state[p] = open
		for _, d := range p.deps {
			if !visit(d) {
				return false
			}
		}
		state[p] = done
		out = append(out, p)
		return true
	}
	for _, p := range ps {
		if !visit(p) {
			return out
		}
	}
	return out
}

func (r *reader) stop(err error) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.stopped == nil {
		r.stopped = err
	}
	r.wake.Broadcast()
}

func (r *reader) work() {
	r.mu.Lock()
	defer r.mu.Unlock()
	for {
		switch {
		case r.stopped != nil || r.left == 0:
			r.wake.Broadcast()
			return
		case len(r.toCheck) > 0:
			p := r.toCheck[len(r.toCheck)-1]
			r.toCheck = r.toCheck[:len(r.toCheck)-1]
			files := r.syntax[p]
			delete(r.syntax, p)
			r.mu.Unlock()
			r.guard(p, func() { r.check(p, files) })
			r.mu.Lock()
			r.left--
			r.progress("reading", len(r.prog.Packages)-r.left, len(r.prog.Packages))
			for _, u := range r.users[p] {
				r.ready(u)
			}
		case len(r.toParse) > 0:
			p := r.toParse[len(r.toParse)-1]
			r.toParse = r.toParse[:len(r.toParse)-1]
			r.mu.Unlock()
			var files []*ast.File
			r.guard(p, func() { files = r.parse(p) })
			r.mu.Lock()
			r.syntax[p] = files
			r.ready(p)
		default:
			r.wake.Wait()
		}
	}
}

// ready notes that p waits for one thing less. r.mu is held.
func (r *reader) ready(p *Package) {
	r.waits[p]--
	if r.waits[p] == 0 {
		r.toCheck = append(r.toCheck, p)
		r.wake.Signal()
	}
}

// guard turns a panic of the parser or checker into an error that names the
// package.
func (r *reader) guard(p *Package, f func()) {
	defer func() {
		if x := recover(); x != nil {
			r.stop(fmt.Errorf("internal error while reading package %s: %v\n%s", p.Path, x, debug.Stack()))
		}
	}()
	f()
}

// parse parses the files of p into their reserved places in the file set.
func (r *reader) parse(p *Package) []*ast.File {
	var out []*ast.File
	for _, f := range p.files {
		src, err := os.ReadFile(f.path)
		if err != nil {
			p.fail(&Error{Kind: SyntaxError, Package: p.Path, Place: f.path, Message: reason(err)})
			continue
		}
		if len(src) != f.size {
			p.fail(&Error{Kind: SyntaxError, Package: p.Path, Place: f.path, Message: "the file changed while it was read; run again"})
			continue
		}
		mode := parser.SkipObjectResolution | parser.ParseComments
		if !p.Bodies {
			mode = parser.SkipObjectResolution
			src = stripBodies(src)
		}
		// A file set of its own whose next base is the reserved one.
		own := token.NewFileSet()
		if f.base > own.Base() {
			own.AddFile("", own.Base(), f.base-own.Base()-1)
		}
		file, err := parser.ParseFile(own, f.path, src, mode)
		if file != nil && file.FileStart.IsValid() {
			if tf := own.File(file.FileStart); tf != nil {
				r.prog.Fset.AddExistingFiles(tf)
			}
		}
		if err != nil {
			var list scanner.ErrorList
			if errors.As(err, &list) {
				for _, e := range list {
					p.fail(&Error{Kind: SyntaxError, Package: p.Path, Place: e.Pos.String(), Message: e.Msg})
				}
			} else {
				p.fail(&Error{Kind: SyntaxError, Package: p.Path, Place: f.path, Message: err.Error()})
			}
			continue
		}
		out = append(out, file)
	}
	return out
}

func (p *Package) fail(e *Error) {
	if len(p.Errors) < maxErrors {
		p.Errors = append(p.Errors, e)
	}
}

// importer resolves the import declarations of one package.
type importer struct{ p *Package }

func (i importer) Import(path string) (*types.Package, error) {
	if path == "unsafe" {
		return types.Unsafe, nil
	}
	if path == "C" && i.p.c != nil {
		return i.p.c, nil
	}
	q := i.p.imports[path]
	if q == nil {
		return nil, fmt.Errorf("package %s is not in the build", path)
	}
	if q.Types == nil {
		return nil, fmt.Errorf("package %s was not checked", path)
	}
	return q.Types, nil
}

func (r *reader) check(p *Package, files []*ast.File) {
	if p.Path == "unsafe" {
		p.Types = types.Unsafe
		return
	}
	if p.Name == "" {
		p.Name = path.Base(p.Path) // of a package that is missing
	}
	var info *types.Info
	if p.Bodies {
		info = &types.Info{
			Types:        make(map[ast.Expr]types.TypeAndValue),
			Defs:         make(map[*ast.Ident]types.Object),
			Uses:         make(map[*ast.Ident]types.Object),
			Implicits:    make(map[ast.Node]types.Object),
			Instances:    make(map[*ast.Ident]types.Instance),
			Scopes:       make(map[ast.Node]*types.Scope),
			Selections:   make(map[*ast.SelectorExpr]*types.Selection),
			FileVersions: make(map[*ast.File]string),
		}
	}
	withC := p.UsesCgo && p.Bodies
	if withC {
		p.c = guessC(files)
	}
	// Of a package that needs one with errors, errors are not told: they may
	// be consequences, and the go command would not get to it either.
	for _, d := range p.deps {
		if d.Broken {
			p.Broken = true
		}
	}
	broken := p.Broken
	defer func() { p.Broken = p.Broken || len(p.Errors) > 0 }()
	var complaints []complaint
	conf := &types.Config{
		GoVersion:        p.goVersion,
		IgnoreFuncBodies: !p.Bodies,
		FakeImportC:      p.UsesCgo && !p.Bodies,
		Importer:         importer{p},
		Sizes:            r.sizes,
		Error: func(err error) {
			if broken {
				return
			}
			var te types.Error
			if !errors.As(err, &te) {
				p.fail(&Error{Kind: TypeError, Package: p.Path, Place: p.Dir, Message: err.Error()})
				return
			}
			if strings.HasPrefix(te.Msg, "\t") {
				return // continues the error before
			}
			e := &Error{Kind: TypeError, Package: p.Path, Place: p.Dir, Message: oneLine(te.Msg)}
			if te.Pos.IsValid() {
				e.Place = te.Fset.PositionFor(te.Pos, false).String()
			}
			switch {
			case !p.UsesCgo:
				p.fail(e)
			case te.Soft, strings.HasSuffix(te.Msg, "not exported by package C"):
				// C exports everything. Soft errors are unused names, whose
				// use may be one that could not be checked.
			case !p.Bodies && strings.Contains(te.Msg, "invalid type"):
				// What C gives has no type here, and nobody will miss it.
			default:
				complaints = append(complaints, complaint{te.Pos, e})
			}
		},
	}
	p.Types = types.NewPackage(p.Path, p.Name)
	checker := types.NewChecker(conf, r.prog.Fset, p.Types, info)
	checker.Files(files) // errors go to conf.Error
	if p.Bodies {
		p.Syntax, p.Info = files, info
	}
	if withC {
		p.CCalls = countC(files, p.c)
		complaints = cut(p, complaints)
	}
	for _, c := range complaints {
		if !withC || !aboutC(c.err.Message) {
			p.fail(c.err)
		}
	}
}

// aboutC reports whether a type error speaks of what C gives.
func aboutC(msg string) bool {
	return strings.Contains(msg, "C.") || strings.Contains(msg, "invalid type")
}

// collectErrors ends the load if packages have errors, or, with Partial,
// takes them and what needs them out of what is built.
func (prog *Program) collectErrors(cfg *Config) error {
	var errs Errors
	for _, p := range prog.Packages {
		for _, e := range p.Errors {
			e.Place = prog.shortPlace(e.Place)
			errs = append(errs, e)
		}
	}
	if len(errs) == 0 {
		return nil
	}
	if !cfg.Partial {
		return errs
	}
	for _, p := range prog.Packages {
		if p.Broken && p.Bodies {
			p.Bodies = false
			prog.Stats.WithBodies--
		}
	}
	return nil
}

// shortPlace writes the file of "file:line:column" as Position does, as far
// as that is possible without a position.
func (prog *Program) shortPlace(place string) string {
	if rel, ok := inside(prog.ModuleDir, place); ok {
		return rel
	}
	return place
}

// inside returns path relative to dir with forward slashes.
func inside(dir, path string) (string, bool) {
	if dir == "" || !filepath.IsAbs(path) {
		return "", false
	}
	rel, err := filepath.Rel(dir, path)
	if err != nil || rel == ".." || strings.HasPrefix(rel, ".."+string(filepath.Separator)) {
		return "", false
	}
	return filepath.ToSlash(rel), true
}

// importsC reports whether the file at path imports "C".
func importsC(path string) bool {
	src, err := os.ReadFile(path)
	if err != nil || !bytes.Contains(src, []byte(`"C"`)) {
		return false
	}
	f, err := parser.ParseFile(token.NewFileSet(), path, src, parser.ImportsOnly)
	if err != nil {
		return false
	}
	return fileImportsC(f)
}

func fileImportsC(f *ast.File) bool {
	for _, s := range f.Imports {
		if p, err := strconv.Unquote(s.Path.Value); err == nil && p == "C" {
			return true
		}
	}
	return false
}
