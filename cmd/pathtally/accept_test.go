package main

import (
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// oldDesk has two findings; the second function is added by tests.
const oldDesk = `package desk

import "sync"

type Desk struct {
	mu   sync.Mutex
	open int
}

func (d *Desk) Book(n int) int {
	d.mu.Lock()
	if n < 0 {
		return 0
	}
	d.open += n
	d.mu.Unlock()
	return d.open
}

func (d *Desk) Close(quick bool) {
	d.mu.Lock()
	if quick {
		return
	}
	d.open = 0
	d.mu.Unlock()
}
`

const newDesk = `
func (d *Desk) Swap(n int) bool {
	d.mu.Lock()
	if n == d.open {
		return false
	}
	d.open = n
	d.mu.Unlock()
	return true
}
`

func rewrite(t *testing.T, dir, name, text string) {
	t.Helper()
	if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
}

// findingsOf runs check and gives its status and findings that are not accepted.
func findingsOf(t *testing.T, dir string, args ...string) (status int, fresh []foundAt, out string) {
	t.Helper()
	status, out, errs := start(t, append([]string{"check", "-C", dir, "--format", "json"}, args...)...)
	var run struct {
		Findings []struct {
			foundAt
			Accepted *string
		}
	}
	if err := json.Unmarshal([]byte(out), &run); err != nil {
		t.Fatalf("%v\n%s%s", err, out, errs)
	}
	for _, f := range run.Findings {
		if f.Accepted == nil {
			fresh = append(fresh, f.foundAt)
		}
	}
	return status, fresh, out
}

// moved is oldDesk further down, in another order and with other names.
func moved() string {
	text := strings.NewReplacer("d *Desk", "desk *Desk", "d.mu", "desk.mu", "d.open", "desk.open", "(n int", "(berths int", "n < 0", "berths < 0", "+= n", "+= berths", "quick", "hasty").Replace(oldDesk)
	head, rest, _ := strings.Cut(text, "func (desk *Desk) Book")
	book, closing, _ := strings.Cut(rest, "func (desk *Desk) Close")
	return head + strings.Repeat("// A line of comment.\n", 100) + "\nfunc (desk *Desk) Close" + closing + "\nfunc (desk *Desk) Book" + book
}

func TestAccept(t *testing.T) {
	dir := module(t, map[string]string{"desk.go": oldDesk})
	status, fresh, _ := findingsOf(t, dir)
	if status != exitBroken || len(fresh) != 2 {
		t.Fatalf("before: status %d, %v", status, fresh)
	}
	if status, _, errs := start(t, "accept", "-C", dir); status != exitFailed || !strings.Contains(errs, "--reason") {
		t.Errorf("without a reason: status %d\n%s", status, errs)
	}
	if _, err := os.Stat(filepath.Join(dir, "pathtally.accepted")); !os.IsNotExist(err) {
		t.Errorf("a refused accept has written: %v", err)
	}
	if status, out, errs := start(t, "accept", "-C", dir, "--reason", "older than the gate"); status != exitHolds || strings.Count(out, "accepted    broken") != 2 {
		t.Fatalf("accept: status %d\n%s%s", status, out, errs)
	}
	status, out, _ := start(t, "check", "-C", dir)
	if status != exitHolds || strings.Contains(out, "can return") || !strings.Contains(out, "accepted  2 broken") {
		t.Errorf("accepted: status %d\n%s", status, out)
	}
	// Break one thing: exactly that one.
	rewrite(t, dir, "desk.go", oldDesk+newDesk)
	status, fresh, _ = findingsOf(t, dir)
	if status != exitBroken || len(fresh) != 1 || fresh[0].Blame != "(*Desk).Swap" {
		t.Errorf("one more: status %d, %v", status, fresh)
	}
	// Move, reorder and rename: still exactly that one.
	if text := moved(); !strings.Contains(text, "desk.mu.Lock()") || strings.Index(text, "Close(") > strings.Index(text, "Book(") {
		t.Fatalf("not moved:\n%s", text)
	}
	rewrite(t, dir, "desk.go", moved()+newDesk)
	status, fresh, out = findingsOf(t, dir)
	if status != exitBroken || len(fresh) != 1 || fresh[0].Blame != "(*Desk).Swap" {
		t.Errorf("moved: status %d, %v\n%s", status, fresh, out)
	}
	// A path that has another shape comes back.
	rewrite(t, dir, "desk.go", strings.Replace(oldDesk, "\tif n < 0 {\n\t\treturn 0", "\tif n < 0 {\n\t\td.mu.Unlock()\n\t\td.mu.Lock()\n\t\treturn 0", 1))
	if status, fresh, _ = findingsOf(t, dir); status != exitBroken || len(fresh) != 1 || fresh[0].Blame != "(*Desk).Book" {
		t.Errorf("another shape: status %d, %v", status, fresh)
	}
	// What was mended is stale, which is advice; --prune drops it.
	rewrite(t, dir, "desk.go", strings.Replace(oldDesk, "\tif quick {\n", "\tif quick {\n\t\td.mu.Unlock()\n", 1))
	status, out, _ = start(t, "check", "-C", dir)
	if status != exitHolds || !strings.Contains(out, "advice: nothing is broken in this way any more: mutex/balanced in (*Desk).Close") {
		t.Errorf("mended: status %d\n%s", status, out)
	}
	// A run that did not look says nothing.
	if _, out, _ := start(t, "check", "-C", dir, "--only", "file"); strings.Contains(out, "any more") {
		t.Errorf("stale without looking:\n%s", out)
	}
	if status, out, _ := start(t, "accept", "-C", dir, "--prune"); status != exitHolds || !strings.Contains(out, "1 entry dropped, 1 left") {
		t.Errorf("prune: status %d\n%s", status, out)
	}
	status, out, _ = start(t, "accept", "-C", dir, "--review")
	if status != exitHolds || !strings.Contains(out, "older than the gate") || !strings.Contains(out, "0 new, 1 accepted, 0 stale") {
		t.Errorf("review: status %d\n%s", status, out)
	}
	// A block without its reason is refused, with its line.
	file := filepath.Join(dir, "pathtally.accepted")
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	rewrite(t, dir, "pathtally.accepted", strings.Replace(string(text), "    reason    older than the gate\n", "", 1))
	if status, _, errs := start(t, "check", "-C", dir); status != exitFailed || !strings.Contains(errs, "pathtally.accepted:7: ") || !strings.Contains(errs, "no reason") {
		t.Errorf("no reason: status %d\n%s", status, errs)
	}
}

func TestAcceptInSource(t *testing.T) {
	with := func(comment string) string {
		return strings.Replace(oldDesk, "\t\treturn 0\n", "\t\treturn 0 "+comment+"\n", 1)
	}
	dir := module(t, map[string]string{"desk.go": with("//pathtally:accept mutex/balanced: Close gives it back")})
	status, fresh, out := findingsOf(t, dir)
	if status != exitBroken || len(fresh) != 1 || fresh[0].Blame != "(*Desk).Close" || !strings.Contains(out, "Close gives it back") {
		t.Errorf("status %d, %v\n%s", status, fresh, out)
	}
	for _, c := range []struct{ comment, want string }{
		{"//pathtally:accept mutex/balanced", "needs a reason"},
		{"//pathtally:accept mutex: because", "RULE/CLAIM"},
	} {
		rewrite(t, dir, "desk.go", with(c.comment))
		if status, _, errs := start(t, "check", "-C", dir); status != exitFailed || !strings.Contains(errs, "desk.go:13:12") || !strings.Contains(errs, c.want) {
			t.Errorf("%s: status %d\n%s", c.comment, status, errs)
		}
	}
	rewrite(t, dir, "desk.go", strings.Replace(oldDesk, "d.open += n\n", "d.open += n //pathtally:accept mutex/balanced: no such thing\n", 1))
	if _, out, _ := start(t, "check", "-C", dir); !strings.Contains(out, "desk.go:15:14: advice: this accepts nothing") {
		t.Errorf("no advice:\n%s", out)
	}
}

func git(t *testing.T, dir string, args ...string) {
	t.Helper()
	c := exec.Command("git", append([]string{"-c", "user.name=t", "-c", "user.email=t@example", "-c", "commit.gpgsign=false"}, args...)...)
	c.Dir = dir
	c.Env = append(os.Environ(), "GIT_CONFIG_GLOBAL="+os.DevNull, "GIT_CONFIG_NOSYSTEM=1")
	if out, err := c.CombinedOutput(); err != nil {
		t.Fatalf("git %v: %v\n%s", args, err, out)
	}
}

// Against a base revision a run says only what that revision does not have, at
// the changed line that is nearest to the cause.
func TestBase(t *testing.T) {
	if _, err := exec.LookPath("git"); err != nil {
		t.Skip("no git")
	}
	top := t.TempDir()
	scratch := t.TempDir() // of its own, so that other runs do not count
	t.Setenv("TMPDIR", scratch)
	dir := filepath.Join(top, "service")
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	helper := "package desk\n\nfunc (d *Desk) Tidy(all bool) {\n\td.mu.Lock()\n\tdefer d.leave(all)\n\td.open++\n}\n\nfunc (d *Desk) leave(all bool) {\n\tif d.open > 7 {\n\t\tALL\n\t}\n\td.mu.Unlock()\n}\n"
	rewrite(t, dir, "go.mod", "module example/m\n\ngo 1.26\n")
	rewrite(t, dir, "desk.go", oldDesk)
	rewrite(t, dir, "tidy.go", strings.Replace(helper, "ALL", "d.open = 7", 1))
	git(t, top, "init", "-q")
	git(t, top, "add", ".")
	git(t, top, "commit", "-q", "-m", "one")
	if status, fresh, _ := findingsOf(t, dir, "--base", "HEAD"); status != exitHolds || len(fresh) != 0 {
		t.Errorf("unchanged: status %d, %v", status, fresh)
	}
	rewrite(t, dir, "desk.go", moved())
	rewrite(t, dir, "tidy.go", strings.Replace(helper, "ALL", "return", 1))
	status, fresh, out := findingsOf(t, dir, "--base", "HEAD", "./...")
	if status != exitBroken || len(fresh) != 1 || fresh[0].Blame != "(*Desk).Tidy" || fresh[0].File != "tidy.go" || fresh[0].Line != 11 {
		t.Errorf("status %d, %v\n%s", status, fresh, out)
	}
	_, out, _ = start(t, "check", "-C", dir, "--base", "HEAD")
	if !strings.Contains(out, "2 broken in HEAD already") {
		t.Errorf("summary:\n%s", out)
	}
	// The cause is in an old line; what was changed is a line on the way to it.
	rewrite(t, dir, "desk.go", oldDesk)
	rewrite(t, dir, "tidy.go", strings.Replace(helper, "ALL", "return", 1))
	git(t, top, "commit", "-q", "-a", "-m", "two")
	rewrite(t, dir, "late.go", "package desk\n\n// Late is new.\nfunc (d *Desk) Late() {\n\td.mu.Lock()\n\td.leave(true)\n}\n")
	status, fresh, out = findingsOf(t, dir, "--base", "HEAD")
	if status != exitBroken || len(fresh) != 1 || fresh[0].File != "late.go" {
		t.Errorf("changed line: status %d, %v\n%s", status, fresh, out)
	}
	for rev, want := range map[string]string{"no-such-revision": "no such revision", "-x": "write a revision"} {
		if status, _, errs := start(t, "check", "-C", dir, "--base="+rev); status != exitFailed || !strings.Contains(errs, want) {
			t.Errorf("--base %s: status %d\n%s", rev, status, errs)
		}
	}
	if entries, err := filepath.Glob(filepath.Join(scratch, "pathtally-base-*")); err != nil || len(entries) > 0 {
		t.Errorf("left behind: %v %v", entries, err)
	}
}

func TestParseDiff(t *testing.T) {
	ch := parseDiff("diff --git a/x.go b/x.go\n--- a/x.go\n+++ b/x.go\n@@ -3,2 +4,3 @@ func f() {\n+a\n@@ -9 +11,0 @@\n-gone\n@@ -20 +21 @@\n+b\n--- a/y.go\n+++ /dev/null\n@@ -1,3 +0,0 @@\n")
	for line := range 30 {
		want := line >= 4 && line <= 6 || line == 11 || line == 12 || line == 21
		if got := ch.has("x.go", line); got != want {
			t.Errorf("line %d: %v", line, got)
		}
	}
	if len(ch) != 1 {
		t.Errorf("files: %v", ch)
	}
}

func TestOutputs(t *testing.T) {
	dir := module(t, map[string]string{"desk.go": oldDesk})
	file := func(name string) string { return filepath.Join(dir, name) }
	status, out, errs := start(t, "check", "-C", dir, "--output", "json="+file("r.json"), "--output", "lines="+file("r.txt"))
	if status != exitBroken || errs != "" {
		t.Fatalf("status %d\n%s", status, errs)
	}
	for format, name := range map[string]string{"json": "r.json", "lines": "r.txt"} {
		text, err := os.ReadFile(file(name))
		if err != nil {
			t.Fatal(err)
		}
		if _, direct, _ := start(t, "check", "-C", dir, "--format", format); direct != string(text) {
			t.Errorf("%s differs from --format %s", name, format)
		}
	}
	if !strings.Contains(out, "(*Desk).Book can return with d.mu still taken") {
		t.Errorf("nothing printed:\n%s", out)
	}
	for _, bad := range []string{"json", "json=", "xml=x", "json=" + file("none/r.json")} {
		if status, _, errs := start(t, "check", "-C", dir, "--output", bad); status != exitFailed || !strings.Contains(errs, "--output") {
			t.Errorf("--output %s: status %d\n%s", bad, status, errs)
		}
	}
}

func TestBuilds(t *testing.T) {
	lock := func(name string) string {
		return fmt.Sprintf("package m\n\nimport \"sync\"\n\nfunc %s(mu *sync.Mutex) { mu.Lock() }\n", name)
	}
	dir := module(t, map[string]string{"m.go": lock("Any"), "m_linux.go": lock("Linux"), "m_windows.go": lock("Windows")})
	status, out, errs := start(t, "check", "-C", dir, "--format", "json", "--build", "linux/amd64", "--build", "windows/arm64")
	var run struct {
		Builds   []string
		Findings []struct {
			Blame  string
			Builds []int
		}
		NotJudged []any
		Summary   struct{ Questions, Functions int }
	}
	if err := json.Unmarshal([]byte(out), &run); err != nil {
		t.Fatalf("%v\n%s%s", err, out, errs)
	}
	got := map[string]string{}
	for _, f := range run.Findings {
		got[f.Blame] = fmt.Sprint(f.Builds)
	}
	want := map[string]string{"Any": "[0 1]", "Linux": "[0]", "Windows": "[1]"}
	if status != exitBroken || fmt.Sprint(got) != fmt.Sprint(want) || fmt.Sprint(run.Builds) != "[linux/amd64 windows/arm64]" || len(run.NotJudged) != 0 || run.Summary.Functions != 4 {
		t.Errorf("status %d, builds %v, findings %v, not judged %v, summary %+v", status, run.Builds, got, run.NotJudged, run.Summary)
	}
	for _, bad := range []string{"linux", "linux/amd64,x", "/amd64", "linux/amd64,tags="} {
		if status, _, errs := start(t, "check", "-C", dir, "--build", bad); status != exitFailed || !strings.Contains(errs, "OS/ARCH") {
			t.Errorf("--build %s: status %d\n%s", bad, status, errs)
		}
	}
}

func TestPartial(t *testing.T) {
	dir := module(t, map[string]string{"good/g.go": "package good\n\nimport \"sync\"\n\nfunc F(mu *sync.Mutex) { mu.Lock() }\n", "bad/b.go": "package bad\n\nvar x int = \"one\"\n"})
	if status, _, _ := start(t, "check", "-C", dir, "./..."); status != exitFailed {
		t.Errorf("status %d", status)
	}
	status, out, errs := start(t, "check", "-C", dir, "--partial", "./...")
	if status != exitFailed || !strings.Contains(out, "F can return with mu still taken") || !strings.Contains(out, "package example/m/bad (it has errors)") || !strings.Contains(errs, "bad/b.go:3:13") {
		t.Errorf("status %d\n%s%s", status, out, errs)
	}
}
