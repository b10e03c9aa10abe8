package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// The finding that the README shows is one that a run prints, and the commands
// and flags that it names exist.
func TestReadme(t *testing.T) {
	text, err := os.ReadFile(filepath.Join("..", "..", "README.md"))
	if err != nil {
		t.Fatal(err)
	}
	_, rest, ok := strings.Cut(string(text), "```\nberth/desk.go:")
	if !ok {
		t.Fatal("no finding in the README")
	}
	shown, _, _ := strings.Cut("berth/desk.go:"+rest, "```")
	_, out, errs := start(t, "check", "-C", demo("harbour"), "--only", "mutex/balanced", "./berth")
	if !strings.Contains(out, shown) {
		t.Errorf("the README shows\n%s\na run prints\n%s%s", shown, out, errs)
	}
	known := checkHelp + countHelp + exportHelp + acceptHelp + joinHelp + rulesHelp + rootHelp
	for _, word := range strings.FieldsFunc(string(text), func(r rune) bool { return !(r == '-' || r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z') }) {
		if strings.HasPrefix(word, "--") && len(word) > 4 && strings.Trim(word, "-") != "" && !strings.Contains(known, word) {
			t.Errorf("the README names %s, which no help has", word)
		}
	}
}

// Help fits a screen.
func TestHelpFitsAScreen(t *testing.T) {
	for name, text := range map[string]string{"pathtally": rootHelp, "check": checkHelp, "accept": acceptHelp, "rules": rulesHelp, "join": joinHelp, "count": countHelp, "export": exportHelp, "completion": completionHelp} {
		lines := strings.Split(strings.TrimSuffix(text, "\n"), "\n")
		if len(lines) > 24 {
			t.Errorf("%s: %d lines", name, len(lines))
		}
		for _, l := range lines {
			if len(l) > 100 {
				t.Errorf("%s: %d columns: %s", name, len(l), l)
			}
		}
	}
}
