package report

import (
	"bytes"
	"encoding/xml"
	"io"
	"regexp"
	"strings"
	"testing"
)

func page1(t *testing.T, run *Run) string {
	t.Helper()
	var b bytes.Buffer
	if err := HTML(&b, run); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// The page is whole: every element is closed, every link goes to a place of it,
// every place is named once, and nothing outside is asked for.
func TestHTMLIsSelfContained(t *testing.T) {
	for name, run := range map[string]*Run{"sample": sample(), "gated": gated()} {
		text := page1(t, run)
		// The page is written so that it reads as XML, too, but for its first line
		// and two empty elements.
		x := regexp.MustCompile(`<(meta [^>]*)>`).ReplaceAllString(strings.TrimPrefix(text, "<!doctype html>\n"), "<$1/>")
		d := xml.NewDecoder(strings.NewReader(x))
		d.Strict = true
		d.Entity = xml.HTMLEntity
		ids, links := map[string]int{}, []string{}
		pictures, tables := 0, 0
		for {
			tok, err := d.Token()
			if err == io.EOF {
				break
			}
			if err != nil {
				t.Fatalf("%s: %v", name, err)
			}
			e, ok := tok.(xml.StartElement)
			if !ok {
				continue
			}
			switch e.Name.Local {
			case "script", "link", "img", "iframe", "object":
				t.Errorf("%s: element %s", name, e.Name.Local)
			case "figure":
				pictures++
			case "table":
				tables++
			}
			for _, a := range e.Attr {
				switch a.Name.Local {
				case "id":
					ids[a.Value]++
				case "href":
					links = append(links, a.Value)
				case "src":
					t.Errorf("%s: src %s", name, a.Value)
				}
				if strings.HasPrefix(a.Name.Local, "on") {
					t.Errorf("%s: %s", name, a.Name.Local)
				}
			}
		}
		for id, n := range ids {
			if n > 1 {
				t.Errorf("%s: id %s is there %d times", name, id, n)
			}
		}
		for _, l := range links {
			if to, ok := strings.CutPrefix(l, "#"); !ok || ids[to] == 0 {
				t.Errorf("%s: link %s goes nowhere", name, l)
			}
		}
		if want := len(blocks(run.shown(false), false)); pictures != want || tables <= pictures || len(links) < 2*want {
			t.Errorf("%s: %d pictures and %d tables for %d findings, %d links", name, pictures, tables, want, len(links))
		}
		for _, bad := range []string{"http:", "https:", "url(", "@import"} {
			if strings.Contains(text, bad) {
				t.Errorf("%s: %s in the page", name, bad)
			}
		}
		if again := page1(t, run); again != text {
			t.Errorf("%s: two runs differ", name)
		}
	}
}

func TestHTMLSaysWhatMatters(t *testing.T) {
	text := page1(t, gated())
	for _, want := range []string{
		"<h1>2 of 412 questions are broken; 1 finding is new; 2 questions are undecided.</h1>",
		"(*Desk).Book can return with d.mu still taken",
		"1 == 0 is false",
		"as wanted, &lt;see&gt; ticket | 12",
		"Locks are given back.",
		"// &lt;b&gt;&amp;",
		"nothing is broken in this way any more",
		"steps, 200,000 for one start",
		"no safety certificate",
		"prefers-color-scheme", "@media print",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("no %q", want)
		}
	}
	if i, k := strings.Index(text, "<h1>"), strings.Index(text, "By cause"); i < 0 || k < i {
		t.Error("the sentence is not first")
	}
}

func TestSatisfied(t *testing.T) {
	names := []string{"taken", "taken-back", "a"}
	for _, c := range []struct {
		formula   string
		counts    []int64
		ok, known bool
	}{
		{"taken == taken-back", []int64{1, 1, 0}, true, true},
		{"taken == taken-back", []int64{1, 0, 0}, false, true},
		{"taken - a <= 1", []int64{2, 0, 0}, false, true},
		{"taken - a <= 1", []int64{2, 0, 1}, true, true},
		{"2 * a < taken + 1 && a >= 0", []int64{2, 0, 1}, true, true},
		{"a <= -1 || taken != 3", []int64{3, 0, 0}, false, true},
		{"taken => a", []int64{0, 0, 0}, false, false},
		{"b == 0", []int64{0, 0, 0}, false, false},
	} {
		if ok, known := satisfied(c.formula, names, c.counts); ok != c.ok || known != c.known {
			t.Errorf("%s of %v: %v, %v", c.formula, c.counts, ok, known)
		}
	}
}
