package judge

import (
	"cmp"
	"fmt"
	"slices"
)

// Union puts the results of several builds of one module together: what two of
// them found is one finding, and a question that two of them asked is one
// question, whose verdict is the worse of the two.
func Union(results []*Result) *Result {
	if len(results) == 1 {
		return results[0]
	}
	out := &Result{}
	found, open, asked := map[string]bool{}, map[string]bool{}, map[string]int{}
	roots, instances := map[string]bool{}, map[string]bool{}
	for _, r := range results {
		for _, f := range r.Findings {
			if !found[f.Fingerprint] {
				found[f.Fingerprint] = true
				out.Findings = append(out.Findings, f)
			}
		}
		for _, o := range r.Open {
			key := o.Fingerprint() + o.StoppedBy + placeKey(o.Place)
			if !open[key] {
				open[key] = true
				out.Open = append(out.Open, o)
			}
		}
		for _, q := range r.Questions {
			root := q.Root.Package + "." + q.Root.Name + placeKey(q.Root.Place)
			roots[root] = true
			instances[fmt.Sprint(q.Set, "\x00", q.Rule, "\x00", root, "\x00", q.Instance)] = true
			key := fmt.Sprint(q.Set, "\x00", q.Rule, "\x00", q.Claim, "\x00", root, "\x00", q.Instance)
			i, ok := asked[key]
			if !ok {
				asked[key] = len(out.Questions)
				out.Questions = append(out.Questions, q)
			} else if worse(q.Verdict, out.Questions[i].Verdict) {
				out.Questions[i] = q
			}
		}
		out.Assumptions = append(out.Assumptions, r.Assumptions...)
		out.Cut = append(out.Cut, r.Cut...)
	}
	out.Tally.Roots, out.Tally.Instances = len(roots), len(instances)
	out.settle()
	return out
}

// worse orders verdicts: broken, undecided, holds.
func worse(a, b Verdict) bool {
	rank := func(v Verdict) int { return []int{Holds: 0, Undecided: 1, Broken: 2}[v] }
	return cmp.Compare(rank(a), rank(b)) > 0
}

// settle puts everything into the fixed order and counts the questions.
func (r *Result) settle() {
	r.Assumptions = sortedNotes(r.Assumptions)
	slices.SortStableFunc(r.Findings, compareFinding)
	slices.SortStableFunc(r.Open, compareOpen)
	slices.SortStableFunc(r.Questions, compareQuestion)
	slices.Sort(r.Cut)
	r.Cut = slices.Compact(r.Cut)
	for i := range r.Questions {
		q := &r.Questions[i]
		r.Tally.Questions++
		switch q.Verdict {
		case Broken:
			r.Tally.Broken++
			if q.Advice {
				r.Tally.Advice++
			}
		case Undecided:
			r.Tally.Undecided++
			if q.Advice {
				r.Tally.UndecidedAdvice++
			}
		default:
			r.Tally.Holds++
		}
	}
}
