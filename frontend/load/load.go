package load

import (
	"context"
	"fmt"
	"go/ast"
	"go/token"
	"go/types"
	"runtime"
	"time"

	"golang.org/x/tools/go/ssa"
)

// Config says what to load. The zero value loads the package in the current
// directory for the build that the go command would choose.
type Config struct {
	Dir      string   // where the go command runs; "" is the current directory
	Patterns []string // as for the go command; empty means "."

	Deps  bool // bodies of dependencies outside the module too
	Tests bool // test files of the named packages too

	Tags       string   // value of -tags; "" leaves GOFLAGS in force
	BuildFlags []string // further flags for the go command, before the patterns
	Env        []string // NAME=value, over the process's environment: GOOS, GOARCH, CGO_ENABLED, ...

	// AllowDownload lets the go command fetch modules. Without it every way
	// to the network is closed.
	AllowDownload bool

	// Partial keeps going when packages have errors: they, and the packages
	// that need them, are in Program.Packages with Errors or Broken set and
	// without SSA. Errors of the go command itself still end the load.
	Partial bool

	// Mode holds further bits for the SSA builder; InstantiateGenerics is
	// always on.
	Mode ssa.BuilderMode

	Workers int // bound on goroutines that work at once; 0 is GOMAXPROCS

	// Progress, if set, is told the stage ("listing", "reading", "building"),
	// and how much of it is done. Calls do not overlap.
	Progress func(stage string, done, total int)
	// Context ends the load early; nil is context.Background().
	Context context.Context
}

// maxErrors bounds the errors that are kept per package; the first ones say
// what is wrong, the others mostly follow from them.
const maxErrors = 10

// Program is what was loaded. It does not change after Load; all methods may
// be called from several goroutines.
type Program struct {
	SSA  *ssa.Program
	Fset *token.FileSet
	// Packages holds every package of the import graph, unsafe too, sorted by
	// Path and then TestVariant.
	Packages []*Package

	ModulePath string // of the module around Dir; "" outside of a module
	ModuleDir  string // its root, absolute; the folder of go.work at the root of a workspace; else Dir
	GoVersion  string // of the go command that listed the packages, "go1.26.8"
	GOOS       string
	GOARCH     string
	GOROOT     string
	Workspace  string // the go.work file in force, "" if none
	// Modules lists the main modules that packages were loaded from, sorted.
	Modules []string

	Stats Stats

	byPath    map[string]*Package
	byTypes   map[*types.Package]*Package
	files     map[string]*fileInfo
	functions functionIndex
	texts     textCache
	tags      []string
	cgo       bool
}

// Package is one package of the build.
type Package struct {
	Path  string // import path; external tests end in "_test"
	Name  string // of the package clause
	Dir   string // absolute
	Types *types.Package
	// SSA is nil for packages with errors and for packages that no package
	// with bodies imports.
	SSA *ssa.Package
	// Syntax and Info are kept for packages with bodies only.
	Syntax []*ast.File
	Info   *types.Info

	Module   string        // path of its module; "std" and "cmd" for the standard library and the commands
	Main     bool          // of a main module (the one around Dir, or one of the workspace)
	Standard bool          // of GOROOT
	Bodies   bool          // function bodies were loaded (false if it has errors)
	Named    bool          // a pattern names it
	Vendored bool          // in a vendor folder
	UsesCgo  bool          // has files that import "C"
	GoFiles  []string      // the files that were read, absolute, sorted as the go command does, tests after them
	Imports  []string      // import paths after vendoring, sorted
	CCalls   int           // calls into C in its files; they are not judged
	Cut      []CutFunction // functions left without a body because they speak to C in a way that could not be made out, in source order

	// LeftOut lists Go files in Dir that are not part of the build, sorted.
	// Complete for packages with bodies.
	LeftOut []LeftOut

	// TestVariant says what of its tests it holds.
	TestVariant TestVariant

	// Errors holds what keeps it from being judged: listing, syntax and type
	// errors, at most maxErrors. Broken is also set if a package it needs has errors.
	Errors []*Error
	Broken bool

	moduleDir string              // root of its module, "" if unknown
	c         *types.Package      // what stands for its "C", nil without cgo or bodies
	goVersion string              // "go1.26"; "" means no limit
	files     []*sourceFile       // same order as GoFiles
	imports   map[string]*Package // by the path as the source writes it
	deps      []*Package          // values of imports, no duplicates, sorted by Path
}

// TestVariant tells how a package relates to test files.
type TestVariant uint8

const (
	// NoTests: no test file is in it.
	NoTests TestVariant = iota
	// WithTests: the package together with its in-package tests.
	WithTests
	// ExternalTests: the package "p_test".
	ExternalTests
)

func (v TestVariant) String() string {
	switch v {
	case NoTests:
		return "no tests"
	case WithTests:
		return "with tests"
	case ExternalTests:
		return "external tests"
	}
	return fmt.Sprintf("TestVariant(%d)", uint8(v))
}

// LeftOut is a file that is not part of the build.
type LeftOut struct {
	File string // absolute
	Why  string // "build constraints", "cgo is off", "tests are not asked for", "cannot be parsed", or a cycle among tests
}

// Stats are sizes and times of a load. Times are for people; nothing that is
// compared from run to run may use them.
type Stats struct {
	List, Read, Build time.Duration // go list; parse and check; SSA

	Packages   int   // of the import graph
	WithBodies int   // of these, those with function bodies
	Files      int   // that were parsed
	Bytes      int64 // in these files
	Functions  int   // len(Program.Functions())
}

// Load lists, reads, checks and builds what cfg asks for.
//
// The error is an Errors value if the input is to blame (wrong pattern, no
// module, type errors, ...), the context's error if it ended, and anything
// else only if the go command cannot be started.
func Load(cfg Config) (*Program, error) {
	if cfg.Context == nil {
		cfg.Context = context.Background()
	}
	if cfg.Workers <= 0 {
		cfg.Workers = runtime.GOMAXPROCS(0)
	}
	if len(cfg.Patterns) == 0 {
		cfg.Patterns = []string{"."}
	}
	progress := cfg.Progress
	if progress == nil {
		progress = func(string, int, int) {}
	}

	began := time.Now()
	progress("listing", 0, 1)
	listing, err := list(&cfg)
	if err != nil {
		return nil, err
	}
	prog, err := plan(&cfg, listing)
	if err != nil {
		return nil, err
	}
	progress("listing", 1, 1)
	prog.Stats.List = time.Since(began)

	began = time.Now()
	if err := prog.read(&cfg, progress); err != nil {
		return nil, err
	}
	prog.Stats.Read = time.Since(began)

	began = time.Now()
	if err := prog.build(&cfg, progress); err != nil {
		return nil, err
	}
	prog.Stats.Build = time.Since(began)
	return prog, nil
}
