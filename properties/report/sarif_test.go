package report

import (
	"bytes"
	"encoding/json"
	"go/ast"
	"go/parser"
	"go/token"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/owenrumney/go-sarif/v3/pkg/report/v210/sarif"
	"github.com/santhosh-tekuri/jsonschema/v6"

	"pathtally/properties"
	"pathtally/properties/accept"
)

// gated is sample with something accepted, something stale and a base.
func gated() *Run {
	run := sample()
	run.Gated = true
	run.Accepted = map[string]accept.Acceptance{
		run.Result.Findings[1].Fingerprint:    {Reason: "as wanted, <see> ticket | 12", Where: "pathtally.accepted:7"},
		run.Result.Open[0].Fingerprint():      {Reason: "small pools only", Where: "depot/refill.go:87:1", Source: true},
		run.Result.Findings[2].Fingerprint:    {Reason: "in source", Where: "berth/desk.go:100:3", Source: true},
		"a fingerprint that nothing here has": {Reason: "x"},
	}
	run.Stale = []accept.Stale{{File: accept.FileName, Line: 12, Claim: "mutex/balanced", Function: "F", Fingerprint: "0123456789abcdef", Text: "nothing is broken in this way any more: mutex/balanced in F"}}
	run.Base, run.KnownFindings = "origin/main", 3
	run.Headlines = map[string]Headline{run.Result.Findings[0].Fingerprint: {Place: at(55, 5), Text: "urgent is true"}}
	run.RuleTexts = map[string]RuleText{"mutex/balanced": {Doc: "Locks are given back. At length.", Formula: "taken == released"}}
	run.Source = func(file string) ([]byte, error) {
		if file != "berth/desk.go" {
			return nil, os.ErrNotExist
		}
		return []byte(strings.Repeat("\t\tü := d.mu.Lock() // <b>&\n", 130)), nil
	}
	return run
}

// publishedSchema is the JSON schema that the standard comes with, as it stands
// in the source of a package that carries it.
func publishedSchema(t *testing.T) *jsonschema.Schema {
	t.Helper()
	dir, err := exec.Command("go", "list", "-f", "{{.Dir}}", "github.com/owenrumney/go-sarif/v3/pkg/report/v210/sarif").Output()
	if err != nil {
		t.Fatal(err)
	}
	file, err := parser.ParseFile(token.NewFileSet(), filepath.Join(strings.TrimSpace(string(dir)), "schema.go"), nil, 0)
	if err != nil {
		t.Fatal(err)
	}
	text := ""
	ast.Inspect(file, func(n ast.Node) bool {
		if spec, ok := n.(*ast.ValueSpec); ok && spec.Names[0].Name == "schema" {
			if text, err = strconv.Unquote(spec.Values[0].(*ast.BasicLit).Value); err != nil {
				t.Fatal(err)
			}
		}
		return true
	})
	doc, err := jsonschema.UnmarshalJSON(strings.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	c := jsonschema.NewCompiler()
	if err := c.AddResource(sarifSchema, doc); err != nil {
		t.Fatal(err)
	}
	schema, err := c.Compile(sarifSchema)
	if err != nil {
		t.Fatal(err)
	}
	return schema
}

func TestSARIF(t *testing.T) {
	schema := publishedSchema(t)
	for name, run := range map[string]*Run{"sample": sample(), "gated": gated()} {
		var b bytes.Buffer
		if err := SARIF(&b, run); err != nil {
			t.Fatal(err)
		}
		doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(b.Bytes()))
		if err != nil {
			t.Fatal(err)
		}
		if err := schema.Validate(doc); err != nil {
			t.Errorf("%s: %v", name, err)
		}
		if name == "gated" {
			golden(t, "sarif.golden", b.Bytes())
		}
		// A wrong document must not pass, or passing says nothing.
		var broken map[string]any
		if err := json.Unmarshal(bytes.Replace(b.Bytes(), []byte(`"kind": "fail"`), []byte(`"kind": "failed"`), 1), &broken); err != nil {
			t.Fatal(err)
		}
		if schema.Validate(broken) == nil {
			t.Error("the schema takes anything")
		}
		// Another reader finds the same in it.
		log, err := sarif.FromBytes(b.Bytes())
		if err != nil {
			t.Fatal(err)
		}
		if got, want := len(log.Runs[0].Results), len(run.Result.Findings)+len(run.Result.Open); got != want {
			t.Errorf("%s: %d results, want %d", name, got, want)
		}
		for i, r := range log.Runs[0].Results {
			if rule := log.Runs[0].Tool.Driver.Rules[r.RuleIndex]; *rule.ID != *r.RuleID {
				t.Errorf("%s: result %d is of %s, its index says %s", name, i, *r.RuleID, *rule.ID)
			}
			if i >= len(run.Result.Findings) {
				continue
			}
			f := &run.Result.Findings[i]
			if n := len(r.CodeFlows[0].ThreadFlows[0].Locations); n != len(f.Path) {
				t.Errorf("%s: %d steps of %d", name, n, len(f.Path))
			}
			if r.PartialFingerprints["pathtally/v1"] != f.Fingerprint {
				t.Errorf("%s: fingerprint %v", name, r.PartialFingerprints)
			}
			if got := len(r.Suppressions) == 1; got != run.IsAccepted(f.Fingerprint) {
				t.Errorf("%s: suppressions %v", name, r.Suppressions)
			}
			if line := *r.Locations[0].PhysicalLocation.Region.StartLine; line != run.Headline(f).Line {
				t.Errorf("%s: line %d", name, line)
			}
		}
	}
}

func TestColumnsAreCharacters(t *testing.T) {
	run := gated()
	s := &sarifer{run: run, lines: map[string][][]byte{}}
	// "\t\tü := ": ü is two bytes, the colon stands in byte 6 and character 5.
	if got := s.column(properties.Place{File: "berth/desk.go", Line: 1, Column: 6}); got != 5 {
		t.Errorf("column %d", got)
	}
	if got := s.column(properties.Place{File: "none.go", Line: 1, Column: 6}); got != 6 {
		t.Errorf("column %d without a source", got)
	}
}

func TestMarkdown(t *testing.T) {
	for name, run := range map[string]*Run{"markdown.golden": sample(), "markdowngated.golden": gated()} {
		var b bytes.Buffer
		if err := Markdown(&b, run, Options{}); err != nil {
			t.Fatal(err)
		}
		golden(t, name, b.Bytes())
	}
}

func TestTextOfAGate(t *testing.T) {
	var b bytes.Buffer
	if err := Text(&b, gated(), Options{}); err != nil {
		t.Fatal(err)
	}
	golden(t, "textgated.golden", b.Bytes())
	b.Reset()
	if err := Lines(&b, gated(), Options{}); err != nil {
		t.Fatal(err)
	}
	golden(t, "linesgated.golden", b.Bytes())
	b.Reset()
	if err := Text(&b, gated(), Options{Verbose: true}); err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(b.String(), "accepted    as wanted, <see> ticket | 12  (pathtally.accepted:7)") {
		t.Errorf("accepted findings are not shown:\n%s", b.String())
	}
}
