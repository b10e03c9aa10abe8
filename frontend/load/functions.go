package load

// This file lists the functions of a program.

import (
	"cmp"
	"go/types"
	"slices"
	"strings"

	"golang.org/x/tools/go/ssa"
)

// functionIndex is what Functions, Wrappers and Uninstantiated answer from.
type functionIndex struct {
	list     []*ssa.Function
	wrappers []*ssa.Function
	unused   map[*ssa.Function]bool // generic functions without any instance
}

// Functions lists the functions that have blocks and a source: declared
// functions and methods, anonymous functions, package initializers, and
// instances of generic functions. A generic function itself is in the list,
// with the anonymous functions in it, only if nothing instantiates it; see
// Uninstantiated. Bound methods, thunks and promoted methods are not; see
// Wrappers.
//
// The order is fixed: by path of the package whose source holds the function,
// then by position, then by name. The caller must not change the slice.
func (prog *Program) Functions() []*ssa.Function {
	return prog.functions.list
}

// Wrappers lists the functions with blocks that have no source of their own
// and that Functions leaves out, in the same order.
func (prog *Program) Wrappers() []*ssa.Function {
	return prog.functions.wrappers
}

// Uninstantiated reports whether fn is a generic function (or in one) that
// nothing in the program instantiates. Its body has types with parameters,
// so calls in it may have no callee.
func (prog *Program) Uninstantiated(fn *ssa.Function) bool {
	for fn.Parent() != nil {
		fn = fn.Parent()
	}
	return prog.functions.unused[fn]
}

// indexFunctions finds the functions. Declared ones come from the packages;
// instances and wrappers are met as operands, and methods of instantiated
// types that only an interface calls through the types that are converted.
func (prog *Program) indexFunctions() {
	seen := map[*ssa.Function]bool{}
	var todo []*ssa.Function
	add := func(fn *ssa.Function) {
		if fn != nil && !seen[fn] {
			seen[fn] = true
			todo = append(todo, fn)
		}
	}
	for _, p := range prog.Packages {
		if !p.Bodies || p.SSA == nil {
			continue
		}
		for _, m := range p.SSA.Members {
			if fn, ok := m.(*ssa.Function); ok {
				add(fn)
			}
		}
		// Methods, and functions named "_" or "init", are no members.
		for _, obj := range p.Info.Defs {
			if fn, ok := obj.(*types.Func); ok {
				add(prog.SSA.FuncValue(fn))
			}
		}
	}
	// Methods of instantiated types that are reached through interfaces only.
	for _, t := range prog.SSA.RuntimeTypes() {
		for _, t := range []types.Type{t, types.NewPointer(t)} {
			if !isInstance(t) || types.IsInterface(t) {
				continue
			}
			set := prog.SSA.MethodSets.MethodSet(t)
			for i := range set.Len() {
				if fn := prog.SSA.MethodValue(set.At(i)); fn != nil && fn.Origin() != nil {
					add(fn)
				}
			}
		}
	}

	instantiated := map[*ssa.Function]bool{}
	var rands [16]*ssa.Value
	for len(todo) > 0 {
		fn := todo[len(todo)-1]
		todo = todo[:len(todo)-1]
		if o := fn.Origin(); o != nil && o != fn {
			instantiated[o] = true
		}
		for _, anon := range fn.AnonFuncs {
			add(anon)
		}
		for _, b := range fn.Blocks {
			for _, instr := range b.Instrs {
				for _, op := range instr.Operands(rands[:0]) {
					if callee, ok := (*op).(*ssa.Function); ok {
						add(callee)
					}
				}
			}
		}
	}

	prog.functions.unused = map[*ssa.Function]bool{}
	var list, wrappers []*ssa.Function
	for fn := range seen {
		if len(fn.Blocks) == 0 {
			continue
		}
		top := fn
		for top.Parent() != nil {
			top = top.Parent()
		}
		if top.TypeParams().Len() > 0 && len(top.TypeArgs()) == 0 {
			if instantiated[top] {
				continue
			}
			prog.functions.unused[top] = true
		}
		if isWrapper(fn) {
			wrappers = append(wrappers, fn)
		} else {
			list = append(list, fn)
		}
	}
	prog.functions.list = prog.sortFunctions(list)
	prog.functions.wrappers = prog.sortFunctions(wrappers)
	prog.Stats.Functions = len(list)
}

// isInstance reports whether t is an instantiated named type or a pointer to one.
func isInstance(t types.Type) bool {
	if p, ok := t.(*types.Pointer); ok {
		t = p.Elem()
	}
	n, ok := types.Unalias(t).(*types.Named)
	return ok && n.TypeArgs().Len() > 0
}

// isWrapper reports whether fn was made up by SSA and stands for no source.
func isWrapper(fn *ssa.Function) bool {
	if fn.Synthetic == "" || fn.Synthetic == "package initializer" || fn.Synthetic == "range-over-func yield" {
		return false
	}
	return !strings.HasPrefix(fn.Synthetic, "instance of ")
}

// sortFunctions sorts as Functions promises.
func (prog *Program) sortFunctions(fns []*ssa.Function) []*ssa.Function {
	type key struct {
		fn   *ssa.Function
		path string
	}
	keys := make([]key, len(fns))
	for i, fn := range fns {
		keys[i].fn = fn
		if p := prog.PackageOfFunction(fn); p != nil {
			keys[i].path = p.Path
		}
	}
	slices.SortFunc(keys, func(a, b key) int {
		if c := strings.Compare(a.path, b.path); c != 0 {
			return c
		}
		if c := cmp.Compare(a.fn.Pos(), b.fn.Pos()); c != 0 {
			return c
		}
		return strings.Compare(a.fn.String(), b.fn.String())
	})
	for i, k := range keys {
		fns[i] = k.fn
	}
	return fns
}
