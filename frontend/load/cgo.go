package load

// This file makes packages with cgo fit for SSA without running cgo.

import (
	"fmt"
	"go/ast"
	"go/types"
	"slices"
)

// cutC removes the bodies of the functions of p that SSA cannot be built for,
// because they speak to C: their expressions have no type. What calls them
// sees a function without a body. It also drops the initial values of
// package variables that come from C.
//
// Precondition: p was checked with FakeImportC.
func cutC(prog *Program, p *Package) {
	// SSA would want an object for the package "C".
	p.Types.SetImports(slices.DeleteFunc(slices.Clone(p.Types.Imports()), func(q *types.Package) bool { return q.Path() == "C" }))
	for i, f := range p.Syntax {
		isC := fileImportsC(f)
		for _, d := range f.Decls {
			fd, ok := d.(*ast.FuncDecl)
			if !ok || fd.Body == nil {
				if isC {
					p.CCalls += countC(d)
				}
				continue
			}
			if isC {
				p.CCalls += countC(fd)
			}
			if touchesInvalid(p.Info, fd.Body) || obscure(p.Info.Defs[fd.Name]) {
				fd.Body = nil
				pos := prog.Fset.PositionFor(fd.Name.Pos(), false)
				p.CFunctions = append(p.CFunctions, fmt.Sprintf("%s:%d:%d: %s", p.GoFiles[i], pos.Line, pos.Column, fd.Name.Name))
			}
		}
	}
	kept := p.Info.InitOrder[:0]
	for _, init := range p.Info.InitOrder {
		bad := touchesInvalid(p.Info, init.Rhs)
		for _, v := range init.Lhs {
			bad = bad || obscure(v)
		}
		if !bad {
			kept = append(kept, init)
		}
	}
	p.Info.InitOrder = kept
}

// countC counts the calls C.f(...) below n. Conversions such as C.int(x)
// cannot be told from calls without running cgo, except for the names that
// cgo gives the numeric types.
func countC(n ast.Node) int {
	count := 0
	ast.Inspect(n, func(n ast.Node) bool {
		if call, ok := n.(*ast.CallExpr); ok {
			if sel, ok := ast.Unparen(call.Fun).(*ast.SelectorExpr); ok {
				if x, ok := sel.X.(*ast.Ident); ok && x.Name == "C" && !cType[sel.Sel.Name] {
					count++
				}
			}
		}
		return true
	})
	return count
}

var cType = map[string]bool{
	"char": true, "schar": true, "uchar": true, "short": true, "ushort": true, "int": true, "uint": true, "long": true, "ulong": true,
	"longlong": true, "ulonglong": true, "float": true, "double": true, "size_t": true, "ssize_t": true, "uintptr_t": true, "intptr_t": true,
	"int8_t": true, "int16_t": true, "int32_t": true, "int64_t": true, "uint8_t": true, "uint16_t": true, "uint32_t": true, "uint64_t": true,
}

// touchesInvalid reports whether some expression below n has no type or one
// that is built around an invalid type.
func touchesInvalid(info *types.Info, n ast.Node) bool {
	found := false
	ast.Inspect(n, func(n ast.Node) bool {
		if found {
			return false
		}
		switch e := n.(type) {
		case *ast.Ident:
			if obj := info.Defs[e]; obj != nil {
				found = obscure(obj)
			} else if obj := info.Uses[e]; obj != nil {
				found = obscure(obj)
			}
		case *ast.SelectorExpr:
			if x, ok := e.X.(*ast.Ident); ok {
				if _, ok := info.Uses[x].(*types.PkgName); ok {
					found = info.Uses[e.Sel] == nil || obscure(info.Uses[e.Sel])
					return false
				}
			}
			found = untyped(info, e)
		case *ast.CallExpr, *ast.StarExpr, *ast.IndexExpr, *ast.IndexListExpr, *ast.SliceExpr, *ast.BinaryExpr, *ast.UnaryExpr, *ast.CompositeLit, *ast.FuncLit, *ast.ParenExpr:
			found = untyped(info, e.(ast.Expr))
		}
		return !found
	})
	return found
}

func untyped(info *types.Info, e ast.Expr) bool {
	tv, ok := info.Types[e]
	return !ok || invalid(tv.Type, nil)
}

// obscure reports whether an object's type is built around an invalid type.
func obscure(obj types.Object) bool {
	switch obj := obj.(type) {
	case *types.Var, *types.Const, *types.Func:
		return invalid(obj.Type(), nil)
	case *types.TypeName:
		// type handle C.handle_t
		return invalid(obj.Type(), nil) || invalid(obj.Type().Underlying(), nil)
	}
	return false
}

// invalid reports whether t is built around the invalid type. Named types
// count as valid whatever they are made of: a struct with a field of a C type
// can be handled as long as nobody looks at that field.
func invalid(t types.Type, seen map[types.Type]bool) bool {
	switch t := t.(type) {
	case nil:
		return false
	case *types.Basic:
		return t.Kind() == types.Invalid
	case *types.Tuple:
		for v := range t.Variables() {
			if invalid(v.Type(), seen) {
				return true
			}
		}
		return false
	}
	if seen[t] {
		return false
	}
	if seen == nil {
		seen = map[types.Type]bool{}
	}
	seen[t] = true
	switch t := t.(type) {
	case *types.Alias:
		return invalid(types.Unalias(t), seen)
	case *types.Named:
		for a := range t.TypeArgs().Types() {
			if invalid(a, seen) {
				return true
			}
		}
	case *types.Pointer:
		return invalid(t.Elem(), seen)
	case *types.Slice:
		return invalid(t.Elem(), seen)
	case *types.Array:
		return invalid(t.Elem(), seen)
	case *types.Chan:
		return invalid(t.Elem(), seen)
	case *types.Map:
		return invalid(t.Key(), seen) || invalid(t.Elem(), seen)
	case *types.Struct:
		for f := range t.Fields() {
			if invalid(f.Type(), seen) {
				return true
			}
		}
	case *types.Signature:
		return invalid(t.Params(), seen) || invalid(t.Results(), seen)
	}
	return false
}
