package main

import (
	"slices"
	"strings"

	"pathtally/properties"
	"pathtally/properties/judge"
	"pathtally/properties/syntax"
)

// onlyList is what --only selects; empty selects all.
type onlyList []only

// only is RULE, RULE/CLAIM or RULE/CLAIM:ID.
type only struct{ rule, claim, id string }

func parseOnly(args []string) (onlyList, error) {
	var l onlyList
	for _, a := range args {
		rest, id, hasID := strings.Cut(a, ":")
		rule, claim, hasClaim := strings.Cut(rest, "/")
		if rule == "" || (hasClaim && claim == "") || (hasID && (id == "" || !hasClaim)) {
			return nil, usage("--only %s: write RULE, RULE/CLAIM or RULE/CLAIM:ID", a)
		}
		l = append(l, only{rule, claim, strings.ToLower(id)})
	}
	return l, nil
}

// known says which name is none.
func (l onlyList) known(book *properties.RuleBook) error {
	for _, o := range l {
		var names, claims []string
		found := false
		for _, r := range book.Rules {
			names = append(names, r.Name)
			if r.Name == o.rule {
				found = true
				for _, c := range r.Claims {
					claims = append(claims, c.Name)
				}
			}
		}
		if !found {
			for _, s := range book.Skipped {
				if s.Name == o.rule {
					return usage("--only %s: the rule means nothing here, since %s is not in the build", o.rule, s.Missing)
				}
			}
			hint := "see pathtally rules list"
			if n := syntax.Near(o.rule, names); n != "" {
				hint = "there is " + n
			}
			return usage("--only %s: there is no such rule; %s", o.rule, hint)
		}
		if o.claim != "" && !slices.Contains(claims, o.claim) {
			return usage("--only %s/%s: rule %s has %s", o.rule, o.claim, o.rule, syntax.Enumerate(claims, "and"))
		}
	}
	return nil
}

// claims gives the rule with the selected claims only, nil if none is.
func (l onlyList) claims(r *properties.ResolvedRule) *properties.ResolvedRule {
	if len(l) == 0 {
		return r
	}
	var keep []properties.Claim
	for _, c := range r.Claims {
		for _, o := range l {
			if o.rule == r.Name && (o.claim == "" || o.claim == c.Name) {
				keep = append(keep, c)
				break
			}
		}
	}
	if len(keep) == 0 {
		return nil
	}
	narrow := *r
	narrow.Claims = keep
	return &narrow
}

func (l onlyList) byID() bool {
	return len(l) > 0 && !slices.ContainsFunc(l, func(o only) bool { return o.id == "" })
}

// keep drops the findings that no ID selects and gives the first ID that
// selects none.
func (l onlyList) keep(r *judge.Result) (missing string) {
	used := make([]bool, len(l))
	r.Findings = slices.DeleteFunc(r.Findings, func(f judge.Finding) bool {
		if len(l) == 0 {
			return false
		}
		drop := true
		for i, o := range l {
			if o.rule == f.Rule && (o.claim == "" || o.claim == f.Claim) && strings.HasPrefix(f.Fingerprint, o.id) {
				used[i], drop = true, false
			}
		}
		return drop
	})
	for i, o := range l {
		if o.id != "" && !used[i] {
			return o.id
		}
	}
	return ""
}
