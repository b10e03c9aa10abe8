package parikh

import (
	"fmt"
	"math/rand/v2"
	"regexp"
	"strings"
	"testing"
	"time"

	"pathtally/parikh/lia"
	"pathtally/pds"
)

var compiled = map[string]*regexp.Regexp{}

// eval decides a formula by its definition, with Go's own strings and regular
// expressions.
func eval(e *pds.Expr, params, data []any) any {
	arg := func(i int) any { return eval(e.Args[i], params, data) }
	switch e.Op {
	case pds.OpVar:
		if e.Param {
			return params[e.Var]
		}
		return data[e.Var]
	case pds.OpInt:
		return e.Int.Int64()
	case pds.OpString:
		return e.Text
	case pds.OpTrue:
		return true
	case pds.OpFalse:
		return false
	case pds.OpNil:
		return int64(0)
	case pds.OpAdd:
		s := int64(0)
		for i := range e.Args {
			s += arg(i).(int64)
		}
		return s
	case pds.OpScale:
		return e.Int.Int64() * arg(0).(int64)
	case pds.OpMod:
		m := e.Int.Int64()
		return ((arg(0).(int64) % m) + m) % m
	case pds.OpEq:
		return arg(0) == arg(1)
	case pds.OpLess:
		return arg(0).(int64) < arg(1).(int64)
	case pds.OpLessEq:
		return arg(0).(int64) <= arg(1).(int64)
	case pds.OpNot:
		return !arg(0).(bool)
	case pds.OpAnd:
		for i := range e.Args {
			if !arg(i).(bool) {
				return false
			}
		}
		return true
	case pds.OpOr:
		for i := range e.Args {
			if arg(i).(bool) {
				return true
			}
		}
		return false
	case pds.OpPrefix:
		return strings.HasPrefix(arg(0).(string), e.Text)
	case pds.OpSuffix:
		return strings.HasSuffix(arg(0).(string), e.Text)
	case pds.OpMatches:
		re := compiled[e.Text]
		if re == nil {
			re = regexp.MustCompile(`\A(?:` + e.Text + `)\z`)
			compiled[e.Text] = re
		}
		return re.MatchString(arg(0).(string))
	}
	panic("unknown operator")
}

var testData = []pds.Variable{{Name: "n", Sort: pds.Int}, {Name: "s", Sort: pds.String}, {Name: "f", Sort: pds.Bool}, {Name: "r", Sort: pds.Ref}}
var testParams = []pds.Variable{{Name: "p", Sort: pds.Int}, {Name: "k", Sort: pds.String}, {Name: "u", Sort: pds.Bool}}

// randomGuard makes formulas whose truth changes only within the domains of
// domain.
func randomGuard(r *rand.Rand, data bool, depth int) string {
	if depth > 0 && r.IntN(3) > 0 {
		op := []string{" && ", " || ", " => "}[r.IntN(3)]
		return "(" + randomGuard(r, data, depth-1) + op + randomGuard(r, data, depth-1) + ")"
	}
	atoms := []string{"p == 1", "p > 2", "u", `k == "a"`, `prefix(k, "a")`}
	if data {
		atoms = append(atoms, "n < p", "n == 1", "n > 2", "n % 2 == 1", "n == p + 1", "f", "f == u", "s == k", `s == "a"`, `prefix(s, "a")`, `suffix(s, "b")`, `matches(s, "a|bb?")`, "r == nil")
	}
	a := atoms[r.IntN(len(atoms))]
	if r.IntN(3) == 0 {
		return "!(" + a + ")"
	}
	return a
}

func domain(s pds.Sort) []any {
	switch s {
	case pds.Bool:
		return []any{false, true}
	case pds.Ref:
		return []any{int64(0), int64(1)}
	case pds.Int:
		var out []any
		for n := int64(-1); n <= 5; n++ {
			out = append(out, n)
		}
		return out
	}
	// Two of each kind of string that the atoms tell apart.
	return []any{"", "a", "b", "bb", "ab", "aab", "aa", "aaa", "abb", "bbb", "cb", "c", "d"}
}

func tuples(vs []pds.Variable, f func([]any)) {
	v := make([]any, len(vs))
	var rec func(i int)
	rec = func(i int) {
		if i == len(vs) {
			f(v)
			return
		}
		for _, x := range domain(vs[i].Sort) {
			v[i] = x
			rec(i + 1)
		}
	}
	rec(0)
}

// randomSystem makes a small parametric system of one state.
func randomSystem(r *rand.Rand) *pds.Table {
	b := pds.NewBuilder("a", "b", "c")
	d := pds.Data{Parameters: testParams, Events: []pds.Event{{Name: "e", Data: testData}}}
	for i := range 3 {
		where, err := pds.ParseGuard(randomGuard(r, true, 1), testParams, testData)
		if err != nil {
			panic(err)
		}
		d.Predicates = append(d.Predicates, pds.Predicate{Count: i, Event: 0, Where: where, By: -1})
	}
	b.Parametric(d)
	n := 2 + r.IntN(2)
	name := func() string { return fmt.Sprintf("g%d", r.IntN(n)) }
	b.Start("q", "g0")
	for i := range n + r.IntN(4) {
		g := fmt.Sprintf("g%d", i%n)
		var opts []pds.Option
		if r.IntN(4) == 0 {
			opts = append(opts, pds.Adds("a", 1))
		}
		switch k := r.IntN(4); {
		case k == 0 || i == n-1:
			b.Pop("q", g, "q", opts...)
		case k < 3:
			b.Step("q", g, "q", name(), opts...)
		default:
			b.Push("q", g, "q", name(), name(), opts...)
		}
		switch r.IntN(4) {
		case 0, 1:
			cond := ""
			if r.IntN(3) > 0 {
				cond = randomGuard(r, true, 1)
			}
			b.Guarded(b.Head("q", g), "e", cond)
		case 2:
			b.Guarded(b.Head("q", g), "", randomGuard(r, false, 1))
		}
	}
	return b.Table()
}

// bruteSystem is the image by definition: for all values of parameters, expand
// each rule into one production per outcome, and enumerate.
func bruteSystem(s *System, bound int64) map[string]bool {
	all := map[string]bool{}
	t := s.Table
	done := map[string]bool{}
	tuples(t.Data().Parameters, func(params []any) {
		g := &Grammar{Counts: t.Counts(), Names: s.Image.g.Names, Start: s.Image.g.Start}
		outcomes := map[*pds.Guard]map[[3]int64][]int64{}
		for i, p := range s.Image.g.Prods {
			base := make([]int64, len(t.Counts()))
			for _, e := range p.Effect {
				if int(e.Count) < len(base) {
					base[e.Count] = e.N
				}
			}
			rule := s.Summary.Prods[i].Rule
			guard := t.Guard(rule.Head, rule.Index)
			if guard == nil {
				g.Prods = append(g.Prods, Production{Lhs: p.Lhs, Rhs: p.Rhs, Effect: sparse(base)})
				continue
			}
			set := outcomes[guard]
			if set == nil {
				set = map[[3]int64][]int64{}
				outcomes[guard] = set
				var data []pds.Variable
				if guard.Event >= 0 {
					data = t.Data().Events[guard.Event].Data
				}
				tuples(data, func(x []any) {
					if guard.Cond != nil && !eval(guard.Cond, params, x).(bool) {
						return
					}
					v := make([]int64, len(base))
					for _, q := range t.Data().Predicates {
						if q.Event == guard.Event && (q.Where == nil || eval(q.Where, params, x).(bool)) {
							if q.By >= 0 {
								v[q.Count] += x[q.By].(int64)
							} else {
								v[q.Count]++
							}
						}
					}
					set[[3]int64(v)] = v
				})
			}
			for _, v := range set {
				sum := make([]int64, len(v))
				for j := range v {
					sum[j] = v[j] + base[j]
				}
				g.Prods = append(g.Prods, Production{Lhs: p.Lhs, Rhs: p.Rhs, Effect: sparse(sum)})
			}
		}
		lines := map[string]bool{}
		for _, p := range g.Prods {
			lines[fmt.Sprint(p)] = true
		}
		if key := sortedKeys(lines); !done[key] {
			done[key] = true
			for v := range brute(g, bound) {
				all[v] = true
			}
		}
	})
	return all
}

// TestRandomSystems compares parametric systems with enumeration, outcomes listed
// and by slots.
func TestRandomSystems(t *testing.T) {
	n := 100
	if testing.Short() {
		n = 30
	}
	const bound = 3
	yes, no, slots, unknown := 0, 0, 0, 0
	for seed := range n {
		r := rand.New(rand.NewPCG(uint64(seed), 3))
		table := randomSystem(r)
		var want map[string]bool
		for _, max := range []int{0, -1} {
			if max < 0 && seed%5 != 0 {
				continue // slots are slower
			}
			s, err := NewSystem(table, table.Starts()[0], SystemOptions{MaxCells: max, Options: Options{Solver: lia.Options{MaxNodes: 2000, MaxPivots: 50000}}})
			if err != nil {
				t.Fatal(err)
			}
			if s.Empty() {
				continue
			}
			if want == nil {
				want = bruteSystem(s, bound)
			}
			if s.data != nil {
				slots += len(s.data.undecided)
			}
			box(3, bound, func(v []int64) {
				if max < 0 && (v[0]+v[1]+v[2])%3 != 0 {
					return
				}
				a := s.Member(bg, bigs(v...))
				if a.Status == Unknown && max < 0 {
					unknown++
					return
				}
				if a.Status == Unknown || (a.Status == Yes) != want[fmt.Sprint(v)] {
					t.Fatalf("seed %d, cells %d: %v: %v %s, enumeration says %v\n%s", seed, max, v, a.Status, a.Budget, want[fmt.Sprint(v)], table)
				}
				if a.Status == Yes {
					yes++
					d, err := Derive(s.Image.g, a.Productions())
					if err != nil {
						t.Fatal(err)
					}
					if _, err := d.Check(); err != nil {
						t.Fatal(err)
					}
				} else {
					no++
				}
			})
		}
	}
	t.Logf("%d yes, %d no, %d groups in slots, %d unknown", yes, no, slots, unknown)
	if yes < n || no < n || slots < n/10 || unknown > n {
		t.Errorf("lopsided: %d yes, %d no, %d in slots", yes, no, slots)
	}
}

// TestWeights adds data up, also where only a range is known.
func TestWeights(t *testing.T) {
	const text = `{"format": "pathtally-system", "version": 1, "counts": ["bytes", "big", "twice"],
"states": ["q"], "symbols": ["x"], "starts": [{"state": "q", "symbol": "x"}],
"parameters": [],
"events": [{"name": "send", "data": [{"name": "n", "sort": "int"}, {"name": "m", "sort": "int"}]}],
"predicates": [{"count": "bytes", "event": "send", "by": "n"}, {"count": "big", "event": "send", "where": "n >= 10"},
  {"count": "twice", "event": "send", "by": "n"}, {"count": "twice", "event": "send", "by": "n"}],
"rules": [{"from": {"state": "q", "symbol": "x"}, "kind": "pop", "state": "q"},
  {"from": {"state": "q", "symbol": "x"}, "kind": "step", "state": "q", "top": "x", "event": "send", "guard": "n >= 3 && n <= 12 && n != 5"}]}`
	table, err := pds.Read(strings.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	s, err := NewSystem(table, table.Starts()[0], SystemOptions{})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		ask  string
		want Status
	}{
		{"bytes == 0 && big == 0", Yes}, {"bytes == 2", No}, {"bytes == 5", No}, {"bytes == 8 && big == 0", Yes}, {"bytes == 8 && big == 1", No},
		{"bytes == 24 && big == 2", Yes}, {"bytes == 24 && big == 3", No}, {"twice != 2 * bytes", No}, {"bytes == 1000000000000000000000 && big == 0", Yes},
		{"big >= 1 && bytes < 10 * big", No},
	} {
		f, err := s.Parse(c.ask)
		if err != nil {
			t.Fatal(err)
		}
		if a := s.Ask(bg, f); a.Status != c.want {
			t.Errorf("%s: %v %s, want %v", c.ask, a.Status, a.Budget, c.want)
		}
	}
	if b := s.Greatest(bg, Form{-1, 9, 0}); b.Status != Yes || b.Unbounded || b.Value.Sign() != 0 {
		t.Errorf("9 big - bytes: %+v", b)
	}
	if b := s.Greatest(bg, Form{-1, 11, 0}); !b.Unbounded {
		t.Errorf("11 big - bytes: %+v", b)
	}
	// A product of a count and a value is refused, with its place.
	bad := strings.Replace(text, "n >= 3 && n <= 12 && n != 5", "n == m", 1)
	table, err = pds.Read(strings.NewReader(bad))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := NewSystem(table, table.Starts()[0], SystemOptions{}); err == nil || !strings.Contains(err.Error(), `predicates[0].by: "n"`) {
		t.Errorf("product: %v", err)
	}
}

// predicateSystem has n overlapping predicates on one event: thresholds and
// remainders of two ints that are entangled.
func predicateSystem(n int) *pds.Table {
	names := make([]string, n)
	for i := range names {
		names[i] = fmt.Sprintf("c%d", i)
	}
	b := pds.NewBuilder(names...)
	data := make([]pds.Variable, n)
	for i := range data {
		data[i] = pds.Variable{Name: fmt.Sprintf("x%d", i), Sort: pds.Int}
	}
	d := pds.Data{Events: []pds.Event{{Name: "e", Data: data}}}
	for i := range n {
		where, err := pds.ParseGuard(fmt.Sprintf("x%d + x%d >= 1", i, (i+1)%n), nil, data)
		if err != nil {
			panic(err)
		}
		d.Predicates = append(d.Predicates, pds.Predicate{Count: i, Event: 0, Where: where, By: -1})
	}
	b.Parametric(d)
	b.Start("q", "x")
	b.Pop("q", "x", "q")
	var guard []string
	for i := range n {
		guard = append(guard, fmt.Sprintf("0 <= x%d && x%d <= 1", i, i))
	}
	b.Step("q", "x", "q", "x").Guarded(b.Head("q", "x"), "e", strings.Join(guard, " && "))
	return b.Table()
}

// TestPredicates grows the number of overlapping predicates. The outcome of
// predicate i is x_i or x_{i+1}: a predicate can hold without its neighbours
// only together with one of them, so c_i <= c_{i-1} + c_{i+1}.
func TestPredicates(t *testing.T) {
	for _, n := range []int{4, 8, 16, 24, 32} {
		began := time.Now()
		table := predicateSystem(n)
		s, err := NewSystem(table, table.Starts()[0], SystemOptions{})
		if err != nil {
			t.Fatal(err)
		}
		f, err := s.Parse("c0 == 5 && c1 == 3 && c2 == 7 && c3 == 6")
		if err != nil {
			t.Fatal(err)
		}
		if a := s.Ask(bg, f); a.Status != Yes {
			t.Errorf("%d predicates: %v %s", n, a.Status, a.Budget)
		}
		no, err := s.Parse(fmt.Sprintf("c0 == 0 && c%d == 0 && c1 >= 1 && c2 == 0", n-1))
		if err != nil {
			t.Fatal(err)
		}
		a := s.Ask(bg, no)
		t.Logf("%d predicates: %d slots at most, second question %v %s, %v, %+v", n, slotBound(n), a.Status, a.Budget, time.Since(began).Round(time.Millisecond), len(s.data.undecided))
		if a.Status == Yes {
			t.Errorf("%d predicates: %v", n, a.Counts)
		}
	}
}

// TestSlotBound pins the formula to the figures of the paper's bound.
func TestSlotBound(t *testing.T) {
	for n, want := range map[int]int{4: 44, 8: 94, 16: 207, 24: 333, 32: 465} {
		if got := slotBound(n); got != want {
			t.Errorf("%d predicates: %d slots, want %d", n, got, want)
		}
	}
}
