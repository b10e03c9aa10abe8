package gentest

import (
	"bytes"
	"context"
	_ "embed"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"time"
)

//go:embed rt.txt
var rtSource string

// Depth and runs of the walk through the branches of one root.
const (
	flipDepth = 12
	maxRuns   = 400
)

// Observed is what all runs of one root showed of one instance, by the kind of
// exit: count vectors (taken, given). Instance "" stands for all instances that
// were born on the way.
type Observed struct {
	Package, Root, Instance, Exit string
	// Ends are the counts at the end: as many alternatives as there are ways to
	// leave out spawned goroutines, which may be roots of their own; all of them
	// counted comes last.
	Ends [][][2]int
	// Moments are the counts after every event, of runs that spawn nothing.
	Moments [][2]int
}

// Tally is how one root was run.
type Tally struct {
	Package, Root string
	Runs, Aborted int
	Complete      bool // every way through the branches was run to its end
}

// A RootRun is what running one root gave.
type RootRun struct {
	Tally
	Seen []Observed
}

// A batch is a module with a package for each program, a command that runs
// them all, and the package rt in a module of its own.
type batch struct {
	dir   string
	progs []*Program
	roots [][]Root
}

func pkgName(i int) string { return fmt.Sprintf("p%04d", i) }

// pkgPath is the import path of program i.
func pkgPath(i int) string { return "gen/p/" + pkgName(i) }

func newBatch(dir string, progs []*Program) (*batch, error) {
	b := &batch{dir: dir, progs: progs}
	var failed error
	write := func(name, text string) {
		path := filepath.Join(dir, filepath.FromSlash(name))
		err := os.MkdirAll(filepath.Dir(path), 0o777)
		if err == nil {
			err = os.WriteFile(path, []byte(text), 0o666)
		}
		if err != nil && failed == nil {
			failed = err
		}
	}
	write("go.mod", "module gen\n\ngo 1.26\n\nrequire gen/rt v0.0.0\n\nreplace gen/rt => ./rt\n")
	write("rt/go.mod", "module gen/rt\n\ngo 1.26\n")
	write("rt/rt.go", rtSource)
	var imports, calls, table strings.Builder
	for i, p := range progs {
		roots, err := p.Check()
		if err != nil {
			return nil, fmt.Errorf("seed %d: %w", p.Seed, err)
		}
		b.roots = append(b.roots, roots)
		write("p/"+pkgName(i)+"/p.go", p.Source())
		if len(roots) > 0 {
			fmt.Fprintf(&imports, "\t%s %q\n", pkgName(i), pkgPath(i))
		}
		fmt.Fprintf(&calls, "func run%d() {\n", i)
		for _, r := range roots {
			calls.WriteString(driver(pkgName(i), r))
		}
		calls.WriteString("}\n\n")
		fmt.Fprintf(&table, "\trun%d,\n", i)
	}
	write("main/main.go", "package main\n\nimport (\n\t\"gen/rt\"\n"+imports.String()+")\n\nfunc main() { rt.Main([]func(){\n"+table.String()+"}) }\n\n"+calls.String())
	return b, failed
}

// driver is the code that explores one root. What the caller decides is for
// the oracle too: the flag of a box, and which pointers are nil.
func driver(pkg string, r Root) string {
	var b strings.Builder
	fmt.Fprintf(&b, "\trt.Explore(%q, %q, %d, %d, func() func() {\n", pkg, r.Name, flipDepth, maxRuns)
	fmt.Fprintf(&b, "\t\t%s.Glob = %s.Res{}\n\t\trt.Name(&%s.Glob, \"Glob\")\n", pkg, pkg, pkg)
	pointer := func(place string) {
		fmt.Fprintf(&b, "\t\tif rt.Flip() {\n\t\t\t%s = &%s.Res{}\n\t\t\trt.Name(%s, %q)\n\t\t}\n", place, pkg, place, place)
	}
	box := func(name string) {
		fmt.Fprintf(&b, "\t\t%s := &%s.Box{F: rt.Flip()}\n", name, pkg)
		fmt.Fprintf(&b, "\t\trt.Name(&%s.A, \"%s.A\")\n\t\trt.Name(&%s.C, \"%s.C\")\n", name, name, name, name)
		pointer(name + ".P")
	}
	call := pkg + "." + r.Name
	if r.Method {
		box("b")
		call = "b." + r.Name[strings.LastIndex(r.Name, ".")+1:]
	}
	var args []string
	for _, p := range r.Params {
		name, typ, _ := strings.Cut(p, " ")
		args = append(args, name)
		switch typ {
		case "*Box":
			box(name)
		case "*Res":
			fmt.Fprintf(&b, "\t\tvar %s *%s.Res\n", name, pkg)
			pointer(name)
		default:
			fmt.Fprintf(&b, "\t\t%s := rt.Flip()\n", name)
		}
	}
	fmt.Fprintf(&b, "\t\treturn func() { %s(%s) }\n\t})\n", call, strings.Join(args, ", "))
	return b.String()
}

// run builds the batch and runs it; by program and root. A program that did not
// come to an end has nil.
func (b *batch) run() ([]map[string]*RootRun, error) {
	ctx, cancel := context.WithTimeout(context.Background(), 2*time.Minute)
	defer cancel()
	bin := filepath.Join(b.dir, "run.exe")
	build := exec.CommandContext(ctx, "go", "build", "-gcflags=gen/...=-N -l", "-ldflags=-s -w", "-o", bin, "./main")
	build.Dir = b.dir
	build.Env = append(os.Environ(), "GOWORK=off", "GOFLAGS=-mod=mod", "GOPROXY=off")
	if out, err := build.CombinedOutput(); err != nil {
		return nil, fmt.Errorf("the go command: %w\n%s", err, out)
	}
	defer os.Remove(bin)
	runs := make([]map[string]*RootRun, len(b.progs))
	at := map[string]int{}
	for i := range b.progs {
		runs[i] = map[string]*RootRun{}
		at[pkgName(i)] = i
	}
	for first := 0; first < len(b.progs); {
		cmd := exec.CommandContext(ctx, bin, strconv.Itoa(first))
		var stderr bytes.Buffer
		cmd.Stderr = &stderr
		out, err := cmd.Output()
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		last := first
		in := json.NewDecoder(bytes.NewReader(out))
		for {
			var line struct {
				Tally
				Instance, Exit string
				Ends           [][][2]int
				Moments        [][2]int
				Begin          int
			}
			if err := in.Decode(&line); err == io.EOF {
				break
			} else if err != nil {
				return nil, fmt.Errorf("the output of the programs: %w", err)
			}
			if line.Package == "" {
				last = line.Begin
				continue
			}
			m := runs[at[line.Package]]
			if line.Exit == "" {
				m[line.Root] = &RootRun{Tally: line.Tally}
				continue
			}
			r := m[line.Root]
			r.Seen = append(r.Seen, Observed{line.Package, line.Root, line.Instance, line.Exit, line.Ends, line.Moments})
		}
		if err == nil {
			break
		}
		// Some mixtures of Goexit, panics and recovers crash Go's own runtime, and
		// a cut of shrinking may leave a recursion without an end: such a program
		// says nothing. Anything else is an error of the generator.
		if text := stderr.String(); !strings.Contains(text, "fatal error: bad recovery") && !strings.Contains(text, "fatal error: stack overflow") &&
			!strings.Contains(text, "gentest: a run does not end") {
			return nil, fmt.Errorf("program of seed %d: %w\n%s\n%s", b.progs[last].Seed, err, clip(stderr.String()), b.progs[last].Source())
		}
		runs[last] = nil
		first = last + 1
	}
	return runs, nil
}

func clip(s string) string {
	if len(s) > 4000 {
		return s[:4000]
	}
	return s
}
