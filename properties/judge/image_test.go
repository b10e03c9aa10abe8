package judge

import (
	"testing"

	"pathtally/pds"
	"pathtally/properties"
)

// TestCasesByImage asks for what no sum of the inequalities decides: the counts
// 3x and 5x against a sum of sixes and tens, where vectors between those of paths
// would break the claim.
func TestCasesByImage(t *testing.T) {
	cases := func(n int64) [][]properties.Question {
		text := "a != n || b != n"
		return [][]properties.Question{{
			{Weights: []int64{1, 0}, Bound: n - 1, Text: text}, {Weights: []int64{-1, 0}, Bound: -n - 1, Text: text},
			{Weights: []int64{0, 1}, Bound: n - 1, Text: text}, {Weights: []int64{0, -1}, Bound: -n - 1, Text: text},
		}}
	}
	build := func(n int64, options ...pds.Option) *Result {
		rule := &properties.ResolvedRule{Name: "r", Stays: true, Each: &properties.EachParam{Name: "m"}, Counts: []string{"a", "b"},
			Claims: []properties.Claim{{Name: "apart", Point: properties.AtEnd, Text: "a != n || b != n", Cases: cases(n)}}}
		b := pds.NewBuilder("a", "b")
		s := start(b, "F", "d.mu", "")
		b.Step("run", "F", "run", "F", append(options, pds.Adds("a", 6), pds.Adds("b", 2), label("event", 2, "six"))...)
		b.Step("run", "F", "run", "F", pds.Adds("a", 2), pds.Adds("b", 6), label("event", 3, "two"))
		b.Step("run", "F", "run", "F", pds.Adds("a", 7), pds.Adds("b", 9), label("event", 4, "odd"))
		b.Pop("run", "F", "ok", label("return", 5, "return"))
		return judgeOne(t, rule, newFake(t, b, s))
	}
	// a == b == 16: twice each of the first two. 14 lies between vectors of paths.
	want(t, build(14), "F apart holds")
	r := build(16)
	want(t, r, "F apart broken")
	if got := r.Findings[0].Counts; got[0] != 16 || got[1] != 16 {
		t.Errorf("counts %v", got)
	}
	// Where the only path to it meets a doubt, nothing is decided.
	want(t, build(16, pds.Doubts("which"), pds.DoubtAdds("a", 1)), "F apart undecided")
}
