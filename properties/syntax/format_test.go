package syntax

import (
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// tokensAndComments is what formatting must keep.
func tokensAndComments(t testing.TB, src string) (toks, comments []string) {
	t.Helper()
	f := newFile("", src)
	for _, tok := range lex(f) {
		if tok.err != nil {
			t.Fatalf("%v in\n%s", tok.err, src)
		}
		if tok.Text == ";" && (len(toks) == 0 || toks[len(toks)-1] == ";") {
			continue
		}
		toks = append(toks, tok.Text)
	}
	for _, c := range f.Comments {
		comments = append(comments, strings.TrimRight(c.Text, " \t"))
	}
	return toks, comments
}

func checkFormat(t testing.TB, name, src string) {
	t.Helper()
	once, err := Format(name, src)
	if err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	twice, err := Format(name, once)
	if err != nil {
		t.Fatalf("%s formats to something malformed: %v\n%s", name, err, once)
	}
	if once != twice {
		t.Fatalf("%s does not format to itself:\n%s\nthen\n%s", name, once, twice)
	}
	a, ac := tokensAndComments(t, src)
	b, bc := tokensAndComments(t, once)
	if !slices.Equal(a, b) {
		t.Fatalf("%s: tokens differ:\n%q\n%q", name, a, b)
	}
	if !slices.Equal(ac, bc) {
		t.Fatalf("%s: comments differ:\n%q\n%q", name, ac, bc)
	}
}

func TestFormatKeepsTokens(t *testing.T) {
	for _, name := range append(ruleFiles(t), "testdata/every.rules") {
		src, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		checkFormat(t, filepath.Base(name), string(src))
		checkFormat(t, filepath.Base(name), strings.ReplaceAll(string(src), "\n", "\r\n"))
	}
}

func TestFormatLayout(t *testing.T) {
	src := "// head\n\n\n\nimport \"sync\"; import \"os\" // both\n// doc\nrule a { // why\n\n\n // first\n each  m *sync.Mutex stays; count n:\n call (*sync.Mutex).Lock // here\n // own\n on m\n\n\n claim x always: n <= 1; // last\n // end\n} // done\nrule b{each c chan struct {} stays; holds `\n x  y\n`}\ndisable a\n reason \"r\"\n// tail"
	want := `// head

import "sync"
import "os" // both

// doc
rule a { // why
  // first
  each m *sync.Mutex stays
  count n:
      call (*sync.Mutex).Lock // here
      // own
      on m

  claim x always: n <= 1 // last
  // end
} // done

rule b{
  each c chan struct {} stays
  holds ` + "`\n x  y\n`" + `
}

disable a
    reason "r"
// tail
`
	got, err := Format("x", src)
	if err != nil {
		t.Fatal(err)
	}
	if got != want {
		t.Errorf("got\n%s\nwant\n%s", got, want)
	}
	checkFormat(t, "x", src)
}

func TestFormatRefusesErrors(t *testing.T) {
	if out, err := Format("x", "rule a {"); err == nil || out != "" {
		t.Errorf("got %q, %v", out, err)
	}
}
