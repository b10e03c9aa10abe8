// Does a system keep its promises?

package pds

import (
	"errors"
	"fmt"
	"reflect"
)

// Sanity asks a system about heads and about what their rules lead to directly
// (twice, the second time in the opposite order) and reports everything that
// breaks the promises of [System], joined into one error: rules that differ from
// one asking to the next, kinds that do not exist, targets or symbols that are
// 0 or negative, a Stop rule with a successor, MarkLoss on a rule that is not a
// Stop, effects without a vector or of the wrong length, a vector 0 that is not
// zero, spawned heads that are none. Cost: two askings per head.
func Sanity(sys System, heads []Head) error {
	var errs []error
	bad := func(h Head, i int, format string, args ...any) {
		errs = append(errs, fmt.Errorf("state %d, symbol %d, rule %d: %s", h.State, h.Symbol, i, fmt.Sprintf(format, args...)))
	}
	n := sys.NumCounts()
	for i, x := range sys.Vector(0) {
		if x != 0 {
			errs = append(errs, fmt.Errorf("effect 0: count %d is %d, not 0", i, x))
		}
	}
	effect := func(h Head, i int, e EffectID) {
		defer func() {
			if r := recover(); r != nil {
				bad(h, i, "effect %d: no vector: %v", e, r)
			}
		}()
		if e < 0 {
			bad(h, i, "effect %d is negative", e)
		} else if v := sys.Vector(e); len(v) != n {
			bad(h, i, "effect %d has %d numbers for %d counts", e, len(v), n)
		}
	}
	first := make([][]Rule, len(heads))
	for k, h := range heads {
		if h.State <= 0 || h.Symbol <= 0 {
			errs = append(errs, fmt.Errorf("head %d: state %d, symbol %d: ids start at 1", k, h.State, h.Symbol))
			continue
		}
		first[k] = sys.Rules(h, nil)
		for i, r := range first[k] {
			needState, needTop, needBelow := false, false, false
			switch r.Kind {
			case Stop:
			case Pop:
				needState = true
			case Step:
				needState, needTop = true, true
			case Push:
				needState, needTop, needBelow = true, true, true
			default:
				bad(h, i, "kind %d does not exist", r.Kind)
				continue
			}
			id := func(what string, x int32, need bool) {
				if need && x <= 0 {
					bad(h, i, "%s: %s is %d", r.Kind, what, x)
				}
				if !need && x != 0 {
					bad(h, i, "%s: %s is %d, must be 0", r.Kind, what, x)
				}
			}
			id("state", int32(r.State), needState)
			id("top", int32(r.Top), needTop)
			id("below", int32(r.Below), needBelow)
			if r.Mark&MarkLoss != 0 && r.Kind != Stop {
				bad(h, i, "%s: marked as a loss but goes on", r.Kind)
			}
			effect(h, i, r.Effect)
			if r.Doubt < 0 || r.Label < 0 {
				bad(h, i, "negative doubt or label")
			}
			if r.Doubt != 0 {
				effect(h, i, r.DoubtEffect)
			}
			for _, s := range r.Spawn {
				if s.State <= 0 || s.Symbol <= 0 {
					bad(h, i, "spawns state %d, symbol %d: ids start at 1", s.State, s.Symbol)
				}
			}
		}
	}
	for k := len(heads) - 1; k >= 0; k-- {
		h := heads[k]
		if h.State <= 0 || h.Symbol <= 0 {
			continue
		}
		marker := Rule{Kind: Push, Label: -1}
		again := sys.Rules(h, []Rule{marker})
		if len(again) == 0 || !reflect.DeepEqual(again[0], marker) {
			errs = append(errs, fmt.Errorf("state %d, symbol %d: rules are not appended to dst", h.State, h.Symbol))
			continue
		}
		again = again[1:]
		if len(again) != len(first[k]) {
			errs = append(errs, fmt.Errorf("state %d, symbol %d: %d rules, asked again %d", h.State, h.Symbol, len(first[k]), len(again)))
			continue
		}
		for i := range again {
			if !sameRule(again[i], first[k][i]) {
				bad(h, i, "differs when asked again: %+v, then %+v", first[k][i], again[i])
			}
		}
	}
	return errors.Join(errs...)
}

func sameRule(a, b Rule) bool {
	if len(a.Spawn) == 0 && len(b.Spawn) == 0 {
		a.Spawn, b.Spawn = nil, nil
	}
	return reflect.DeepEqual(a, b)
}

// Sanity checks the table: the promises of [System] for every head, and that
// every id is one that the table has a name for.
func (t *Table) Sanity() error {
	var errs []error
	check := func(where string, h Head) {
		if h.State <= 0 || int(h.State) >= len(t.states) || h.Symbol <= 0 || int(h.Symbol) >= len(t.symbols) {
			errs = append(errs, fmt.Errorf("%s: state %d, symbol %d is not declared", where, h.State, h.Symbol))
		}
	}
	for i, h := range t.starts {
		check(fmt.Sprintf("start %d", i), h)
	}
	for _, h := range t.heads {
		check("head", h)
		for i, r := range t.rules[h] {
			where := fmt.Sprintf("%s %s, rule %d", t.StateName(h.State), t.SymbolName(h.Symbol), i)
			if int(r.State) >= len(t.states) || int(r.Top) >= len(t.symbols) || int(r.Below) >= len(t.symbols) {
				errs = append(errs, fmt.Errorf("%s: leads to a state or symbol that is not declared", where))
			}
			if int(r.Label) >= len(t.labels) || int(r.Doubt) >= len(t.doubts) || r.Mark>>len(t.marks) != 0 {
				errs = append(errs, fmt.Errorf("%s: label, doubt or mark is not declared", where))
			}
			for _, s := range r.Spawn {
				check(where+": spawned head", s)
			}
		}
	}
	return errors.Join(append(errs, Sanity(t, t.heads))...)
}
