package load

// This file asks the go command for the import graph.

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"go/version"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"runtime"
	"slices"
	"strings"
)

// listed is a package as `go list -json` prints it, as far as it is used.
type listed struct {
	ImportPath     string
	Name           string
	Dir            string
	Standard       bool
	DepOnly        bool
	ForTest        string
	Match          []string
	GoFiles        []string
	CgoFiles       []string
	IgnoredGoFiles []string
	InvalidGoFiles []string
	TestGoFiles    []string
	XTestGoFiles   []string
	Imports        []string
	ImportMap      map[string]string
	TestImports    []string
	XTestImports   []string
	Module         *listedModule
	Error          *listedError
}

type listedModule struct {
	Path      string
	Dir       string
	Main      bool
	GoVersion string
	Error     *struct{ Err string }
}

type listedError struct {
	ImportStack []string
	Pos         string
	Err         string
}

// goEnv is what `go env -json` says.
type goEnv struct {
	GOOS, GOARCH, GOROOT, GOVERSION, GOMOD, GOWORK, GOFLAGS, CGO_ENABLED string
}

// listing is the answer of the go command.
type listing struct {
	env      goEnv
	dir      string // absolute
	packages []*listed
	warnings string              // standard error of go list
	broken   map[string][]*Error // with Partial: by path, what the go command says of a package
}

const listFields = "-json=ImportPath,Name,Dir,Standard,DepOnly,ForTest,Match,GoFiles,CgoFiles,IgnoredGoFiles,InvalidGoFiles," +
	"TestGoFiles,XTestGoFiles,Imports,ImportMap,TestImports,XTestImports,Module,Error"

// environment is the environment of the go command: the process's own,
// overlaid with cfg.Env, with every way to the network closed.
//
// GOPROXY=off alone is not enough: modules that GONOPROXY (by default
// GOPRIVATE) names are fetched past it.
func environment(cfg *Config) []string {
	env := append(os.Environ(), cfg.Env...)
	if cfg.Dir != "" {
		if abs, err := filepath.Abs(cfg.Dir); err == nil {
			env = append(env, "PWD="+abs)
		}
	}
	if !cfg.AllowDownload {
		env = append(env, "GOPROXY=off", "GONOPROXY=none", "GOVCS=*:off", "GOSUMDB=off")
	}
	return env
}

func list(cfg *Config) (*listing, error) {
	l := &listing{broken: map[string][]*Error{}}
	dir, err := filepath.Abs(cfg.Dir)
	if err != nil {
		return nil, err
	}
	l.dir = dir
	if _, err := os.ReadDir(dir); err != nil {
		return nil, Errors{{Kind: NoDirectory, Place: dir, Message: reason(err)}}
	}
	for _, p := range cfg.Patterns {
		if strings.HasPrefix(p, "-") {
			return nil, Errors{{Kind: NoMatch, Message: fmt.Sprintf("pattern %q begins with a dash; packages never do", p)}}
		}
	}

	out, stderr, err := goCommand(cfg, "env", "-json", "GOOS", "GOARCH", "GOROOT", "GOVERSION", "GOMOD", "GOWORK", "GOFLAGS", "CGO_ENABLED")
	if err != nil {
		return nil, commandError(cfg, dir, stderr, err)
	}
	if err := json.Unmarshal(out, &l.env); err != nil {
		return nil, Errors{{Kind: GoCommand, Message: "go env printed no JSON: " + err.Error()}}
	}

	args := []string{"list", "-e", "-deps", "-buildvcs=false", listFields}
	if cfg.Tests {
		args = append(args, "-test")
	}
	if cfg.Tags != "" {
		args = append(args, "-tags="+cfg.Tags)
	}
	args = append(args, cfg.BuildFlags...)
	if usesModMod(l.env.GOFLAGS, cfg.BuildFlags) {
		// -mod=mod lets the go command rewrite go.mod and go.sum. A judge
		// must not change what it judges.
		args = append(args, "-mod=readonly")
	}
	args = append(args, "--")
	args = append(args, cfg.Patterns...)
	out, stderr, err = goCommand(cfg, args...)
	if err != nil {
		return nil, commandError(cfg, dir, stderr, err)
	}
	l.warnings = stderr
	dec := json.NewDecoder(bytes.NewReader(out))
	for {
		p := new(listed)
		if err := dec.Decode(p); err == io.EOF {
			break
		} else if err != nil {
			return nil, Errors{{Kind: GoCommand, Message: "go list printed broken JSON: " + err.Error()}}
		}
		l.packages = append(l.packages, p)
	}
	return l, l.check(cfg)
}

func usesModMod(goflags string, flags []string) bool {
	return slices.ContainsFunc(append(strings.Fields(goflags), flags...), func(f string) bool {
		return strings.TrimLeft(f, "-") == "mod=mod"
	})
}

// MainModules lists the root folders of the main modules that the go command
// sees from cfg.Dir, sorted: one in a module, all that are in use in a
// workspace. Patterns made from them ("DIR/...") name all of a workspace.
func MainModules(cfg Config) ([]string, error) {
	if cfg.Context == nil {
		cfg.Context = context.Background()
	}
	dir, err := filepath.Abs(cfg.Dir)
	if err != nil {
		return nil, err
	}
	out, stderr, err := goCommand(&cfg, "list", "-mod=readonly", "-m", "-f", "{{.Dir}}")
	if err != nil {
		return nil, commandError(&cfg, dir, stderr, err)
	}
	var dirs []string
	for line := range strings.Lines(string(out)) {
		if line = strings.TrimSpace(line); line != "" {
			dirs = append(dirs, line)
		}
	}
	slices.Sort(dirs)
	if len(dirs) == 0 {
		return nil, Errors{noModule(dir)}
	}
	return dirs, nil
}

// goCommand runs the go command and returns its standard output and error.
func goCommand(cfg *Config, args ...string) (stdout []byte, stderr string, err error) {
	cmd := exec.CommandContext(cfg.Context, "go", args...)
	cmd.Dir = cfg.Dir
	cmd.Env = environment(cfg)
	var out, errs bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &errs
	err = cmd.Run()
	if cfg.Context.Err() != nil {
		err = cfg.Context.Err()
	}
	return out.Bytes(), errs.String(), err
}

// commandError turns a failed go command into one message.
func commandError(cfg *Config, dir, stderr string, err error) error {
	if cfg.Context.Err() != nil {
		return cfg.Context.Err()
	}
	var exit *exec.ExitError
	if !errors.As(err, &exit) {
		return Errors{{Kind: GoCommand, Message: "cannot start the go command: " + err.Error()}}
	}
	e := classify(dir, stderr)
	return Errors{e}
}

var (
	asksForGo  = regexp.MustCompile(`^(?:(?:\S*[/\\])?(go\.mod|go\.work) requires go >= |download(?:ing)? go)(\d[0-9A-Za-z.]*)`)
	namesPlace = regexp.MustCompile(`^(\S+\.(?:mod|work|sum)(?::\d+(?::\d+)?)?):\s+(.*)$`)
)

// classify reads what the go command printed. It knows the sentences of the
// go command that a user meets often and passes on the others whole.
func classify(dir, stderr string) *Error {
	text := strings.TrimSpace(stderr)
	var lines []string
	for line := range strings.Lines(text) {
		line = strings.TrimSpace(line)
		line = strings.TrimPrefix(line, "go: ")
		if strings.HasPrefix(line, "errors parsing ") && strings.HasSuffix(line, ":") {
			continue // the next line says the same with a place
		}
		if line != "" && !strings.HasPrefix(line, "warning: ") {
			lines = append(lines, line)
		}
	}
	first := "the go command failed without a word"
	if len(lines) > 0 {
		first = strings.Join(lines, "; ")
	}
	place := ""
	if m := namesPlace.FindStringSubmatch(first); m != nil {
		place, first = m[1], m[2]
	}
	e := &Error{Kind: GoCommand, Place: place, Message: first}
	switch {
	case strings.Contains(first, "requires go >= "), strings.Contains(first, "toolchain not available"), strings.Contains(first, "download go1"),
		strings.Contains(first, "golang.org/toolchain"):
		e.Kind = NewerGo
		// "go.mod requires go >= 1.30 (running go 1.26; GOTOOLCHAIN=local)" or
		// "downloading go1.30 (linux/amd64); ...: toolchain not available".
		if m := asksForGo.FindStringSubmatch(first); m != nil {
			e.Place = nearest(dir, m[1])
			e.Message = fmt.Sprintf("this asks for Go %s; this pathtally was built with %s", m[2], strings.TrimPrefix(runtime.Version(), "go"))
		}
	case needsModule(first):
		return noModule(dir)
	case missing(first):
		e.Kind = MissingModule
		e.Message = withRemedy(first)
	case strings.Contains(place, "go."), strings.Contains(first, "go.mod"), strings.Contains(first, "go.work"), strings.Contains(first, "go.sum"), strings.Contains(first, "vendor"):
		e.Kind = BadModule
	}
	return e
}

// nearest finds the file name, or if that is "" the go.work or go.mod in
// force, in dir or above it; "" if there is none.
func nearest(dir, name string) string {
	names := []string{name}
	if name == "" {
		names = []string{"go.work", "go.mod"}
	}
	for _, name := range names {
		for d := dir; ; d = filepath.Dir(d) {
			if st, err := os.Stat(filepath.Join(d, name)); err == nil && st.Mode().IsRegular() {
				return filepath.Join(d, name)
			}
			if d == filepath.Dir(d) {
				break
			}
		}
	}
	return ""
}

// noModule is the error for a folder outside of any module.
func noModule(dir string) *Error {
	return &Error{Kind: NoModule, Place: dir,
		Message: "no go.mod in this folder or above it; run pathtally inside of a module, or name packages of the standard library"}
}

func needsModule(s string) bool {
	return strings.Contains(s, "go.mod file not found") || strings.Contains(s, "cannot find main module") ||
		strings.Contains(s, "outside main module or its selected dependencies") && strings.Contains(s, "current directory outside")
}

// notCached reports whether s is what the go command says where it would
// have to fetch.
func notCached(s string) bool {
	return strings.Contains(s, "GOPROXY=off") || strings.Contains(s, "GOVCS disallows")
}

func missing(s string) bool {
	if notCached(s) {
		return true
	}
	for _, w := range []string{"no required module provides package", "cannot find module providing package", "missing go.sum entry"} {
		if strings.Contains(s, w) {
			return true
		}
	}
	return false
}

// withRemedy replaces what the go command would do about a missing module by
// the command to type.
func withRemedy(msg string) string {
	remedy := "run `go mod download` here"
	if strings.Contains(msg, "no required module provides package") || strings.Contains(msg, "missing go.sum entry") {
		remedy = "run `go mod tidy` here"
	}
	msg, _, _ = strings.Cut(msg, "; to add")
	return msg + "; " + remedy
}

// check reports what the go command said package by package.
func (l *listing) check(cfg *Config) error {
	var errs Errors
	// A go directive newer than the go/types in this program cannot be judged,
	// whatever the go command thinks.
	own := runtime.Version()
	newer := map[string]bool{}
	for _, p := range l.packages {
		m := p.Module
		if m == nil || m.GoVersion == "" || newer[m.Path] || !version.IsValid(own) {
			continue
		}
		if version.Compare(version.Lang("go"+m.GoVersion), version.Lang(own)) > 0 {
			newer[m.Path] = true
			errs = append(errs, &Error{Kind: NewerGo, Package: m.Path, Place: filepath.Join(m.Dir, "go.mod"),
				Message: fmt.Sprintf("module %s asks for go %s; this pathtally was built with %s", m.Path, m.GoVersion, own)})
		}
	}
	if len(errs) > 0 {
		return errs
	}

	matched := map[string]bool{}
	for _, p := range l.packages {
		for _, m := range p.Match {
			matched[m] = true
		}
		if p.Error == nil || l.harmless(p) {
			continue
		}
		if p.ForTest != "" && !cfg.Tests {
			continue
		}
		e := &Error{Kind: BadPackage, Package: p.ImportPath, Place: l.place(p.Error.Pos), Message: oneLine(p.Error.Err)}
		switch {
		case strings.Contains(e.Message, "requires go >= "):
			e.Kind = NewerGo
		case needsModule(e.Message), l.outside() && strings.Contains(e.Message, "does not contain main module"):
			e = noModule(l.dir)
		case strings.Contains(e.Message, "does not contain modules listed in go.work"):
			e.Kind, e.Place = NoMatch, l.dir
			e.Message = "no module of the workspace covers " + strings.Join(p.Match, ", ")
			if dirs, err := MainModules(*cfg); err == nil && len(dirs) > 0 {
				example := dirs[0]
				if rel, ok := inside(l.dir, dirs[0]); ok {
					example = "./" + rel
				}
				e.Message += fmt.Sprintf("; name its modules, as in %s/... (there are %d)", example, len(dirs))
			}
		case strings.Contains(e.Message, "does not contain main module"):
			e.Kind = NoMatch
			e.Message = fmt.Sprintf("%s is outside of the module in %s", strings.Join(p.Match, ", "), l.root())
		case !p.DepOnly && strings.Contains(e.Message, "is not in std"):
			e.Kind = NoMatch
		case missing(e.Message):
			e.Kind = MissingModule
			if notCached(e.Message) && !strings.Contains(e.Message, p.ImportPath) {
				e.Message = "the module of package " + p.ImportPath + " is not in the module cache"
			}
			e.Message = withRemedy(e.Message)
		case strings.Contains(e.Message, "directory not found"), strings.Contains(e.Message, "no such file or directory"), strings.Contains(e.Message, "permission denied"):
			e.Kind = NoDirectory
			// "pattern ./x/...: lstat ./x/: no such file or directory"
			// or "stat /abs/x: directory not found"
			if parts := strings.Split(strings.TrimPrefix(e.Message, "pattern "), ": "); e.Place == "" && len(parts) >= 2 {
				if _, path, ok := strings.Cut(parts[len(parts)-2], " "); ok {
					e.Message = parts[len(parts)-1]
					e.Place = filepath.Clean(path)
					if !filepath.IsAbs(e.Place) {
						e.Place = filepath.Join(l.dir, path)
					}
				}
			}
		case strings.HasPrefix(e.Message, "import cycle not allowed") && len(p.Error.ImportStack) > 1:
			e.Message = "import cycle: " + strings.Join(p.Error.ImportStack, " imports ")
		case strings.Contains(e.Message, "no Go files"), strings.Contains(e.Message, "matched no packages"):
			e.Kind = NoMatch
		case strings.Contains(e.Message, "expected "), strings.Contains(e.Message, "illegal "):
			e.Kind = SyntaxError
		}
		if cfg.Partial {
			switch {
			case e.Kind == SyntaxError:
				continue // met again, and told, when the file is read
			case e.Kind == MissingModule, e.Kind == BadPackage && !strings.HasPrefix(e.Message, "import cycle"):
				l.broken[p.ImportPath] = append(l.broken[p.ImportPath], e)
				continue
			}
		}
		errs = append(errs, e)
	}
	for _, pattern := range cfg.Patterns {
		if matched[pattern] {
			continue
		}
		// The go command rewrites some patterns; only complain if nothing
		// that was matched could be meant.
		if slices.ContainsFunc(l.packages, func(p *listed) bool { return !p.DepOnly && filepath.ToSlash(filepath.Clean(pattern)) == p.ImportPath }) {
			continue
		}
		if l.outside() {
			errs = append(errs, noModule(l.dir))
			continue
		}
		e := &Error{Kind: NoMatch, Message: fmt.Sprintf("pattern %s names no package", pattern)}
		if filepath.IsAbs(pattern) || strings.HasPrefix(pattern, ".") {
			dir := strings.TrimSuffix(strings.TrimSuffix(pattern, "..."), "/")
			if !filepath.IsAbs(dir) {
				dir = filepath.Join(l.dir, dir)
			}
			if _, err := os.ReadDir(dir); err != nil {
				e.Kind, e.Place = NoDirectory, dir
				e.Message = reason(err)
			}
		}
		if strings.Contains(l.warnings, "does not contain main module or its selected dependencies") {
			e.Message += " of the module or workspace around " + l.dir
		}
		errs = append(errs, e)
	}
	if len(errs) > 0 {
		return errs
	}
	return nil
}

// root is the folder that places are relative to: of the module around dir,
// else of the workspace, else dir itself.
func (l *listing) root() string {
	switch {
	case l.env.GOMOD != "" && l.env.GOMOD != os.DevNull:
		return filepath.Dir(l.env.GOMOD)
	case l.env.GOWORK != "" && l.env.GOWORK != "off":
		return filepath.Dir(l.env.GOWORK)
	}
	return l.dir
}

// place writes a place that the go command printed, relative to the folder it
// ran in, as Program.Position does.
func (l *listing) place(pos string) string {
	if pos == "" {
		return ""
	}
	if !filepath.IsAbs(pos) {
		pos = filepath.Join(l.dir, pos)
	}
	if rel, ok := inside(l.root(), pos); ok {
		return rel
	}
	return pos
}

// outside reports whether the go command found neither module nor workspace.
func (l *listing) outside() bool {
	return (l.env.GOMOD == "" || l.env.GOMOD == os.DevNull) && (l.env.GOWORK == "" || l.env.GOWORK == "off")
}

// harmless reports whether the error of a package only says that this build
// has no file for it. Folders like that are met by every "./...".
func (l *listing) harmless(p *listed) bool {
	msg := p.Error.Err
	if strings.Contains(msg, "no non-test Go files") || strings.Contains(msg, "build constraints exclude all Go files") {
		// Named by a wildcard, or only through its tests.
		if p.DepOnly {
			return false
		}
		return true
	}
	return false
}

func oneLine(s string) string { return strings.Join(strings.Fields(s), " ") }

// reason is the part of a file system error that is not the path.
func reason(err error) string {
	var pe *os.PathError
	if errors.As(err, &pe) {
		return pe.Err.Error()
	}
	return err.Error()
}
