// Strings in guards: which tests a string passes, and how many strings do.

package parikh

import (
	"fmt"
	"regexp"
	"regexp/syntax"
	"slices"
	"unicode/utf8"

	"pathtally/pds"
)

// stringTypes sorts all strings by the tests that they pass (equal to a literal,
// prefix, suffix, regular expression), by the product of the tests' automata.
type stringTypes struct {
	tests []string // regular expressions; index = test
	index map[string]int
	types []stringType
}

// stringType is the set of strings with one outcome of all tests.
type stringType struct {
	pass []bool // by test
	size int    // number of strings, capped; -1: infinitely many
	some []string
}

const (
	maxStringStates = 20000
	stringSamples   = 64 // strings kept per type; also the cap on sizes
)

// test gives the index of a test, adding it.
func (st *stringTypes) test(op pds.Op, text string) int {
	re := text
	switch op {
	case pds.OpString:
		re = regexp.QuoteMeta(text)
	case pds.OpPrefix:
		re = regexp.QuoteMeta(text) + "(?s:.*)"
	case pds.OpSuffix:
		re = "(?s:.*)" + regexp.QuoteMeta(text)
	}
	i, ok := st.index[re]
	if !ok {
		if st.index == nil {
			st.index = map[string]int{}
		}
		i = len(st.tests)
		st.index[re] = i
		st.tests = append(st.tests, re)
	}
	return i
}

// automaton simulates one expression that has to match the whole string.
type automaton struct{ prog *syntax.Prog }

// build finds the types; tests must be complete. Errors: an expression with \b or
// (?m), or too many states.
func (st *stringTypes) build() error {
	var autos []automaton
	cuts := []rune{0, 0xD800, 0xE000, utf8.MaxRune + 1}
	for _, re := range st.tests {
		parsed, err := syntax.Parse(`\A(?:`+re+`)\z`, syntax.Perl)
		if err != nil {
			return fmt.Errorf("regular expression %q: %v", re, err)
		}
		prog, err := syntax.Compile(parsed.Simplify())
		if err != nil {
			return fmt.Errorf("regular expression %q: %v", re, err)
		}
		for _, in := range prog.Inst {
			switch in.Op {
			case syntax.InstEmptyWidth:
				if syntax.EmptyOp(in.Arg)&^(syntax.EmptyBeginText|syntax.EmptyEndText) != 0 {
					return fmt.Errorf("regular expression %q: line and word boundaries are not supported", re)
				}
			case syntax.InstRune, syntax.InstRune1:
				if syntax.Flags(in.Arg)&syntax.FoldCase != 0 {
					return fmt.Errorf("regular expression %q: folding case is not supported", re)
				}
				if len(in.Rune) == 1 {
					cuts = append(cuts, in.Rune[0], in.Rune[0]+1)
					continue
				}
				for k := 0; k+1 < len(in.Rune); k += 2 {
					cuts = append(cuts, in.Rune[k], in.Rune[k+1]+1)
				}
			case syntax.InstRuneAnyNotNL:
				cuts = append(cuts, '\n', '\n'+1)
			}
		}
		autos = append(autos, automaton{prog})
	}
	slices.Sort(cuts)
	cuts = slices.Compact(cuts)
	// Readable runes first, so that samples are.
	type class struct{ low, n rune }
	var classes []class
	for i := 0; i+1 < len(cuts); i++ {
		if cuts[i] == 0xD800 {
			continue // surrogates are no characters
		}
		if cuts[i] <= 'a' && cuts[i+1] > 'a' && cuts[i] != 'a' {
			classes = append(classes, class{'a', cuts[i+1] - 'a'}, class{cuts[i], 'a' - cuts[i]})
			continue
		}
		classes = append(classes, class{cuts[i], cuts[i+1] - cuts[i]})
	}
	type state struct {
		sets [][]uint32
		next []int32 // by class
		typ  int
	}
	var states []state
	ids := map[string]int32{}
	add := func(sets [][]uint32) int32 {
		key := fmt.Sprint(sets)
		id, ok := ids[key]
		if !ok {
			id = int32(len(states))
			ids[key] = id
			states = append(states, state{sets: sets})
		}
		return id
	}
	var first [][]uint32
	for _, a := range autos {
		first = append(first, a.closure([]uint32{uint32(a.prog.Start)}, syntax.EmptyBeginText))
	}
	add(first)
	for i := 0; i < len(states); i++ {
		if len(states) > maxStringStates {
			return fmt.Errorf("the string tests need more than %d automaton states", maxStringStates)
		}
		for _, c := range classes {
			var sets [][]uint32
			for t, a := range autos {
				sets = append(sets, a.step(states[i].sets[t], c.low))
			}
			states[i].next = append(states[i].next, add(sets))
		}
	}
	byPass := map[string]int{}
	for i := range states {
		pass := make([]bool, len(autos))
		for t, a := range autos {
			// The empty string is at its begin and end at once.
			at := syntax.EmptyEndText
			if i == 0 {
				at |= syntax.EmptyBeginText
			}
			pass[t] = a.accepts(states[i].sets[t], at)
		}
		key := fmt.Sprint(pass)
		typ, ok := byPass[key]
		if !ok {
			typ = len(st.types)
			byPass[key] = typ
			st.types = append(st.types, stringType{pass: pass})
		}
		states[i].typ = typ
	}
	// Sizes: a type is infinite iff a state on a cycle leads to it.
	succ := func(a int32) []int32 { return states[a].next }
	infinite := make([]bool, len(states))
	for _, c := range components(len(states), succ, nil) {
		if len(c) > 1 || slices.Contains(states[c[0]].next, c[0]) {
			for _, a := range c {
				infinite[a] = true
			}
		}
	}
	// What a cycle leads to is infinite too.
	var work []int32
	for i := range infinite {
		if infinite[i] {
			work = append(work, int32(i))
		}
	}
	for len(work) > 0 {
		a := work[len(work)-1]
		work = work[:len(work)-1]
		for _, b := range states[a].next {
			if !infinite[b] {
				infinite[b] = true
				work = append(work, b)
			}
		}
	}
	for i := range states {
		if infinite[i] {
			st.types[states[i].typ].size = -1
		}
	}
	// Number of strings per state, by length; finite states form a graph without
	// cycles. Samples by length, a few per state and step.
	count := map[int32]int{0: 1}
	samples := map[int32][]string{0: {""}}
	for range 4 * (len(states) + stringSamples) {
		nextCount := map[int32]int{}
		nextSamples := map[int32][]string{}
		full := true
		for a := int32(0); a < int32(len(states)); a++ {
			n := count[a]
			if n == 0 {
				continue
			}
			t := &st.types[states[a].typ]
			if t.size >= 0 {
				t.size = min(stringSamples, t.size+n)
			}
			for _, s := range samples[a] {
				if len(t.some) < stringSamples {
					t.some = append(t.some, s)
				}
			}
			for c, b := range states[a].next {
				nextCount[b] = min(stringSamples, nextCount[b]+min(stringSamples, n*int(min(stringSamples, classes[c].n))))
				for _, s := range samples[a] {
					for k := rune(0); k < min(classes[c].n, stringSamples) && len(nextSamples[b]) < stringSamples; k++ {
						nextSamples[b] = append(nextSamples[b], s+string(classes[c].low+k))
					}
				}
			}
		}
		for _, t := range st.types {
			full = full && len(t.some) >= stringSamples
		}
		count, samples = nextCount, nextSamples
		if full {
			break
		}
	}
	return nil
}

// closure follows instructions that read nothing.
func (a automaton) closure(pcs []uint32, at syntax.EmptyOp) []uint32 {
	seen := map[uint32]bool{}
	work := slices.Clone(pcs)
	var out []uint32
	for len(work) > 0 {
		pc := work[len(work)-1]
		work = work[:len(work)-1]
		if seen[pc] {
			continue
		}
		seen[pc] = true
		in := &a.prog.Inst[pc]
		switch in.Op {
		case syntax.InstAlt, syntax.InstAltMatch:
			work = append(work, in.Out, in.Arg)
		case syntax.InstCapture, syntax.InstNop:
			work = append(work, in.Out)
		case syntax.InstEmptyWidth:
			if syntax.EmptyOp(in.Arg)&^at == 0 {
				work = append(work, in.Out)
			} else if syntax.EmptyOp(in.Arg)&syntax.EmptyBeginText == 0 {
				out = append(out, pc) // passes at the end
			}
		case syntax.InstFail:
		default:
			out = append(out, pc)
		}
	}
	slices.Sort(out)
	return out
}

func (a automaton) step(pcs []uint32, r rune) []uint32 {
	var next []uint32
	for _, pc := range pcs {
		in := &a.prog.Inst[pc]
		switch in.Op {
		case syntax.InstRune, syntax.InstRune1, syntax.InstRuneAny, syntax.InstRuneAnyNotNL:
			if in.MatchRune(r) {
				next = append(next, in.Out)
			}
		}
	}
	return a.closure(next, 0)
}

func (a automaton) accepts(pcs []uint32, at syntax.EmptyOp) bool {
	for _, pc := range a.closure(pcs, at) {
		if a.prog.Inst[pc].Op == syntax.InstMatch {
			return true
		}
	}
	return false
}
