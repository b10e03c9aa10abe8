package report

import (
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// A browser shows the page: it keeps every element, and the anchor of a step is
// there to be jumped to.
func TestPageInABrowser(t *testing.T) {
	browser := ""
	for _, name := range []string{"chromium", "chromium-browser", "google-chrome"} {
		if at, err := exec.LookPath(name); err == nil {
			browser = at
			break
		}
	}
	if browser == "" {
		t.Skip("no browser here")
	}
	dir := t.TempDir()
	text := page1(t, gated())
	file := filepath.Join(dir, "page.html")
	if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	// A hanging browser is no verdict on the page; the bound is generous.
	ctx, stop := context.WithTimeout(context.Background(), 2*time.Minute)
	defer stop()
	out, err := exec.CommandContext(ctx, browser, "--headless", "--no-sandbox", "--disable-gpu", "--user-data-dir="+filepath.Join(dir, "profile"), "--dump-dom", "file://"+file+"#f1-s1").Output()
	if err != nil {
		t.Skipf("the browser does not run here: %v", err)
	}
	dom := string(out)
	for _, tag := range []string{"<article", "<figure", "<table", "<svg", "<a id=\"f1-s1\"", "<a href=\"#f1-s1\""} {
		if got, want := strings.Count(dom, tag), strings.Count(text, tag); want == 0 || got != want {
			t.Errorf("%s: %d in the browser, %d in the page", tag, got, want)
		}
	}
}
