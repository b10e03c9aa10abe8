package properties

// Rule files: those built in, those of a module, and which of them apply where.

import (
	"embed"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"strings"

	"pathtally/properties/syntax"
)

// RuleFileName is the name of rule files in a module.
const RuleFileName = "pathtally.rules"

//go:embed rulesets/*.rules
var ruleSets embed.FS

// A RuleFile is a rule file that was read.
type RuleFile struct {
	Name    string       // as the user should see it: relative to the module root, forward slashes
	Dir     string       // folder, relative to the module root, forward slashes: the rules apply to packages in it and below; "." for all
	BuiltIn bool         // comes with the tool; not applicable, silently, where its packages are not in the build
	Tree    *syntax.File // never nil; holds what could be read
	// Errs are the lexical and grammatical errors; Resolve reports them with its own.
	Errs syntax.Errors
}

// Set is the name of the rule set, "" without a `ruleset` line.
func (f *RuleFile) Set() string {
	if f.Tree.RuleSet == nil {
		return ""
	}
	return f.Tree.RuleSet.Text
}

// ParseRuleFile reads the text of a rule file that stands in the folder dir
// (see RuleFile.Dir). Errors are kept for Resolve, so that a person sees those
// of all stages at once.
func ParseRuleFile(name, dir, src string) *RuleFile {
	f := &RuleFile{Name: name, Dir: path.Clean(dir)}
	tree, err := syntax.Parse(name, src)
	f.Tree = tree
	errors.As(err, &f.Errs)
	return f
}

// BuiltInRules gives the rule sets that come with the tool, sorted by name. A
// built-in file that does not parse is a bug and panics; a test reads them all.
func BuiltInRules() []*RuleFile {
	entries, err := ruleSets.ReadDir("rulesets")
	if err != nil {
		panic("properties: " + err.Error())
	}
	var files []*RuleFile
	for _, e := range entries { // ReadDir sorts
		src, err := ruleSets.ReadFile("rulesets/" + e.Name())
		if err != nil {
			panic("properties: " + err.Error())
		}
		f := ParseRuleFile("built-in "+e.Name(), ".", string(src))
		if len(f.Errs) > 0 {
			panic("properties: " + f.Errs.Error())
		}
		f.BuiltIn = true
		files = append(files, f)
	}
	return files
}

// RuleFilePaths lists the rule files that apply to packages in the folder dir
// of a module, nearest first, as paths relative to root with forward slashes.
// root is a folder of the machine; dir is relative to it with forward slashes
// and must not lead out of it.
func RuleFilePaths(root, dir string) ([]string, error) {
	dir = path.Clean(dir)
	if dir == ".." || strings.HasPrefix(dir, "../") || path.IsAbs(dir) {
		return nil, fmt.Errorf("folder %s is outside of the module", dir)
	}
	var found []string
	for {
		p := path.Join(dir, RuleFileName)
		info, err := os.Stat(filepath.Join(root, filepath.FromSlash(p)))
		switch {
		case err == nil && info.Mode().IsRegular():
			found = append(found, p)
		case err != nil && !errors.Is(err, fs.ErrNotExist):
			return nil, fmt.Errorf("looking for rule files: %w", err)
		}
		if dir == "." {
			return found, nil
		}
		dir = path.Dir(dir)
	}
}

// ReadRuleFiles reads all rule files that apply to packages in one of the
// folders (each as for RuleFilePaths), outer folders before inner ones. Errors
// are those of the file system; those of rules are in the files.
func ReadRuleFiles(root string, dirs []string) ([]*RuleFile, error) {
	seen := map[string]bool{}
	var names []string
	for _, d := range dirs {
		found, err := RuleFilePaths(root, d)
		if err != nil {
			return nil, err
		}
		for _, p := range found {
			if !seen[p] {
				seen[p] = true
				names = append(names, p)
			}
		}
	}
	sortOuterFirst(names)
	var files []*RuleFile
	for _, name := range names {
		src, err := os.ReadFile(filepath.Join(root, filepath.FromSlash(name)))
		if err != nil {
			return nil, fmt.Errorf("reading rules: %w", err)
		}
		files = append(files, ParseRuleFile(name, path.Dir(name), string(src)))
	}
	return files, nil
}

// RuleImports lists the import paths that the files of a module name, sorted.
// Whoever loads the build should load them too, so that rules are right or
// wrong whatever packages a run is asked for.
func RuleImports(files []*RuleFile) []string {
	var paths []string
	for _, f := range files {
		if f.BuiltIn {
			continue
		}
		for _, im := range f.Tree.Imports {
			paths = append(paths, im.Path.Value)
		}
	}
	return sortedUnique(paths)
}
