package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// Parts joined are the undivided run, byte for byte, in every format.
func TestPartsJoin(t *testing.T) {
	dir := t.TempDir()
	var files []string
	for i := 1; i <= 3; i++ {
		status, out, errs := start(t, "check", "-C", demo("harbour"), "--part", fmt.Sprintf("%d/3", i), "./...")
		if status != exitHolds {
			t.Fatalf("part %d: status %d\n%s", i, status, errs)
		}
		name := filepath.Join(dir, strconv.Itoa(i)+".part")
		rewrite(t, dir, filepath.Base(name), out)
		files = append(files, name)
	}
	for _, format := range []string{"text", "json", "html"} {
		status, want, _ := start(t, "check", "-C", demo("harbour"), "--format", format, "./...")
		// The order of the files does not matter.
		got, out, errs := start(t, "join", "-C", demo("harbour"), "--format", format, files[2], files[0], files[1])
		if got != status || out != want {
			t.Errorf("%s: status %d, want %d; %s\n%s", format, got, status, firstDifference([]byte(want), []byte(out)), errs)
		}
	}
	text, err := os.ReadFile(files[0])
	if err != nil {
		t.Fatal(err)
	}
	bad := func(name, content string) string {
		rewrite(t, dir, name, content)
		return filepath.Join(dir, name)
	}
	for _, c := range []struct {
		name  string
		files []string
		want  string
	}{
		{"missing", files[:2], "part 3 of 3 is missing"},
		{"twice", []string{files[0], files[1], files[1]}, "part 2 is in"},
		{"cut", []string{bad("cut", string(text[:len(text)/2])), files[1], files[2]}, "no whole part"},
		{"other", []string{bad("other", "{}"), files[1], files[2]}, "no part"},
		{"another run", []string{bad("another", strings.Replace(string(text), `"Packages":13`, `"Packages":14`, 1)), files[1], files[2]}, "not of the same run"},
		{"none", nil, "which parts"},
		{"no file", []string{filepath.Join(dir, "none")}, "no such file"},
	} {
		if status, out, errs := start(t, append([]string{"join"}, c.files...)...); status != exitFailed || !strings.Contains(errs, c.want) || out != "" {
			t.Errorf("%s: status %d\n%s%s", c.name, status, out, errs)
		}
	}
	for _, arg := range []string{"0/3", "4/3", "1", "a/b", "1/0"} {
		if status, _, errs := start(t, "check", "-C", demo("harbour"), "--part", arg); status != exitFailed || !strings.Contains(errs, "I/N") {
			t.Errorf("--part %s: status %d\n%s", arg, status, errs)
		}
	}
}

// The columns of a ledger add up to its totals.
func TestLedger(t *testing.T) {
	const lock = "package %s\n\nimport \"sync\"\n\nfunc F(mu *sync.Mutex) { mu.Lock(); mu.Unlock() }\n\nfunc G() {}\n"
	dir := module(t, map[string]string{"a/a.go": fmt.Sprintf(lock, "a"), "a/a_plan9.go": "package a\n", "b/b.go": fmt.Sprintf(lock, "b"), "b/b_test.go": "package b\n",
		"tools/go.mod": "module example/tools\n\ngo 1.26\n", "tools/t.go": "package tools\n"})
	file := filepath.Join(dir, "ledger.tsv")
	status, out, errs := start(t, "check", "-C", dir, "--ledger", file, "--build", "linux/amd64", "./...")
	if status != exitHolds || !strings.Contains(out, "module tools (another module") {
		t.Fatalf("status %d\n%s%s", status, out, errs)
	}
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	sum := map[string]int{}
	packages := 0
	var last string
	for _, line := range strings.Split(strings.TrimSpace(string(text)), "\n") {
		if strings.HasPrefix(line, "package\t") {
			packages++
			for _, col := range strings.Split(line, "\t")[2:] {
				i := strings.LastIndexByte(col, ' ')
				n, err := strconv.Atoi(col[i+1:])
				if err != nil {
					t.Fatalf("%s: %v", line, err)
				}
				sum[col[:i]] += n
			}
		}
		last = line
	}
	met, known := sum["with events"]
	want := fmt.Sprintf("total\t%d packages\t%s", packages, columns([6]int{sum["files"], sum["left out"], sum["functions"], met, sum["starts"], sum["questions"]}, known))
	if last != want {
		t.Errorf("the columns add up to\n%s\nthe file says\n%s", want, last)
	}
	if sum["files"] != 2 || (known && met != 2) || sum["starts"] != 2 || sum["questions"] == 0 {
		t.Errorf("%v in\n%s", sum, text)
	}
	for _, line := range []string{"left\texample/m/a\ta/a_plan9.go\tbuild constraints", "folder\ttools\t\tanother module"} {
		if !strings.Contains(string(text), line+"\n") {
			t.Errorf("no line %q in\n%s", line, text)
		}
	}
}

func TestCompletion(t *testing.T) {
	for _, shell := range shells {
		if status, out, errs := start(t, "completion", shell); status != exitHolds || !strings.Contains(out, "pathtally") {
			t.Errorf("%s: status %d, %d bytes\n%s", shell, status, len(out), errs)
		}
	}
	if status, _, errs := start(t, "completion", "ash"); status != exitFailed || !strings.Contains(errs, "bash") {
		t.Errorf("ash: status %d\n%s", status, errs)
	}
	for args, want := range map[string]string{"--format ": "sarif\n", "--undecided ": "note\n", "--only mutex/": "mutex/balanced\n"} {
		flag, given, _ := strings.Cut(args, " ")
		if _, out, _ := start(t, "__complete", "check", flag, given); !strings.Contains(out, want) {
			t.Errorf("%s completes to\n%s", args, out)
		}
	}
}
