package properties

// Settings: which rules and claims are on where, roots, and how files combine.

import (
	"path"
	"regexp"
	"sort"
	"strings"

	"pathtally/properties/syntax"
)

// State says whether a claim is judged, and how its findings count.
type State uint8

const (
	On       State = iota // as the rule says
	Softened              // judged; findings are shown as advice
	Off                   // not judged
)

// A Switch is one target of an enable, disable or soften line.
type Switch struct {
	State  State
	Target string         // name of a rule or of a rule set
	Claim  string         // "" for all claims
	In     []string       // patterns of packages as written; empty for all
	Reason string         // "" only with On
	Dir    string         // as RuleFile.Dir: the switch acts on packages in it and below
	Pos    string         // of the target
	match  []packageMatch // as In
}

// PackageRef names a package of the module.
type PackageRef struct {
	Path string // import path
	Dir  string // folder relative to the module root, forward slashes; "." for the root
}

// packageMatch is one pattern of the go command.
type packageMatch struct {
	byDir bool // against the folder, else against the import path
	re    *regexp.Regexp
}

func (m packageMatch) fits(p PackageRef) bool {
	if m.byDir {
		return m.re.MatchString(path.Clean(p.Dir))
	}
	return m.re.MatchString(p.Path)
}

// State gives the state of a claim of a rule for findings of a package. The
// switches act in their order, so that the nearest file wins and in a file the
// last line. A rule of a folder that does not hold the package is off.
func (b *RuleBook) State(rule *ResolvedRule, claim string, p PackageRef) State {
	if !within(path.Clean(p.Dir), rule.Dir) {
		return Off
	}
	state := On
	for _, s := range b.Switches {
		if s.Target != rule.Name && (s.Target != rule.Set || s.Claim != "") || s.Claim != "" && s.Claim != claim {
			continue
		}
		if !within(path.Clean(p.Dir), s.Dir) {
			continue
		}
		fits := len(s.match) == 0
		for _, m := range s.match {
			fits = fits || m.fits(p)
		}
		if fits {
			state = s.State
		}
	}
	return state
}

// setting resolves a setting.
func (r *resolver) setting(s *syntax.Setting) {
	switch s.Word {
	case "pin":
		r.fail(syntax.Naming, s, "", "not judged yet: pin")
	case "root", "noroot":
		rs := RootSetting{Dir: r.file.Dir, Pos: r.file.Tree.Place(s)}
		r.inst = nil
		for _, c := range s.Callees {
			rs.Callees = append(rs.Callees, r.callees(c, noCondition)...)
		}
		if s.Word == "root" {
			r.book.Roots = append(r.book.Roots, rs)
		} else {
			r.book.NoRoots = append(r.book.NoRoots, rs)
		}
		return
	}
	state := map[string]State{"enable": On, "disable": Off, "soften": Softened}[s.Word]
	reason := ""
	if s.Reason != nil {
		reason = strings.TrimSpace(s.Reason.Value)
	}
	if state != On && reason == "" {
		r.fail(syntax.Naming, s, `write reason "…" behind it`, "%s needs a reason", s.Word)
	}
	var in []string
	var match []packageMatch
	for _, p := range s.In {
		in = append(in, p.Value)
		match = append(match, r.pattern(p))
	}
	for _, t := range s.Targets {
		r.target(t)
		sw := Switch{State: state, Target: t.Name.Text, In: in, match: match, Reason: reason, Dir: r.file.Dir, Pos: r.file.Tree.Place(t)}
		if t.Claim != nil {
			sw.Claim = t.Claim.Text
		}
		r.book.Switches = append(r.book.Switches, sw)
	}
}

// pattern reads a package pattern of the go command, relative to the file.
func (r *resolver) pattern(p *syntax.StrLit) packageMatch {
	v := p.Value
	if v == "" || strings.Contains(v, "\\") || path.IsAbs(v) {
		r.fail(syntax.Naming, p, `as for the go command: "./depot/..."`, "this is no pattern of packages")
	}
	m := packageMatch{}
	if v == "." || v == ".." || strings.HasPrefix(v, "./") || strings.HasPrefix(v, "../") {
		m.byDir = true
		v = path.Join(r.file.Dir, v)
		if v == ".." || strings.HasPrefix(v, "../") {
			r.fail(syntax.Naming, p, "patterns are relative to the file", "this pattern leads out of the module")
		}
	}
	// "..." is any string, and "/..." at the end also none; "./..." is everything.
	re := strings.ReplaceAll(regexp.QuoteMeta(v), `\.\.\.`, ".*")
	if strings.HasSuffix(re, "/.*") {
		re = strings.TrimSuffix(re, "/.*") + "(/.*)?"
	}
	m.re = regexp.MustCompile("^(" + re + ")$")
	return m
}

// target checks that a rule, rule set or claim exists: in this file, in one
// that is further out, or built in; whether it is applicable does not matter.
func (r *resolver) target(t *syntax.Target) {
	var names, claims []string
	found, isSet := false, false
	for _, d := range r.declared {
		if !within(r.file.Dir, d.file.Dir) {
			continue
		}
		names = append(names, d.rule.Name.Text)
		if s := d.file.Set(); s != "" {
			names = append(names, s)
			isSet = isSet || s == t.Name.Text
		}
		if d.rule.Name.Text == t.Name.Text {
			found = true
			claims = append(claims, d.claims...)
		}
	}
	if !found && !isSet {
		names = sortedUnique(names)
		hint := ""
		if n := syntax.Near(t.Name.Text, names); n != "" {
			hint = "there is " + n
		} else if len(names) <= 16 {
			hint = thereIs(names)
		}
		r.fail(syntax.Naming, t.Name, hint, "there is no rule or rule set %s", t.Name.Text)
	}
	if t.Claim == nil {
		return
	}
	if !found {
		r.fail(syntax.Naming, t.Claim, "claims belong to rules", "%s is a rule set and has no claims", t.Name.Text)
	}
	for _, c := range claims {
		if c == t.Claim.Text {
			return
		}
	}
	r.fail(syntax.Naming, t.Claim, has(t.Claim.Text, claims), "the rule %s has no claim %s", t.Name.Text, t.Claim.Text)
}

func sortedUnique(in []string) []string {
	sort.Strings(in)
	var out []string
	for i, s := range in {
		if i == 0 || s != in[i-1] {
			out = append(out, s)
		}
	}
	return out
}

// sortOuterFirst orders paths of rule files by depth, then by name.
func sortOuterFirst(names []string) {
	sort.Slice(names, func(i, j int) bool {
		a, b := strings.Count(names[i], "/"), strings.Count(names[j], "/")
		if a != b {
			return a < b
		}
		return names[i] < names[j]
	})
}
