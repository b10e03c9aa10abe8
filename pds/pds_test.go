package pds

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// drain is the recursive function of the package comment.
func drain() *Table {
	b := NewBuilder("taken", "released")
	b.Start("run", "drain")
	b.Step("run", "drain", "run", "unlock", Adds("taken", 1), Labelled("mu.Lock()"))
	b.Step("run", "unlock", "run", "fork", Adds("released", 1), Labelled(`mu.Unlock() // "<&>"`))
	b.Pop("run", "fork", "back")
	b.Push("run", "fork", "run", "drain", "leave")
	b.Pop("back", "leave", "back")
	return b.Table()
}

// all has every feature of the form.
func all() *Table {
	b := NewBuilder("a", "b b")
	b.Start("p", "x").Start("q", "y")
	b.Step("p", "x", "q", "y", Adds("a", math.MaxInt64), Adds("b b", math.MinInt64), Doubts("d"), DoubtAdds("a", -1))
	b.Pop("q", "y", "p", Doubts("e"), Marked("here"), Marked("there"))
	b.Push("q", "y", "p", "x", "y", Spawns("p", "x"), Spawns("q", "y"))
	b.Stop("p", "x", Marked(LossMark), Adds("a", 2))
	b.Stop("q", "unused")
	return b.Table()
}

func TestString(t *testing.T) {
	want := `run drain -> run unlock [taken 1]
run unlock -> run fork [released 1]
run fork -> back
run fork -> run drain, leave
back leave -> back
`
	if got := drain().String(); got != want {
		t.Errorf("got\n%swant\n%s", got, want)
	}
}

// guarded is a system with parameters: each lock of key counts if it is the chosen
// one, and adds what is asked for.
func guarded() *Table {
	b := NewBuilder("taken", "asked")
	params := []Variable{{"chosen", String}, {"limit", Int}}
	data := []Variable{{"key", String}, {"n", Int}, {"fresh", Bool}, {"who", Ref}}
	where, err := ParseGuard(`key == chosen && !fresh => prefix(key, "a\n") || n % 3 == 1`, params, data)
	if err != nil {
		panic(err)
	}
	b.Parametric(Data{Parameters: params, Events: []Event{{"lock", data}, {"idle", nil}},
		Predicates: []Predicate{{Count: 0, Event: 0, Where: where, By: -1}, {Count: 1, Event: 0, By: 1}}})
	b.Start("q", "x")
	b.Pop("q", "x", "q").Pop("q", "x", "r").Guarded(b.Head("q", "x"), "lock", "n >= 1 && n <= limit && who != nil")
	b.Pop("q", "x", "s").Guarded(b.Head("q", "x"), "", "limit > 3")
	return b.Table()
}

func TestRoundTrip(t *testing.T) {
	for _, sys := range []*Table{drain(), all(), guarded(), NewBuilder().Table()} {
		if err := sys.Sanity(); err != nil {
			t.Fatal(err)
		}
		var out bytes.Buffer
		if err := sys.WriteJSON(&out); err != nil {
			t.Fatal(err)
		}
		back, err := Read(bytes.NewReader(out.Bytes()))
		if err != nil {
			t.Fatalf("%v\n%s", err, out.String())
		}
		if back.String() != sys.String() {
			t.Errorf("got\n%swant\n%s", back, sys)
		}
		var again bytes.Buffer
		if err := back.WriteJSON(&again); err != nil {
			t.Fatal(err)
		}
		if again.String() != out.String() {
			t.Errorf("written again:\n%swant\n%s", again.String(), out.String())
		}
		if fmt.Sprint(back.Starts(), back.Counts()) != fmt.Sprint(sys.Starts(), sys.Counts()) {
			t.Errorf("starts or counts: %v %v", back.Starts(), back.Counts())
		}
	}
}

func TestGoldenJSON(t *testing.T) {
	golden := filepath.Join("testdata", "drain.json")
	want, err := os.ReadFile(golden)
	if err != nil {
		t.Fatal(err)
	}
	var out bytes.Buffer
	if err := drain().WriteJSON(&out); err != nil {
		t.Fatal(err)
	}
	if out.String() != string(want) {
		t.Errorf("got\n%swant (%s)\n%s", out.String(), golden, want)
	}
}

func TestReadErrors(t *testing.T) {
	const head = `{"format": "pathtally-system", "version": 1, "counts": ["a"], "states": ["p"], "symbols": ["x"], `
	const events = `"events": [{"name": "e", "data": [{"name": "n", "sort": "int"}, {"name": "s", "sort": "string"}]}], `
	rule := func(s string) string {
		return head + "\n" + `"rules": [{"from": {"state": "p", "symbol": "x"}, ` + s + `}]}`
	}
	for _, c := range []struct{ in, want string }{
		{``, "1:1: the text ends too early"},
		{`{`, "1:2: the text ends too early"},
		{`[]`, "1:1: is a list, must be an object"},
		{`{"a" 1}`, "invalid character '1' after object key"},
		{`{}`, "no format or no version"},
		{`{"format": "other"}`, `1:12: format: is "other"`},
		{`{"format": "pathtally-system", "version": 2}`, "version: is 2, must be 1"},
		{`{"format": "pathtally-system", "format": "pathtally-system"}`, "format: comes twice"},
		{head + `"more": 1}`, "more: unknown member"},
		{head + `"rules": []} x`, "behind the system"},
		{head + `"rules": []} {}`, "text behind the system"},
		{head + `"rules": {}}`, "rules: is an object, must be a list"},
		{head + `"starts": [{"state": "p"}]}`, "starts[0]: needs a state and a symbol"},
		{head + `"starts": [{"state": "z", "symbol": "x"}]}`, `starts[0].state: state "z" is not declared`},
		{head + `"parameters": [{"name": "n", "sort": "number"}]}`, `parameters[0].sort: is "number", must be ref, int, string or bool`},
		{head + `"parameters": [{"name": "n"}]}`, `parameters[0]: needs "name" and "sort"`},
		{head + `"parameters": [{"name": "n-m", "sort": "int"}]}`, `parameters[0].name: "n-m" is not a name`},
		{head + `"parameters": [{"name": "n", "sort": "int"}, {"name": "n", "sort": "int"}]}`, `parameters[1].name: "n" comes twice`},
		{head + `"predicates": [1]}`, "predicates[0]: is a number, must be an object"},
		{head + `"predicates": [{"count": "a", "event": "e"}]}`, `predicates[0].event: event "e" is not declared`},
		{head + events + `"predicates": [{"count": "b", "event": "e"}]}`, `predicates[0].count: count "b" is not declared`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "where": "n <"}]}`, `predicates[0].where: at byte 3: the formula ends too early`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "where": "m == 1"}]}`, `"m" is no parameter and no datum`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "where": "s < 1"}]}`, `at byte 0: has sort string, must be int`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "where": "s == n"}]}`, `at byte 5: has sort int, the left side has string`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "where": "n == 9223372036854775808"}]}`, `does not fit into 64 bits`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "where": "n * n == 1"}]}`, `one side of * must be a number`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "where": "n % 0 == 1"}]}`, `must be a positive number`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "where": "matches(s, \"(\")"}]}`, `missing closing )`},
		{head + events + `"predicates": [{"count": "a", "event": "e", "by": "s"}]}`, `predicates[0].by: "s" has sort string, must be int`},
		{head + events + `"rules": [{"from": {"state": "p", "symbol": "x"}, "kind": "stop", "guard": "n > 1"}]}`, `rules[0].guard: at byte 0: "n" is no parameter`},
		{rule(`"kind": "step", "state": "p", "top": "w"`), `2:88: rules[0].top: symbol "w" is not declared`},
		{rule(`"kind": "step", "state": "w", "top": "x"`), `rules[0].state: state "w" is not declared`},
		{rule(`"kind": "jump"`), `rules[0].kind: is "jump", must be stop, pop, step or push`},
		{rule(`"kind": "pop"`), `rules[0]: pop needs "state"`},
		{rule(`"kind": "pop", "state": "p", "top": "x"`), "rules[0].top: pop has none"},
		{rule(`"kind": "stop", "effect": {"a": 9223372036854775808}`), "rules[0].effect.a: 9223372036854775808 does not fit into 64 bits"},
		{rule(`"kind": "stop", "effect": {"a": 1.5}`), "rules[0].effect.a: 1.5 is not an integer"},
		{rule(`"kind": "stop", "effect": {"a": "1"}`), "rules[0].effect.a: is a string, must be a number"},
		{rule(`"kind": "stop", "effect": {"b": 1}`), `rules[0].effect.b: count "b" is not declared`},
		{rule(`"kind": "stop", "effect": {"a": 1, "a": 2}`), "rules[0].effect.a: comes twice"},
		{rule(`"kind": "stop", "doubtEffect": {"a": 1}`), "rules[0].doubtEffect: without a doubt"},
		{rule(`"kind": "pop", "state": "p", "marks": ["loss"]`), `rules[0].marks: "loss" belongs to a stop`},
		{rule(`"kind": "stop", "spawn": [{"state": "p", "symbol": "y"}]`), `rules[0].spawn[0].symbol: symbol "y" is not declared`},
		{rule(`"kind": "stop", "guard": {"op": "=="}`), "rules[0].guard: is an object, must be a string"},
		{rule(`"kind": "stop", "event": "x"`), `rules[0].event: event "x" is not declared`},
		{rule(`"kind": "stop", "colour": 1`), "rules[0].colour: unknown member"},
		{head + `"rules": [{"kind": "stop"}]}`, `rules[0]: needs "from" and "kind"`},
		{`{"states": ["p", "q", "p"]}`, `states[2]: "p" is states[0] already`},
		{`{"states": [""]}`, "states[0]: is empty"},
		{strings.Repeat(`[`, 1000), "nested deeper"},
	} {
		_, err := Read(strings.NewReader(c.in))
		var f *FormatError
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s\n got %v\nwant %s", c.in, err, c.want)
		} else if !errors.As(err, &f) || f.Line < 1 || f.Column < 1 {
			t.Errorf("%s: %T without a place", c.in, err)
		}
	}
	for _, s := range []string{"parameters", "predicates"} {
		if _, err := Read(strings.NewReader(head + `"` + s + `": []}`)); err != nil {
			t.Errorf("empty %s: %v", s, err)
		}
	}
}

func TestReplay(t *testing.T) {
	sys := drain()
	h := sys.Starts()[0]
	run, err := Replay(sys, h, Choices(0, 0, 1, 0, 0, 0, 0))
	if err != nil {
		t.Fatal(err)
	}
	if run.End != EndEmpty || run.State != sys.State("back") || fmt.Sprint(run.Total) != "[2 2]" {
		t.Errorf("%v in %d with %v", run.End, run.State, run.Total)
	}
	var depths, counts []string
	for _, c := range run.Configs {
		depths = append(depths, fmt.Sprint(c.Depth))
		counts = append(counts, fmt.Sprint(c.Counts))
	}
	if got := strings.Join(depths, " "); got != "1 1 1 2 2 2 1 0" {
		t.Errorf("depths %s", got)
	}
	if got := strings.Join(counts, " "); got != "[0 0] [1 0] [1 1] [1 1] [2 1] [2 2] [2 2] [2 2]" {
		t.Errorf("counts %s", got)
	}
	for _, c := range []struct {
		rules []int
		want  string
	}{
		{[]int{1}, "step 0 at state 1, symbol 1: no rule 1 among 1"},
		{[]int{-1}, "no rule -1"},
		{[]int{0, 0, 0, 0}, "step 3 at state 2, symbol 0: the stack is empty"},
	} {
		if _, err := Replay(sys, h, Choices(c.rules...)); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%v: %v, want %s", c.rules, err, c.want)
		}
	}
	if _, err := Replay(sys, h, []Choice{{Doubt: true}}); err == nil || !strings.Contains(err.Error(), "carries no doubt") {
		t.Errorf("doubt: %v", err)
	}
	if _, err := Replay(sys, h, []Choice{{Spawned: make([][]Choice, 1)}}); err == nil || !strings.Contains(err.Error(), "spawned") {
		t.Errorf("spawned: %v", err)
	}
}

func TestReplayAll(t *testing.T) {
	sys := all()
	// The step's doubt is taken; the push spawns two runs, the second of which does
	// not run; the spawned one stops with its loss.
	run, err := Replay(sys, sys.Starts()[0], []Choice{
		{Rule: 0, Doubt: true},
		{Rule: 1, Spawned: [][]Choice{{{Rule: 1}}, nil}},
		{Rule: 1},
	})
	if err != nil {
		t.Fatal(err)
	}
	if run.End != EndStop || fmt.Sprint(run.Own, run.Total) != "[1 0] [3 0]" {
		t.Errorf("%v, own %v, total %v", run.End, run.Own, run.Total)
	}
	if sub := run.Configs[1].Spawned; len(sub) != 2 || sub[0].End != EndStop || sub[1].End != EndMiddle {
		t.Errorf("spawned %+v", sub)
	}
	if last := run.Configs[len(run.Configs)-1]; last.Depth != 2 {
		t.Errorf("depth %d at the stop", last.Depth)
	}
	_, err = Replay(sys, sys.Starts()[0], []Choice{{Rule: 0}, {Rule: 1}, {Rule: 0}})
	if err == nil || !strings.Contains(err.Error(), "count 0 passes 64 bits") {
		t.Errorf("overflow: %v", err)
	}
	_, err = Replay(sys, sys.Starts()[0], Choices(1, 0))
	if err == nil || !strings.Contains(err.Error(), "ended at a stop") {
		t.Errorf("behind a stop: %v", err)
	}
	_, err = Replay(sys, sys.Starts()[1], []Choice{{Rule: 1, Spawned: [][]Choice{{{Rule: 7}}, nil}}})
	var re *ReplayError
	if !errors.As(err, &re) || !strings.Contains(err.Error(), "step 0, spawned run 0: step 0") {
		t.Errorf("bad spawned run: %v", err)
	}
}

// moody breaks the promises of System on demand.
type moody struct {
	*Table
	bend func(h Head, asked int, rules []Rule) []Rule
	n    int
}

func (m *moody) Rules(h Head, dst []Rule) []Rule {
	m.n++
	return append(dst, m.bend(h, m.n, m.Table.Rules(h, nil))...)
}

func TestSanity(t *testing.T) {
	one := func(f func(r *Rule)) func(Head, int, []Rule) []Rule {
		return func(h Head, _ int, rules []Rule) []Rule {
			if len(rules) > 0 {
				f(&rules[0])
			}
			return rules
		}
	}
	for _, c := range []struct {
		want string
		bend func(Head, int, []Rule) []Rule
	}{
		{"rules, asked again", func(_ Head, n int, rules []Rule) []Rule { return rules[:len(rules)*(n%2)] }},
		{"differs when asked again", func(_ Head, n int, rules []Rule) []Rule {
			rules[0].Label = LabelID(n)
			return rules
		}},
		{"kind 9 does not exist", one(func(r *Rule) { r.Kind = 9 })},
		{"top is 5, must be 0", one(func(r *Rule) { r.Kind, r.Top, r.Below = Pop, 5, 0 })},
		{"state is 0", one(func(r *Rule) { r.Kind, r.State, r.Top = Pop, 0, 0 })},
		{"below is 0", one(func(r *Rule) { r.Kind, r.Below, r.State, r.Top = Push, 0, 1, 1 })},
		{"effect 99: no vector", one(func(r *Rule) { r.Effect = 99 })},
		{"marked as a loss but goes on", one(func(r *Rule) { r.Mark = MarkLoss })},
		{"spawns state 0", one(func(r *Rule) { r.Spawn = []Head{{}} })},
	} {
		sys := drain()
		if err := Sanity(&moody{Table: sys, bend: c.bend}, sys.Heads()); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("got %v, want %s", err, c.want)
		}
	}
	sys := drain()
	if err := Sanity(sys, append(sys.Heads(), Head{})); err == nil {
		t.Error("head 0 passes")
	}
	b := NewBuilder("a")
	b.Add(b.Head("p", "x"), Rule{Kind: Pop, State: 7})
	if err := b.Table().Sanity(); err == nil || !strings.Contains(err.Error(), "not declared") {
		t.Errorf("dangling state: %v", err)
	}
}

func TestExplore(t *testing.T) {
	sys := drain()
	got, ok := Explore(sys, sys.Starts(), 100)
	if !ok {
		t.Fatal("limit")
	}
	if err := got.Sanity(); err != nil {
		t.Fatal(err)
	}
	for _, h := range sys.Heads() {
		if fmt.Sprint(got.Rules(h, nil)) != fmt.Sprint(sys.Rules(h, nil)) && len(got.Rules(h, nil)) != len(sys.Rules(h, nil)) {
			t.Errorf("%v: %v", h, got.Rules(h, nil))
		}
	}
	if len(got.Heads()) != len(sys.Heads()) {
		t.Errorf("%d heads, want %d", len(got.Heads()), len(sys.Heads()))
	}
	if _, ok := Explore(sys, sys.Starts(), 2); ok {
		t.Error("limit 2 was not noticed")
	}
}

func TestDOT(t *testing.T) {
	var out bytes.Buffer
	if err := all().WriteDOT(&out); err != nil {
		t.Fatal(err)
	}
	golden := filepath.Join("testdata", "all.dot")
	want, err := os.ReadFile(golden)
	if err != nil {
		t.Fatal(err)
	}
	if out.String() != string(want) {
		t.Errorf("got\n%s\nwant (%s)\n%s", out.String(), golden, want)
	}
}

func FuzzRead(f *testing.F) {
	for _, sys := range []*Table{drain(), all(), guarded()} {
		var out bytes.Buffer
		if err := sys.WriteJSON(&out); err != nil {
			f.Fatal(err)
		}
		f.Add(out.Bytes())
	}
	f.Add([]byte(`{"format": "pathtally-system", "version": 1, "rules": null}`))
	f.Fuzz(func(t *testing.T, data []byte) {
		sys, err := Read(bytes.NewReader(data))
		if err != nil {
			var fe *FormatError
			if !errors.As(err, &fe) {
				t.Fatalf("%T: %v", err, err)
			}
			return
		}
		if err := sys.Sanity(); err != nil {
			t.Fatal(err)
		}
		var out bytes.Buffer
		if err := sys.WriteJSON(&out); err != nil {
			t.Fatal(err)
		}
		back, err := Read(&out)
		if err != nil {
			t.Fatal(err)
		}
		if back.String() != sys.String() {
			t.Fatalf("got\n%swant\n%s", back, sys)
		}
	})
}
