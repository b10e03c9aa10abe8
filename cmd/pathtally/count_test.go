package main

import (
	"encoding/json"
	"encoding/xml"
	"fmt"
	"io"
	"maps"
	"math/big"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"pathtally/parikh"
)

func image(name string) string { return filepath.Join("..", "..", "testdata", "images", name) }

// dataSystem has a parameter, two predicates that overlap and a count that adds
// a datum up.
const dataSystem = `{"format": "pathtally-system", "version": 1, "counts": ["bytes", "big"],
"states": ["q"], "symbols": ["x"], "starts": [{"state": "q", "symbol": "x"}],
"parameters": [{"name": "limit", "sort": "int"}],
"events": [{"name": "send", "data": [{"name": "n", "sort": "int"}, {"name": "m", "sort": "int"}]}],
"predicates": [{"count": "bytes", "event": "send", "by": "n"}, {"count": "big", "event": "send", "where": "m >= limit"}],
"rules": [{"from": {"state": "q", "symbol": "x"}, "kind": "pop", "state": "q"},
  {"from": {"state": "q", "symbol": "x"}, "kind": "step", "state": "q", "top": "x", "event": "send", "guard": "n >= 3 && n <= 12 && m < 10"}]}`

// What count prints of systems whose images are in the books.
func TestCountSystem(t *testing.T) {
	for _, c := range []struct {
		args   string
		status int
		want   string
	}{
		{"equal-blocks.json", exitHolds, `
                  a  b
  base            0  0
    + n1 times    1  1
  these are all
  minimal         0  0
  a               at least 0, without bound
  b               at least 0, without bound
  a - b           always 0
`},
		{"doubling.json", exitHolds, `
                                         a
  exactly         604462909807314587353088
  these are all
  minimal         604462909807314587353088
  a               always 604462909807314587353088
`},
		{"brackets.json --counts open,left --rays", exitHolds, `
                  open  left
  rays               1     0
                     0     1
`},
		{"running-example.json --counts b,c --grid 3", exitHolds, `
  c upwards, b to the right: # some path, . none, ? not known
   3  # # # .
   2  # # . .
   1  # . . .
   0  # . . .
      0 1 2 3
`},
		{"equal-blocks.json --ask a==3", exitHolds, `
  yes: a 3, b 3
    ×3
      q S, rule 0
    q S, rule 1
`},
		{"equal-blocks.json --ask a>b", exitBroken, "\n  no: no path has such counts\n"},
		{"nuggets.json --member 43", exitBroken, "\n  no: no path has such counts\n"},
		{"endless.json", exitHolds, "\n  no path ends there: there are no counts\n"},
	} {
		args := strings.Fields(c.args)
		args = append([]string{"count", "--system", image(args[0])}, args[1:]...)
		got, out, errs := start(t, args...)
		first, rest, _ := strings.Cut(out, "\n")
		if got != c.status || errs != "" || "\n"+rest != c.want || first != filepath.ToSlash(image(strings.Fields(c.args)[0])) {
			t.Errorf("%s: status %d, want %d\n%s%s\nwant:%s", c.args, got, c.status, out, errs, c.want)
		}
	}
}

// Each row of the table of images can be shown, and its stated image is asked
// both ways: something is inside, nothing outside.
func TestCountShowsTheTextbooks(t *testing.T) {
	data, err := os.ReadFile(image("table.json"))
	if err != nil {
		t.Fatal(err)
	}
	var table []struct{ File, Image string }
	if err := json.Unmarshal(data, &table); err != nil {
		t.Fatal(err)
	}
	if len(table) < 20 {
		t.Fatalf("only %d rows", len(table))
	}
	for _, r := range table {
		if got, out, errs := start(t, "count", "--system", image(r.File)); got != exitHolds || len(strings.Split(out, "\n")) < 3 {
			t.Errorf("%s: status %d\n%s%s", r.File, got, out, errs)
		}
		if got, out, errs := start(t, "count", "--system", image(r.File), "--ask", "!("+r.Image+")"); got != exitBroken {
			t.Errorf("%s, outside: status %d\n%s%s", r.File, got, out, errs)
		}
		inside := exitHolds
		if r.Image == "false" {
			inside = exitBroken
		}
		if got, out, errs := start(t, "count", "--system", image(r.File), "--ask", r.Image); got != inside {
			t.Errorf("%s, inside: status %d\n%s%s", r.File, got, out, errs)
		}
	}
}

func TestCountWithData(t *testing.T) {
	file := filepath.Join(t.TempDir(), "data.json")
	if err := os.WriteFile(file, []byte(dataSystem), 0o644); err != nil {
		t.Fatal(err)
	}
	got, out, errs := start(t, "count", "--system", file, "--ask", "bytes == 7 && big == 1", "--format", "json")
	if got != exitHolds {
		t.Fatalf("status %d\n%s%s", got, out, errs)
	}
	var r countResult
	if err := json.Unmarshal([]byte(out), &r); err != nil {
		t.Fatal(err)
	}
	im := r.Images[0]
	if im.Answer != "yes" || im.With["bytes"].Int64() != 7 || len(im.Parameters) != 1 || !strings.Contains(strings.Join(im.Data, "\n"), "n as counted") {
		t.Errorf("%s", out)
	}
	// A message has 3 bytes at least.
	if got, out, _ := start(t, "count", "--system", file, "--ask", "bytes == 2"); got != exitBroken {
		t.Errorf("2 bytes: status %d\n%s", got, out)
	}
	if got, _, errs := start(t, "export", "--system", file, "--format", "smt2", "--ask", "big > 0"); got != exitFailed || !strings.Contains(errs, "no data") {
		t.Errorf("export of data: %d %s", got, errs)
	}
}

// bookModule locks in a loop, hands the unlock to a helper, and forgets it on one
// way out.
var bookModule = map[string]string{"m.go": `package m

import "sync"

type Desk struct{ mu sync.Mutex }

func (d *Desk) Book(quiet bool) {
	d.mu.Lock()
	d.settle(quiet)
}

func (d *Desk) settle(quiet bool) {
	if quiet {
		return
	}
	d.mu.Unlock()
}

func (d *Desk) Even(n int) {
	for range n {
		d.mu.Lock()
		d.mu.Unlock()
	}
}
`}

func TestCountFunction(t *testing.T) {
	dir := module(t, bookModule)
	for _, c := range []struct {
		args   []string
		status int
		want   string
	}{
		{[]string{"Book", "--rule", "mutex"}, exitHolds, `(*Desk).Book, rule mutex, d.mu, at end
                  taken  released
  exactly             1         0
  or exactly          1         1
  these are all
  minimal             1         0
  taken             always 1
  released          at least 0, at most 1
  taken - released  at least 0, at most 1
`},
		{[]string{"(*Desk).Book", "--rule", "mutex", "--ask", "taken > released"}, exitHolds, `(*Desk).Book, rule mutex, d.mu, at end
  yes: taken 1, released 0
      place  function                        taken  released
     m.go:8  Book      d.mu.Lock()               1         0
     m.go:9  Book      d.settle(quiet)
    m.go:13    settle  quiet is true
    m.go:14    settle  return
    m.go:10  Book      the function ends         1         0
`},
		{[]string{"Even", "--rule", "mutex"}, exitHolds, `(*Desk).Even, rule mutex, d.mu, at end
                  taken  released
  base                0         0
    + n1 times        1         1
  these are all
  minimal             0         0
  taken             at least 0, without bound
  released          at least 0, without bound
  taken - released  always 0
`},
		{[]string{"Even", "--rule", "mutex", "--at", "always", "--ask", "released > taken"}, exitBroken, "(*Desk).Even, rule mutex, d.mu, at any moment\n  no: no path has such counts\n"},
	} {
		args := append([]string{"count", "-C", dir}, c.args...)
		got, out, errs := start(t, args...)
		if got != c.status || out != c.want {
			t.Errorf("%v: status %d, want %d\n%s%s\nwant:\n%s", c.args, got, c.status, out, errs, c.want)
		}
	}
}

// Every answer of a function with a loop and two ways through it has its path.
func TestCountPaths(t *testing.T) {
	dir := module(t, map[string]string{"m.go": `package m

type Desk struct{ n int }

func (d *Desk) Six() { d.n += 6 }
func (d *Desk) Two() { d.n += 2 }

func Use(d *Desk, more []bool) {
	for _, m := range more {
		if m {
			d.Six()
			d.Two()
			d.Six()
		} else {
			d.Two()
			d.Six()
			d.Two()
		}
	}
}
`, "pathtally.rules": `import "example/m"

rule desk {
  each d *m.Desk stays
  count six: call (*m.Desk).Six on d
  count two: call (*m.Desk).Two on d
  claim apart at end: six != 3 || two != 3
  claim uneven at end: six != 2 || two != 2
}
`})
	for _, ask := range []string{"six == 2", "six == 3 && two == 3", "six == 20", "two == 2*six"} {
		status, out, errs := start(t, "count", "-C", dir, "Use", "--rule", "desk", "--ask", ask, "--format", "json")
		var r countResult
		if err := json.Unmarshal([]byte(out), &r); err != nil || status != exitHolds {
			t.Fatalf("%s: %d %v\n%s%s", ask, status, err, out, errs)
		}
		path := r.Images[0].Path
		for name, n := range r.Images[0].With {
			if len(path) == 0 || path[len(path)-1].Counts[name] != n.Int64() {
				t.Errorf("%s: the path does not end in %v\n%s", ask, r.Images[0].With, out)
			}
		}
	}
	// Claims that take the count image are judged.
	status, out, errs := start(t, "check", "-C", dir, "--only", "desk/apart")
	if status != exitBroken || !strings.Contains(out, "3 != 3 is false") {
		t.Errorf("apart: %d\n%s%s", status, out, errs)
	}
	if status, out, errs := start(t, "check", "-C", dir, "--only", "desk/uneven"); status != exitHolds {
		t.Errorf("uneven: %d\n%s%s", status, out, errs)
	}
}

// foldSets keeps the union.
func TestFoldSets(t *testing.T) {
	v := func(n ...int64) []*big.Int {
		var out []*big.Int
		for _, x := range n {
			out = append(out, big.NewInt(x))
		}
		return out
	}
	sets := func() []parikh.LinearSet {
		return []parikh.LinearSet{
			{Base: v(0, 0)}, {Base: v(1, 1)}, {Base: v(2, 2), Periods: [][]*big.Int{v(1, 1)}},
			{Base: v(5, 0), Periods: [][]*big.Int{v(0, 3)}}, {Base: v(6, 0), Periods: [][]*big.Int{v(0, 3), v(1, 0)}},
			{Base: v(0, 7)}, {Base: v(1, 7), Periods: [][]*big.Int{v(1, 0), v(0, 2)}}, // (0,7) + (0,2)n is not there
		}
	}
	members := func(ss []parikh.LinearSet) map[string]bool {
		m := map[string]bool{}
		for _, s := range ss {
			ps := append(slices.Clone(s.Periods), v(0, 0), v(0, 0))
			for i := range int64(13) {
				for j := range int64(13) {
					x := s.Base[0].Int64() + i*ps[0][0].Int64() + j*ps[1][0].Int64()
					y := s.Base[1].Int64() + i*ps[0][1].Int64() + j*ps[1][1].Int64()
					if x <= 12 && y <= 12 {
						m[fmt.Sprint(x, y)] = true
					}
				}
			}
		}
		return m
	}
	folded := foldSets(sets())
	if len(folded) != 4 {
		t.Errorf("%d sets are left: %v", len(folded), folded)
	}
	if want, got := members(sets()), members(folded); !maps.Equal(want, got) {
		t.Errorf("before %v\nafter  %v", want, got)
	}
}

// An exported system counts what the function counts.
func TestExportCountsTheSame(t *testing.T) {
	dir := module(t, bookModule)
	for _, name := range []string{"Book", "Even"} {
		_, want, _ := start(t, "count", "-C", dir, name, "--rule", "mutex")
		status, out, errs := start(t, "export", "-C", dir, "--function", name, "--rule", "mutex")
		if status != exitHolds {
			t.Fatalf("export: %d %s", status, errs)
		}
		file := filepath.Join(t.TempDir(), "system.json")
		if err := os.WriteFile(file, []byte(out), 0o644); err != nil {
			t.Fatal(err)
		}
		_, got, errs := start(t, "count", "--system", file)
		_, want, _ = strings.Cut(want, "\n")
		_, got, _ = strings.Cut(got, "\n")
		if got != want || want == "" {
			t.Errorf("%s: the export counts\n%s%s\nthe function\n%s", name, got, errs, want)
		}
		if status, again, _ := start(t, "export", "--system", file); status != exitHolds || again != out {
			t.Errorf("%s: reading and writing changes the system", name)
		}
	}
	status, out, _ := start(t, "export", "-C", dir, "--rule", "mutex", "--format", "dot")
	if status != exitHolds || !strings.HasPrefix(out, "digraph") || !strings.Contains(out, "d.mu.Unlock()") {
		t.Errorf("dot: %d\n%s", status, out)
	}
	status, out, errs := start(t, "export", "-C", dir, "--function", "Book", "--rule", "mutex", "--format", "smt2", "--ask", "taken == 2")
	if status != exitHolds || !strings.Contains(out, "(set-logic QF_LIA)") || !strings.Contains(out, "(check-sat)") {
		t.Errorf("smt2: %d\n%s%s", status, out, errs)
	}
}

func TestCountSVG(t *testing.T) {
	file := filepath.Join(t.TempDir(), "grid.svg")
	if status, _, errs := start(t, "count", "--system", image("running-example.json"), "--counts", "b,c", "--grid", "4", "--svg", file); status != exitHolds {
		t.Fatalf("%d %s", status, errs)
	}
	data, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	d := xml.NewDecoder(strings.NewReader(string(data)))
	for {
		if _, err := d.Token(); err == io.EOF {
			break
		} else if err != nil {
			t.Fatalf("no XML: %v\n%s", err, data)
		}
	}
	// c == 0 only with b == 0; otherwise b < c: 1 + 1 + 2 + 3 + 4 of 25.
	if yes, no := strings.Count(string(data), ": yes</title>"), strings.Count(string(data), ": no</title>"); yes != 11 || no != 14 {
		t.Errorf("%d filled and %d hollow cells", yes, no)
	}
}

func TestCountErrors(t *testing.T) {
	dir := module(t, bookModule)
	bad := filepath.Join(t.TempDir(), "bad.json")
	if err := os.WriteFile(bad, []byte(`{"format": "pathtally-system", "version": 1, "counts": ["a"], "states": ["q"], "symbols": ["S"], "starts": [{"state": "q", "symbol": "T"}]}`), 0o644); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		args []string
		want string
	}{
		{[]string{"count"}, "which function"},
		{[]string{"count", "--system", image("brackets.json"), "--ask", "opn > 1"}, `unknown name "opn"`},
		{[]string{"count", "--system", image("brackets.json"), "--ask", "open = 1"}, "column 6"},
		{[]string{"count", "--system", image("brackets.json"), "--member", "1,2"}, "2 numbers and 4 counts"},
		{[]string{"count", "--system", image("brackets.json"), "--member", "shut=1"}, "there is no count shut"},
		{[]string{"count", "--system", image("nuggets.json"), "--grid", "3"}, "needs two counts"},
		{[]string{"count", "--system", image("nuggets.json"), "--counts", "b"}, "there is no count b"},
		{[]string{"count", "--system", "no-such-file.json"}, "no-such-file.json"},
		{[]string{"count", "--system", bad}, "starts[0]"},
		{[]string{"count", "--system", image("nuggets.json"), "Book"}, "a system has no functions"},
		{[]string{"count", "-C", dir, "Bok", "--rule", "mutex"}, "(*Desk).Book"},
		{[]string{"count", "-C", dir, "Book", "--rule", "mutx"}, "no such rule"},
		{[]string{"count", "-C", dir, "Book", "--rule", "mutex", "--instance", "e.mu"}, `"d.mu"`},
		{[]string{"count", "-C", dir, "Book", "--rule", "mutex", "--at", "noon"}, "there are end"},
		{[]string{"export", "-C", dir}, "of which rule"},
		{[]string{"export", "-C", dir, "--rule", "mutex", "--format", "smt2"}, "--ask FORMULA"},
		{[]string{"export", "-C", dir, "--rule", "mutex", "--format", "smt2", "--ask", "taken > 0"}, "one start"},
		{[]string{"export", "--system", image("brackets.json"), "--format", "smt2", "--ask", "(open"}, "--ask, column"},
	} {
		status, out, errs := start(t, c.args...)
		if status != exitFailed || out != "" || !strings.Contains(errs, c.want) {
			t.Errorf("%v: status %d, out %q, want %q in:\n%s", c.args, status, out, c.want, errs)
		}
		if c.args[0] == "export" {
			continue
		}
		status, out, _ = start(t, append(c.args, "--format", "json")...)
		var v map[string]any
		if err := json.Unmarshal([]byte(out), &v); status != exitFailed || err != nil || v["error"] == nil {
			t.Errorf("%v: status %d, JSON %v: %s", c.args, status, err, out)
		}
	}
}
