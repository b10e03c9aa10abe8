package lia

import (
	"context"
	"fmt"
	"math/big"
	"runtime"
	"time"

	"github.com/go-air/gini"
	"github.com/go-air/gini/z"
)

// Options sets budgets and switches; the zero value is the default of each.
// All budgets are counts of deterministic steps per Check.
type Options struct {
	MaxPivots  int64 // simplex pivots; default 2,000,000
	MaxNodes   int64 // branching steps; default 100,000
	MaxClauses int64 // learnt clauses; default 100,000
	MaxCuts    int   // cuts; default 24, since cuts of cuts grow ugly fast

	// MaxBoundBits ends the widening of the search box: boxes of 10, 20, 40, ...
	// bits are tried up to this size, then the search goes on without a box.
	// Default 1280.
	MaxBoundBits int

	// The switches turn one optimisation off. Answers never depend on them
	// (Unknown may); tests run both ways.
	NoPresolve bool // no substitution of variables
	NoCuts     bool
	NoLattice  bool // no divisibility test of whole systems of equations
	NoMinimise bool // conflicts are learnt as found
	smallDrive bool // use the large-system pivoting on small ones; for tests
	Sanity     bool // check internal invariants after each step; slow
}

func (o *Options) defaults() {
	set := func(p *int64, v int64) {
		if *p == 0 {
			*p = v
		}
	}
	set(&o.MaxPivots, 2_000_000)
	set(&o.MaxNodes, 100_000)
	set(&o.MaxClauses, 100_000)
	if o.MaxCuts == 0 {
		o.MaxCuts = 24
	}
	if o.MaxBoundBits == 0 {
		o.MaxBoundBits = 1280
	}
}

// Stats counts the work of a Solver since it was made.
type Stats struct {
	Pivots, Refactors         int64 // simplex
	Nodes, Rounds             int64 // branching steps; Boolean assignments tried
	Clauses, Literals         int64 // learnt clauses and their total length
	Cuts, LatticeConflicts    int64
	Substituted, Rows, Atoms  int64 // variables removed by presolve; rows and atoms made
	Lemmas, BoxEnlarged       int64 // formulas from OnModel; times the search box grew
	MinimiseTries, ModelsSeen int64
}

// Status is an answer.
type Status uint8

const (
	// Unknown: a budget ran out or the context was cancelled; nothing is claimed.
	Unknown Status = iota
	// Sat: exact, there is a model, and it was checked against every formula.
	Sat
	// Unsat: exact, there is no integer model.
	Unsat
)

func (s Status) String() string { return [...]string{"unknown", "sat", "unsat"}[s] }

// Result is the outcome of a Check.
type Result struct {
	Status Status
	Budget string // Unknown: "pivots", "nodes", "clauses" or "cancelled"
	Model  Model  // Sat
	// Failed lists indices of assumptions that suffice for Unsat, ascending;
	// empty when the assertions alone have no model. Sufficient, not minimal.
	Failed []int
}

// Solver decides conjunctions of asserted formulas. It is incremental: formulas
// may be added at any time and Check called again; nothing learnt is lost. Not
// safe for concurrent use.
type Solver struct {
	opt   Options
	stats Stats

	names     []string // by Var
	declLo    []*num   // by Var: bounds as declared, nil for none
	declHi    []*num
	lo, hi    []*num   // by Var: bounds after presolve, nil for none
	boolNames []string // by Bool

	asserts []assertion
	done    int // asserts[:done] have been handed to the search
	onModel func(Model) ([]Formula, error)

	// Presolve.
	prepared   bool
	dead       bool           // the assertions have no model
	subst      [][]term       // by Var: the form that replaces it
	substK     []num          // by Var: its constant
	substOn    []bool         // by Var
	modVars    map[string]Var // quotients of remainders, by form and modulus
	remainders []quotient     // all
	quotients  []quotient     // those not yet bounded on both sides
	side       []hardRow      // definitions of remainders not yet handed over

	// Arithmetic.
	sx         *simplex
	svarOf     []int32 // by Var; -1 until used
	structural []int32 // simplex variables that stand for a Var, ascending
	varAt      []Var   // by simplex variable: its Var, 0 for a slack
	forms      map[string]int32
	cuts       []cut

	// Boolean structure.
	sat     *gini.Gini
	guard   z.Lit // every clause contains its negation; see addClause
	truth   z.Lit // a literal that is always true
	atoms   []atom
	atomOf  []int32           // by z.Var: atom index + 1, 0 for none
	byVar   map[int32][]int32 // simplex variable -> atoms, ascending in c
	enc     map[*node]encoded
	boolLit []z.Lit // by Bool
	vals    []bool  // by z.Var: the assignment of the last satisfiable Solve
	roots   []*node // non-atomic assertions and lemmas
	boxBits int     // 0: none yet
	boxLit  z.Lit
	noBox   bool // the box has reached its limit and is given up

	lastLits []z.Lit // the theory literals behind the last model, without branches
	pivotEnd int64
	nodeEnd  int64
	clauEnd  int64
}

type assertion struct {
	name  string
	f     Formula
	lemma bool // from OnModel
}

// atom is "simplex variable v <= c"; its negation is v >= c+1.
type atom struct {
	v   int32
	c   num
	lit z.Lit
}

// New makes an empty solver.
func New(opt Options) *Solver {
	opt.defaults()
	s := &Solver{
		opt:       opt,
		names:     []string{""},
		declLo:    []*num{nil},
		declHi:    []*num{nil},
		lo:        []*num{nil},
		hi:        []*num{nil},
		boolNames: []string{""},
		subst:     [][]term{nil},
		substK:    []num{{}},
		substOn:   []bool{false},
		modVars:   map[string]Var{},
		svarOf:    []int32{-1},
		forms:     map[string]int32{},
		sat:       gini.New(),
		byVar:     map[int32][]int32{},
		enc:       map[*node]encoded{},
		boolLit:   []z.Lit{z.LitNull},
	}
	s.sx = newSimplex(&s.stats)
	if opt.smallDrive {
		s.sx.driveRows = 0
	}
	s.guard = s.sat.Lit()
	s.truth = s.sat.Lit()
	s.addClause(s.truth)
	return s
}

// NewVar makes a variable that ranges over the natural numbers. Names serve
// output only; they need not differ.
func (s *Solver) NewVar(name string) Var { return s.newVar(name, &num{}, nil) }

// NewFree makes a variable that ranges over all integers.
func (s *Solver) NewFree(name string) Var { return s.newVar(name, nil, nil) }

// NewBounded makes a variable within [lo, hi]; nil means no bound on that side.
func (s *Solver) NewBounded(name string, lo, hi *big.Int) Var {
	var l, h *num
	if lo != nil {
		v := numBig(new(big.Int).Set(lo))
		l = &v
	}
	if hi != nil {
		v := numBig(new(big.Int).Set(hi))
		h = &v
	}
	return s.newVar(name, l, h)
}

func (s *Solver) newVar(name string, lo, hi *num) Var {
	s.names = append(s.names, name)
	s.declLo = append(s.declLo, lo)
	s.declHi = append(s.declHi, hi)
	s.lo = append(s.lo, lo)
	s.hi = append(s.hi, hi)
	s.subst = append(s.subst, nil)
	s.substK = append(s.substK, num{})
	s.substOn = append(s.substOn, false)
	s.svarOf = append(s.svarOf, -1)
	if lo != nil && hi != nil && lo.cmp(*hi) > 0 {
		s.dead = true
	}
	return Var(len(s.names) - 1)
}

// NewBool makes a propositional variable.
func (s *Solver) NewBool(name string) Bool {
	s.boolNames = append(s.boolNames, name)
	s.boolLit = append(s.boolLit, z.LitNull)
	return Bool(len(s.boolNames) - 1)
}

// VarName is the name that x was made with.
func (s *Solver) VarName(x Var) string { return s.names[x] }

// Stats is a copy of the work counters.
func (s *Solver) Stats() Stats { return s.stats }

// Assert adds f for good. The name identifies it in Core; it may be empty.
func (s *Solver) Assert(name string, f Formula) {
	s.asserts = append(s.asserts, assertion{name: name, f: f})
}

// OnModel registers a check of models: it is called for each integer model that
// satisfies all formulas. It returns nil to accept it, or formulas (lemmas, valid
// for every acceptable model) of which at least one is false under m; they are
// added for good and the search goes on. The callback may make variables. An
// error ends the Check with that error. Lemmas are trusted: Unsat means no model
// of assertions and lemmas.
func (s *Solver) OnModel(f func(m Model) (lemmas []Formula, err error)) { s.onModel = f }

// addClause adds a clause to gini. gini ends the process (log.Fatalf) once its
// clauses are unsatisfiable without assumptions, so every clause also contains
// ¬guard, and guard is assumed in every Solve: the clause set itself can always
// be satisfied by making guard false.
func (s *Solver) addClause(lits ...z.Lit) {
	for _, l := range lits {
		s.sat.Add(l)
	}
	s.sat.Add(s.guard.Not())
	s.sat.Add(z.LitNull)
}

// solveSAT runs gini under guard and the given assumptions: 1, -1, or 0 when ctx
// was cancelled.
func (s *Solver) solveSAT(ctx context.Context, assume []z.Lit) int {
	s.sat.Assume(s.guard)
	s.sat.Assume(assume...)
	if ctx.Done() == nil {
		return s.sat.Solve()
	}
	// Polling keeps to the one call at a time that gini's handle allows. Time is
	// used for waiting only and never decides an answer.
	run := s.sat.GoSolve()
	wait := 10 * time.Microsecond
	for i := 0; ; i++ {
		if res, ok := run.Test(); ok {
			return res
		}
		if ctx.Err() != nil {
			return run.Stop()
		}
		if i < 50 {
			runtime.Gosched()
			continue
		}
		time.Sleep(wait)
		wait = min(2*wait, time.Millisecond)
	}
}

// varOf is the Var of a structural simplex variable.
func (s *Solver) varOf(v int32) Var { return s.varAt[v] }

func (s *Solver) fail(format string, args ...any) {
	panic("lia: " + fmt.Sprintf(format, args...))
}
