package properties

// What `rules list` and `rules show` print, from rule files alone and, if there
// is a build, with what it adds.

import (
	"fmt"
	"go/doc"
	"go/types"
	"strings"

	"pathtally/properties/syntax"
)

// RuleInfo is a rule as a list of rules shows it.
type RuleInfo struct {
	Set      string   // "" for a module's own rule outside of a rule set
	Name     string   // of the rule
	Sentence string   // first sentence of the documentation, "" without any
	Claims   []string // names, in source order
	Advice   []string // names of those that are advice
	BuiltIn  bool
	Pos      string // file:line:column
	// On: no switch of the files turns off the whole rule everywhere. Switches
	// for single claims or packages are in the output of ShowRule.
	On bool

	file *RuleFile
	decl *syntax.Rule
}

// ListRules lists the rules of the files, in their order (see Resolve).
func ListRules(files []*RuleFile) []RuleInfo {
	var out []RuleInfo
	for _, f := range files {
		for _, d := range f.Tree.Decls {
			r, ok := d.(*syntax.Rule)
			if !ok {
				continue
			}
			i := RuleInfo{Set: f.Set(), Name: r.Name.Text, BuiltIn: f.BuiltIn, Pos: f.Tree.Place(r), On: true, file: f, decl: r}
			i.Sentence = new(doc.Package).Synopsis(r.Doc)
			for _, c := range r.Clauses {
				if c, ok := c.(*syntax.Claim); ok {
					i.Claims = append(i.Claims, c.Name.Text)
					if c.Advice {
						i.Advice = append(i.Advice, c.Name.Text)
					}
				}
			}
			for _, s := range settingsFor(files, &i) {
				for _, t := range s.setting.Targets {
					if i.isTarget(t) && t.Claim == nil && len(s.setting.In) == 0 && within(i.file.Dir, s.file.Dir) {
						i.On = s.setting.Word != "disable"
					}
				}
			}
			out = append(out, i)
		}
	}
	return out
}

// LookupRule gives the rules with a name: one, none, or several of different folders.
func LookupRule(files []*RuleFile, name string) []RuleInfo {
	var out []RuleInfo
	for _, i := range ListRules(files) {
		if i.Name == name {
			out = append(out, i)
		}
	}
	return out
}

func (i *RuleInfo) isTarget(t *syntax.Target) bool {
	return t.Name.Text == i.Name || t.Claim == nil && t.Name.Text == i.Set && i.Set != ""
}

// placedSetting is a setting and its file.
type placedSetting struct {
	file    *RuleFile
	setting *syntax.Setting
}

// settingsFor gives the switches that name a rule or its set, in the order in which they act.
func settingsFor(files []*RuleFile, i *RuleInfo) []placedSetting {
	var out []placedSetting
	for _, f := range files {
		for _, d := range f.Tree.Decls {
			s, ok := d.(*syntax.Setting)
			if !ok {
				continue
			}
			for _, t := range s.Targets {
				if i.isTarget(t) {
					out = append(out, placedSetting{f, s})
					break
				}
			}
		}
	}
	return out
}

// ShowRule writes a rule as `rules show` prints it: documentation, clauses,
// claims with reasons, switches, what prefixes matched (from book, which may be
// nil) and examples.
func ShowRule(files []*RuleFile, i RuleInfo, book *RuleBook) string {
	var b strings.Builder
	f := i.file.Tree
	fmt.Fprintf(&b, "%s", i.Name)
	if i.Set != "" {
		fmt.Fprintf(&b, ", of the rule set %s", i.Set)
	}
	fmt.Fprintf(&b, " (%s)\n", i.Pos)
	if i.decl.Doc != "" {
		b.WriteByte('\n')
		for _, l := range strings.Split(i.decl.Doc, "\n") {
			b.WriteString(strings.TrimRight("    "+l, " ") + "\n")
		}
	}
	b.WriteString("\n")
	var examples []*syntax.Example
	for _, c := range i.decl.Clauses {
		switch c := c.(type) {
		case *syntax.Example:
			examples = append(examples, c)
		default:
			fmt.Fprintf(&b, "    %s\n", f.Text(c))
		}
	}
	if s := settingsFor(files, &i); len(s) > 0 {
		b.WriteString("\nswitches, the last one wins\n")
		for _, s := range s {
			fmt.Fprintf(&b, "    %s  (%s)\n", s.file.Tree.Text(s.setting), s.file.Tree.Place(s.setting))
		}
	}
	if book != nil {
		i.showBuild(&b, book)
	}
	for _, e := range examples {
		title := "keeps every claim"
		if len(e.Broken) > 0 {
			var names []string
			for _, n := range e.Broken {
				names = append(names, n.Text)
			}
			title = "breaks " + syntax.Enumerate(names, "and")
		}
		fmt.Fprintf(&b, "\n%s\n%s", title, indentCode(e.Code.Value))
	}
	return b.String()
}

// showBuild adds what the build says: what prefixes matched, or that the rule
// is not applicable.
func (i *RuleInfo) showBuild(b *strings.Builder, book *RuleBook) {
	for _, s := range book.Skipped {
		if s.Name == i.Name && s.Set == i.Set && i.BuiltIn {
			fmt.Fprintf(b, "\nnot applicable: %s is not in the build\n", s.Missing)
		}
	}
	for _, r := range book.Rules {
		if r.decl != i.decl {
			continue
		}
		first := true
		n := 0
		for _, c := range i.decl.Clauses {
			ev := eventOf(c)
			if ev == nil {
				continue
			}
			if n >= len(r.Events) {
				break
			}
			m := r.Events[n]
			if m.Pos != i.file.Tree.Place(c) && m.Pos != i.file.Tree.Place(ev) {
				continue // the same checkpoint a second time
			}
			n++
			prefix := false
			for _, c := range ev.Callees {
				prefix = prefix || c.Prefix
			}
			if !prefix {
				continue
			}
			if first {
				b.WriteString("\nprefixes\n")
				first = false
			}
			var names []string
			for _, c := range m.Callees {
				names = append(names, c.String())
			}
			fmt.Fprintf(b, "    %s\n        %s\n", m.Text, strings.Join(names, ", "))
		}
	}
}

// eventOf gives the event that a clause matches, nil if it matches none.
func eventOf(c syntax.Clause) *syntax.Event {
	switch c := c.(type) {
	case *syntax.Count:
		return c.Event
	case *syntax.Claim:
		return c.Point.Event
	}
	return nil
}

// String writes a callee as a rule does.
func (c Callee) String() string {
	if c.Recv != nil {
		return "(" + types.TypeString(c.Recv, qualifier) + ")." + c.Obj.Name()
	}
	if c.Obj.Pkg() == nil {
		return c.Obj.Name()
	}
	return c.Obj.Pkg().Name() + "." + c.Obj.Name()
}

// indentCode writes the code of an example four columns in, its common indent
// and blank lines at both ends taken away.
func indentCode(code string) string {
	lines := strings.Split(strings.ReplaceAll(code, "\r\n", "\n"), "\n")
	for len(lines) > 0 && strings.TrimSpace(lines[0]) == "" {
		lines = lines[1:]
	}
	for len(lines) > 0 && strings.TrimSpace(lines[len(lines)-1]) == "" {
		lines = lines[:len(lines)-1]
	}
	common := -1
	for _, l := range lines {
		if strings.TrimSpace(l) == "" {
			continue
		}
		if n := len(l) - len(strings.TrimLeft(l, " \t")); common < 0 || n < common {
			common = n
		}
	}
	var b strings.Builder
	for _, l := range lines {
		if strings.TrimSpace(l) == "" {
			b.WriteByte('\n')
			continue
		}
		b.WriteString("    " + l[common:] + "\n")
	}
	return b.String()
}
