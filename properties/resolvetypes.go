package properties

// Names of types, functions and methods in rules, looked up in the build.

import (
	"go/types"
	"math/big"
	"path"
	"regexp"
	"sort"
	"strings"

	"pathtally/properties/syntax"
)

// Universe is the set of packages of the build: the module's and all they need.
// Each path is type-checked once, so that objects can be compared by identity.
type Universe interface {
	// Package gives the package with an import path, nil if it is not in the build.
	Package(path string) *types.Package
	// Packages lists all packages, in any order.
	Packages() []*types.Package
}

// TypeFits reports whether a value of type t can be an instance of type
// pattern, one of EachParam.Types: the types are identical, or pattern is a
// generic type without arguments and t one of its instances, or one of them is
// an interface that the other implements.
func TypeFits(pattern, t types.Type) bool {
	pattern, t = types.Unalias(pattern), types.Unalias(t)
	if types.Identical(pattern, t) {
		return true
	}
	if _, ok := t.(*types.TypeParam); ok {
		return true // depends on the instance of the generic function
	}
	if p, ok := pattern.(*types.Pointer); ok {
		q, ok := t.Underlying().(*types.Pointer)
		if ok && openGeneric(p.Elem()) != nil {
			return TypeFits(p.Elem(), q.Elem())
		}
	}
	if n := openGeneric(pattern); n != nil {
		if m, ok := t.(*types.Named); ok && m.Origin() == n {
			return true
		}
	}
	if open(pattern) {
		// Whether any instance of it implements t is a question for the code
		// that has the instance.
		return types.IsInterface(t)
	}
	if types.IsInterface(pattern) || types.IsInterface(t) {
		if types.IsInterface(pattern) && types.IsInterface(t) {
			return true // a third type may implement both
		}
		return types.AssignableTo(t, pattern) || types.AssignableTo(pattern, t)
	}
	return types.AssignableTo(t, pattern) && types.AssignableTo(pattern, t)
}

// openGeneric gives a generic type that stands without arguments, else nil.
func openGeneric(t types.Type) *types.Named {
	n, ok := types.Unalias(t).(*types.Named)
	if ok && n.TypeParams().Len() > 0 && n.TypeArgs().Len() == 0 {
		return n
	}
	return nil
}

// open reports whether t is, or points to, a generic type without arguments.
func open(t types.Type) bool {
	if p, ok := types.Unalias(t).(*types.Pointer); ok {
		t = p.Elem()
	}
	return openGeneric(t) != nil
}

// importName is the name that an import line binds when it names none.
var versionElem = regexp.MustCompile(`^v[0-9]+$`)

func importName(p string) string {
	base := path.Base(p)
	if versionElem.MatchString(base) && path.Dir(p) != "." {
		base = path.Base(path.Dir(p))
	}
	if i := strings.LastIndex(base, ".v"); i > 0 { // gopkg.in/yaml.v3
		base = base[:i]
	}
	return strings.ReplaceAll(base, "-", "_")
}

// imported is what an import line binds.
type imported struct {
	path string
	pkg  *types.Package // nil: not in the build
	node syntax.Node
}

// importsOf binds the import lines of a file.
func (r *resolver) importsOf(f *RuleFile) {
	r.imports, r.importNames = map[string]*imported{}, nil
	for _, im := range f.Tree.Imports {
		r.clause(func() {
			p := &imported{path: im.Path.Value, pkg: r.u.Package(im.Path.Value), node: im.Path}
			name := importName(p.path)
			if p.pkg != nil {
				name = p.pkg.Name()
			}
			var at syntax.Node = im.Path
			if im.Name != nil {
				name, at = im.Name.Text, im.Name
			}
			if r.imports[name] != nil {
				r.fail(syntax.Naming, at, "give one of them another name: import other "+quote(p.path), "two imports are called %s", name)
			}
			r.imports[name] = p
			r.importNames = append(r.importNames, name)
			if p.pkg == nil && !f.BuiltIn {
				r.fail(syntax.Typing, im.Path, r.nearPackage(p.path), "package %s is not in the build", p.path)
			}
		})
	}
	sort.Strings(r.importNames)
}

func quote(s string) string { return `"` + s + `"` }

// nearPackage is a hint at a package of the build with a similar path.
func (r *resolver) nearPackage(p string) string {
	var paths []string
	for _, q := range r.u.Packages() {
		paths = append(paths, q.Path())
	}
	sort.Strings(paths)
	if n := syntax.Near(p, paths); n != "" {
		return "there is " + n
	}
	for _, q := range paths {
		if path.Base(q) == path.Base(p) && q != p {
			return "there is " + q
		}
	}
	return "packages of this module and those they import can be named"
}

// pkg gives the package that a name of the file stands for, or fails.
func (r *resolver) pkg(id *syntax.Ident) *types.Package {
	p := r.imports[id.Text]
	if p == nil {
		if r.file.Tree.BadImport {
			panic(bail{}) // perhaps it was meant there
		}
		hint := "write import " + quote("…") + " above the rules"
		if n := syntax.Near(id.Text, r.importNames); n != "" {
			hint = "imported is " + n
		} else if len(r.importNames) > 0 && len(r.importNames) <= 12 {
			hint = "imported are " + syntax.Enumerate(r.importNames, "and")
			if len(r.importNames) == 1 {
				hint = "imported is " + r.importNames[0]
			}
		}
		r.fail(syntax.Naming, id, hint, "no import is called %s", id.Text)
	}
	if p.pkg == nil {
		if r.file.BuiltIn {
			panic(notApplicable{p.path})
		}
		panic(bail{}) // the import line has the error
	}
	return p.pkg
}

// notApplicable unwinds from a built-in rule whose package is not in the build.
type notApplicable struct{ path string }

// absent unwinds from a name of a built-in rule that its package does not have:
// the standard library of the build is older than the rule.
type absent struct{ name string }

// unlessAbsent runs f; if a built-in rule names what the build does not have,
// it notes the name and reports false.
func (r *resolver) unlessAbsent(f func()) (ok bool) {
	defer func() {
		if p := recover(); p != nil {
			a, mine := p.(absent)
			if !mine {
				panic(p)
			}
			r.out.Absent = append(r.out.Absent, a.name)
		}
	}()
	f()
	return true
}

// missing fails for a name that a package or type does not have.
func (r *resolver) missing(at *syntax.Ident, hint, format string, args ...any) {
	if r.file.BuiltIn {
		panic(absent{at.Text})
	}
	r.fail(syntax.Typing, at, hint, format, args...)
}

// named gives the type that a subject names.
func (r *resolver) named(s *syntax.Subject) *types.TypeName {
	switch len(s.Parts) {
	case 1:
		if o, ok := types.Universe.Lookup(s.Parts[0].Text).(*types.TypeName); ok {
			return o
		}
		r.fail(syntax.Naming, s, "types are named as in Go: sync.Mutex", "%s names no type", s)
	case 2:
		pkg := r.pkg(s.Parts[0])
		o := pkg.Scope().Lookup(s.Parts[1].Text)
		if o == nil {
			r.missing(s.Parts[1], r.nearObject(s.Parts[1].Text, pkg, func(o types.Object) bool { _, ok := o.(*types.TypeName); return ok }),
				"package %s has no type %s", pkg.Path(), s.Parts[1].Text)
		}
		if t, ok := o.(*types.TypeName); ok {
			return t
		}
		r.fail(syntax.Typing, s, "", "%s is %s, not a type", s, objectKind(o))
	}
	r.fail(syntax.Naming, s, "types are named as in Go: sync.Mutex", "%s names no type", s)
	return nil
}

func objectKind(o types.Object) string {
	switch o.(type) {
	case *types.TypeName:
		return "a type"
	case *types.Func:
		return "a function"
	case *types.Var:
		return "a variable"
	case *types.Const:
		return "a constant"
	}
	return "something else"
}

// nearObject is a hint at an object of a package with a similar name.
func (r *resolver) nearObject(name string, pkg *types.Package, ok func(types.Object) bool) string {
	var names []string
	for _, n := range pkg.Scope().Names() {
		if o := pkg.Scope().Lookup(n); ok(o) {
			names = append(names, n)
		}
	}
	if n := syntax.Near(name, names); n != "" {
		return "it has " + n
	}
	if len(names) > 0 && len(names) <= 8 {
		return "it has " + syntax.Enumerate(names, "and")
	}
	return ""
}

// typ gives the type of a type expression; nil for _.
func (r *resolver) typ(e syntax.TypeExpr) types.Type {
	inner := func(e syntax.TypeExpr) types.Type {
		t := r.typ(e)
		if t == nil {
			r.fail(syntax.Naming, e, "_ can stand for a whole type or for a type argument", "not judged yet: _ inside of a type")
		}
		return t
	}
	switch e := e.(type) {
	case *syntax.AnyType:
		return nil
	case *syntax.PointerType:
		return types.NewPointer(inner(e.Elem))
	case *syntax.ArrayType:
		if e.Len == nil {
			return types.NewSlice(inner(e.Elem))
		}
		return types.NewArray(inner(e.Elem), r.int64(e.Len, e.Len.Value))
	case *syntax.MapType:
		return types.NewMap(inner(e.Key), inner(e.Elem))
	case *syntax.ChanType:
		dir := map[string]types.ChanDir{"chan": types.SendRecv, "<-chan": types.RecvOnly, "chan<-": types.SendOnly}[e.Word]
		return types.NewChan(dir, inner(e.Elem))
	case *syntax.FuncType:
		var params []*types.Var
		for _, p := range e.Params {
			params = append(params, types.NewVar(0, nil, "", inner(p)))
		}
		return types.NewSignatureType(nil, nil, nil, types.NewTuple(params...), nil, false)
	case *syntax.StructType:
		return types.NewStruct(nil, nil)
	case *syntax.NamedType:
		o := r.named(e.Subject)
		return r.withArgs(e, o, e.Args)
	}
	panic("properties: unknown type expression")
}

// withArgs gives the type of an object with type arguments; [_, …] and none
// stand for any.
func (r *resolver) withArgs(at syntax.Node, o *types.TypeName, args []syntax.TypeExpr) types.Type {
	if len(args) == 0 {
		return o.Type()
	}
	params := typeParams(o.Type())
	if n := params.Len(); n != len(args) {
		r.fail(syntax.Typing, at, "", "%s has %s, not %d", o.Name(), plural(n, "type parameter"), len(args))
	}
	var ts []types.Type
	for _, a := range args {
		if t := r.typ(a); t != nil {
			ts = append(ts, t)
		}
	}
	switch {
	case len(ts) == 0:
		return o.Type()
	case len(ts) < len(args):
		r.fail(syntax.Naming, at, "write _ for all of them or for none", "not judged yet: _ beside other type arguments")
	}
	t, err := types.Instantiate(nil, o.Type(), ts, true)
	if err != nil {
		r.fail(syntax.Typing, at, "", "%v", err)
	}
	return t
}

func typeParams(t types.Type) *types.TypeParamList {
	switch t := t.(type) {
	case *types.Named:
		return t.TypeParams()
	case *types.Alias:
		return t.TypeParams()
	}
	return nil
}

// noCondition fits every function.
func noCondition(*types.Func, types.Type) *syntax.Error { return nil }

// callees resolves one callee; a prefix gives all functions with it, sorted by
// name. fits says why a function cannot be meant: nil if it can. The result is
// not empty.
func (r *resolver) callees(c *syntax.Callee, fits func(f *types.Func, recv types.Type) *syntax.Error) []Callee {
	var found []Callee
	if c.Recv {
		found = r.methods(c)
	} else {
		found = r.functions(c)
	}
	var out []Callee
	var why *syntax.Error
	for _, f := range found {
		if err := fits(f.Obj, f.Recv); err != nil {
			if !c.Prefix {
				r.failWith(err)
			}
			why = err
			continue
		}
		out = append(out, f)
	}
	if len(out) == 0 {
		r.fail(syntax.Typing, c, "for example: "+why.Msg, "none of the functions with this prefix fits the event")
	}
	return out
}

func (r *resolver) functions(c *syntax.Callee) []Callee {
	s := c.Subject
	if len(s.Parts) == 1 {
		hint := "functions are named with their package: os.Open, (*os.File).Close"
		if r.inst != nil {
			hint = "the instance is " + r.inst.Name.Text + "; functions are named with their package"
		}
		r.fail(syntax.Naming, s, hint, "%s is neither a function nor the instance", s)
	}
	pkg := r.pkg(s.Parts[0])
	name := s.Parts[1]
	if len(s.Parts) > 2 {
		r.fail(syntax.Naming, s, "a method is written with its receiver's type: (*os.File).Close", "%s names no function", s)
	}
	isFunc := func(o types.Object) bool { _, ok := o.(*types.Func); return ok }
	if c.Prefix {
		var out []Callee
		for _, n := range pkg.Scope().Names() { // sorted
			if f, ok := pkg.Scope().Lookup(n).(*types.Func); ok && strings.HasPrefix(n, name.Text) {
				out = append(out, Callee{Obj: f})
			}
		}
		if len(out) == 0 {
			r.missing(name, r.nearObject(name.Text, pkg, isFunc), "package %s has no function that starts with %s", pkg.Path(), name.Text)
		}
		return out
	}
	o := pkg.Scope().Lookup(name.Text)
	if o == nil {
		r.missing(name, r.nearObject(name.Text, pkg, isFunc), "package %s has no function %s", pkg.Path(), name.Text)
	}
	f, ok := o.(*types.Func)
	if !ok {
		hint := ""
		if _, isType := o.(*types.TypeName); isType {
			hint = "a method is written with its receiver's type: (*os.File).Close"
		}
		r.fail(syntax.Typing, name, hint, "%s is %s, not a function", s, objectKind(o))
	}
	r.anyArgs(c, f.Signature().TypeParams().Len(), s.String())
	return []Callee{{Obj: f}}
}

// anyArgs allows only _ as type arguments of a callee.
func (r *resolver) anyArgs(c *syntax.Callee, params int, what string) {
	if len(c.Args) == 0 {
		return
	}
	if params != len(c.Args) {
		r.fail(syntax.Typing, c, "", "%s has %s, not %d", what, plural(params, "type parameter"), len(c.Args))
	}
	for _, a := range c.Args {
		if _, ok := a.(*syntax.AnyType); !ok {
			r.fail(syntax.Naming, a, "write _", "not judged yet: type arguments of a function other than _")
		}
	}
}

func (r *resolver) methods(c *syntax.Callee) []Callee {
	o := r.named(c.Subject)
	base := types.Unalias(o.Type())
	n := 0
	if p := typeParams(o.Type()); p != nil {
		n = p.Len()
	}
	r.anyArgs(c, n, o.Name())
	recv := base
	shown := c.Subject.String()
	iface := types.IsInterface(base)
	if c.Pointer {
		if iface {
			r.fail(syntax.Typing, c.Subject, "write ("+shown+")."+c.Method.Text, "%s is an interface; a pointer to it has no methods", shown)
		}
		recv = types.NewPointer(base)
		shown = "*" + shown
	}
	set := types.NewMethodSet(recv)
	var names []string
	for i := range set.Len() {
		if o := set.At(i).Obj(); o.Exported() { // hints name only what most rules may mean
			names = append(names, o.Name())
		}
	}
	sort.Strings(names)
	if c.Prefix {
		var out []Callee
		for i := range set.Len() {
			sel := set.At(i)
			if strings.HasPrefix(sel.Obj().Name(), c.Method.Text) && (iface || len(sel.Index()) == 1) {
				out = append(out, Callee{Obj: sel.Obj().(*types.Func).Origin(), Interface: iface, Recv: recv})
			}
		}
		sort.Slice(out, func(i, j int) bool { return out[i].Obj.Name() < out[j].Obj.Name() })
		if len(out) == 0 {
			r.missing(c.Method, has(c.Method.Text, names), "%s has no method that starts with %s", shown, c.Method.Text)
		}
		return out
	}
	for i := range set.Len() {
		sel := set.At(i)
		if sel.Obj().Name() != c.Method.Text {
			continue
		}
		f := sel.Obj().(*types.Func).Origin()
		if !iface && len(sel.Index()) > 1 {
			r.fail(syntax.Typing, c.Method, "it belongs to "+types.TypeString(f.Signature().Recv().Type(), qualifier)+"; name that type", "not judged yet: %s of %s is a method of an embedded field", c.Method.Text, shown)
		}
		return []Callee{{Obj: f, Interface: iface, Recv: recv}}
	}
	hint := has(c.Method.Text, names)
	if !c.Pointer && !iface {
		if m, _, _ := types.LookupFieldOrMethod(types.NewPointer(base), false, o.Pkg(), c.Method.Text); m != nil {
			if _, ok := m.(*types.Func); ok {
				hint = "*" + shown + " has it: (*" + shown + ")." + c.Method.Text
			}
		}
	}
	r.missing(c.Method, hint, "%s has no method %s", shown, c.Method.Text)
	return nil
}

// qualifier prints packages by their name, as a rule does.
func qualifier(p *types.Package) string { return p.Name() }

// has is a hint at what there is: the nearest name, or all if they are few.
func has(name string, names []string) string {
	switch {
	case len(names) == 0:
		return "it has none"
	case len(names) <= 6:
		return "it has " + syntax.Enumerate(names, "and")
	}
	if n := syntax.Near(name, names); n != "" {
		return "it has " + n
	}
	return ""
}

func plural(n int, what string) string {
	switch n {
	case 0:
		return "no " + what + "s"
	case 1:
		return "one " + what
	}
	return big.NewInt(int64(n)).String() + " " + what + "s"
}
