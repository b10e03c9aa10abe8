package syntax

import (
	"os"
	"path/filepath"
	"testing"
)

// ruleFiles are all rule files of the project that must be well-formed.
func ruleFiles(t testing.TB) []string {
	var files []string
	for _, glob := range []string{"../rulesets/*.rules", "../testdata/*.rules"} {
		m, err := filepath.Glob(glob)
		if err != nil {
			t.Fatal(err)
		}
		files = append(files, m...)
	}
	if len(files) == 0 {
		t.Fatal("no rule file found")
	}
	return files
}

func TestParseProjectFiles(t *testing.T) {
	for _, name := range ruleFiles(t) {
		src, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := Parse(filepath.Base(name), string(src)); err != nil {
			t.Errorf("%s:\n%s", name, err.(Errors).Text())
		}
	}
}
