package accept

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"pathtally/properties"
	"pathtally/properties/judge"
)

func entry(pkg, fn, print string) Entry {
	return Entry{Kind: Broken, Claim: "mutex/balanced", Fingerprint: print, Package: pkg, Function: fn, Instance: "d.mu", Cause: "a.go: f: return", Build: "linux/amd64", Reason: "because"}
}

const (
	printA = "00000000000000aa"
	printB = "00000000000000bb"
	printC = "00000000000000cc"
)

func TestFileReadsBack(t *testing.T) {
	long := entry("example/b", "F", printC)
	long.Reason = strings.Repeat("a reason of many words and of build and reason itself ", 8) + "#4711"
	long.Kind = Undecided
	f := &File{Entries: []Entry{long, entry("example/b", "(*T).M", printB), entry("example/a", "G", printA)}}
	text := f.String()
	got, err := Parse(FileName, text)
	if err != nil {
		t.Fatalf("%v\n%s", err, text)
	}
	if len(got.Entries) != 3 || got.Entries[0].Package != "example/a" || got.Entries[1].Function != "(*T).M" || got.Entries[2].Reason != strings.TrimSpace(long.Reason) || got.Entries[2].Kind != Undecided {
		t.Errorf("read back as %+v", got.Entries)
	}
	if again := got.String(); again != text {
		t.Errorf("written again:\n%s\nwant:\n%s", again, text)
	}
	for i, line := range strings.Split(text, "\n") {
		if len(line) > 14+reasonWidth+20 {
			t.Errorf("line %d has %d characters", i+1, len(line))
		}
	}
}

func TestParseErrors(t *testing.T) {
	block := "package p\n\nbroken r/c 00000000000000aa\n    function  f\n    reason    x\n"
	for _, c := range []struct {
		text string
		line int
		want string
	}{
		{strings.Replace(block, "    reason    x\n", "", 1), 3, "no reason"},
		{strings.Replace(block, "reason    x", "reason", 1), 3, "no reason"},
		{strings.Replace(block, "broken", "accepted", 1), 3, "expected package, broken or undecided"},
		{strings.Replace(block, "00aa", "00a", 1), 3, "16 hexadecimal digits"},
		{strings.Replace(block, "r/c", "r", 1), 3, "RULE/CLAIM"},
		{strings.TrimPrefix(block, "package p\n"), 2, "package"},
		{strings.Replace(block, "function", "funktion", 1), 4, "funktion"},
		{block + "\nbroken r/c 00000000000000aa\n    reason y\n", 7, "line 3 already"},
		{"<<<<<<< ours\n" + block, 1, "merge"},
		{"package\n", 1, "import path"},
		{"\xff", 1, "UTF-8"},
	} {
		_, err := Parse(FileName, c.text)
		var e *Error
		if !errors.As(err, &e) || e.Line != c.line || !strings.Contains(e.Text, c.want) {
			t.Errorf("%q: %v, want line %d with %q", c.text, err, c.line, c.want)
		}
	}
}

func FuzzParse(f *testing.F) {
	f.Add((&File{Entries: []Entry{entry("example/a", "G", printA)}}).String())
	f.Add("package p\nbroken a/b 0123456789abcdef\n reason x\n  more reason\n")
	f.Fuzz(func(t *testing.T, text string) {
		got, err := Parse(FileName, text)
		if err != nil {
			return
		}
		again, err := Parse(FileName, got.String())
		if err != nil {
			t.Fatalf("%v\nof\n%s", err, got)
		}
		if len(again.Entries) != len(got.Entries) || again.String() != got.String() {
			t.Fatalf("%s\nand\n%s", got, again)
		}
	})
}

func TestDirectives(t *testing.T) {
	src := "package p\n\nfunc f() {\n\tg() //pathtally:accept mutex/balanced: it is given back: later\n\t_ = `//pathtally:accept a/b: in a string`\n\t//pathtally:acceptance is another word\n}\n"
	ds, err := Directives("p.go", []byte(src))
	if err != nil || len(ds) != 1 {
		t.Fatalf("%v %v", ds, err)
	}
	if d := ds[0]; d.Line != 4 || d.Column != 6 || d.Claim != "mutex/balanced" || d.Reason != "it is given back: later" {
		t.Errorf("%+v", d)
	}
	for bad, want := range map[string]string{"//pathtally:accept": "write", "//pathtally:accept a/b": "reason", "//pathtally:accept a/b:  ": "reason", "//pathtally:accept a/b c: x": "write"} {
		_, err := Directives("p.go", []byte("package p\n\n"+bad+"\n"))
		var e *Error
		if !errors.As(err, &e) || e.Line != 3 || !strings.Contains(e.Text, want) {
			t.Errorf("%s: %v", bad, err)
		}
	}
}

func finding(print, pkg string, line int) judge.Finding {
	return judge.Finding{Rule: "mutex", Claim: "balanced", Fingerprint: print, Blame: properties.Func{Name: "f", Package: pkg},
		Cause: judge.Spot{Place: properties.Place{File: "p.go", Line: line, Column: 1}}}
}

func TestApply(t *testing.T) {
	r := &judge.Result{Findings: []judge.Finding{finding(printA, "p", 10), finding(printB, "p", 20)},
		Open: []judge.Open{{Rule: "mutex", Claim: "balanced", Root: properties.Func{Name: "g", Package: "p"}}}}
	open := r.Open[0].Fingerprint()
	wrongKind := entry("p", "g", open)
	f := &File{Entries: []Entry{entry("p", "f", printA), entry("p", "f", printC), entry("q", "f", "00000000000000dd"), wrongKind}}
	ds := []Directive{{File: "p.go", Line: 19, Column: 2, Claim: "mutex/balanced", Reason: "above"}, {File: "p.go", Line: 30, Column: 2, Claim: "mutex/balanced", Reason: "nothing"},
		{File: "p.go", Line: 20, Column: 2, Claim: "file/closed", Reason: "not judged"}}
	scope := Scope{Package: func(p string) bool { return p == "p" }, Claim: func(c string) bool { return c == "mutex/balanced" }, Build: "linux/amd64"}
	a := Apply(r, f, ds, scope)
	if got := a.Accepted[printA]; got.Reason != "because" || got.Source {
		t.Errorf("by the file: %+v", got)
	}
	if got := a.Accepted[printB]; got.Reason != "above" || !got.Source || got.Where != "p.go:19:2" {
		t.Errorf("by a directive: %+v", got)
	}
	if len(a.Accepted) != 2 {
		t.Errorf("accepted %v: an entry of the other kind accepts nothing", a.Accepted)
	}
	var stale []string
	for _, s := range a.Stale {
		stale = append(stale, s.File+" "+s.Fingerprint)
	}
	if want := []string{"p.go ", FileName + " " + open, FileName + " " + printC}; strings.Join(sorted(stale), ";") != strings.Join(sorted(want), ";") {
		t.Errorf("stale %q, want %q", stale, want)
	}
	// Another build says nothing about what only this one saw.
	scope.Build = "windows/arm64"
	for _, s := range Apply(r, f, ds, scope).Stale {
		if s.Fingerprint == printC {
			t.Error("stale in a build that was not the one that saw it")
		}
	}
	pruned, n := Prune(f, a)
	if n != 2 || len(pruned.Entries) != 2 {
		t.Errorf("pruned %d, left %+v", n, pruned.Entries)
	}
}

func sorted(s []string) []string {
	for i := range s {
		for k := i; k > 0 && s[k] < s[k-1]; k-- {
			s[k], s[k-1] = s[k-1], s[k]
		}
	}
	return s
}

func TestUpdateKeepsReasons(t *testing.T) {
	old := entry("p", "f", printA)
	now := entry("p", "f", printA)
	now.Reason, now.Instance, now.Build = "today's", "desk.mu", "windows/arm64"
	f := Update(&File{Entries: []Entry{old}}, []Entry{now, entry("a", "g", printB)})
	if len(f.Entries) != 2 || f.Entries[0].Package != "a" {
		t.Fatalf("%+v", f.Entries)
	}
	if e := f.Entries[1]; e.Reason != "because" || e.Instance != "desk.mu" || e.Build != "linux/amd64, windows/arm64" {
		t.Errorf("%+v", e)
	}
}

func TestWriteAndRead(t *testing.T) {
	dir := t.TempDir()
	if f, err := Read(dir); err != nil || len(f.Entries) != 0 {
		t.Fatalf("no file: %v %v", f, err)
	}
	f := &File{Entries: []Entry{entry("p", "f", printA)}}
	if err := f.Write(dir); err != nil {
		t.Fatal(err)
	}
	got, err := Read(dir)
	if err != nil || len(got.Entries) != 1 {
		t.Fatalf("%v %v", got, err)
	}
	names, err := filepath.Glob(filepath.Join(dir, "*"))
	if err != nil || len(names) != 1 {
		t.Errorf("files %v, %v", names, err)
	}
	if err := f.Write(filepath.Join(dir, "none")); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("into a folder that is not there: %v", err)
	}
}
