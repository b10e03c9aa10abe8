package report

import (
	"bytes"
	"encoding/json"
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"unicode/utf8"

	"pathtally/properties"
	"pathtally/properties/judge"
)

var update = flag.Bool("update", false, "write the golden files")

func golden(t *testing.T, name string, got []byte) {
	t.Helper()
	file := filepath.Join("testdata", name)
	if *update {
		if err := os.WriteFile(file, got, 0o644); err != nil {
			t.Fatal(err)
		}
		return
	}
	want, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(got, want) {
		t.Errorf("%s differs; got:\n%s\nwant:\n%s", name, got, want)
	}
}

func at(line, col int) properties.Place {
	return properties.Place{File: "berth/desk.go", Line: line, Column: col}
}

// sample is the finding that OUTPUT and README show, with a second one whose
// path crosses files and is long enough to be folded.
func sample() *Run {
	book := properties.Func{Name: "(*Desk).Book", Package: "example/harbour/berth", Place: at(41, 1)}
	step := func(line, col int, fn string, kind properties.StepKind, text string, depth int, a, b int64, changed bool) judge.PathStep {
		return judge.PathStep{Place: at(line, col), Function: fn, Kind: kind, Text: text, Depth: depth, Counts: []int64{a, b}, Changed: changed}
	}
	one := judge.Finding{
		Rule: "mutex", Claim: "balanced", Point: "at end", Formula: "taken == released", Broken: "taken == released",
		Message: "(*Desk).Book can return with d.mu still taken", Root: book, RootKind: "exported", Blame: book, Instance: "d.mu",
		Opened: judge.Spot{Place: at(42, 2), Function: "(*Desk).Book", Text: "d.mu.Lock()"}, OpenedVerb: "taken at",
		Cause: judge.Spot{Place: at(57, 3), Function: "(*Desk).settle", Text: "return"}, CauseText: "this return passes by d.mu.Unlock() in line 59",
		CountNames: []string{"taken", "released"}, Counts: []int64{1, 0}, Fact: "1 == 0 is false", Fingerprint: "7f3a91c20d5be844", Starts: 1,
		Path: []judge.PathStep{
			step(42, 2, "(*Desk).Book", "event", "d.mu.Lock()", 0, 1, 0, true),
			step(43, 2, "(*Desk).Book", "defer", "defer d.settle(urgent)", 0, 1, 0, false),
			step(46, 3, "(*Desk).Book", "return", "return err", 0, 1, 0, false),
			step(43, 2, "(*Desk).Book", "call", "the deferred call runs", 0, 1, 0, false),
			step(55, 5, "(*Desk).settle", "branch", "urgent is true", 1, 1, 0, false),
			step(57, 3, "(*Desk).settle", "return", "return", 1, 1, 0, false),
			{Function: "(*Desk).Book", Kind: "end", Text: "has returned", Counts: []int64{1, 0}},
		},
	}
	two := one
	two.Claim, two.Fingerprint, two.Advice, two.Reason, two.Starts = "not-early", "00aa11bb22cc33dd", true, "the owner may be elsewhere", 3
	two.Root = properties.Func{Name: "main", Package: "example/harbour/cmd/office", Place: properties.Place{File: "cmd/office/main.go", Line: 9, Column: 1}}
	two.Assumptions = []properties.Note{{Kind: "no body", Place: at(44, 7), Text: "syscall.Sync meets no event"}}
	two.Path = nil
	for i := range 20 {
		s := step(100+i, 2, "(*Desk).Book", "branch", fmt.Sprintf("turn %d of a rather long text that says more than there is room for on a line of eighty columns", i), i%3, 0, 0, false)
		s.Changed = i == 9 || i == 11
		if i >= 9 {
			s.Counts = []int64{0, 1}
		}
		if i >= 11 {
			s.Counts = []int64{123456, 1}
		}
		if i > 15 {
			s.Place.File = "cmd/office/main.go"
		}
		two.Path = append(two.Path, s)
	}
	three := one
	three.Claim, three.Fingerprint, three.Point, three.Formula = "not-twice", "1234567890abcdef", "always", "taken - released <= 1"
	return &Run{
		Version: "0.1", Rulesets: []Ruleset{{"std", "1"}}, Module: "example/harbour", Builds: []string{"linux/amd64"},
		Packages: 38, Functions: 2904, WithEvents: 611,
		NotJudged: []Left{{"3 files", "build constraints"}, {"module tools/gen", "not named"}, {"C code behind 2 calls", "out of sight"}},
		Result: &judge.Result{
			Findings: []judge.Finding{one, three, two},
			Open: []judge.Open{{Rule: "permit", Claim: "back", Point: "at end", Formula: "taken == back",
				Root: properties.Func{Name: "(*Pool).refill", Package: "example/harbour/depot"}, Instance: "p.permits",
				Place:     properties.Place{File: "depot/refill.go", Line: 88, Column: 1},
				StoppedBy: "steps, 200,000 for one start", SoFar: "nothing broken on what was seen; that is not an answer", Steps: 800000},
				{Rule: "permit", Claim: "room", Point: "always", Formula: "taken - back <= 1",
					Root: properties.Func{Name: "(*Pool).refill", Package: "example/harbour/depot"}, Instance: "p.permits",
					Place:     properties.Place{File: "depot/refill.go", Line: 88, Column: 1},
					StoppedBy: "steps, 200,000 for one start", SoFar: "nothing broken on what was seen; that is not an answer", Steps: 800000}},
			Questions: []judge.Question{
				{Rule: "mutex", Claim: "balanced", Root: book, Instance: "d.mu", Verdict: judge.Broken, Grounds: one.Message},
				{Rule: "mutex", Claim: "not-twice", Root: book, Instance: "d.mu", Verdict: judge.Holds, Grounds: "greatest taken - released on a path is 1"},
			},
			Assumptions: two.Assumptions,
			Tally:       judge.Tally{Roots: 143, Instances: 98, Questions: 412, Holds: 408, Broken: 2, Undecided: 2, Advice: 1},
			Cut:         []string{"main: 20 findings of mutex/balanced, more exist"},
		},
	}
}

func TestGolden(t *testing.T) {
	run := sample()
	for _, c := range []struct {
		name  string
		print func(w *bytes.Buffer) error
	}{
		{"text.golden", func(w *bytes.Buffer) error { return Text(w, run, Options{}) }},
		{"verbose.golden", func(w *bytes.Buffer) error {
			return Text(w, run, Options{Verbose: true, Assumptions: true, Width: 80})
		}},
		{"lines.golden", func(w *bytes.Buffer) error { return Lines(w, run, Options{}) }},
		{"json.golden", func(w *bytes.Buffer) error { return JSON(w, run) }},
		{"about.golden", func(w *bytes.Buffer) error {
			return About(w, run, func(q judge.Question) bool { return q.Root.Name == "(*Desk).Book" }, Options{})
		}},
	} {
		var w bytes.Buffer
		if err := c.print(&w); err != nil {
			t.Fatal(err)
		}
		golden(t, c.name, w.Bytes())
	}
}

func TestTextFitsItsWidth(t *testing.T) {
	for _, width := range []int{80, 100, 120} {
		var w bytes.Buffer
		if err := Text(&w, sample(), Options{Width: width, Verbose: true}); err != nil {
			t.Fatal(err)
		}
		for _, l := range strings.Split(w.String(), "\n") {
			if !strings.HasPrefix(l, " ") && strings.Contains(l, ".go:") {
				continue // a headline is as long as it must be
			}
			// The fact behind the last row may stand out by 20 columns; a wrapped line reads worse.
			if n := utf8.RuneCountInString(l); n > width+20 {
				t.Errorf("width %d: a line of %d columns: %s", width, n, l)
			}
			if strings.HasSuffix(l, " ") {
				t.Errorf("trailing space: %q", l)
			}
		}
	}
}

func TestColourOnlyWhenAsked(t *testing.T) {
	var plain, colour bytes.Buffer
	if err := Text(&plain, sample(), Options{}); err != nil {
		t.Fatal(err)
	}
	if err := Text(&colour, sample(), Options{Colour: true}); err != nil {
		t.Fatal(err)
	}
	if bytes.Contains(plain.Bytes(), []byte{0x1b}) {
		t.Error("plain text has an escape")
	}
	if !bytes.Contains(colour.Bytes(), []byte{0x1b}) {
		t.Error("coloured text has no escape")
	}
	stripped := colour.String()
	for {
		i := strings.Index(stripped, "\x1b[")
		if i < 0 {
			break
		}
		j := strings.IndexByte(stripped[i:], 'm')
		stripped = stripped[:i] + stripped[i+j+1:]
	}
	if normal(stripped) != normal(plain.String()) {
		t.Errorf("colour changes the words:\n%s\nwant:\n%s", stripped, plain.String())
	}
}

// normal drops spaces at line ends, which a colour's end may hide from trimming.
func normal(s string) string {
	lines := strings.Split(s, "\n")
	for i, l := range lines {
		lines[i] = strings.TrimRight(l, " ")
	}
	return strings.Join(lines, "\n")
}

func TestFoldKeepsWhatCounts(t *testing.T) {
	f := &sample().Result.Findings[2]
	rows := fold(f, false)
	if len(rows) >= len(f.Path) {
		t.Fatalf("%d rows for %d steps: nothing was folded", len(rows), len(f.Path))
	}
	seen, total := map[int]bool{}, 0
	for _, r := range rows {
		if r.step >= 0 {
			seen[r.step] = true
			total++
		} else {
			total += r.skip
		}
	}
	if total != len(f.Path) {
		t.Errorf("rows stand for %d steps of %d", total, len(f.Path))
	}
	for i, s := range f.Path {
		if s.Changed && !seen[i] {
			t.Errorf("step %d counts and was folded", i)
		}
	}
	if !seen[0] || !seen[len(f.Path)-1] {
		t.Error("an end was folded")
	}
}

func TestJSONIsValidOnErrors(t *testing.T) {
	var w bytes.Buffer
	if err := JSONError(&w, "0.1", "rules", "no method \"Unlok\" <&>\n", []string{"pathtally.rules:14:40"}); err != nil {
		t.Fatal(err)
	}
	var v struct {
		Schema int
		Error  struct {
			Stage, Message string
			Places         []string
		}
	}
	if err := json.Unmarshal(w.Bytes(), &v); err != nil {
		t.Fatal(err)
	}
	if v.Schema != 1 || v.Error.Stage != "rules" || v.Error.Message != "no method \"Unlok\" <&>\n" || len(v.Error.Places) != 1 {
		t.Errorf("read back %+v", v)
	}
}

func TestJSONHasNoNullList(t *testing.T) {
	var w bytes.Buffer
	if err := JSON(&w, &Run{Result: &judge.Result{}}); err != nil {
		t.Fatal(err)
	}
	if strings.Contains(w.String(), "null") {
		t.Errorf("null in an empty run:\n%s", w.String())
	}
}

// A finding that follows from another is one line below it, and a block of its
// own where the other is not shown.
func TestFollowingFinding(t *testing.T) {
	run := sample()
	fs := run.Result.Findings
	fs[2].Follows = fs[0].Fingerprint
	var w bytes.Buffer
	if err := Text(&w, run, Options{}); err != nil {
		t.Fatal(err)
	}
	if out := w.String(); !strings.Contains(out, "leads to    berth/desk.go:57:3") || strings.Contains(out, "desk.go:57:3: advice") {
		t.Errorf("not folded:\n%s", out)
	}
	run.Result.Findings = fs[2:]
	w.Reset()
	if err := Text(&w, run, Options{}); err != nil {
		t.Fatal(err)
	}
	if out := w.String(); !strings.Contains(out, "desk.go:57:3: advice") {
		t.Errorf("lost:\n%s", out)
	}
}
