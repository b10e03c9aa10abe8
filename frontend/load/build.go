package load

// This file builds SSA for the packages with bodies.

import (
	"fmt"
	"go/types"
	"runtime/debug"
	"sync"

	"golang.org/x/tools/go/ssa"
)

// build creates and builds the SSA program.
//
// Packages without bodies are created from their types, as functions without
// blocks, and only those that a package with bodies imports: SSA makes
// methods of other packages on demand, and no instruction can name anything
// else of a package that is not imported.
func (prog *Program) build(cfg *Config, progress func(string, int, int)) error {
	prog.SSA = ssa.NewProgram(prog.Fset, ssa.InstantiateGenerics|cfg.Mode)
	prog.SSA.SetNoReturn(func(fn *types.Func) bool { return NoReturn(fn) != Returns })

	wanted := map[*Package]bool{}
	for _, p := range prog.Packages {
		if p.Bodies {
			wanted[p] = true
			for _, d := range p.deps {
				wanted[d] = true
			}
		}
	}
	var todo []*Package
	for _, p := range prog.Packages {
		if p.Types != nil {
			prog.byTypes[p.Types] = p
		}
		if !wanted[p] || p.Types == nil {
			continue
		}
		if p.Bodies {
			if p.c != nil {
				prog.SSA.CreatePackage(p.c, nil, nil, false)
			}
			p.SSA = prog.SSA.CreatePackage(p.Types, p.Syntax, p.Info, true)
			todo = append(todo, p)
		} else {
			p.SSA = prog.SSA.CreatePackage(p.Types, nil, nil, true)
		}
	}

	var (
		mu     sync.Mutex
		next   int
		done   int
		failed error
		wg     sync.WaitGroup
	)
	for range cfg.Workers {
		wg.Go(func() {
			for {
				mu.Lock()
				if failed == nil {
					failed = cfg.Context.Err()
				}
				if failed != nil || next == len(todo) {
					mu.Unlock()
					return
				}
				p := todo[next]
				next++
				mu.Unlock()

				err := buildPackage(p)

				mu.Lock()
				if err != nil && failed == nil {
					failed = err
				}
				done++
				progress("building", done, len(todo))
				mu.Unlock()
			}
		})
	}
	wg.Wait()
	if failed != nil {
		return failed
	}
	prog.indexFiles()
	prog.indexFunctions()
	return nil
}

// buildPackage builds one package. A panic of the builder becomes an error
// that names the package: it is a bug, here or there, never the user's.
func buildPackage(p *Package) (err error) {
	defer func() {
		if x := recover(); x != nil {
			err = fmt.Errorf("internal error while building package %s: %v\n%s", p.Path, x, debug.Stack())
		}
	}()
	p.SSA.Build()
	return nil
}
