package load

import "go/types"

// Universe shows the program's packages to who resolves names: by path, as
// types only.
type Universe struct{ prog *Program }

// Universe returns the view.
func (prog *Program) Universe() Universe { return Universe{prog} }

// Package returns the package with the import path, or nil if it is not in
// the import graph or could not be checked. A path without its vendor prefix
// does not find a vendored package of the standard library.
func (u Universe) Package(path string) *types.Package {
	if p := u.prog.byPath[path]; p != nil {
		return p.Types
	}
	return nil
}

// Packages lists every package of the import graph, sorted by path.
func (u Universe) Packages() []*types.Package {
	out := make([]*types.Package, 0, len(u.prog.Packages))
	for _, p := range u.prog.Packages {
		if p.Types != nil {
			out = append(out, p.Types)
		}
	}
	return out
}
