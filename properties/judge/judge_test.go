package judge

import (
	"testing"

	"pathtally/pds"
	"pathtally/properties"
)

func TestWalkthrough(t *testing.T) {
	b, s := book()
	r := judgeOne(t, mutex(), newFake(t, b, s))
	want(t, r, "Book balanced broken", "Book not-early holds", "Book not-twice holds")
	if len(r.Findings) != 1 {
		t.Fatalf("%d findings, want 1: %+v", len(r.Findings), r.Findings)
	}
	f := r.Findings[0]
	for _, c := range []struct{ what, got, want string }{
		{"message", f.Message, "Book can return with d.mu still taken"},
		{"cause", f.CauseText, "this return passes by d.mu.Unlock() in line 59"},
		{"right way", f.OtherWay, "urgent is false, in line 55"},
		{"verb", f.OpenedVerb, "taken at"},
		{"fact", f.Fact, "1 == 0 is false"},
		{"cause function", f.Cause.Function, "settle"},
	} {
		if c.got != c.want {
			t.Errorf("%s: %q, want %q", c.what, c.got, c.want)
		}
	}
	if f.Cause.Place.Line != 57 || f.Opened.Place.Line != 42 {
		t.Errorf("cause in line %d, opened in line %d; want 57 and 42", f.Cause.Place.Line, f.Opened.Place.Line)
	}
	if n := len(f.Path); n != 7 || f.Path[5].Depth != 1 || f.Path[6].Depth != 0 {
		t.Errorf("path of %d steps: %+v", n, f.Path)
	}
}

// A path that a finding prints must break its claim only because of what it
// counts: with one event switched off, its replay must fail.
func TestConfirmRefusesAPathWithoutItsEvent(t *testing.T) {
	b, s := book()
	m := newFake(t, b, s)
	rule := mutex()
	j := newJudge(rule, m, newEngine(m, DefaultSteps), Options{})
	c := &rule.Claims[0]
	a := j.asks(&j.starts[0], c, c.Questions[0].Weights)
	choices, stop := j.s.witness(a, 0)
	if stop != nil || choices == nil {
		t.Fatalf("no witness: %v", stop)
	}
	j.confirm(&j.starts[0], c, a, 0, choices)

	j.m = deaf{m}
	defer func() {
		p := recover()
		if _, ok := p.(*Bug); !ok {
			t.Errorf("a path without its event was confirmed: %v", p)
		}
	}()
	j.confirm(&j.starts[0], c, a, 0, choices)
}

// deaf counts nothing.
type deaf struct{ *fake }

func (d deaf) Vector(pds.EffectID) []int64 { return make([]int64, d.NumCounts()) }

func TestPairExcusesBoth(t *testing.T) {
	build := func(withUnlock bool) *Result {
		b := pds.NewBuilder("taken", "released")
		lock := start(b, "Lock", "d.mu", "berth.Desk.mu")
		b.Pop("run", "Lock", "ok", taken(10)...)
		starts := []properties.Start{lock}
		if withUnlock {
			starts = append(starts, start(b, "Unlock", "d.mu", "berth.Desk.mu"))
			b.Pop("run", "Unlock", "ok", released(14)...)
		}
		return judgeOne(t, mutex(), newFake(t, b, starts...))
	}
	r := build(true)
	want(t, r, "Lock balanced holds", "Unlock balanced holds", "Unlock not-early holds")
	if len(r.Assumptions) != 1 || r.Assumptions[0].Text != "Lock and Unlock are called as a pair" {
		t.Errorf("assumptions: %+v", r.Assumptions)
	}
	want(t, build(false), "Lock balanced broken")
}

func TestSettlerAloneIsBroken(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	s := start(b, "Unlock", "d.mu", "berth.Desk.mu")
	b.Pop("run", "Unlock", "ok", released(14)...)
	r := judgeOne(t, mutex(), newFake(t, b, s))
	want(t, r, "Unlock balanced broken", "Unlock not-early broken", "Unlock not-twice holds")
}

func TestTryLenderLendsOnSuccessOnly(t *testing.T) {
	build := func(yes, no []pds.Option) *Result {
		b := pds.NewBuilder("taken", "released")
		try, unlock := start(b, "Try", "d.mu", "berth.Desk.mu"), start(b, "Unlock", "d.mu", "berth.Desk.mu")
		b.Pop("run", "Try", "yes", yes...)
		b.Pop("run", "Try", "no", no...)
		b.Pop("run", "Unlock", "ok", released(14)...)
		return judgeOne(t, mutex(), newFake(t, b, try, unlock))
	}
	want(t, build(taken(10), nil), "Try balanced holds", "Unlock balanced holds")
	// A surplus on failure and none on success is never a contract.
	want(t, build(nil, taken(10)), "Try balanced broken", "Unlock balanced broken")
}

func TestLenderKeepsNothingOnError(t *testing.T) {
	build := func(exit string) *Result {
		b := pds.NewBuilder("taken", "released")
		take, leave := start(b, "Take", "d.mu", "berth.Desk.mu"), start(b, "Leave", "d.mu", "berth.Desk.mu")
		b.Step("run", "Take", "run", "Take:2", taken(10)...)
		b.Pop("run", "Take:2", exit, label("return", 11, "return errFull"))
		b.Pop("run", "Take:2", "ok", label("return", 12, "return nil"))
		b.Pop("run", "Leave", "err", released(14)...)
		return judgeOne(t, mutex(), newFake(t, b, take, leave))
	}
	want(t, build("ok"), "Take balanced holds", "Leave balanced holds")
	want(t, build("err"), "Take balanced broken", "Leave balanced broken")
}

func TestSettlerThatTakesIsNone(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	lock, swap := start(b, "Lock", "d.mu", "berth.Desk.mu"), start(b, "Swap", "d.mu", "berth.Desk.mu")
	b.Pop("run", "Lock", "ok", taken(10)...)
	b.Step("run", "Swap", "run", "Swap:2", released(20)...)
	b.Step("run", "Swap:2", "run", "Swap:3", taken(21)...)
	b.Step("run", "Swap:3", "run", "Swap:4", released(22)...)
	b.Pop("run", "Swap:4", "ok")
	want(t, judgeOne(t, mutex(), newFake(t, b, lock, swap)), "Lock balanced broken", "Swap balanced broken")
}

func TestCallerHolds(t *testing.T) {
	build := func(events ...[]pds.Option) *Result {
		b := pds.NewBuilder("taken", "released")
		s := start(b, "wait", "c.mu", "berth.Cond.mu")
		at := "wait"
		for i, e := range events {
			next := "wait:" + string(rune('a'+i))
			b.Step("run", at, "run", next, e...)
			at = next
		}
		b.Pop("run", at, "ok")
		return judgeOne(t, mutex(), newFake(t, b, s))
	}
	want(t, build(released(5), taken(7)), "wait balanced holds", "wait not-early holds", "wait not-twice holds")
	// Two releases need two holds: one caller holds one.
	want(t, build(released(5), released(6), taken(7), taken(8)), "wait not-early broken")
	// The first event is a take: no caller is meant to hold.
	want(t, build(taken(4), released(5), released(6), taken(7)), "wait not-early broken")
}

func TestTwoCausesAreTwoFindings(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	s := start(b, "Book", "d.mu", "berth.Desk.mu")
	b.Step("run", "Book", "run", "Book:3", taken(2)...)
	b.Step("run", "Book:3", "run", "Book:4", label("branch", 3, "a is true"))
	b.Step("run", "Book:3", "run", "Book:5", label("branch", 3, "a is false"))
	b.Pop("run", "Book:4", "ok", label("return", 4, "return"))
	b.Step("run", "Book:5", "run", "Book:6", label("branch", 5, "b is true"))
	b.Step("run", "Book:5", "run", "Book:7", label("branch", 5, "b is false"))
	b.Pop("run", "Book:6", "ok", label("return", 6, "return"))
	b.Pop("run", "Book:7", "ok", released(7)...)
	r := judgeOne(t, mutex(), newFake(t, b, s))
	var lines []int
	for _, f := range r.Findings {
		lines = append(lines, f.Cause.Place.Line)
	}
	if len(lines) != 2 || lines[0] != 4 || lines[1] != 6 {
		t.Errorf("causes in lines %v, want 4 and 6", lines)
	}
	if r.Tally.Broken != 1 {
		t.Errorf("%d questions broken, want 1", r.Tally.Broken)
	}
	if r.Findings[0].Fingerprint == r.Findings[1].Fingerprint {
		t.Error("two findings have one fingerprint")
	}
}

func TestFingerprintHasNoLines(t *testing.T) {
	print := func(shift int) string {
		b := pds.NewBuilder("taken", "released")
		s := start(b, "Book", "d.mu", "berth.Desk.mu")
		b.Step("run", "Book", "run", "Book:3", taken(2+shift)...)
		b.Pop("run", "Book:3", "ok", label("return", 4+shift, "return"))
		return judgeOne(t, mutex(), newFake(t, b, s)).Findings[0].Fingerprint
	}
	if print(0) != print(40) {
		t.Error("moved code has another fingerprint")
	}
}

// A wrapper that lends is passed over: the caller that forgets is to blame.
func TestBlameClimbsOverALender(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	s := start(b, "Book", "d.mu", "berth.Desk.mu")
	b.Push("run", "Book", "run", "lock", "Book:3", label("call", 2, "d.lock()"))
	b.Pop("run", "lock", "ok", taken(20)...)
	b.Step("ok", "Book:3", "run", "Book:4", label("branch", 3, "bad is true"))
	b.Step("ok", "Book:3", "run", "Book:5", label("branch", 3, "bad is false"))
	b.Pop("run", "Book:4", "ok", label("return", 4, "return"))
	b.Push("run", "Book:5", "run", "unlock", "Book:6", label("call", 5, "d.unlock()"))
	b.Pop("run", "unlock", "ok", released(24)...)
	b.Pop("ok", "Book:6", "ok", label("return", 6, "return"))
	r := judgeOne(t, mutex(), newFake(t, b, s))
	if len(r.Findings) != 1 {
		t.Fatalf("%d findings", len(r.Findings))
	}
	f := r.Findings[0]
	if f.Blame.Name != "Book" || f.Opened.Function != "lock" || f.Cause.Place.Line != 4 {
		t.Errorf("blame %s, opened in %s, cause in line %d; want Book, lock, 4", f.Blame.Name, f.Opened.Function, f.Cause.Place.Line)
	}
	if f.CauseText != "this return passes by d.mu.Unlock() in line 24" {
		t.Errorf("cause: %q", f.CauseText)
	}
}

// A callee that itself forgets on one path is to blame, not its caller.
func TestBlameStaysInTheUnevenCallee(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	s := start(b, "Serve", "d.mu", "berth.Desk.mu")
	b.Push("run", "Serve", "run", "Book", "Serve:3", label("call", 2, "d.Book()"))
	b.Pop("ok", "Serve:3", "ok", label("return", 3, "return"))
	b.Step("run", "Book", "run", "Book:3", taken(12)...)
	b.Step("run", "Book:3", "run", "Book:4", label("branch", 13, "a is true"))
	b.Step("run", "Book:3", "run", "Book:5", label("branch", 13, "a is false"))
	b.Pop("run", "Book:4", "ok", label("return", 14, "return"))
	b.Pop("run", "Book:5", "ok", released(15)...)
	r := judgeOne(t, mutex(), newFake(t, b, s))
	if len(r.Findings) != 1 || r.Findings[0].Blame.Name != "Book" || r.Findings[0].Cause.Place.Line != 14 {
		t.Errorf("findings: %+v", r.Findings)
	}
	if r.Findings[0].Root.Name != "Serve" {
		t.Errorf("root %s, want Serve", r.Findings[0].Root.Name)
	}
}

func TestStartsWithOneCauseMerge(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	one, two := start(b, "Serve", "d.mu", "berth.Desk.mu"), start(b, "LongServe", "d.mu", "berth.Desk.mu")
	b.Push("run", "Serve", "run", "Book", "Serve:3", label("call", 2, "d.Book()"))
	b.Pop("ok", "Serve:3", "ok", label("return", 3, "return"))
	b.Step("run", "LongServe", "run", "LongServe:2", label("branch", 51, "x is true"))
	b.Push("run", "LongServe:2", "run", "Book", "LongServe:3", label("call", 52, "d.Book()"))
	b.Pop("ok", "LongServe:3", "ok", label("return", 53, "return"))
	b.Step("run", "Book", "run", "Book:3", taken(12)...)
	b.Step("run", "Book:3", "run", "Book:4", label("branch", 13, "a is true"))
	b.Step("run", "Book:3", "run", "Book:5", label("branch", 13, "a is false"))
	b.Pop("run", "Book:4", "ok", label("return", 14, "return"))
	b.Pop("run", "Book:5", "ok", released(15)...)
	r := judgeOne(t, mutex(), newFake(t, b, two, one))
	if len(r.Findings) != 1 || r.Findings[0].Starts != 2 || r.Findings[0].Root.Name != "Serve" {
		t.Errorf("findings: %+v", r.Findings)
	}
	if r.Tally.Broken != 2 {
		t.Errorf("%d broken, want 2 questions", r.Tally.Broken)
	}
}

func TestDoubtThatMendsIsUndecided(t *testing.T) {
	build := func(mends bool) *Result {
		b := pds.NewBuilder("taken", "released")
		s := start(b, "Book", "d.mu", "berth.Desk.mu")
		b.Step("run", "Book", "run", "Book:3", taken(2)...)
		opts := []pds.Option{pds.Doubts("alias"), label("event", 3, "e.mu.Unlock()")}
		if mends {
			opts = append(opts, pds.DoubtAdds("released", 1))
		} else {
			opts = append(opts, pds.DoubtAdds("taken", 1))
		}
		b.Step("run", "Book:3", "run", "Book:4", opts...)
		b.Pop("run", "Book:4", "ok", label("return", 4, "return"))
		return judgeOne(t, mutex(), newFake(t, b, s))
	}
	r := build(true)
	want(t, r, "Book balanced undecided")
	if len(r.Open) != 1 || r.Open[0].Doubt.Kind != "alias" || r.Open[0].Place.Line != 77 {
		t.Errorf("undecided: %+v", r.Open)
	}
	want(t, build(false), "Book balanced broken")
}

func TestBudgetEndsUndecided(t *testing.T) {
	b, s := book()
	m := newFake(t, b, s)
	r := Merge([]*RuleResult{Judge(mutex(), m, Options{Steps: 2})})
	if r.Tally.Undecided != 3 || r.Tally.Broken != 0 || r.Tally.Holds != 0 {
		t.Errorf("tally with a budget of 2 steps: %+v", r.Tally)
	}
	if len(r.Open) != 3 || r.Open[0].Steps != 8 {
		t.Errorf("open: %+v", r.Open)
	}
}

func TestBornUnbornOutsideAndLoss(t *testing.T) {
	file := &properties.ResolvedRule{Name: "file", Moves: true, Each: &properties.EachParam{Name: "f"}, Counts: []string{"opened", "closed"},
		Claims: []properties.Claim{{Name: "closed", Point: properties.AtReturn, Text: "opened <= closed", Linear: true,
			Questions: []properties.Question{{Weights: []int64{1, -1}, Text: "opened <= closed"}}}}}
	build := func(exit string) *Result {
		b := pds.NewBuilder("opened", "closed")
		s := start(b, "Load", "", "")
		s.Born = true
		b.Pop("run", "Load", "unborn")
		b.Step("run", "Load", "run", "Load:2", counts("opened", 2, "os.Open(name)")...)
		if exit == "loss" {
			b.Stop("run", "Load:2", pds.Marked("loss"))
		} else {
			b.Pop("run", "Load:2", exit, label("return", 3, "return"))
		}
		return judgeOne(t, file, newFake(t, b, s))
	}
	want(t, build("ok"), "Load closed broken")
	want(t, build("ok+outside"), "Load closed holds")
	want(t, build("panic"), "Load closed holds")
	r := build("loss")
	want(t, r, "Load closed broken")
	if got := r.Findings[0].Message; got != "Load can lose its f opened but not closed" {
		t.Errorf("message %q", got)
	}
}

func TestPanicIsAnEndOnlyIfRecovered(t *testing.T) {
	build := func(recovered bool) *Result {
		b := pds.NewBuilder("taken", "released")
		s := start(b, "Serve", "d.mu", "berth.Desk.mu")
		s.Recovered = recovered
		b.Step("run", "Serve", "run", "Serve:3", taken(2)...)
		b.Pop("run", "Serve:3", "panic", label("panic", 3, "panic(x)"))
		b.Step("run", "Serve:3", "run", "Serve:4", label("branch", 3, "x is nil"))
		b.Pop("run", "Serve:4", "ok", released(4)...)
		return judgeOne(t, mutex(), newFake(t, b, s))
	}
	want(t, build(false), "Serve balanced holds")
	r := build(true)
	want(t, r, "Serve balanced broken")
	if got := r.Findings[0]; got.Message != "Serve can panic with d.mu still taken" || got.CauseText != "this panic passes by d.mu.Unlock() in line 4" {
		t.Errorf("%q, %q", got.Message, got.CauseText)
	}
}

func TestBeforeAnEvent(t *testing.T) {
	rule := &properties.ResolvedRule{Name: "asked-first", Counts: []string{"asked", "sent"},
		Claims: []properties.Claim{{Name: "asked", Point: properties.Before, Mark: 2, Text: "sent < asked", Linear: true,
			Questions: []properties.Question{{Weights: []int64{-1, 1}, Bound: -1, Text: "sent < asked"}}}}}
	build := func(asks bool) *Result {
		b := pds.NewBuilder("asked", "sent")
		if m, _ := b.Mark("send"); m != 2 {
			t.Fatalf("mark %d", m)
		}
		s := start(b, "Run", "", "")
		at := "Run"
		if asks {
			b.Step("run", "Run", "run", "Run:2", counts("asked", 2, "l.Wait()")...)
			at = "Run:2"
		}
		b.Pop("run", at, "ok", append(counts("sent", 3, "c.Send()"), pds.Marked("send"))...)
		return judgeOne(t, rule, newFake(t, b, s))
	}
	want(t, build(true), "Run asked holds")
	r := build(false)
	want(t, r, "Run asked broken")
	if f := r.Findings[0]; f.Message != "Run can come to c.Send() while sent < asked is false" || f.Cause.Place.Line != 3 || f.Fact != "0 < 0 is false" {
		t.Errorf("%q in line %d, %q", f.Message, f.Cause.Place.Line, f.Fact)
	}
}

func TestAlwaysWithoutAnEndIsJudged(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	s := start(b, "serve", "mu", "global berth.mu")
	b.Step("run", "serve", "run", "serve:2", taken(2)...)
	b.Step("run", "serve:2", "run", "serve")
	r := judgeOne(t, mutex(), newFake(t, b, s))
	want(t, r, "serve balanced holds", "serve not-twice broken")
	for _, q := range r.Questions {
		if q.Claim == "balanced" && q.Grounds != "no path comes to this checkpoint" {
			t.Errorf("grounds: %q", q.Grounds)
		}
	}
}

func TestClaimThatNeedsTheImageIsUndecided(t *testing.T) {
	b, s := book()
	rule := mutex()
	rule.Claims = []properties.Claim{{Name: "odd", Point: properties.AtEnd, Text: "taken != released"}}
	want(t, judgeOne(t, rule, newFake(t, b, s)), "Book odd undecided")
}

func TestInstantiate(t *testing.T) {
	names := []string{"starts-ok", "stops", "n"}
	for _, c := range []struct{ in, want string }{
		{"starts-ok <= stops", "7 <= -2"},
		{"starts-ok - stops <= 10", "7 - -2 <= 10"},
		{"n*2 == 4", "3*2 == 4"},
		{"n-1 >= 0", "3-1 >= 0"},
	} {
		if got, ok := instantiate(c.in, names, []int64{7, -2, 3}); !ok || got != c.want {
			t.Errorf("%q: %q %v, want %q", c.in, got, ok, c.want)
		}
	}
	if got, ok := instantiate("n <= cap(sem)", names, []int64{7, -2, 3}); ok {
		t.Errorf("a capacity became %q", got)
	}
}

func TestSwitches(t *testing.T) {
	for _, c := range []struct {
		state    properties.State
		broken   int
		advice   int
		findings int
		asked    int
	}{{properties.On, 1, 0, 1, 3}, {properties.Softened, 1, 1, 1, 3}, {properties.Off, 0, 0, 0, 2}} {
		b, s := book()
		r := Merge([]*RuleResult{Judge(mutex(), newFake(t, b, s), Options{State: func(claim, pkg string) properties.State {
			if claim == "balanced" && pkg == "example/berth" {
				return c.state
			}
			return properties.On
		}})})
		if r.Tally.Broken != c.broken || r.Tally.Advice != c.advice || len(r.Findings) != c.findings || r.Tally.Questions != c.asked {
			t.Errorf("state %d: %+v, %d findings", c.state, r.Tally, len(r.Findings))
		}
	}
}

// not-mixed is broken where both differences are uneven at one moment.
func TestCases(t *testing.T) {
	q := func(w ...int64) properties.Question {
		return properties.Question{Weights: w, Text: "w - wu == 0 || r - ru == 0"}
	}
	rule := &properties.ResolvedRule{Name: "rw", Stays: true, Each: &properties.EachParam{Name: "m"}, Counts: []string{"w", "wu", "r", "ru"},
		Claims: []properties.Claim{{Name: "not-mixed", Point: properties.Always, Text: "w - wu == 0 || r - ru == 0", Cases: [][]properties.Question{
			{q(1, -1, 0, 0), q(0, 0, 1, -1)}, {q(1, -1, 0, 0), q(0, 0, -1, 1)}, {q(-1, 1, 0, 0), q(0, 0, 1, -1)}, {q(-1, 1, 0, 0), q(0, 0, -1, 1)}}}}}
	build := func(order ...string) *Result {
		b := pds.NewBuilder("w", "wu", "r", "ru")
		s := start(b, "F", "d.mu", "")
		at := "F"
		for i, c := range order {
			next := "F:" + string(rune('a'+i))
			b.Step("run", at, "run", next, counts(c, i+2, c)...)
			at = next
		}
		b.Pop("run", at, "ok")
		return judgeOne(t, rule, newFake(t, b, s))
	}
	want(t, build("w", "wu", "r", "ru"), "F not-mixed holds")
	r := build("w", "r", "ru", "wu")
	want(t, r, "F not-mixed broken")
	if f := r.Findings[0]; f.Cause.Place.Line != 3 || f.Fact != "1 - 0 == 0 || 1 - 0 == 0 is false" {
		t.Errorf("cause in line %d, %q", f.Cause.Place.Line, f.Fact)
	}
}

// A callee that fails to open is right: what its caller forgets is no fork of
// the callee's.
func TestCauseIsNotInARightCallee(t *testing.T) {
	file := &properties.ResolvedRule{Name: "file", Moves: true, Each: &properties.EachParam{Name: "f"}, Counts: []string{"opened", "closed"},
		Claims: []properties.Claim{{Name: "closed", Point: properties.AtReturn, Text: "opened <= closed", Linear: true,
			Questions: []properties.Question{{Weights: []int64{1, -1}, Text: "opened <= closed"}}}}}
	b := pds.NewBuilder("opened", "closed")
	s := start(b, "Load", "", "")
	s.Born = true
	b.Push("run", "Load", "run", "open", "Load:3", label("call", 2, "open(name)"))
	b.Step("run", "open", "run", "open:2", counts("opened", 20, "os.Open(name)")...)
	b.Step("run", "open:2", "run", "open:3", label("branch", 21, "bad is true"))
	b.Step("run", "open:2", "run", "open:4", label("branch", 21, "bad is false"))
	b.Pop("run", "open:3", "err", counts("closed", 22, "f.Close()")...)
	b.Pop("run", "open:4", "ok+outside", label("return", 23, "return f, nil"))
	b.Pop("err", "Load:3", "err", label("return", 4, "return err"))
	b.Pop("ok+outside", "Load:3", "ok", label("return", 6, "return nil"))
	r := judgeOne(t, file, newFake(t, b, s))
	if len(r.Findings) != 1 {
		t.Fatalf("%d findings", len(r.Findings))
	}
	if f := r.Findings[0]; f.Blame.Name != "Load" || f.Cause.Place.Line != 6 || f.CauseText != "this return leaves it opened" {
		t.Errorf("blame %s, cause in line %d, %q", f.Blame.Name, f.Cause.Place.Line, f.CauseText)
	}
}

// A second Lock that is one too many only because an earlier call has kept the
// lock follows from that call's finding.
func TestSecondLockFollowsFromTheLeak(t *testing.T) {
	b := pds.NewBuilder("taken", "released")
	s := start(b, "Gate", "d.mu", "berth.Desk.mu")
	b.Push("run", "Gate", "run", "Apply", "Gate:3", label("call", 2, "d.Apply()"))
	b.Step("run", "Apply", "run", "Apply:2", taken(20)...)
	b.Step("run", "Apply:2", "run", "Apply:3", label("branch", 21, "bad is true"))
	b.Step("run", "Apply:2", "run", "Apply:4", label("branch", 21, "bad is false"))
	b.Pop("run", "Apply:3", "ok", label("return", 22, "return"))
	b.Pop("run", "Apply:4", "ok", released(24)...)
	b.Push("ok", "Gate:3", "run", "State", "Gate:4", label("call", 3, "d.State()"))
	b.Step("run", "State", "run", "State:2", taken(30)...)
	b.Pop("run", "State:2", "ok", released(31)...)
	b.Pop("ok", "Gate:4", "ok", label("return", 4, "return"))
	r := judgeOne(t, mutex(), newFake(t, b, s))
	want(t, r, "Gate balanced broken", "Gate not-twice broken", "Gate not-early holds")
	if len(r.Findings) != 2 {
		t.Fatalf("%d findings", len(r.Findings))
	}
	twice, leak := &r.Findings[0], &r.Findings[1]
	if twice.Claim != "not-twice" || twice.Follows != leak.Fingerprint || leak.Follows != "" {
		t.Errorf("%s follows %q, %s follows %q", twice.Claim, twice.Follows, leak.Claim, leak.Follows)
	}
}
