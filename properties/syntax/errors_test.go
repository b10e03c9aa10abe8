package syntax

import (
	"strings"
	"testing"
)

// TestText: the excerpt of a long line is cut around the place, whatever the
// bytes are, and the carets stand under the token.
func TestText(t *testing.T) {
	for _, fill := range []string{"x", "é", "\xa2", "\t"} {
		for _, before := range []int{0, 1, 50, 69, 70, 71, 72, 300} {
			for _, after := range []int{0, 5, 300} {
				src := strings.Repeat(fill, before) + "TOKEN" + strings.Repeat(fill, after)
				at := before * len(fill)
				e := &Error{File: "f", Line: 1, Column: at + 1, Source: src, Width: 5, Msg: "m", Hint: "h"}
				lines := strings.Split(e.Text(), "\n")
				if len(lines) != 5 || lines[3] != "    h" || lines[4] != "" {
					t.Fatalf("%q: %d lines: %q", src, len(lines), lines)
				}
				text, carets := []rune(lines[1]), []rune(lines[2])
				start := strings.IndexRune(lines[2], '^') // spaces and tabs only before it
				if string(carets[start:]) != "^^^^^" || string(text[start:start+5]) != "TOKEN" {
					t.Errorf("%q: carets are not under the token:\n%s\n%s", src, lines[1], lines[2])
				}
				if len(text) > shown+12 {
					t.Errorf("an excerpt of %d columns", len(text))
				}
			}
		}
	}
}

// TestNoControlCharacters: nothing that a file holds reaches the terminal raw.
func TestNoControlCharacters(t *testing.T) {
	_, err := Parse("x.rules", "rule a { \x1b[2J }\nrule b { claim x always: \"\x1b[31m\" \"\x1b\" }\n\x00")
	for _, r := range err.(Errors).Text() {
		if r < ' ' && r != '\n' || r == 0x7f {
			t.Errorf("control character %q in\n%q", r, err.(Errors).Text())
			break
		}
	}
}

func TestNear(t *testing.T) {
	names := []string{"Lock", "TryLock", "Unlock", "a"}
	for _, c := range [][2]string{
		{"Unlok", "Unlock"}, {"Unlockk", "Unlock"}, {"Unlcok", "Unlock"}, {"Unlick", "Unlock"}, {"lock", "Lock"},
		{"LOCK", "Lock"}, {"nlock", "Unlock"}, {"Unl", ""}, {"b", ""}, {"Lock", ""}, {"", ""}, {"Lokcs", ""},
	} {
		if got := Near(c[0], names); got != c[1] {
			t.Errorf("Near(%q) = %q, want %q", c[0], got, c[1])
		}
	}
}

func TestErrorsSortAndCap(t *testing.T) {
	var l Errors
	for i := range 25 {
		l = append(l, &Error{Stage: Stage(3 - i%4), File: "f", Line: 25 - i, Column: 1, Msg: "m"})
	}
	l.Sort()
	for i := 1; i < len(l); i++ {
		a, b := l[i-1], l[i]
		if a.Stage > b.Stage || a.Stage == b.Stage && a.Line > b.Line {
			t.Fatalf("%v stands before %v", a, b)
		}
	}
	text := l.Text()
	if n := strings.Count(text, ": m\n"); n != MostShown || !strings.HasSuffix(text, "and 5 more\n") {
		t.Errorf("%d shown:\n%s", n, text)
	}
}
