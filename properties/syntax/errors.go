package syntax

// Errors of rule files as a person sees them.

import (
	"fmt"
	"sort"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Stage is the step of reading at which an error was found. Errors are
// printed in the order of the stages.
type Stage uint8

const (
	Lexical Stage = iota
	Grammatical
	Naming // names and sorts inside the file
	Typing // names and types of the build
	Exemplary
)

// Error is one error of a rule file. The zero value is of no use.
type Error struct {
	Stage  Stage
	File   string // as the user should see it
	Line   int    // from 1
	Column int    // from 1, in bytes
	Source string // the line, without its end
	Width  int    // bytes from Column that are underlined; at least 1 caret is drawn
	Msg    string
	Hint   string // what there is instead; "" for none
}

// Error gives the error in one line.
func (e *Error) Error() string {
	return fmt.Sprintf("%s:%d:%d: %s", e.File, e.Line, e.Column, e.Msg)
}

// shown is the greatest number of bytes of a source line that is printed;
// longer ones are cut around the place.
const shown = 140

// Text gives the error in full: the place and the message, the line, carets
// under the token, and what there is instead. It ends in a line break.
func (e *Error) Text() string {
	var b strings.Builder
	b.WriteString(printable(e.Error()))
	b.WriteByte('\n')
	src := e.Source
	at := min(e.Column-1, len(src))
	end := min(at+max(e.Width, 0), len(src))
	// Leading space goes, so that the excerpt does not depend on how deep the
	// clause stands.
	lead := len(src) - len(strings.TrimLeft(src, " \t"))
	lead = min(lead, at)
	tail := len(src)
	prefix, suffix := "", ""
	if tail-lead > shown {
		if at-lead > shown/2 {
			lead = runeStart(src, at-shown/2)
			prefix = "…"
		}
		if tail-lead > shown {
			tail = runeStart(src, lead+shown)
			suffix = "…"
		}
		end = min(end, tail)
	}
	fmt.Fprintf(&b, "        %s%s%s\n        ", prefix, printable(src[lead:tail]), suffix)
	b.WriteString(strings.Repeat(" ", utf8.RuneCountInString(prefix)))
	for _, r := range src[lead:at] {
		if r != '\t' { // a tab stays one, so that the carets stand right
			r = ' '
		}
		b.WriteRune(r)
	}
	b.WriteString(strings.Repeat("^", max(1, utf8.RuneCountInString(src[at:max(at, end)]))))
	b.WriteByte('\n')
	if e.Hint != "" {
		fmt.Fprintf(&b, "    %s\n", printable(e.Hint))
	}
	return b.String()
}

// printable replaces control characters, which a file could use to write
// elsewhere on a terminal; tabs stay. The number of runes stays the same.
func printable(s string) string {
	return strings.Map(func(r rune) rune {
		if r != '\t' && unicode.IsControl(r) {
			return utf8.RuneError
		}
		return r
	}, s)
}

// runeStart moves i down to where a rune of s starts; where s is not UTF-8, i stays.
func runeStart(s string, i int) int {
	for n := 0; n < utf8.UTFMax && i-n > 0 && i < len(s); n++ {
		if utf8.RuneStart(s[i-n]) {
			return i - n
		}
	}
	return i
}

// Errors is a list of errors, as Sort orders it. As an error value it is never empty.
type Errors []*Error

// MostShown is the greatest number of errors that Text prints.
const MostShown = 20

// Error gives the first error and how many more there are.
func (l Errors) Error() string {
	switch len(l) {
	case 0:
		return "no errors"
	case 1:
		return l[0].Error()
	}
	return fmt.Sprintf("%s (and %d more)", l[0].Error(), len(l)-1)
}

// Text gives the first MostShown errors in full and says how many are left out.
func (l Errors) Text() string {
	var b strings.Builder
	for i, e := range l {
		if i == MostShown {
			fmt.Fprintf(&b, "and %d more\n", len(l)-i)
			break
		}
		b.WriteString(e.Text())
	}
	return b.String()
}

// Sort orders by stage, file, place and message.
func (l Errors) Sort() {
	sort.SliceStable(l, func(i, j int) bool {
		a, b := l[i], l[j]
		switch {
		case a.Stage != b.Stage:
			return a.Stage < b.Stage
		case a.File != b.File:
			return a.File < b.File
		case a.Line != b.Line:
			return a.Line < b.Line
		case a.Column != b.Column:
			return a.Column < b.Column
		}
		return a.Msg < b.Msg
	})
}

// Err gives nil for an empty list and the sorted list otherwise.
func (l Errors) Err() error {
	if len(l) == 0 {
		return nil
	}
	l.Sort()
	return l
}

// Near gives the first of names that is one edit (a letter more, less, other,
// or two neighbours swapped) or a change of case away from name, "" if none is.
func Near(name string, names []string) string {
	for _, n := range names {
		if n != name && (strings.EqualFold(n, name) || oneEdit(name, n)) {
			return n
		}
	}
	return ""
}

func oneEdit(a, b string) bool {
	x, y := []rune(a), []rune(b)
	if len(x) > len(y) {
		x, y = y, x
	}
	if len(y) < 2 || len(y)-len(x) > 1 {
		return false
	}
	i := 0
	for i < len(x) && x[i] == y[i] {
		i++
	}
	if len(x) < len(y) {
		return string(x[i:]) == string(y[i+1:])
	}
	if i == len(x) {
		return true
	}
	if string(x[i+1:]) == string(y[i+1:]) {
		return len(x) > 1
	}
	return i+1 < len(x) && x[i] == y[i+1] && x[i+1] == y[i] && string(x[i+2:]) == string(y[i+2:])
}

// Enumerate writes a list as a sentence does: "a, b and c" for the word "and".
func Enumerate(names []string, word string) string {
	switch len(names) {
	case 0:
		return ""
	case 1:
		return names[0]
	}
	return strings.Join(names[:len(names)-1], ", ") + " " + word + " " + names[len(names)-1]
}
