package main

import (
	"context"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"unicode/utf8"

	"github.com/spf13/cobra"

	"pathtally/frontend/load"
	"pathtally/properties"
	"pathtally/properties/syntax"
)

const rulesHelp = `pathtally rules COMMAND

  pathtally rules list                   the rules that apply in this module
  pathtally rules show RULE [packages]   one rule; with packages, what its names match there
  pathtally rules try [RULE ...]         do the examples of the rules come out as they say?

  all       -C DIR  --rules FILE
  try       --verbose

exit  0 as said   1 an example comes out otherwise   2 could not run
`

type rulesFlags struct {
	dir     string
	rules   []string
	verbose bool
}

func rulesCommand(ctx context.Context, s streams) *cobra.Command {
	var f rulesFlags
	c := &cobra.Command{
		Use: "rules",
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) > 0 {
				return fmt.Errorf("there is no command rules %s: there are list, show and try", args[0])
			}
			return nil
		},
		RunE: func(c *cobra.Command, _ []string) error { return c.Help() },
	}
	list := &cobra.Command{Use: "list", Args: cobra.NoArgs, RunE: func(*cobra.Command, []string) error { return rulesList(s, &f) }}
	show := &cobra.Command{Use: "show RULE [packages]", RunE: func(_ *cobra.Command, args []string) error {
		if len(args) == 0 {
			return fmt.Errorf("rules show: which rule? See pathtally rules list")
		}
		return rulesShow(ctx, s, &f, args[0], args[1:])
	}}
	try := &cobra.Command{Use: "try [RULE ...]", RunE: func(_ *cobra.Command, args []string) error { return rulesTry(ctx, s, &f, args) }}
	try.Flags().BoolVar(&f.verbose, "verbose", false, "print the findings of examples that come out otherwise")
	for _, sub := range []*cobra.Command{list, show, try} {
		sub.Flags().StringVarP(&f.dir, "dir", "C", "", "run in this folder")
		sub.Flags().StringArrayVar(&f.rules, "rules", nil, "a further rule file")
		setHelp(sub, rulesHelp)
		c.AddCommand(sub)
	}
	setHelp(c, rulesHelp)
	return c
}

// moduleRoot is the folder of the go.mod around dir; dir itself without one.
func moduleRoot(dir string) (root string, module bool, err error) {
	if dir == "" {
		dir = "."
	}
	abs, err := filepath.Abs(dir)
	if err != nil {
		return "", false, err
	}
	if info, err := os.Stat(abs); err != nil || !info.IsDir() {
		return "", false, fmt.Errorf("-C %s: no such folder", dir)
	}
	for at := abs; ; {
		if info, err := os.Stat(filepath.Join(at, "go.mod")); err == nil && info.Mode().IsRegular() {
			return at, true, nil
		}
		up := filepath.Dir(at)
		if up == at {
			return abs, false, nil
		}
		at = up
	}
}

// allRules reads every rule file of the module: those of folders that hold one.
func allRules(f *rulesFlags) (root string, files []*properties.RuleFile, err error) {
	root, module, err := moduleRoot(f.dir)
	if err != nil {
		return "", nil, &failure{stage: "usage", message: err.Error()}
	}
	var dirs []string
	if module {
		err = filepath.WalkDir(root, func(p string, d fs.DirEntry, err error) error {
			if err != nil {
				return err
			}
			name := d.Name()
			if d.IsDir() && p != root {
				// The go command does not look here either.
				if name == "vendor" || name == "testdata" || name == "node_modules" || strings.HasPrefix(name, ".") || strings.HasPrefix(name, "_") {
					return fs.SkipDir
				}
				if _, err := os.Stat(filepath.Join(p, "go.mod")); err == nil {
					return fs.SkipDir
				}
			}
			if !d.IsDir() && name == properties.RuleFileName {
				rel, err := filepath.Rel(root, filepath.Dir(p))
				if err != nil {
					return err
				}
				dirs = append(dirs, filepath.ToSlash(rel))
			}
			return nil
		})
		if err != nil {
			return "", nil, &failure{stage: "rules", message: "looking for rule files: " + err.Error()}
		}
	}
	files, err = readRules(root, dirs, f.rules)
	return root, files, err
}

func rulesList(s streams, f *rulesFlags) error {
	_, files, err := allRules(f)
	if err != nil {
		return err
	}
	infos := properties.ListRules(files)
	width := 0
	for _, i := range infos {
		width = max(width, utf8.RuneCountInString(i.Name))
	}
	set := "\x00"
	for _, i := range infos {
		head := "this module"
		if i.Set != "" {
			head = "rule set " + i.Set
		}
		if i.BuiltIn {
			head += " (built in)"
		}
		if head != set {
			if set != "\x00" {
				fmt.Fprintln(s.out)
			}
			fmt.Fprintln(s.out, head)
			set = head
		}
		off := ""
		if !i.On {
			off = "  (off)"
		}
		sentence := i.Sentence
		if sentence == "" {
			sentence = strings.Join(i.Claims, ", ")
		}
		fmt.Fprintf(s.out, "  %-*s  %s%s\n", width, i.Name, sentence, off)
	}
	return nil
}

func rulesShow(ctx context.Context, s streams, f *rulesFlags, name string, patterns []string) error {
	_, files, err := allRules(f)
	if err != nil {
		return err
	}
	found := properties.LookupRule(files, name)
	if len(found) == 0 {
		var names []string
		for _, i := range properties.ListRules(files) {
			names = append(names, i.Name)
		}
		hint := "see pathtally rules list"
		if n := syntax.Near(name, names); n != "" {
			hint = "there is " + n
		}
		return &failure{stage: "usage", message: fmt.Sprintf("there is no rule %s; %s", name, hint)}
	}
	var book *properties.RuleBook
	if len(patterns) > 0 {
		prog, err := load.Load(load.Config{Dir: f.dir, Patterns: patterns, Context: ctx})
		if err != nil {
			return loadFailure(err)
		}
		if missing := missingImports(prog, files); len(missing) > 0 {
			if prog, err = load.Load(load.Config{Dir: f.dir, Patterns: append(slices.Clone(patterns), missing...), Context: ctx}); err != nil {
				return loadFailure(err)
			}
		}
		if book, err = properties.Resolve(files, prog.Universe(), properties.Options{}); err != nil {
			return ruleFailure(err)
		}
	}
	for i, r := range found {
		if i > 0 {
			fmt.Fprintln(s.out)
		}
		fmt.Fprint(s.out, properties.ShowRule(files, r, book))
	}
	return nil
}

// pick gives the rules that names name, all if none does.
func pick(rules []*properties.ResolvedRule, names []string) ([]*properties.ResolvedRule, error) {
	if len(names) == 0 {
		return rules, nil
	}
	var out []*properties.ResolvedRule
	for _, n := range names {
		found := false
		for _, r := range rules {
			if r.Name == n {
				found = true
				out = append(out, r)
			}
		}
		if !found {
			return nil, &failure{stage: "usage", message: fmt.Sprintf("there is no rule %s; see pathtally rules list", n)}
		}
	}
	slices.SortStableFunc(out, func(a, b *properties.ResolvedRule) int { return strings.Compare(a.Set, b.Set) })
	return out, nil
}
