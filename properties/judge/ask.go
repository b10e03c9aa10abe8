package judge

import (
	"fmt"

	"pathtally/pds"
	"pathtally/properties"
)

// A ruleAt names one rule of a head.
type ruleAt struct {
	head pds.Head
	rule int // index into Rules(head)
}

// An ask is one question to the search: over the paths from start to an
// accepted end, which weight?
type ask struct {
	start   pds.Head
	weights []int64
	// accept says which states end a path when the stack is empty; nil none.
	accept func(pds.StateID) bool
	stops  pds.Mark // also stop before a rule that carries one of these
	moment bool     // also stop anywhere
	// mend takes every doubt that lowers the weight of the path.
	mend bool
	// fear takes every doubt that raises the weight of the path.
	fear bool
	off  []ruleAt // rules that no path may take
	// offLabels switches off all rules with one of these labels.
	offLabels []pds.LabelID
}

// A greatestWeight is the answer to an ask.
type greatestWeight struct {
	none     bool // no path ends as asked
	infinite bool // for every number there is a heavier path
	n        int64
}

// over says that some path weighs more than bound.
func (g greatestWeight) over(bound int64) bool { return !g.none && (g.infinite || g.n > bound) }

// is says that paths exist and the greatest weight is exactly n.
func (g greatestWeight) is(n int64) bool { return !g.none && !g.infinite && g.n == n }

// A stopped says that a search ended without an answer.
type stopped struct {
	reason string
	steps  int64 // budget of the search; 0 if no greater budget helps
}

// A searcher answers asks about one model. engine (engine.go) is the one that
// the program uses; tests put a search by brute force beside it.
type searcher interface {
	greatest(a ask) (greatestWeight, *stopped)
	// witness gives a shortest path heavier than bound; nil if there is none.
	witness(a ask, bound int64) ([]pds.Choice, *stopped)
	// beside gives, for one step of a path and one other rule of its head, the
	// least weight of a path that goes the same way up to there, takes the other
	// rule and then ends as asked; none if there is no such path.
	beside(a ask, t *trace, step, rule int) (greatestWeight, *stopped)
}

// ended says how a replayed path ends, and whether the ask accepts that.
func (a *ask) ended(m properties.Model, t *trace) (by leaving, ok bool) {
	switch t.run.End {
	case pds.EndEmpty:
		switch m.Exit(t.run.State).Kind {
		case properties.ExitPanic:
			by = byPanic
		case properties.ExitGoexit:
			by = byGoexit
		}
		return by, a.moment || (a.accept != nil && a.accept(t.run.State))
	case pds.EndMiddle:
		for _, r := range m.Rules(t.end, nil) {
			if r.Mark&a.stops != 0 {
				if r.Mark&a.stops&pds.MarkLoss != 0 {
					return byLoss, true
				}
				return byMoment, true
			}
		}
		return byMoment, a.moment
	default:
		return byMoment, a.moment
	}
}

// asks gives the question of a claim at a start, without contract or doubt.
func (j *judge) asks(s *properties.Start, c *properties.Claim, w []int64) ask {
	a := ask{start: s.Head, weights: w}
	switch {
	case c.Point == properties.Always:
		a.moment = true
	case c.Point == properties.Before || c.Point == properties.After:
		a.stops = c.Mark
	default:
		a.accept = func(q pds.StateID) bool { return j.isEndFor(s, c.Point, j.m.Exit(q)) }
		if c.Point == properties.AtReturn || c.Point == properties.AtEnd {
			a.stops = pds.MarkLoss
		}
	}
	return a
}

// isEndFor says whether leaving the root by e is an end of the checkpoint p.
func (j *judge) isEndFor(s *properties.Start, p properties.Point, e properties.Exit) bool {
	if s.Born && e.Unborn {
		return false // the counts are those of no instance
	}
	if j.rule.Moves && e.Outside {
		return false // handed on: whoever has it now owes the rest
	}
	switch p {
	case properties.AtReturn:
		return e.Kind == properties.ExitReturn
	case properties.AtSuccess:
		return e.Kind == properties.ExitReturn && e.Outcome != properties.Failure
	case properties.AtFailure:
		return e.Kind == properties.ExitReturn && e.Outcome != properties.Success
	case properties.AtPanic:
		return e.Kind == properties.ExitPanic
	case properties.AtEnd:
		return e.Kind == properties.ExitReturn || e.Kind == properties.ExitGoexit || (e.Kind == properties.ExitPanic && s.Recovered)
	}
	return false
}

// A Bug is a contradiction inside the program. It is thrown with panic and
// caught once, by the command.
type Bug struct {
	Stage string // what was going on
	Rule  string
	Where string // the start
	Text  string
}

func (b *Bug) Error() string {
	return fmt.Sprintf("%s, rule %s, %s: %s", b.Stage, b.Rule, b.Where, b.Text)
}
