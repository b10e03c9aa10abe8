package judge

import (
	"context"
	"errors"
	"slices"

	"pathtally/parikh"
	"pathtally/parikh/lia"
	"pathtally/pds"
	"pathtally/properties"
	"pathtally/summary"
)

// Budgets of one question to a count image, in steps of its solver, and the
// longest path that is taken from one.
const (
	imageNodes  = 5_000
	imagePivots = 200_000
	imagePath   = 20_000
)

// A both is what a count image says of several inequalities on one path.
type both struct {
	// none: no path makes all of them true, whatever the doubts.
	none bool
	// path makes all of them true and meets no doubt; nil if there is none.
	path   []pds.Choice
	budget string // what ran out; "" if nothing did
}

// An imager is a searcher that can ask the set of all count vectors, package
// parikh.
type imager interface {
	// together asks whether all inequalities are true on one path. Weights and
	// doubts of the ask do not matter: a step in doubt goes both ways for none,
	// and no way for path.
	together(a ask, all []properties.Question) both
}

func (g *engine) together(a ask, all []properties.Question) both {
	if g.saturate(a.start) != nil {
		return both{budget: "steps"}
	}
	uncertain := func(h pds.Head, rule int) bool {
		r := g.m.Rules(h, nil)[rule]
		return r.Doubt != 0 && !slices.Equal(g.m.Vector(r.Effect), g.m.Vector(r.DoubtEffect))
	}
	q := summary.Question{StopMarks: a.stops, AnyMoment: a.moment}
	sg, err := g.e.Grammar(a.start, accepting(a), q)
	if err != nil {
		return both{none: errors.Is(err, summary.ErrNoWitness)}
	}
	wide := g.grammar(sg)
	doubts := false
	for _, p := range sg.Prods {
		if p.Rule == (summary.RuleRef{}) || p.Before || !uncertain(p.Rule.Head, p.Rule.Index) {
			continue
		}
		doubts = true
		twin := parikh.Production{Lhs: parikh.NT(p.Lhs)}
		for _, b := range p.Rhs {
			twin.Rhs = append(twin.Rhs, parikh.NT(b))
		}
		for k, n := range g.m.Vector(g.m.Rules(p.Rule.Head, nil)[p.Rule.Index].DoubtEffect) {
			if n != 0 {
				twin.Effect = append(twin.Effect, parikh.Amount{Count: int32(k), N: n})
			}
		}
		wide.Prods = append(wide.Prods, twin)
	}
	answer := askImage(wide, all, false).answer
	switch answer.Status {
	case parikh.No:
		return both{none: true}
	case parikh.Unknown:
		return both{budget: answer.Budget}
	}
	if doubts {
		q.Off = uncertain
		if sg, err = g.e.Grammar(a.start, accepting(a), q); err != nil {
			return both{}
		}
	}
	// A path is asked of productions as they are: what merged ones stand for need
	// not fit together.
	exact := askImage(g.grammar(sg), all, true)
	if exact.answer.Status != parikh.Yes {
		return both{budget: exact.answer.Budget}
	}
	d, err := parikh.Derive(exact.image.Grammar(), exact.answer.Productions())
	if err != nil {
		panic("judge: an answer of a count image is no derivation: " + err.Error())
	}
	w, err := (&parikh.System{Image: exact.image, Start: a.start, Summary: sg}).Word(d)
	if err != nil {
		return both{budget: "the length of a path"}
	}
	path, err := w.Choices(imagePath, 0)
	if err != nil {
		return both{budget: "the length of a path"}
	}
	return both{path: path}
}

// grammar hands the grammar of runs to package parikh.
func (g *engine) grammar(sg *summary.Grammar) *parikh.Grammar {
	counts := make([]string, g.m.NumCounts())
	for i := range counts {
		counts[i] = "c" + grouped(int64(i))
	}
	return parikh.FromSummary(sg, counts, func(p summary.Production) []int64 { return g.m.Vector(p.Effect) }, nil)
}

type asked struct {
	image  *parikh.Image
	answer parikh.Answer
}

// askImage asks for a derivation on which all inequalities are true. plain keeps
// productions apart that could be merged.
func askImage(g *parikh.Grammar, all []properties.Question, plain bool) asked {
	im := parikh.New(g, parikh.Options{Plain: plain, Solver: lia.Options{MaxNodes: imageNodes, MaxPivots: imagePivots}})
	var fs []lia.Formula
	for i := range all {
		var terms []lia.Lin
		for k, w := range all[i].Weights {
			terms = append(terms, im.Count(k).Scale(w))
		}
		fs = append(fs, lia.GT(lia.Sum(terms...), lia.Const(all[i].Bound)))
	}
	return asked{im, im.Ask(context.Background(), lia.And(fs...))}
}

// pathFirst is a searcher that has one path to give.
type pathFirst struct {
	searcher
	path []pds.Choice
}

func (p *pathFirst) witness(ask, int64) ([]pds.Choice, *stopped) {
	c := p.path
	p.path = nil
	return c, nil
}
