package judge

import (
	"fmt"
	"slices"

	"pathtally/properties"
)

// factors weigh one inequality of a case against the others, see mixes.
var factors = []int64{8, 64}

// answerCase decides one way of breaking a claim that is no single inequality:
// is there one path on which all of several inequalities w·c > b are true?
//
// Exact answers take the count image (image.go). Two cheap ones come first, and
// each is proof: if all are true on a path, then so is every sum of them with positive
// factors, Σ λ(w·c) ≥ Σ λ(b+1), so a greatest weight below that excludes the
// case; and a path past such a sum that makes them all true breaks the claim.
// The image decides what they leave, within its budget and where no doubt
// matters; what remains is undecided.
func (j *judge) answerCase(si int, c *properties.Claim, all []properties.Question) answered {
	s := &j.starts[si]
	if len(all) == 0 {
		return answered{verdict: Undecided, open: j.openFor(s, c, "form of the claim: it is false whatever happens", 0)}
	}
	var notes []properties.Note
	var base ask
	strict := slices.Clone(all) // with what contracts excuse
	for i := range all {
		x, stop := j.suspect(si, c, &all[i])
		if stop != nil {
			return j.undecided(s, c, stop)
		}
		if x.ground != "" {
			o, stop := j.fears(s, c, x)
			switch {
			case stop != nil:
				return j.undecided(s, c, stop)
			case o != nil:
				return answered{verdict: Undecided, open: o}
			}
			return answered{ground: x.ground}
		}
		notes = append(notes, x.notes...)
		strict[i].Bound = x.bound
		base = x.a
	}
	if len(all) == 1 {
		return j.answer(si, c, &all[0])
	}
	fits := func(counts []int64) bool {
		for i := range all {
			if dot(all[i].Weights, counts) <= all[i].Bound {
				return false
			}
		}
		return true
	}
	sums := mixes(all)
	for i := range sums {
		base.weights = sums[i].Weights
		most, stop := j.s.greatest(base)
		if stop != nil {
			return j.undecided(s, c, stop)
		}
		if !most.over(sums[i].Bound) {
			return answered{ground: holdsText(&sums[i], j.rule.Counts, most)}
		}
	}
	base.mend = true
	for i := range sums {
		base.weights = sums[i].Weights
		choices, stop := j.s.witness(base, sums[i].Bound)
		if stop != nil || choices == nil {
			continue
		}
		t, err := replay(j.m, base.start, choices)
		if err != nil {
			j.bug("replaying a path of "+c.Name, s, err.Error())
		}
		if fits(t.total()) {
			return j.causes(si, c, &sums[i], base, sums[i].Bound, notes, fits)
		}
	}
	reason := ""
	if im, ok := j.s.(imager); ok {
		b := im.together(j.asks(s, c, sums[0].Weights), all)
		switch {
		case b.none:
			return answered{ground: fmt.Sprintf("no path makes all %d inequalities true at once (count image)", len(all))}
		case b.path != nil && len(notes) > 0:
			b = im.together(base, strict) // a path that no contract excuses
		}
		if b.path != nil {
			old := j.s
			j.s = &pathFirst{searcher: old, path: b.path}
			defer func() { j.s = old }()
			base.weights, base.mend = sums[0].Weights, false
			return j.causes(si, c, &sums[0], base, sums[0].Bound, notes, fits)
		}
		reason = b.budget
	}
	if reason != "" {
		o := j.openFor(s, c, fmt.Sprintf("budget of the count image: %s", reason), 0)
		o.SoFar = "each of the inequalities alone is true on some path"
		return answered{verdict: Undecided, open: o}
	}
	o := j.openFor(s, c, fmt.Sprintf("form of the claim: it asks for %d inequalities on one path, which takes the set of all count vectors", len(all)), 0)
	o.SoFar = "each of them alone is true on some path"
	return answered{verdict: Undecided, open: o}
}

// mixes gives positive combinations of the inequalities of a case: the plain
// sum, and each of them weighing more than the others.
func mixes(all []properties.Question) []properties.Question {
	var out []properties.Question
	add := func(heavy int, factor int64) {
		m := properties.Question{Weights: make([]int64, len(all[0].Weights)), Bound: -1, Text: all[0].Text}
		for i := range all {
			f := int64(1)
			if i == heavy {
				f = factor
			}
			for k, w := range all[i].Weights {
				m.Weights[k] += f * w
			}
			m.Bound += f * (all[i].Bound + 1)
		}
		out = append(out, m)
	}
	add(-1, 1)
	for _, f := range factors {
		for i := range all {
			add(i, f)
		}
	}
	return out
}
