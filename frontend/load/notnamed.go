package load

// This file finds what lies below the module root and is no part of the program.

import (
	"go/build"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
)

// Unjudged is a folder with Go files below the module root of which nothing
// was loaded with bodies.
type Unjudged struct {
	Folder string // relative to the module root with forward slashes
	Files  int    // Go files in it, tests not counted unless it has nothing else
	Why    string // "another module", "not named", "build constraints", "only tests", "has errors"
}

// Unjudged walks over the folders below the module root, sorted by path. It
// passes by what the go command passes by: vendor and testdata folders, and
// those whose names begin with "." or "_". Of another module it names the
// root only. It is not called by Load: on a big tree it is not for free.
//
// A folder that cannot be read is the returned error; the list is right up to there.
func (prog *Program) Unjudged() ([]Unjudged, error) {
	judged := map[string]bool{} // by folder
	broken := map[string]bool{}
	for _, p := range prog.Packages {
		if p.Bodies {
			judged[filepath.Clean(p.Dir)] = true
		} else if p.Broken {
			broken[filepath.Clean(p.Dir)] = true
		}
	}
	modules := map[string]bool{} // roots of modules that are judged
	for _, p := range prog.Packages {
		if p.Bodies && p.moduleDir != "" {
			modules[filepath.Clean(p.moduleDir)] = true
		}
	}
	ctx := build.Default
	ctx.GOOS, ctx.GOARCH, ctx.BuildTags, ctx.CgoEnabled = prog.GOOS, prog.GOARCH, prog.tags, prog.cgo

	var out []Unjudged
	err := filepath.WalkDir(prog.ModuleDir, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if !d.IsDir() {
			return nil
		}
		if path != prog.ModuleDir {
			name := d.Name()
			if name == "vendor" || name == "testdata" || strings.HasPrefix(name, ".") || strings.HasPrefix(name, "_") {
				return filepath.SkipDir
			}
		}
		rel, _ := inside(prog.ModuleDir, path)
		if path != prog.ModuleDir && !modules[path] {
			if st, err := os.Stat(filepath.Join(path, "go.mod")); err == nil && st.Mode().IsRegular() {
				out = append(out, Unjudged{Folder: rel, Why: "another module"})
				return filepath.SkipDir
			}
		}
		if judged[path] {
			return nil
		}
		entries, err := os.ReadDir(path)
		if err != nil {
			return err
		}
		files, tests, matching := 0, 0, 0
		for _, e := range entries {
			name := e.Name()
			switch {
			case e.IsDir() || !strings.HasSuffix(name, ".go") || strings.HasPrefix(name, ".") || strings.HasPrefix(name, "_"):
			case strings.HasSuffix(name, "_test.go"):
				tests++
			default:
				files++
				// An unreadable or odd file is one that a build would look at.
				if ok, err := ctx.MatchFile(path, name); ok || err != nil {
					matching++
				}
			}
		}
		u := Unjudged{Folder: rel, Files: files, Why: "not named"}
		switch {
		case files == 0 && tests == 0:
			return nil
		case broken[path]:
			u.Why = "has errors"
		case files == 0:
			u.Files, u.Why = tests, "only tests"
		case matching == 0:
			u.Why = "build constraints"
		}
		out = append(out, u)
		return nil
	})
	return out, err
}
