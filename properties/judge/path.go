package judge

import (
	"fmt"

	"pathtally/pds"
	"pathtally/properties"
)

// A move is one step of a replayed path.
type move struct {
	head    pds.Head
	rule    pds.Rule
	delta   []int64   // what the step counts, with the work that it spawns
	after   []int64   // running counts behind the step
	height  int       // symbols on the stack before the step
	act     int       // index into trace.acts of the activation that the head stands in
	spawned []pds.Run // runs of what the step spawns
}

// An activation is one call on a path, from the step behind its entry head.
type activation struct {
	fn     properties.Func
	entry  pds.Head
	base   int // height of the stack at the entry, the entry's symbol included
	parent int // index into trace.acts; -1 for the root
	depth  int // number of calls above it
}

// A trace is a replayed path with its calls found again.
type trace struct {
	choices []pds.Choice
	moves   []move
	acts    []activation // acts[0] is the root
	run     pds.Run
	end     pds.Head // where the path stopped; Symbol 0 if the stack is empty

	stacks []*level // see levels
}

// replay executes a witness on the model and finds its calls again. It uses
// nothing that the search knows: a path that it accepts is a path of the model.
func replay(m properties.Model, start pds.Head, choices []pds.Choice) (*trace, error) {
	run, err := pds.Replay(m, start, choices)
	if err != nil {
		return nil, err
	}
	t := &trace{choices: choices, run: run}
	t.acts = append(t.acts, activation{fn: m.Frame(start).Func, entry: start, base: 1, parent: -1})
	n := m.NumCounts()
	sum := make([]int64, n)
	current := 0
	for i := range run.Configs {
		c := &run.Configs[i]
		// Calls whose symbols are gone have ended.
		for current > 0 && t.acts[current].base > c.Depth {
			current = t.acts[current].parent
		}
		if i > 0 && c.Depth > 0 && run.Configs[i-1].Rule.Kind != pds.Pop {
			if f := m.Frame(c.Head); f.Entry && !f.Deferred {
				// A step (not a push) into an entry is a pending call that starts, or a
				// wrapper that gives way to what it wraps: the caller stays beneath.
				for current > 0 && t.acts[current].base >= c.Depth {
					current = t.acts[current].parent
				}
				t.acts = append(t.acts, activation{fn: f.Func, entry: c.Head, base: c.Depth, parent: current, depth: t.acts[current].depth + 1})
				current = len(t.acts) - 1
			}
		}
		if i == len(run.Configs)-1 {
			t.end = c.Head
			break
		}
		v := c.Rule.Effect
		if choices[i].Doubt {
			v = c.Rule.DoubtEffect
		}
		delta := append([]int64(nil), m.Vector(v)...)
		for _, s := range c.Spawned {
			for k := range delta {
				delta[k] += s.Total[k]
			}
		}
		after := make([]int64, n)
		for k := range after {
			sum[k] += delta[k]
			after[k] = sum[k]
		}
		t.moves = append(t.moves, move{head: c.Head, rule: c.Rule, delta: delta, after: after, height: c.Depth, act: current, spawned: c.Spawned})
	}
	for k := range sum {
		if sum[k] != run.Total[k] {
			return nil, fmt.Errorf("count %d is %d along the path and %d in the replay", k, sum[k], run.Total[k])
		}
	}
	return t, nil
}

// total is the count vector at the end of the path.
func (t *trace) total() []int64 { return t.run.Total }

// opening is the index of the move after which w·counts stays above bound, -1
// if it is above from the start.
func (t *trace) opening(w []int64, bound int64) int {
	at := -1
	for i := len(t.moves) - 1; i >= 0; i-- {
		var before int64
		if i > 0 {
			before = dot(w, t.moves[i-1].after)
		}
		if before <= bound {
			at = i
			break
		}
	}
	return at
}

// within counts the moves of activation a, and of the calls it makes, that
// change w·counts.
func (t *trace) within(a int, w []int64) int {
	n := 0
	for i := range t.moves {
		if dot(w, t.moves[i].delta) != 0 && t.inside(t.moves[i].act, a) {
			n++
		}
	}
	return n
}

// inside says that activation b is a or was called below it.
func (t *trace) inside(b, a int) bool {
	for b >= 0 {
		if b == a {
			return true
		}
		b = t.acts[b].parent
	}
	return false
}

// steps lists what a person sees: the labelled moves, spawned work indented
// below the step that starts it, and an end.
func (t *trace) steps(m properties.Model, last PathStep) []PathStep {
	var out []PathStep
	for i := range t.moves {
		mv := &t.moves[i]
		changed := false
		for _, d := range mv.delta {
			changed = changed || d != 0
		}
		if mv.rule.Label != 0 {
			st := m.Step(mv.rule.Label)
			kind := st.Kind
			if kind == "" {
				kind = properties.StepEvent
			}
			name := st.Func.Name
			if name == "" {
				name = t.acts[mv.act].fn.Name
			}
			if st.Text == "" && !changed {
				continue // nothing to read
			}
			out = append(out, PathStep{Place: st.Place, Function: name, Kind: kind, Text: st.Text, Depth: t.acts[mv.act].depth, Counts: mv.after, Changed: changed})
		} else if changed {
			// A step that counts is never left out, labelled or not.
			fn := t.acts[mv.act].fn
			out = append(out, PathStep{Place: fn.Place, Function: fn.Name, Kind: properties.StepEvent, Text: "counts", Depth: t.acts[mv.act].depth, Counts: mv.after, Changed: true})
		}
		for _, s := range mv.spawned {
			out = appendSpawned(out, m, s, t.acts[mv.act].depth+1, mv.after)
		}
	}
	last.Counts = t.total()
	return append(out, last)
}

// appendSpawned lists the steps of work in a goroutine of its own. Its counts
// are already in those of the step that spawns it.
func appendSpawned(out []PathStep, m properties.Model, r pds.Run, depth int, counts []int64) []PathStep {
	for i := 0; i+1 < len(r.Configs); i++ {
		c := &r.Configs[i]
		if c.Rule.Label == 0 {
			continue
		}
		st := m.Step(c.Rule.Label)
		out = append(out, PathStep{Place: st.Place, Function: st.Func.Name, Kind: st.Kind, Text: st.Text, Depth: depth, Counts: counts})
		for _, s := range c.Spawned {
			out = appendSpawned(out, m, s, depth+1, counts)
		}
	}
	return out
}
