// Package load turns the patterns that name Go packages into type-checked
// packages and an SSA program, and answers questions about their source:
// which functions there are, where they stand, what a line says.
//
// # What is loaded
//
//	named packages                                     bodies, SSA
//	what they need of the same modules, and of the
//	main modules (the one around Config.Dir, or all
//	that the workspace uses)                           bodies, SSA
//	other packages they need                           declarations; functions without blocks
//	the same with Config.Deps                          bodies, SSA
//	tests of the named packages, with Config.Tests     bodies, SSA
//
// The standard library counts as a module ("std"), the go commands as another
// ("cmd"): naming net/http loads the bodies of all of std that net/http needs.
// A pattern may name packages of any module in the build list.
//
// # How
//
//	list    go list -e -deps: files and import graph. No export data is asked
//	        for, or the go command would compile everything first.
//	plan    one Package per import path; tests merged; bodies chosen; a place
//	        in the file set for every file, before any is parsed, so that
//	        token.Pos values are the same in every run.
//	read    parse and check, in parallel over the import graph. Where no
//	        bodies are needed, their text is blanked out before parsing
//	        (stripBodies), which leaves all other positions alone.
//	build   SSA, in parallel over the packages with bodies, with
//	        ssa.InstantiateGenerics. Packages without bodies are created from
//	        their types, and only if a package with bodies imports them.
//	index   the functions, in a fixed order.
//
// # The go command
//
// It runs in Config.Dir with the process's environment and Config.Env, so
// GOFLAGS, GOWORK, GOOS and so on mean what they always mean. Two things are
// taken from it: the network (GOPROXY, GONOPROXY, GOVCS; see environment) and
// the right to change go.mod (-mod=mod becomes -mod=readonly). Like any go
// command it may write to its own build cache.
//
// # Tests
//
// The go command compiles a tested package twice, with and without its test
// files, and what lies between it and its external tests as well. Here there
// is one copy of each package: tests are merged into it (WithTests), external
// tests are a package "p_test" beside it (ExternalTests), and the generated
// test command does not exist. If the tests of several packages together
// would close an import cycle, those of the later ones are left out and
// listed in LeftOut.
//
// # cgo
//
// Neither cgo nor a C compiler runs. The names of C get types by the way the
// code uses them (guessC); a function for which no guess fits loses its body
// and is listed in Package.Cut, and package variables lose their initial
// value likewise. Calls into C are calls of functions without a body in a
// package "C"; Package.CCalls counts them. Type errors in a function that
// touches C are therefore not reported: the go command will.
//
// # Errors
//
// Whatever is wrong with the input is an Errors value of one-line messages
// with places. A package with type errors ends the load, whether it is named
// or only needed; with Config.Partial it is marked Broken together with what
// needs it, and the rest is built. A panic of checker or builder is caught and
// becomes an error that names the package.
//
// # Limits and traps
//
//   - Positions ignore "//line" comments: what is judged is the file that was read.
//   - After a call of a function that NoReturn knows, SSA has a Panic of the
//     constant "noreturn"; but not after a call through an interface
//     ((testing.TB).FailNow), nor after go and defer.
//   - Functions has instances in the place of generic functions. An instance
//     of a function whose body was not loaded has no blocks and is not listed.
//     fn.Pkg is nil for instances and wrappers: use PackageOfFunction.
//   - go/types is not told of bodies it does not see: errors in the bodies of
//     dependencies go unnoticed, which is what is wanted.
//   - Package.Info and Syntax stay in memory, as SSA builds instances and
//     method wrappers on demand.
//   - A file that changes while it is read is an error, not a mixture.
//
// # Names
//
//	l   listing          p, q  package         d     what a package imports
//	lp  listed package   f     file            fn    function
package load
