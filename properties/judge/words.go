package judge

import (
	"fmt"
	"go/types"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"pathtally/properties"
)

// subject names the instance of a finding: "d.mu", "an *os.File", or "" for a
// rule without an instance.
func subject(rule *properties.ResolvedRule, start *properties.Start) string {
	if start.Instance != "" {
		return start.Instance
	}
	if rule.Each == nil {
		return ""
	}
	var names []string
	for _, t := range rule.Each.Types {
		names = append(names, types.TypeString(t, func(p *types.Package) string { return p.Name() }))
	}
	if len(names) == 0 {
		return "its " + rule.Each.Name
	}
	if len(names) > 1 {
		return "its " + rule.Each.Name
	}
	return article(names[0]) + " " + names[0]
}

// article is a or an, by the first letter that is spoken.
func article(s string) string {
	s = strings.TrimLeft(s, "*[]<-")
	if s != "" && strings.ContainsRune("aeiouAEIO", rune(s[0])) {
		return "an"
	}
	return "a"
}

// leaving is how a path ends, in a sentence: "return", "panic".
type leaving int

const (
	byReturn leaving = iota
	byPanic
	byGoexit
	byLoss
	byMoment // the path is stopped at a moment: always, before, after
)

// message says what is wrong, for any rule: who can do what.
//
//	surplus of the first count at an end   F can return with X still TAKEN
//	deficit at an end                      F can return with X RELEASED more often than TAKEN
//	one count                              F can return with TRIES 4 on X
//	at a moment                            F can have X RELEASED more often than TAKEN
//	before an event                        F can come to EVENT while FORMULA is false
func message(who string, rule *properties.ResolvedRule, claim *properties.Claim, q properties.Question, subj string, by leaving, counts []int64, event string) string {
	verb := "return"
	switch by {
	case byPanic:
		verb = "panic"
	case byGoexit:
		verb = "end its goroutine"
	case byLoss:
		verb = "lose"
	}
	names := rule.Counts
	if claim.Point == properties.Before || claim.Point == properties.After {
		what := event
		if what == "" {
			what = "that event"
		}
		word := "come to"
		if claim.Point == properties.After {
			word = "do"
		}
		on := ""
		if subj != "" {
			on = " for " + subj
		}
		return fmt.Sprintf("%s can %s %s while %s is false%s", who, word, what, claim.Text, on)
	}
	if p, n, ok := pair(q.Weights); ok && q.Bound == 0 {
		surplus := opens(q.Weights)
		switch {
		case by == byMoment && subj != "":
			return fmt.Sprintf("%s can have %s %s more often than %s", who, subj, names[p], names[n])
		case by == byMoment:
			return fmt.Sprintf("%s can count %s more often than %s", who, names[p], names[n])
		case by == byLoss && subj != "" && surplus:
			return fmt.Sprintf("%s can lose %s %s but not %s", who, subj, names[p], names[n])
		case by == byLoss:
			return fmt.Sprintf("%s can lose %s with more %s than %s", who, orIt(subj), names[p], names[n])
		case subj != "" && surplus && rule.Moves:
			return fmt.Sprintf("%s can %s with %s %s but not %s", who, verb, subj, names[p], names[n])
		case subj != "" && surplus:
			return fmt.Sprintf("%s can %s with %s still %s", who, verb, subj, names[p])
		case subj != "":
			return fmt.Sprintf("%s can %s with %s %s more often than %s", who, verb, subj, names[p], names[n])
		default:
			return fmt.Sprintf("%s can %s with more %s than %s", who, verb, names[p], names[n])
		}
	}
	if p, n, ok := pair(q.Weights); ok && by == byMoment && subj != "" && opens(q.Weights) {
		return fmt.Sprintf("%s can have %s %s %d times and %s %d times at one moment", who, subj, names[p], counts[p], names[n], counts[n])
	}
	var parts []string
	for i, w := range q.Weights {
		if w != 0 {
			parts = append(parts, names[i]+" "+strconv.FormatInt(counts[i], 10))
		}
	}
	with := strings.Join(parts, ", ")
	if subj != "" {
		with += " on " + subj
	}
	switch by {
	case byMoment:
		return fmt.Sprintf("%s can come to %s, against %s", who, with, q.Text)
	case byLoss:
		return fmt.Sprintf("%s can lose %s with %s, against %s", who, orIt(subj), strings.Join(parts, ", "), q.Text)
	default:
		return fmt.Sprintf("%s can %s with %s, against %s", who, verb, with, q.Text)
	}
}

func orIt(s string) string {
	if s == "" {
		return "it"
	}
	return s
}

// instantiate writes a formula with the numbers in the place of the counts:
// "taken == released" with 1 and 0 is "1 == 0". ok is false if the formula
// has a name that is no count (a phase, a capacity).
func instantiate(formula string, names []string, counts []int64) (string, bool) {
	var b strings.Builder
	for i := 0; i < len(formula); {
		r, n := utf8.DecodeRuneInString(formula[i:])
		if r != '_' && !unicode.IsLetter(r) {
			// A number's digits are copied whole, so that no name starts inside one.
			b.WriteString(formula[i : i+n])
			i += n
			continue
		}
		j := i
		for j < len(formula) {
			r, n := utf8.DecodeRuneInString(formula[j:])
			if r == '-' {
				// A hyphen belongs to the name before a letter, as in the rule language.
				next, _ := utf8.DecodeRuneInString(formula[j+n:])
				if !unicode.IsLetter(next) {
					break
				}
			} else if r != '_' && !unicode.IsLetter(r) && !unicode.IsDigit(r) {
				break
			}
			j += n
		}
		word := formula[i:j]
		found := false
		for k, name := range names {
			if name == word {
				b.WriteString(strconv.FormatInt(counts[k], 10))
				found = true
				break
			}
		}
		if !found {
			return "", false
		}
		i = j
	}
	return b.String(), true
}

// causeText says in a few words why the instance is lost at a step.
func causeText(kind properties.StepKind, by leaving, passed *Spot, here string, q properties.Question, word string) string {
	if by == byMoment && passed != nil {
		text := passed.Text
		if text == "" {
			text = "the event"
		}
		return fmt.Sprintf("this leads to %s in %s, where %s is false", text, lineOf(passed.Place, here), q.Text)
	}
	if by == byMoment {
		return "here " + q.Text + " is false"
	}
	who := "this step"
	switch kind {
	case properties.StepReturn:
		who = "this return"
	case properties.StepPanic:
		who = "this panic"
	case properties.StepBranch:
		who = "this way"
	case properties.StepCall, properties.StepDefer:
		who = "this call"
	case properties.StepEnd:
		who = "this end"
	case properties.StepSpawn:
		who = "this go statement"
	}
	if by == byLoss && passed == nil {
		return "its last name is gone behind this"
	}
	if passed != nil {
		text := passed.Text
		if text == "" {
			text = "the right way"
		}
		return fmt.Sprintf("%s passes by %s in %s", who, text, lineOf(passed.Place, here))
	}
	if kind == properties.StepEvent {
		return "this is one too many"
	}
	if word == "" {
		return who + " leaves it so"
	}
	return fmt.Sprintf("%s leaves it %s", who, word)
}

// lineOf names a line, with its file if it is another one than the reader's.
func lineOf(p properties.Place, here string) string {
	if p.File == here {
		return fmt.Sprintf("line %d", p.Line)
	}
	return fmt.Sprintf("%s:%d", p.File, p.Line)
}
