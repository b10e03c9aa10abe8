package main

import (
	"archive/tar"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"

	"pathtally/properties/judge"
	"pathtally/properties/report"
)

// A checkout is a revision of the repository around a module, in a folder of
// its own. The work tree and git's own files stay as they are.
type checkout struct {
	rev    string
	module string // root of the module in the work tree
	prefix string // of the module below the top of the repository, slashes, "" or ending in one
	dir    string // the temporary folder
}

func gitFailure(rev string, err error, stderr string) error {
	m := strings.TrimSpace(stderr)
	if first, _, more := strings.Cut(m, "\n"); more {
		m = first
	}
	var missing *exec.Error
	switch {
	case errors.As(err, &missing):
		m = "--base needs git, which is not there"
	case m == "":
		m = fmt.Sprintf("--base %s: %v", rev, err)
	default:
		m = fmt.Sprintf("--base %s: %s", rev, strings.TrimPrefix(m, "fatal: "))
	}
	return &failure{stage: "usage", message: m, text: "pathtally: " + m}
}

// git runs git in the module and gives its output.
func (c *checkout) git(ctx context.Context, args ...string) ([]byte, error) {
	cmd := exec.CommandContext(ctx, "git", args...)
	cmd.Dir = c.module
	var errs bytes.Buffer
	cmd.Stderr = &errs
	out, err := cmd.Output()
	if err != nil {
		return nil, gitFailure(c.rev, err, errs.String())
	}
	return out, nil
}

// checkOut writes a revision into a temporary folder.
func checkOut(ctx context.Context, module, rev string) (*checkout, error) {
	c := &checkout{rev: rev, module: module}
	if strings.HasPrefix(rev, "-") {
		return nil, usage("--base %s: write a revision, such as origin/main", rev)
	}
	if _, err := c.git(ctx, "rev-parse", "--verify", "--quiet", rev+"^{commit}"); err != nil {
		return nil, usage("--base %s: git knows no such revision here", rev)
	}
	top, err := c.git(ctx, "rev-parse", "--show-toplevel")
	if err != nil {
		return nil, err
	}
	prefix, err := c.git(ctx, "rev-parse", "--show-prefix")
	if err != nil {
		return nil, err
	}
	c.prefix = strings.TrimSpace(string(prefix))
	if c.dir, err = os.MkdirTemp("", "pathtally-base-"); err != nil {
		return nil, &failure{stage: "usage", message: "--base: " + err.Error()}
	}
	cmd := exec.CommandContext(ctx, "git", "archive", "--format=tar", rev)
	cmd.Dir = strings.TrimSpace(string(top))
	var errs bytes.Buffer
	cmd.Stderr = &errs
	out, err := cmd.StdoutPipe()
	if err == nil {
		err = cmd.Start()
	}
	if err != nil {
		c.remove()
		return nil, gitFailure(rev, err, errs.String())
	}
	unpackErr := unpack(out, c.dir)
	if err := cmd.Wait(); err != nil {
		c.remove()
		return nil, gitFailure(rev, err, errs.String())
	}
	if unpackErr != nil {
		c.remove()
		return nil, &failure{stage: "usage", message: fmt.Sprintf("--base %s: %v", rev, unpackErr)}
	}
	return c, nil
}

func (c *checkout) remove() { os.RemoveAll(c.dir) }

// unpack writes a tar stream below dir; links are kept where they stay inside.
func unpack(r io.Reader, dir string) error {
	root, err := os.OpenRoot(dir)
	if err != nil {
		return err
	}
	defer root.Close()
	t := tar.NewReader(r)
	for {
		h, err := t.Next()
		if err == io.EOF {
			// git pads the stream; it must be read to its end.
			_, err = io.Copy(io.Discard, r)
			return err
		}
		if err != nil {
			return err
		}
		name := filepath.FromSlash(strings.TrimSuffix(h.Name, "/"))
		switch h.Typeflag {
		case tar.TypeDir:
			err = root.MkdirAll(name, 0o755)
		case tar.TypeReg:
			if err = root.MkdirAll(filepath.Dir(name), 0o755); err != nil {
				return err
			}
			var w *os.File
			if w, err = root.Create(name); err != nil {
				return err
			}
			_, err = io.Copy(w, t)
			if e := w.Close(); err == nil {
				err = e
			}
		case tar.TypeSymlink:
			if filepath.IsLocal(h.Linkname) {
				err = root.Symlink(h.Linkname, name)
			}
		}
		if err != nil {
			return err
		}
	}
}

// folder is where the run stands in the revision, with the patterns that name
// something there; "" if nothing does.
func (c *checkout) folder(dir string, patterns []string) (string, []string, error) {
	if dir == "" {
		dir = "."
	}
	abs, err := filepath.Abs(dir)
	if err != nil {
		return "", nil, &failure{stage: "usage", message: err.Error()}
	}
	if abs, err = filepath.EvalSymlinks(abs); err != nil {
		return "", nil, &failure{stage: "usage", message: err.Error()}
	}
	module, err := filepath.EvalSymlinks(c.module)
	if err != nil {
		return "", nil, &failure{stage: "usage", message: err.Error()}
	}
	rel, err := filepath.Rel(module, abs)
	if err != nil {
		return "", nil, &failure{stage: "usage", message: err.Error()}
	}
	base := filepath.Join(c.dir, filepath.FromSlash(c.prefix))
	at := filepath.Join(base, rel)
	if !exists(filepath.Join(base, "go.mod")) && !exists(filepath.Join(base, "go.work")) {
		return "", nil, nil
	}
	if len(patterns) == 0 {
		patterns = []string{"."}
	}
	var keep []string
	for _, p := range patterns {
		if strings.HasPrefix(p, ".") {
			folder, all := strings.CutSuffix(p, "...")
			if !hasGo(filepath.Join(at, filepath.FromSlash(folder)), all) {
				continue
			}
		}
		keep = append(keep, p)
	}
	if len(keep) == 0 || !exists(at) {
		return "", nil, nil
	}
	return at, keep, nil
}

func exists(file string) bool {
	_, err := os.Stat(file)
	return err == nil
}

// hasGo says that a folder holds a Go file, at any depth with all.
func hasGo(dir string, all bool) bool {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return false
	}
	for _, e := range entries {
		if !e.IsDir() && strings.HasSuffix(e.Name(), ".go") && (all || !strings.HasSuffix(e.Name(), "_test.go")) {
			return true
		}
		if all && e.IsDir() && hasGo(filepath.Join(dir, e.Name()), true) {
			return true
		}
	}
	return false
}

// changes are the lines of the module that differ from the revision, by file as
// findings name it. Where lines were only taken away, the two around the gap
// count as changed.
type changes map[string][]lineRange

type lineRange struct{ From, To int }

func (c *checkout) changes(ctx context.Context) (changes, error) {
	out, err := c.git(ctx, "-c", "core.quotePath=off", "diff", "--no-color", "--no-ext-diff", "--relative", "--unified=0", "--src-prefix=a/", "--dst-prefix=b/", c.rev, "--", "*.go")
	if err != nil {
		return nil, err
	}
	ch := parseDiff(string(out))
	// A file that git does not follow yet is new as a whole.
	out, err = c.git(ctx, "-c", "core.quotePath=off", "ls-files", "--others", "--exclude-standard", "--", "*.go")
	if err != nil {
		return nil, err
	}
	for _, name := range strings.Split(string(out), "\n") {
		if name != "" {
			ch[name] = append(ch[name], lineRange{1, 1 << 30})
		}
	}
	return ch, nil
}

func parseDiff(text string) changes {
	ch := changes{}
	file := ""
	for _, line := range strings.Split(text, "\n") {
		switch {
		case strings.HasPrefix(line, "+++ b/"):
			file = strings.TrimPrefix(line, "+++ b/")
		case strings.HasPrefix(line, "+++ "):
			file = ""
		case strings.HasPrefix(line, "@@ ") && file != "":
			_, rest, ok := strings.Cut(line, " +")
			if !ok {
				continue
			}
			rest, _, _ = strings.Cut(rest, " ")
			start, count, counted := strings.Cut(rest, ",")
			from, err := strconv.Atoi(start)
			if err != nil {
				continue
			}
			n := 1
			if counted {
				if n, err = strconv.Atoi(count); err != nil {
					continue
				}
			}
			if n == 0 {
				ch[file] = append(ch[file], lineRange{from, from + 1})
			} else {
				ch[file] = append(ch[file], lineRange{from, from + n - 1})
			}
		}
	}
	return ch
}

func (ch changes) has(file string, line int) bool {
	for _, r := range ch[file] {
		if line >= r.From && line <= r.To {
			return true
		}
	}
	return false
}

// nearest is the step on a finding's path at a changed line that is the fewest
// steps away from the cause; of two the one before it.
func (ch changes) nearest(f *judge.Finding) (report.Headline, bool) {
	if ch.has(f.Cause.Place.File, f.Cause.Place.Line) {
		return report.Headline{}, false // it stands there already
	}
	cause := len(f.Path) - 1
	for i := len(f.Path) - 1; i >= 0; i-- {
		if f.Path[i].Place == f.Cause.Place {
			cause = i
			break
		}
	}
	best, far := -1, 0
	for i := range f.Path {
		p := f.Path[i].Place
		if p.Line == 0 || !ch.has(p.File, p.Line) {
			continue
		}
		d := 2 * (cause - i)
		if d < 0 {
			d = 1 - d
		}
		if best < 0 || d < far {
			best, far = i, d
		}
	}
	if best >= 0 {
		return report.Headline{Place: f.Path[best].Place, Text: f.Path[best].Text}, true
	}
	// Not on the path: the changed line of the cause's file that is nearest, such
	// as an Unlock that was taken away.
	at, far := 0, 0
	for _, r := range ch[f.Cause.Place.File] {
		for _, line := range []int{r.From, min(r.To, r.From+1<<20)} {
			d := line - f.Cause.Place.Line
			if d < 0 {
				d = -d
			}
			if at == 0 || d < far {
				at, far = line, d
			}
		}
	}
	inside := func(line int) bool {
		return f.Blame.Place.File == f.Cause.Place.File && line >= f.Blame.Place.Line && (f.Blame.End.Line == 0 || line <= f.Blame.End.Line)
	}
	if at > 0 && inside(at) {
		p := f.Cause.Place
		p.Line, p.Column = at, 1
		return report.Headline{Place: p, Text: "changed here"}, true
	}
	return report.Headline{}, false
}
