package syntax

// The layout of rule files: one clause a line, comments kept.

import "strings"

// Format gives the text of a rule file in the usual layout: one clause in each
// line, two columns in; a clause that was wrapped stays wrapped where it was,
// six columns in; a blank line around each rule; at most one blank line
// elsewhere. Code, strings and comments are kept as they are, written semicolons
// at line ends go. The result has the same tokens and formats to itself. The
// error is an Errors; a file with errors is not formatted.
func Format(name, src string) (string, error) {
	if _, err := Parse(name, src); err != nil {
		return "", err
	}
	f := newFile(name, src)
	p := &printer{f: f, toks: lex(f)}
	p.comments = f.Comments
	p.file()
	return p.out.String(), nil
}

// printer is the state of Format.
type printer struct {
	f        *File
	toks     []Token
	comments []Comment // those not yet printed
	out      strings.Builder
	inRule   bool
	opened   bool // nothing printed since the brace of a rule, or at all
	wasRule  bool // the last declaration was a rule
	end      int  // where the last thing printed ends in the source, 0 for none
}

func (p *printer) line(offset int) int {
	l, _ := p.f.Position(offset)
	return l
}

// statements are separated by semicolons; the opening brace of a rule ends one
// too, its closing brace is one.
func (p *printer) file() {
	p.opened = true
	for i := 0; p.toks[i].Kind != EOF; {
		t := p.toks[i]
		if t.Text == ";" {
			i++
			continue
		}
		isRule := t.Text == "rule" && t.Kind == Word && !p.inRule
		if p.inRule && t.Text == "}" {
			p.ownComments(t.From, false)
			p.out.WriteString("}")
			p.end = t.To
			p.inRule, p.opened, p.wasRule = false, false, true
			p.restOfLine(p.toks[i+1].From)
			i++
			continue
		}
		p.ownComments(t.From, isRule)
		p.opened = false
		if !p.inRule {
			p.wasRule = isRule
		}
		if p.inRule {
			p.out.WriteString("  ")
		}
		from := i
		for ; p.toks[i].Text != ";" || p.toks[i].Kind != Word; i++ {
			t := p.toks[i]
			if i > from {
				p.between(t)
			}
			p.out.WriteString(t.Text)
			p.end = t.To
			if isRule && t.Text == "{" {
				p.inRule, p.opened = true, true
				i++
				break
			}
		}
		p.restOfLine(p.next(i))
	}
	p.ownComments(len(p.f.Src), false)
}

// next is where the next token that was written starts.
func (p *printer) next(i int) int {
	for p.toks[i].Text == ";" {
		i++
	}
	return p.toks[i].From
}

// ownComments prints the comments before a statement, which starts at offset,
// and blank lines before them and it.
func (p *printer) ownComments(offset int, isRule bool) {
	blank := func(from int) {
		first := p.out.Len() == 0 || p.opened
		if !first && (p.end > 0 && p.line(from)-p.line(p.end-1) > 1 || !p.inRule && (isRule || p.wasRule)) {
			p.out.WriteByte('\n')
		}
		isRule, p.wasRule = false, false
	}
	indent := ""
	if p.inRule {
		indent = "  "
	}
	for len(p.comments) > 0 && p.comments[0].From < offset {
		c := p.comments[0]
		p.comments = p.comments[1:]
		blank(c.From)
		p.opened = false
		p.out.WriteString(indent + strings.TrimRight(c.Text, " \t") + "\n")
		p.end = c.To
	}
	if offset < len(p.f.Src) && p.f.Src[offset] != '}' {
		blank(offset)
	}
}

// restOfLine ends a line with the comments that stand in it before offset.
func (p *printer) restOfLine(offset int) {
	for len(p.comments) > 0 && p.comments[0].From < offset && !p.comments[0].Own {
		p.out.WriteString(" " + strings.TrimRight(p.comments[0].Text, " \t"))
		p.end = p.comments[0].To
		p.comments = p.comments[1:]
		break // a comment ends its line; the next one stands in another
	}
	p.out.WriteByte('\n')
}

// between prints what stands before token t inside a statement: nothing, a
// space, or a line break with the comments around it.
func (p *printer) between(t Token) {
	indent := "    "
	if p.inRule {
		indent = "      "
	}
	broken := p.line(t.From) > p.line(p.end-1)
	if !broken {
		if t.From > p.end {
			p.out.WriteByte(' ')
		}
		return
	}
	for len(p.comments) > 0 && p.comments[0].From < t.From {
		c := p.comments[0]
		p.comments = p.comments[1:]
		if c.Own {
			p.out.WriteString("\n" + indent)
		} else {
			p.out.WriteByte(' ')
		}
		p.out.WriteString(strings.TrimRight(c.Text, " \t"))
	}
	p.out.WriteString("\n" + indent)
}
