package main

import (
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// What cannot be judged is said in one clear error with its place, with status
// 2; a program that asked for JSON finds JSON and nothing else.
func TestBadInput(t *testing.T) {
	const sound = "package m\n\nimport \"sync\"\n\nfunc F(mu *sync.Mutex) { mu.Lock(); mu.Unlock() }\n"
	const rule = "import \"sync\"\n\nrule r {\n  each m *sync.Mutex stays\n  count a: EVENT\n  claim c at end: a == 0\n}\n"
	with := func(event string) string { return strings.Replace(rule, "EVENT", event, 1) }
	for _, c := range []struct {
		name  string
		files map[string]string
		args  []string
		in    string // folder below the module to run in
		stage string
		want  []string // on standard error
		place string   // first place in JSON ends so; "" for none
	}{
		{"unknown method", map[string]string{"m.go": sound, "pathtally.rules": with("call (*sync.Mutex).Unlok on m")}, nil, "", "rules",
			[]string{"pathtally.rules:5:", "Unlok", "Lock, TryLock and Unlock", "^^^^^"}, "pathtally.rules:5:31"},
		{"unknown function", map[string]string{"m.go": sound, "pathtally.rules": with("call sync.Lok with m")}, nil, "", "rules",
			[]string{"pathtally.rules:5:", "Lok"}, "pathtally.rules:5:22"},
		{"unknown package", map[string]string{"m.go": sound, "pathtally.rules": strings.Replace(with("call (*sync.Mutex).Lock on m"), "\n\n", "; import \"example/none\"\n\n", 1)}, nil, "", "",
			[]string{"example/none"}, ""},
		{"malformed rule", map[string]string{"m.go": sound, "pathtally.rules": "rule r {\n  each m stays\n  claim c at end a\n}\n"}, nil, "", "rules",
			[]string{"pathtally.rules:3:"}, "pathtally.rules:"},
		{"type error", map[string]string{"m.go": "package m\n\nvar x int = \"one\"\n"}, nil, "", "load", []string{"m.go:3:13"}, "m.go:3:13"},
		{"no module", map[string]string{"go.mod": "", "m.go": sound}, nil, "", "load", []string{"no go.mod"}, ""},
		{"empty pattern", map[string]string{"m.go": sound}, []string{""}, "", "usage", []string{"empty", "./..."}, ""},
		{"pattern that names nothing", map[string]string{"m.go": sound}, []string{"./none/..."}, "", "load", []string{"none"}, ""},
		{"folder without Go files", map[string]string{"m.go": sound, "text/readme": ""}, []string{"./text"}, "", "load", []string{"text", "no Go files"}, ""},
		{"a file for a folder", map[string]string{"m.go": sound}, nil, "m.go", "load", []string{"m.go", "not a directory"}, "m.go"},
		{"no such folder", map[string]string{"m.go": sound}, nil, "none", "load", []string{"none", "no such"}, "none"},
		{"no such rule file", map[string]string{"m.go": sound}, []string{"--rules", "none.rules"}, "", "rules", []string{"none.rules"}, "none.rules"},
		{"no such flag", map[string]string{"m.go": sound}, []string{"--nun"}, "", "usage", []string{"--nun", "--help"}, ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := module(t, c.files)
			if text, ok := c.files["go.mod"]; ok && text == "" {
				if err := os.Remove(filepath.Join(dir, "go.mod")); err != nil {
					t.Fatal(err)
				}
			}
			for _, format := range []string{"text", "json"} {
				status, out, errs := start(t, append([]string{"check", "-C", filepath.Join(dir, c.in), "--format", format}, c.args...)...)
				if status != exitFailed {
					t.Errorf("%s: status %d, want %d\n%s%s", format, status, exitFailed, out, errs)
				}
				for _, w := range c.want {
					if !strings.Contains(errs, w) {
						t.Errorf("%s: no %q on standard error:\n%s", format, w, errs)
					}
				}
				if strings.Contains(errs, "goroutine ") {
					t.Errorf("%s: a Go stack on standard error:\n%s", format, errs)
				}
				if format == "text" {
					if out != "" {
						t.Errorf("text on standard output:\n%s", out)
					}
					continue
				}
				var v struct {
					Error struct {
						Stage, Message string
						Places         []string
					}
				}
				if err := json.Unmarshal([]byte(out), &v); err != nil {
					t.Fatalf("no JSON: %v\n%s", err, out)
				}
				if v.Error.Message == "" || (c.stage != "" && v.Error.Stage != c.stage) {
					t.Errorf("error %+v, want stage %s", v.Error, c.stage)
				}
				if c.place != "" && (len(v.Error.Places) == 0 || !strings.Contains(v.Error.Places[0], c.place)) {
					t.Errorf("places %v, want %s first", v.Error.Places, c.place)
				}
			}
		})
	}
}

// A folder that may not be read is named.
func TestUnreadableFolder(t *testing.T) {
	if os.Geteuid() == 0 {
		t.Skip("nothing is unreadable for root")
	}
	dir := module(t, map[string]string{"m.go": "package m\n", "shut/s.go": "package shut\n"})
	shut := filepath.Join(dir, "shut")
	if err := os.Chmod(shut, 0); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.Chmod(shut, 0o755) })
	status, _, errs := start(t, "check", "-C", dir, "./shut")
	if status != exitFailed || !strings.Contains(errs, "shut") {
		t.Errorf("status %d\n%s", status, errs)
	}
}
