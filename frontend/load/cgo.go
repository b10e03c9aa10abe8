package load

// This file makes packages with cgo fit for checking and for SSA without
// running cgo or a C compiler.

import (
	"go/ast"
	"go/token"
	"go/types"
	"maps"
	"slices"
	"strings"
)

// CutFunction is a function whose body was taken away, or a package variable
// whose initial value was.
type CutFunction struct {
	Pos  token.Pos // of its name
	Name string
}

// cNumbers are the numeric types that cgo knows without asking C. Sizes of
// long and pointers are those of 64-bit Unix; nothing here depends on sizes.
var cNumbers = map[string]types.BasicKind{
	"char": types.Int8, "schar": types.Int8, "uchar": types.Uint8, "short": types.Int16, "ushort": types.Uint16,
	"int": types.Int32, "uint": types.Uint32, "long": types.Int64, "ulong": types.Uint64, "longlong": types.Int64, "ulonglong": types.Uint64,
	"float": types.Float32, "double": types.Float64, "size_t": types.Uint64, "ssize_t": types.Int64, "uintptr_t": types.Uintptr, "intptr_t": types.Int64,
	"int8_t": types.Int8, "int16_t": types.Int16, "int32_t": types.Int32, "int64_t": types.Int64,
	"uint8_t": types.Uint8, "uint16_t": types.Uint16, "uint32_t": types.Uint32, "uint64_t": types.Uint64, "_Bool": types.Bool, "bool": types.Bool,
}

// cUse is how the files of a package use one name of C.
type cUse struct {
	isType    bool // stands where only a type can
	calls     int
	statement int // calls whose result nobody takes
	double    int // calls as in "r, err := C.f()"
	arity     int // of the first call
	value     bool
}

// guessC makes a package "C" for the files of one package from the way they
// use it:
//
//   - the numeric types and the helpers of cgo are what they are;
//   - a name in the place of a type is a struct without fields;
//   - a name that is called is a function without a body. It has no result,
//     or one of type C.int, or an error too, as the calls take it;
//   - any other name is a variable of type C.int.
//
// A guess that does not fit the code makes the checker complain inside of a
// function, and that function loses its body (see cut). A guess that fits but
// is wrong is of no harm: what a function without a body gives is not known anyway.
func guessC(files []*ast.File) *types.Package {
	uses := map[string]*cUse{}
	for _, f := range files {
		if fileImportsC(f) {
			surveyC(f, uses)
		}
	}
	c := types.NewPackage("C", "C")
	scope := c.Scope()
	typeOf := func(name string) types.Type {
		if obj := scope.Lookup(name); obj != nil {
			return obj.Type()
		}
		obj := types.NewTypeName(token.NoPos, c, name, nil)
		var under types.Type = types.NewStruct(nil, nil)
		if kind, ok := cNumbers[name]; ok {
			under = types.Typ[kind]
		} else if strings.HasPrefix(name, "enum_") {
			under = types.Typ[types.Uint32]
		}
		types.NewNamed(obj, under, nil)
		scope.Insert(obj)
		return obj.Type()
	}
	function := func(name string, params, results []types.Type) {
		tuple := func(ts []types.Type) *types.Tuple {
			var vs []*types.Var
			for _, t := range ts {
				vs = append(vs, types.NewParam(token.NoPos, c, "", t))
			}
			return types.NewTuple(vs...)
		}
		scope.Insert(types.NewFunc(token.NoPos, c, name, types.NewSignatureType(nil, nil, nil, tuple(params), tuple(results), false)))
	}
	one := func(ts ...types.Type) []types.Type { return ts }
	anyType := types.Universe.Lookup("any").Type()
	errorType := types.Universe.Lookup("error").Type()
	text, pointer := types.Typ[types.String], types.Typ[types.UnsafePointer]
	chars := func() types.Type { return types.NewPointer(typeOf("char")) }
	for _, name := range slices.Sorted(maps.Keys(uses)) {
		u := uses[name]
		if scope.Lookup(name) != nil {
			continue
		}
		_, number := cNumbers[name]
		switch {
		case number || u.isType || strings.HasPrefix(name, "struct_") || strings.HasPrefix(name, "union_") || strings.HasPrefix(name, "enum_"):
			typeOf(name)
		case name == "CString":
			function(name, one(text), one(chars()))
		case name == "CBytes":
			function(name, one(types.NewSlice(types.Typ[types.Byte])), one(pointer))
		case name == "GoString":
			function(name, one(chars()), one(text))
		case name == "GoStringN":
			function(name, one(chars(), typeOf("int")), one(text))
		case name == "GoBytes":
			function(name, one(pointer, typeOf("int")), one(types.NewSlice(types.Typ[types.Byte])))
		case name == "malloc" && u.double == 0:
			function(name, one(typeOf("size_t")), one(pointer))
		case name == "free" && u.double == 0:
			function(name, one(pointer), nil)
		case u.calls > 0:
			var results []types.Type
			switch {
			case u.double == u.calls:
				results = one(typeOf("int"), errorType)
			case u.double > 0:
				continue // one and two results: no Go signature has both
			case u.statement < u.calls:
				results = one(typeOf("int"))
			}
			function(name, slices.Repeat(one(anyType), u.arity), results)
		case strings.HasPrefix(name, "sizeof_"):
			scope.Insert(types.NewVar(token.NoPos, c, name, typeOf("size_t")))
		default:
			scope.Insert(types.NewVar(token.NoPos, c, name, typeOf("int")))
		}
	}
	c.MarkComplete()
	return c
}

// surveyC notes each use of a name of C in f.
func surveyC(f *ast.File, uses map[string]*cUse) {
	ast.PreorderStack(f, nil, func(n ast.Node, stack []ast.Node) bool {
		name := nameOfC(n)
		if name == "" {
			return true
		}
		u := uses[name]
		if u == nil {
			u = &cUse{}
			uses[name] = u
		}
		at := len(stack) - 1
		for at > 0 {
			if _, ok := stack[at].(*ast.ParenExpr); !ok {
				break
			}
			at--
		}
		switch up := stack[at].(type) {
		case *ast.StarExpr, *ast.ArrayType, *ast.MapType, *ast.ChanType, *ast.Field, *ast.TypeSpec, *ast.TypeAssertExpr, *ast.Ellipsis:
			u.isType = true
		case *ast.CompositeLit:
			u.isType = u.isType || up.Type == n
		case *ast.ValueSpec:
			if up.Type == n {
				u.isType = true
			} else {
				u.value = true
			}
		case *ast.CallExpr:
			if ast.Unparen(up.Fun) != n {
				if id, ok := up.Fun.(*ast.Ident); ok && (id.Name == "new" || id.Name == "make") && up.Args[0] == n {
					u.isType = true
				} else {
					u.value = true
				}
				break
			}
			if u.calls == 0 {
				u.arity = len(up.Args)
			}
			u.calls++
			switch over := stack[at-1].(type) {
			case *ast.ExprStmt, *ast.GoStmt, *ast.DeferStmt:
				u.statement++
			case *ast.AssignStmt:
				if len(over.Lhs) == 2 && len(over.Rhs) == 1 {
					u.double++
				}
			case *ast.ValueSpec:
				if len(over.Names) == 2 && len(over.Values) == 1 {
					u.double++
				}
			}
		default:
			u.value = true
		}
		return false
	})
}

// nameOfC returns x if n is "C.x".
func nameOfC(n ast.Node) string {
	if sel, ok := n.(*ast.SelectorExpr); ok {
		if x, ok := sel.X.(*ast.Ident); ok && x.Name == "C" {
			return sel.Sel.Name
		}
	}
	return ""
}

// cut takes the bodies of those functions of p that SSA cannot be built for:
// the ones the checker complained about (at complaints), and those with
// expressions that have no type. What calls them sees a function without a
// body. It does the same with the initial values of package variables.
//
// It returns the complaints that lie in none of them.
func cut(p *Package, complaints []complaint) (rest []complaint) {
	used := make([]bool, len(complaints))
	// claims takes the complaints in n as its own, if C can be behind them.
	claims := func(n ast.Node) bool {
		found := false
		for i, c := range complaints {
			if n.Pos() <= c.pos && c.pos < n.End() && (found || aboutC(c.err.Message) || touchesC(p.Info, n)) {
				used[i], found = true, true
			}
		}
		return found
	}
	for _, f := range p.Syntax {
		for _, d := range f.Decls {
			fd, ok := d.(*ast.FuncDecl)
			if !ok || fd.Body == nil {
				continue
			}
			if claims(fd) || touchesInvalid(p.Info, fd.Body) || obscure(p.Info.Defs[fd.Name]) {
				fd.Body = nil
				p.Cut = append(p.Cut, CutFunction{fd.Name.Pos(), fd.Name.Name})
			}
		}
	}
	kept := p.Info.InitOrder[:0]
	for _, init := range p.Info.InitOrder {
		bad := claims(init.Rhs) || touchesInvalid(p.Info, init.Rhs)
		for _, v := range init.Lhs {
			bad = bad || obscure(v)
		}
		if !bad {
			kept = append(kept, init)
		} else if len(init.Lhs) > 0 {
			p.Cut = append(p.Cut, CutFunction{init.Lhs[0].Pos(), init.Lhs[0].Name()})
		}
	}
	p.Info.InitOrder = kept
	for i, c := range complaints {
		if !used[i] {
			rest = append(rest, c)
		}
	}
	return rest
}

// complaint is a type error of a package with cgo that may stem from a guess.
type complaint struct {
	pos token.Pos
	err *Error
}

// countC counts the calls into C: calls of functions of the package "C",
// those in functions that were cut included. Helpers that only convert count
// as well; they are C code behind a call like any other.
func countC(files []*ast.File, c *types.Package) int {
	count := 0
	for _, f := range files {
		if !fileImportsC(f) {
			continue
		}
		ast.Inspect(f, func(n ast.Node) bool {
			if call, ok := n.(*ast.CallExpr); ok {
				if name := nameOfC(ast.Unparen(call.Fun)); name != "" {
					if _, isType := c.Scope().Lookup(name).(*types.TypeName); !isType {
						count++
					}
				}
			}
			return true
		})
	}
	return count
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
	return !ok || around(tv.Type, isInvalid, nil)
}

// obscure reports whether an object's type is built around an invalid type.
func obscure(obj types.Object) bool {
	if obj, ok := obj.(*types.TypeName); ok && around(obj.Type().Underlying(), isInvalid, nil) {
		return true // type handle C.handle_t
	}
	return aroundObject(obj, isInvalid)
}

// touchesC reports whether some name below n is of a type that is built
// around a guessed type or an invalid one, or is a name of C itself.
func touchesC(info *types.Info, n ast.Node) bool {
	found := false
	ast.Inspect(n, func(n ast.Node) bool {
		if id, ok := n.(*ast.Ident); ok && !found {
			obj := info.Uses[id]
			if obj == nil {
				obj = info.Defs[id]
			}
			switch obj := obj.(type) {
			case nil:
			case *types.PkgName:
				found = obj.Imported().Path() == "C"
			default:
				found = aroundObject(obj, isOfC)
			}
		}
		return !found
	})
	return found
}

func isInvalid(t types.Type) bool { return t == types.Typ[types.Invalid] }

func isOfC(t types.Type) bool {
	if named, ok := t.(*types.Named); ok {
		pkg := named.Obj().Pkg()
		return pkg != nil && pkg.Path() == "C"
	}
	return isInvalid(t)
}

func aroundObject(obj types.Object, leaf func(types.Type) bool) bool {
	switch obj.(type) {
	case *types.Var, *types.Const, *types.Func, *types.TypeName:
		return around(obj.Type(), leaf, nil)
	}
	return false
}

// around reports whether t is built around a type that leaf accepts. Other
// named types are not looked into: a struct with a field of a C type
// can be handled as long as nobody looks at that field.
func around(t types.Type, leaf func(types.Type) bool, seen map[types.Type]bool) bool {
	if t == nil {
		return false
	}
	t = types.Unalias(t)
	if leaf(t) {
		return true
	}
	switch t := t.(type) {
	case *types.Basic, *types.TypeParam:
		return false
	case *types.Tuple:
		for v := range t.Variables() {
			if around(v.Type(), leaf, seen) {
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
	case *types.Named:
		for a := range t.TypeArgs().Types() {
			if around(a, leaf, seen) {
				return true
			}
		}
	case *types.Pointer:
		return around(t.Elem(), leaf, seen)
	case *types.Slice:
		return around(t.Elem(), leaf, seen)
	case *types.Array:
		return around(t.Elem(), leaf, seen)
	case *types.Chan:
		return around(t.Elem(), leaf, seen)
	case *types.Map:
		return around(t.Key(), leaf, seen) || around(t.Elem(), leaf, seen)
	case *types.Struct:
		for f := range t.Fields() {
			if around(f.Type(), leaf, seen) {
				return true
			}
		}
	case *types.Signature:
		return around(t.Params(), leaf, seen) || around(t.Results(), leaf, seen)
	}
	return false
}
