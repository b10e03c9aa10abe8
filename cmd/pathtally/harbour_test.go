package main

import (
	"bufio"
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"
)

// defect is a line of testdata/harbour/DEFECTS.tsv: what was planted and where
// its finding has to stand.
type defect struct {
	rule, file, function string
	lines                []int // the line that loses it, then others that a reviewer would accept
	what                 string
}

// fits says that the finding of rule at file:line in function is this defect.
func (d defect) fits(f foundAt) bool {
	return d.rule == f.Rule && d.file == f.File && d.function == f.Blame && slices.Contains(d.lines, f.Line)
}

// foundAt is the part of a finding in JSON that the demo compares.
type foundAt struct {
	Rule, Claim, Severity, File, Blame, Message, Fingerprint, Follows string
	Line                                                              int
}

func (f foundAt) String() string {
	return fmt.Sprintf("%s:%d %s/%s in %s: %s", f.File, f.Line, f.Rule, f.Claim, f.Blame, f.Message)
}

// readDefects reads the table. Its columns are rule, file, function, line,
// description and, where a second place is as good, the other lines of it,
// separated by commas.
func readDefects(t *testing.T, file string) []defect {
	t.Helper()
	r, err := os.Open(file)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	var out []defect
	s := bufio.NewScanner(r)
	for n := 1; s.Scan(); n++ {
		col := strings.Split(s.Text(), "\t")
		if n == 1 || s.Text() == "" {
			continue
		}
		if len(col) < 5 {
			t.Fatalf("%s:%d: %d columns", file, n, len(col))
		}
		d := defect{rule: col[0], file: col[1], function: col[2], what: col[4]}
		lines := []string{col[3]}
		if len(col) > 5 && col[5] != "" {
			lines = append(lines, strings.Split(col[5], ",")...)
		}
		for _, l := range lines {
			v, err := strconv.Atoi(l)
			if err != nil {
				t.Fatalf("%s:%d: line %q: %v", file, n, l, err)
			}
			d.lines = append(d.lines, v)
		}
		out = append(out, d)
	}
	if err := s.Err(); err != nil {
		t.Fatal(err)
	}
	return out
}

func demo(name string) string { return filepath.Join("..", "..", "testdata", name) }

// The demo has exactly the findings that were planted, each in its function
// and at its line.
func TestHarbour(t *testing.T) {
	defects := readDefects(t, filepath.Join(demo("harbour"), "DEFECTS.tsv"))
	if len(defects) < 12 {
		t.Fatalf("the demo has %d defects", len(defects))
	}
	status, out, errs := start(t, "check", "-C", demo("harbour"), "--format", "json", "./...")
	if status != exitBroken {
		t.Errorf("status %d, want %d\n%s", status, exitBroken, errs)
	}
	var run struct {
		Findings  []foundAt
		Undecided []struct {
			Rule, Claim, Function, StoppedBy string
		}
	}
	if err := json.Unmarshal([]byte(out), &run); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	met := make([]int, len(defects))
	for _, f := range run.Findings {
		// What follows from another finding is one line below it in text, and goes
		// with it; that other one has to be planted.
		if f.Follows != "" && slices.ContainsFunc(run.Findings, func(g foundAt) bool { return g.Fingerprint == f.Follows }) {
			continue
		}
		at := slices.IndexFunc(defects, func(d defect) bool { return d.fits(f) })
		if at < 0 {
			t.Errorf("not planted: %s", f)
			continue
		}
		met[at]++
	}
	for i, n := range met {
		if d := defects[i]; n == 0 {
			t.Errorf("not found: %s:%d %s in %s: %s", d.file, d.lines[0], d.rule, d.function, d.what)
		}
	}
	for _, u := range run.Undecided {
		t.Errorf("undecided: %s/%s of %s: %s", u.Rule, u.Claim, u.Function, u.StoppedBy)
	}
}

// The mended service has none.
func TestHarbourMended(t *testing.T) {
	status, out, errs := start(t, "check", "-C", demo("harbour-mended"), "--format", "lines", "./...")
	if status != exitHolds {
		t.Errorf("status %d\n%s%s", status, out, errs)
	}
	if n := strings.Count(out, "\n"); n != 1 {
		t.Errorf("%d lines, want the closing one:\n%s", n, out)
	}
}

// built is the command as a user has it.
var built = sync.OnceValues(func() (string, error) {
	dir, err := os.MkdirTemp("", "pathtally")
	if err != nil {
		return "", err
	}
	file := filepath.Join(dir, "pathtally")
	if out, err := exec.Command("go", "build", "-o", file, ".").CombinedOutput(); err != nil {
		return "", fmt.Errorf("%w\n%s", err, out)
	}
	return file, nil
})

func TestMain(m *testing.M) {
	status := m.Run()
	if file, err := built(); err == nil {
		os.RemoveAll(filepath.Dir(file))
	}
	os.Exit(status)
}

// Equal runs give equal bytes, on one processor and on two.
func TestRunsAreEqual(t *testing.T) {
	file, err := built()
	if err != nil {
		t.Fatal(err)
	}
	first := map[string][]byte{}
	for i := range 10 {
		format := []string{"text", "json"}[i%2]
		c := exec.Command(file, "check", "-C", demo("harbour"), "--format", format, "--assumptions", "./...")
		c.Env = append(os.Environ(), "GOMAXPROCS="+strconv.Itoa(1+(i/2)%2))
		var errs bytes.Buffer
		c.Stderr = &errs
		out, err := c.Output()
		if c.ProcessState == nil || c.ProcessState.ExitCode() != exitBroken {
			t.Fatalf("run %d: %v\n%s", i, err, errs.String())
		}
		if i < 2 {
			first[format] = out
			if len(out) < 1000 {
				t.Fatalf("hardly an output:\n%s", out)
			}
			continue
		}
		if !bytes.Equal(out, first[format]) {
			t.Fatalf("run %d (%s, GOMAXPROCS %d) differs from the first:\n%s", i, format, 1+(i/2)%2, firstDifference(first[format], out))
		}
	}
}

// firstDifference shows the first line in which two outputs differ.
func firstDifference(a, b []byte) string {
	x, y := strings.Split(string(a), "\n"), strings.Split(string(b), "\n")
	for i := range min(len(x), len(y)) {
		if x[i] != y[i] {
			return fmt.Sprintf("line %d\n- %s\n+ %s", i+1, x[i], y[i])
		}
	}
	return fmt.Sprintf("%d and %d lines", len(x), len(y))
}
