package accept

import (
	"cmp"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"unicode/utf8"
)

// FileName is the file at the module root.
const FileName = "pathtally.accepted"

// The two kinds of entries.
const (
	Broken    = "broken"
	Undecided = "undecided"
)

// An Entry accepts one finding or one undecided question.
type Entry struct {
	Kind        string // Broken or Undecided
	Claim       string // RULE/CLAIM
	Fingerprint string // 16 hexadecimal digits
	Package     string // import path of the function's package
	Function    string
	Instance    string // as the source wrote it; "" if there is none
	Cause       string // file, function and text of the step that loses it; what stopped it, for a question
	Build       string // "linux/amd64", "linux/amd64 with tests": the run that saw it; others do not call it stale
	Reason      string // never empty
	Line        int    // in the file; 0 for an entry that was not read
}

// A File is the content of pathtally.accepted. The zero value is an empty one.
type File struct {
	Entries []Entry // sorted by package, function, claim, fingerprint
}

// An Error is a mistake in the file or in a directive.
type Error struct {
	File   string
	Line   int
	Column int // 0 in the file, where the line is enough
	Text   string
}

func (e *Error) Error() string {
	if e.Column > 0 {
		return fmt.Sprintf("%s:%d:%d: %s", e.File, e.Line, e.Column, e.Text)
	}
	return fmt.Sprintf("%s:%d: %s", e.File, e.Line, e.Text)
}

const head = `# What pathtally found here and somebody decided to live with. Written by
# "pathtally accept"; the reasons are yours to edit. Drop what is gone with
# "pathtally accept --prune".
`

// Parse reads a file; name is for errors. Errors are of type *Error.
func Parse(name, text string) (*File, error) {
	f := &File{}
	pkg := ""
	var cur *Entry
	last := "" // label that a continuation line belongs to
	seen := map[string]int{}
	fail := func(line int, format string, args ...any) error {
		return &Error{File: name, Line: line, Text: fmt.Sprintf(format, args...)}
	}
	closeEntry := func() error {
		if cur == nil {
			return nil
		}
		if cur.Reason == "" {
			return fail(cur.Line, "the entry for %s in %s has no reason; write a line \"reason\" below it", cur.Claim, cur.Function)
		}
		f.Entries = append(f.Entries, *cur)
		cur = nil
		return nil
	}
	if !utf8.ValidString(text) {
		return nil, fail(1, "the file is not UTF-8 text")
	}
	for i, raw := range strings.Split(text, "\n") {
		n := i + 1
		line := strings.TrimRight(raw, " \t\r")
		words := strings.Fields(line)
		if len(words) == 0 || strings.HasPrefix(words[0], "#") {
			continue
		}
		if strings.HasPrefix(line, "<<<<<<<") || strings.HasPrefix(line, "=======") || strings.HasPrefix(line, ">>>>>>>") {
			return nil, fail(n, "a merge was left unfinished here; keep the blocks of both sides")
		}
		indented := line[0] == ' ' || line[0] == '\t'
		switch {
		case !indented && words[0] == "package":
			if err := closeEntry(); err != nil {
				return nil, err
			}
			if len(words) != 2 {
				return nil, fail(n, "expected one import path behind package")
			}
			pkg = words[1]
		case !indented && (words[0] == Broken || words[0] == Undecided):
			if err := closeEntry(); err != nil {
				return nil, err
			}
			if len(words) != 3 || strings.Count(words[1], "/") != 1 || !isFingerprint(words[2]) {
				return nil, fail(n, "expected %s RULE/CLAIM and 16 hexadecimal digits", words[0])
			}
			if pkg == "" {
				return nil, fail(n, "expected a line with the package before the first block")
			}
			if at, again := seen[words[2]]; again {
				return nil, fail(n, "%s is accepted in line %d already", words[2], at)
			}
			seen[words[2]] = n
			cur, last = &Entry{Kind: words[0], Claim: words[1], Fingerprint: words[2], Package: pkg, Line: n}, ""
		case indented && cur != nil:
			rest := strings.TrimSpace(strings.TrimPrefix(strings.TrimSpace(line), words[0]))
			switch words[0] {
			case "function":
				cur.Function = rest
			case "instance":
				cur.Instance = rest
			case "cause":
				cur.Cause = rest
			case "build":
				cur.Build = rest
			case "reason":
				cur.Reason = rest
			default:
				if last != "reason" {
					return nil, fail(n, "expected function, instance, cause, build or reason, found %s", words[0])
				}
				// A long reason goes on in the next line.
				cur.Reason = strings.TrimSpace(cur.Reason + " " + strings.TrimSpace(line))
				continue
			}
			last = words[0]
		default:
			return nil, fail(n, "expected package, broken or undecided, found %s", words[0])
		}
	}
	if err := closeEntry(); err != nil {
		return nil, err
	}
	f.sort()
	return f, nil
}

func isFingerprint(s string) bool {
	return len(s) == 16 && strings.Trim(s, "0123456789abcdef") == ""
}

func (f *File) sort() {
	slices.SortStableFunc(f.Entries, func(a, b Entry) int {
		return cmp.Or(strings.Compare(a.Package, b.Package), strings.Compare(a.Function, b.Function),
			strings.Compare(a.Claim, b.Claim), strings.Compare(a.Fingerprint, b.Fingerprint))
	})
}

// String is the file as text; Parse reads it back. Reasons are broken at
// reasonWidth columns, so that a review shows them whole.
func (f *File) String() string {
	f.sort()
	var b strings.Builder
	b.WriteString(head)
	pkg := ""
	for _, e := range f.Entries {
		if e.Package != pkg {
			pkg = e.Package
			fmt.Fprintf(&b, "\npackage %s\n", pkg)
		}
		fmt.Fprintf(&b, "\n%s %s %s\n", e.Kind, e.Claim, e.Fingerprint)
		line := func(label, text string) {
			if text != "" {
				fmt.Fprintf(&b, "    %-8s  %s\n", label, text)
			}
		}
		line("function", e.Function)
		line("instance", e.Instance)
		line("cause", e.Cause)
		line("build", e.Build)
		for i, part := range broken(e.Reason, reasonWidth) {
			if i == 0 {
				line("reason", part)
			} else {
				fmt.Fprintf(&b, "              %s\n", part)
			}
		}
	}
	return b.String()
}

const reasonWidth = 90

// labels may not begin a continuation line, where they would be read as labels.
var labels = []string{"function", "instance", "cause", "build", "reason"}

// broken splits a text into lines of at most width columns, at spaces.
func broken(text string, width int) []string {
	var lines []string
	cur := ""
	for _, w := range strings.Fields(text) {
		if cur != "" && utf8.RuneCountInString(cur)+1+utf8.RuneCountInString(w) > width && !slices.Contains(labels, w) && !strings.HasPrefix(w, "#") {
			lines = append(lines, cur)
			cur = ""
		}
		if cur != "" {
			cur += " "
		}
		cur += w
	}
	return append(lines, cur)
}

// Read reads the file of a module; one that is not there is empty.
func Read(root string) (*File, error) {
	text, err := os.ReadFile(filepath.Join(root, FileName))
	if os.IsNotExist(err) {
		return &File{}, nil
	}
	if err != nil {
		return nil, err
	}
	return Parse(FileName, string(text))
}

// Write replaces the file of a module in one step.
func (f *File) Write(root string) error {
	t, err := os.CreateTemp(root, FileName+".*")
	if err != nil {
		return err
	}
	_, err = t.WriteString(f.String())
	if e := t.Chmod(0o644); err == nil {
		err = e
	}
	if e := t.Close(); err == nil {
		err = e
	}
	if err == nil {
		err = os.Rename(t.Name(), filepath.Join(root, FileName))
	}
	if err != nil {
		os.Remove(t.Name())
	}
	return err
}
