// Package effects summarises what every function of a program may do to memory
// and control, and what is known of its results: one bottom-up pass over the SSA
// of all loaded bodies, by strongly connected components of the call graph.
//
// # What a summary denotes
//
// A summary speaks about one call of a function, all calls that it makes
// included. "May" facts are over-approximations on loaded bodies: overwrites,
// exits, flows. Facts about results are under-approximations: what is said
// holds at every normal return. Printed form:
//
//	writes: elem int; p0{.next}      places that may be overwritten: of any
//	                                 object; of the object of parameter 0
//	exits: returns|panics            how it may end
//	r0: nil iff p1                   what holds of a result
//	flow p0: r0 global               where parameter 0 may go
//	pure                             a pure getter
//
// Words: a root is a parameter (receiver first) or a free variable (after the
// parameters); a place is a field, a package variable, the elements of one type,
// or what pointers of one type point to; a site is a call, defer or go
// statement; a group is the set of candidates of a dynamic call.
//
// In code: n node, s site or summary, t table, m mask of roots, p place; rel is
// "relative to roots", ext the effect of a callee without body.
//
// # Asking
//
// Of answers for a function, OfCall for one call: it knows the candidates of a
// dynamic call, and for callees without body the types of these arguments and
// what they may call back. MayOverwriteField and its likes answer for any object;
// OverwritesParamField for the object of a root. InitOnlyGlobal, GlobalNonNil and
// GlobalConst answer for package variables.
//
// # Phases
//
// Compute runs them in this order: scan (stores.go) reads the stores, loads and
// calls of each body; order (graph.go) finds the components; then for each
// component, callees first, overwrites (table.go), exits (exits.go), purity
// (table.go), results (results.go), flows (flows.go), each to its least
// fixpoint. sanity.go solves everything once more and must find no change;
// random_test.go compares summaries with runs of random programs.
//
// # Instructions
//
// An unknown kind panics. "roots" are those of the address or container.
//
//	Store                     overwrites the place and the places inside the value; value flows into the roots
//	MapUpdate                 overwrites elements; key and value flow into the map
//	UnOp *                    reads the place; result holds what the address reaches
//	UnOp <-                   no getter; result holds what the channel reaches
//	UnOp others, BinOp        no effect
//	Call                      the callee's summary, roots replaced by those of the arguments
//	Defer                     as Call, whenever it runs; may stop panics behind it
//	Go                        spawns; overwrites as Call; arguments are kept; its panics and exits are not the caller's
//	Send                      no getter; value flows into the channel and is kept
//	Select                    as its sends and receives; without cases it blocks forever
//	Panic                     panics (explicit ones; see KindOf); the operand is kept
//	Return                    returns; operands are the results
//	RunDefers                 no effect of its own: deferred calls count where they are deferred
//	If, Jump                  control only; tests of nil are facts on the sides
//	Alloc, MakeChan, MakeMap, MakeSlice, MakeClosure
//	                          a new object: stores to it do not count; never nil; no getter (Alloc: heap only)
//	MakeInterface             never nil; holds its operand
//	ChangeInterface, ChangeType, Convert, TypeAssert, Extract, Phi, Slice, SliceToArrayPointer
//	                          the result holds the operands and has their roots
//	Field, FieldAddr, Index, IndexAddr, Lookup
//	                          the result holds the operand; an address used for more than a load or store is exposed
//	Range, Next               the result holds the operand; over a map: no getter
//	DebugRef                  no effect
//	MultiConvert              only in bodies over type parameters, which are never scanned
//	append, copy, clear, delete
//	                          overwrite elements; the source flows into the target
//	close, print, println, recover
//	                          no getter
//	panic (deferred)          panics
//	len, cap, min, max, complex, real, imag, unsafe.*, ssa:*
//	                          no effect; the result holds the first operand if it has pointers
//
// # Overlap
//
// A store through a *T of unknown origin may change every exposed field,
// variable and element of type T; a store to a part of a struct changes the
// struct. Queries take care of that.
//
// # Assumptions
//
//   - A pointer made from an unsafe.Pointer stores only objects of its own type.
//   - Code without body writes only what its arguments reach over exported
//     fields, elements and pointers (in a package with bodies, its own fields
//     too), calls only function values and interface methods that it is handed,
//     keeps nothing (unless modelled) but in its results, and does not panic.
//   - An interface call whose interface is declared in a package without bodies,
//     and a call of a function value whose type such a package can make, may
//     reach such code besides the candidates: then nothing is known of results.
//   - Code out of sight does not assign to variables of other packages, and a
//     variable of type error named Err... or EOF in such a package is not nil.
//   - Run-time panics (nil, index, division) are no explicit panics.
package effects
