package load

// This file turns the list of packages into the import graph that is read:
// which files belong to each package, which packages get bodies, how tests
// are merged, and where in the file set each file lies.

import (
	"cmp"
	"fmt"
	"go/token"
	"go/types"
	"go/version"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// sourceFile is a file to read.
type sourceFile struct {
	path string // absolute
	base int    // of its token.File; fixed before anything is parsed, so that positions are the same in every run
	size int    // bytes
	cgo  bool   // imports "C"
}

// plan makes the program's packages, without reading any source.
func plan(cfg *Config, l *listing) (*Program, error) {
	prog := &Program{
		Fset:      token.NewFileSet(),
		GoVersion: l.env.GOVERSION,
		GOOS:      l.env.GOOS,
		GOARCH:    l.env.GOARCH,
		GOROOT:    l.env.GOROOT,
		ModuleDir: l.root(),
		byPath:    map[string]*Package{},
		byTypes:   map[*types.Package]*Package{},
		cgo:       l.env.CGO_ENABLED == "1",
		tags:      buildTags(cfg, l.env.GOFLAGS),
	}
	if l.env.GOWORK != "off" {
		prog.Workspace = l.env.GOWORK
	}

	byListed := map[string]*listed{}
	for _, lp := range plain(l.packages) {
		byListed[lp.ImportPath] = lp
		p := newPackage(lp, l)
		prog.Packages = append(prog.Packages, p)
		prog.byPath[p.Path] = p
		if m := lp.Module; m != nil && m.Main {
			if filepath.Clean(m.Dir) == prog.ModuleDir {
				prog.ModulePath = m.Path
			}
			if !slices.Contains(prog.Modules, m.Path) {
				prog.Modules = append(prog.Modules, m.Path)
			}
		}
	}
	slices.Sort(prog.Modules)
	if prog.ModulePath == "" && l.env.GOMOD != "" && l.env.GOMOD != os.DevNull {
		prog.ModulePath = moduleLine(l.env.GOMOD)
	}
	sortPackages(prog.Packages)
	for _, p := range prog.Packages {
		lp := byListed[p.Path]
		for _, path := range lp.Imports {
			prog.link(p, path, nil)
		}
		for source := range lp.ImportMap {
			prog.link(p, source, lp.ImportMap)
		}
	}
	if cfg.Tests {
		prog.addTests(l, byListed)
	}

	prog.chooseBodies(cfg)
	prog.explainLeftOut(cfg, byListed)
	for _, p := range prog.Packages {
		p.deps = nil
		for _, d := range p.imports {
			p.deps = append(p.deps, d)
		}
		sortPackages(p.deps)
		p.deps = slices.Compact(p.deps)
		for _, d := range p.deps {
			p.Imports = append(p.Imports, d.Path)
		}
	}
	if err := prog.layOut(); err != nil {
		return nil, err
	}
	prog.Stats.Packages = len(prog.Packages)
	return prog, nil
}

// buildTags lists the build tags in force: the last -tags wins, as for the go
// command.
func buildTags(cfg *Config, goflags string) []string {
	tags := ""
	flags := strings.Fields(goflags)
	if cfg.Tags != "" {
		flags = append(flags, "-tags="+cfg.Tags)
	}
	for _, f := range append(flags, cfg.BuildFlags...) {
		if v, ok := strings.CutPrefix(strings.TrimLeft(f, "-"), "tags="); ok {
			tags = v
		}
	}
	return strings.FieldsFunc(tags, func(r rune) bool { return r == ',' || r == ' ' })
}

// plain lists the packages as they are outside of test binaries. One that only
// external tests need may be listed as a variant only, "q [p.test]", because
// it needs the tested package in turn; then it is made out of the variant.
func plain(all []*listed) []*listed {
	var out []*listed
	seen := map[string]bool{}
	for _, lp := range all {
		if !isTestVariant(lp) {
			seen[lp.ImportPath] = true
			out = append(out, lp)
		}
	}
	for _, lp := range all {
		path, _, variant := strings.Cut(lp.ImportPath, " [")
		if !variant || lp.ForTest == "" || seen[path] || path == lp.ForTest || path == lp.ForTest+"_test" {
			continue
		}
		seen[path] = true
		q := *lp
		q.ImportPath = path
		out = append(out, &q)
	}
	return out
}

// isTestVariant reports whether lp is a package that exists for a test binary
// only: "p [q.test]", "p_test [p.test]" or the generated "p.test".
func isTestVariant(lp *listed) bool {
	return lp.ForTest != "" || strings.HasSuffix(lp.ImportPath, "]") ||
		lp.Name == "main" && strings.HasSuffix(lp.ImportPath, ".test") && len(lp.GoFiles) == 1 && strings.HasSuffix(lp.GoFiles[0], "_testmain.go") ||
		strings.HasSuffix(lp.ImportPath, ".test") && lp.Dir != "" && len(lp.GoFiles) == 1 && filepath.IsAbs(lp.GoFiles[0])
}

func newPackage(lp *listed, l *listing) *Package {
	p := &Package{
		Path:     lp.ImportPath,
		Name:     lp.Name,
		Dir:      lp.Dir,
		Standard: lp.Standard,
		Named:    !lp.DepOnly,
		UsesCgo:  len(lp.CgoFiles) > 0,
		Errors:   l.broken[lp.ImportPath],
		imports:  map[string]*Package{},
	}
	switch m := lp.Module; {
	case m != nil:
		p.Module, p.Main, p.moduleDir = m.Path, m.Main, m.Dir
		if m.GoVersion != "" {
			p.goVersion = "go" + m.GoVersion
		} else {
			p.goVersion = "go1.16" // what the go command assumes for a go.mod without a go line
		}
		p.Vendored = !m.Main && m.Dir == "" || strings.Contains(filepath.ToSlash(lp.Dir), "/vendor/")
	case lp.Standard && (lp.ImportPath == "cmd" || strings.HasPrefix(lp.ImportPath, "cmd/")):
		p.Module, p.goVersion = "cmd", version.Lang(l.env.GOVERSION)
	case lp.Standard:
		p.Module, p.goVersion = "std", version.Lang(l.env.GOVERSION)
	}
	if lp.Standard && (strings.HasPrefix(lp.ImportPath, "vendor/") || strings.HasPrefix(lp.ImportPath, "cmd/vendor/")) {
		p.Vendored = true
	}
	cgo := map[string]bool{}
	for _, f := range lp.CgoFiles {
		cgo[f] = true
	}
	names := slices.Concat(lp.GoFiles, lp.CgoFiles)
	slices.Sort(names)
	for _, f := range names {
		p.addFile(f, cgo[f])
	}
	for _, f := range lp.IgnoredGoFiles {
		p.LeftOut = append(p.LeftOut, LeftOut{File: filepath.Join(lp.Dir, f), Why: leftByConstraints})
	}
	for _, f := range lp.InvalidGoFiles {
		if !slices.Contains(names, f) {
			p.LeftOut = append(p.LeftOut, LeftOut{File: filepath.Join(lp.Dir, f), Why: leftUnparsed})
		}
	}
	return p
}

// The reasons of LeftOut.
const (
	leftByConstraints = "build constraints"
	leftByCgo         = "cgo is off"
	leftTests         = "tests are not asked for"
	leftByCycle       = "its tests and those of another package need each other"
	leftUnparsed      = "cannot be parsed"
)

// explainLeftOut completes LeftOut for the packages with bodies; of the
// others nobody asks, and there are many.
func (prog *Program) explainLeftOut(cfg *Config, byListed map[string]*listed) {
	for _, p := range prog.Packages {
		lp := byListed[p.Path]
		if !p.Bodies || lp == nil {
			continue
		}
		if !prog.cgo {
			for i := range p.LeftOut {
				if out := &p.LeftOut[i]; out.Why == leftByConstraints && importsC(out.File) {
					out.Why = leftByCgo
				}
			}
		}
		if !cfg.Tests || !p.Named {
			for _, f := range slices.Concat(lp.TestGoFiles, lp.XTestGoFiles) {
				p.LeftOut = append(p.LeftOut, LeftOut{File: filepath.Join(p.Dir, f), Why: leftTests})
			}
		}
		slices.SortFunc(p.LeftOut, func(a, b LeftOut) int { return strings.Compare(a.File, b.File) })
	}
}

func (p *Package) addFile(name string, cgo bool) {
	if !filepath.IsAbs(name) {
		name = filepath.Join(p.Dir, name)
	}
	p.GoFiles = append(p.GoFiles, name)
	p.files = append(p.files, &sourceFile{path: name, cgo: cgo})
}

// link notes that p's source imports path.
func (prog *Program) link(p *Package, path string, imap map[string]string) {
	source, _, _ := strings.Cut(path, " [")
	if to := imap[path]; to != "" {
		path = to
	}
	path, _, _ = strings.Cut(path, " [")
	if q := prog.byPath[path]; q != nil && q != p {
		p.imports[source] = q
	}
}

// addTests merges the in-package tests of the named packages into their
// packages and adds the external tests as packages of their own.
//
// The go command compiles "p [p.test]" beside p, and again each package
// between p_test and p. Here there is one copy of p: with its tests. That is
// the same program, as a test file cannot import what needs its own package;
// only the tests of several packages taken together can close a cycle. Then
// the tests of the later package, in the order of paths, are left out.
func (prog *Program) addTests(l *listing, byListed map[string]*listed) {
	// Import maps of the variants, by their path without the "[p.test]".
	maps := map[string]map[string]string{}
	for _, lp := range l.packages {
		if lp.ForTest == "" {
			continue
		}
		self, _, _ := strings.Cut(lp.ImportPath, " [")
		if self != lp.ForTest && self != lp.ForTest+"_test" {
			continue
		}
		m := map[string]string{}
		for from, to := range lp.ImportMap {
			m[from], _, _ = strings.Cut(to, " [")
		}
		maps[self] = m
	}
	// connect adds the imports of test files: as the source writes them, and,
	// where that differs, as they were resolved.
	connect := func(p *Package, key string, imports []string) {
		for _, path := range imports {
			if q := prog.byPath[path]; q != nil && q != p {
				p.imports[path] = q
			}
		}
		for from, to := range maps[key] {
			if q := prog.byPath[to]; q != nil && q != p {
				p.imports[from] = q
			}
		}
	}
	var external []*Package
	for _, p := range prog.Packages {
		lp := byListed[p.Path]
		if !p.Named || lp == nil {
			continue
		}
		resolve := func(path string) *Package {
			if to := maps[p.Path][path]; to != "" {
				path = to
			}
			return prog.byPath[path]
		}
		cycle := false
		for _, path := range lp.TestImports {
			if q := resolve(path); q != nil && reaches(q, p) {
				cycle = true
			}
		}
		if cycle {
			for _, f := range slices.Concat(lp.TestGoFiles, lp.XTestGoFiles) {
				p.LeftOut = append(p.LeftOut, LeftOut{File: filepath.Join(p.Dir, f), Why: leftByCycle})
			}
			continue
		}
		if len(lp.TestGoFiles) > 0 {
			p.TestVariant = WithTests
			for _, f := range lp.TestGoFiles {
				p.addFile(f, false)
			}
			connect(p, p.Path, lp.TestImports)
		}
		if len(lp.XTestGoFiles) > 0 {
			x := &Package{
				Path: p.Path + "_test", Name: p.Name + "_test", Dir: p.Dir,
				Module: p.Module, Main: p.Main, Standard: p.Standard, Named: true, Vendored: p.Vendored,
				TestVariant: ExternalTests, goVersion: p.goVersion, imports: map[string]*Package{},
			}
			for _, f := range lp.XTestGoFiles {
				x.addFile(f, false)
			}
			connect(x, x.Path, lp.XTestImports)
			external = append(external, x)
		}
	}
	for _, x := range external {
		prog.Packages = append(prog.Packages, x)
		if prog.byPath[x.Path] == nil {
			prog.byPath[x.Path] = x
		}
	}
	sortPackages(prog.Packages)
}

// reaches reports whether from needs to (or is it).
func reaches(from, to *Package) bool {
	seen := map[*Package]bool{}
	var visit func(p *Package) bool
	visit = func(p *Package) bool {
		if p == to {
			return true
		}
		if seen[p] {
			return false
		}
		seen[p] = true
		for _, q := range p.imports {
			if visit(q) {
				return true
			}
		}
		return false
	}
	return visit(from)
}

// chooseBodies marks the packages whose function bodies are loaded: the named
// ones, and what they need of the same modules and of the main modules.
func (prog *Program) chooseBodies(cfg *Config) {
	modules := map[string]bool{}
	for _, p := range prog.Packages {
		if p.Named {
			modules[p.Module] = true
		}
	}
	for _, p := range prog.Packages {
		own := p.Main || modules[p.Module]
		if p.Vendored && !p.Named && p.Standard {
			own = modules[p.Module] // std and cmd vendor as a part of themselves
		}
		p.Bodies = (p.Named || own || cfg.Deps) && p.Path != "unsafe" && len(p.files) > 0
		if p.Bodies {
			prog.Stats.WithBodies++
		}
	}
}

// layOut gives each file its place in the file set.
func (prog *Program) layOut() error {
	base := prog.Fset.Base()
	for _, p := range prog.Packages {
		for _, f := range p.files {
			st, err := os.Stat(f.path)
			if err != nil {
				return Errors{{Kind: NoDirectory, Package: p.Path, Place: f.path, Message: reason(err)}}
			}
			if st.Size() > 1<<30 {
				return Errors{{Kind: BadPackage, Package: p.Path, Place: f.path, Message: "a source file of more than 1 GB"}}
			}
			f.base, f.size = base, int(st.Size())
			base += f.size + 1
			prog.Stats.Files++
			prog.Stats.Bytes += st.Size()
		}
	}
	return nil
}

func sortPackages(ps []*Package) {
	slices.SortFunc(ps, func(a, b *Package) int {
		return cmp.Or(strings.Compare(a.Path, b.Path), cmp.Compare(a.TestVariant, b.TestVariant))
	})
}

// moduleLine reads the module path out of a go.mod that the go command
// accepted.
func moduleLine(gomod string) string {
	data, err := os.ReadFile(gomod)
	if err != nil {
		return ""
	}
	for line := range strings.Lines(string(data)) {
		if fields := strings.Fields(line); len(fields) >= 2 && fields[0] == "module" {
			return strings.Trim(fields[1], `"`+"`")
		}
	}
	return ""
}

func (p *Package) String() string { return fmt.Sprintf("package %s (%s)", p.Path, p.TestVariant) }
