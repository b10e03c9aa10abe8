package syntax

// Text to tokens, with the semicolons that line breaks stand for.

import (
	"fmt"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Kind is the class of a token.
type Kind uint8

const (
	EOF     Kind = iota
	Name         // an identifier that is not reserved
	Int          // digits
	String       // "…"
	Code         // back quotes
	Word         // a word or sign of the grammar; Token.Text is the word
	illegal      // Token.err says why
)

// Token is one token. Text is the source text, ";" for a semicolon that a line
// break stands for.
type Token struct {
	Kind
	Span
	Text string
	auto bool // a semicolon that was not written
	err  *Error
}

// words are the reserved words of the grammar; a test compares them with it.
var words = wordSet(`_ across advice after always arg at before broken by call calls cap chan claim close count disable
	each enable end ends failure false from func goroutine goroutines holds import in inside keeps len make map matches model
	moves never nil noroot on outside panic phase pin reason receive repeats return returning returns root rule ruleset send
	since soften spawn spawns starts stays struct success true until where with within yields`)

// clauseWords start a clause of a rule when they stand first in a line,
// topWords a declaration of the file.
var (
	clauseWords = wordSet(`each count phase claim advice model holds broken across within`)
	topWords    = wordSet(`rule model enable disable soften root noroot pin import`)
)

func wordSet(s string) map[string]bool {
	m := map[string]bool{}
	for _, w := range strings.Fields(s) {
		m[w] = true
	}
	return m
}

// signs, longest first among those with a common start.
var signs = []string{"...", "=>", "==", "!=", "<=", ">=", "||", "&&",
	"{", "}", "(", ")", "[", "]", ";", ":", ",", ".", "|", "*", "/", "-", "+", "%", "<", ">", "!"}

// Tokens splits the text of a rule file; the semicolons that line breaks stand
// for are in the result, comments are not. The list ends in a token of kind
// EOF. The error is an Errors with the lexical errors.
func Tokens(file, src string) ([]Token, error) {
	f := newFile(file, src)
	toks := lex(f)
	var errs Errors
	for _, t := range toks {
		if t.err != nil {
			errs = append(errs, t.err)
		}
	}
	return toks, errs.Err()
}

// lexer is the state of lex.
type lexer struct {
	f     *File
	src   string
	at    int
	toks  []Token
	depth int  // open braces
	fresh bool // no token yet in this line
}

func lex(f *File) []Token {
	l := &lexer{f: f, src: f.Src, fresh: true}
	if strings.HasPrefix(l.src, "\uFEFF") {
		l.at = len("\uFEFF")
		l.bad(0, l.at, "the file starts with a byte order mark", "save it as UTF-8 without one")
	}
	for l.next() {
	}
	l.semi(len(l.src))
	l.toks = append(l.toks, Token{Kind: EOF, Span: Span{len(l.src), len(l.src)}})
	return l.toks
}

// semi adds the semicolon that a line break stands for.
func (l *lexer) semi(at int) {
	if n := len(l.toks); n > 0 && l.toks[n-1].Text != ";" && l.toks[n-1].Text != "{" {
		l.toks = append(l.toks, Token{Kind: Word, Text: ";", Span: Span{at, at}, auto: true})
	}
}

func (l *lexer) add(k Kind, from int) {
	text := l.src[from:l.at]
	if k == Word {
		switch {
		case text == "}":
			l.semi(from)
			l.depth = max(0, l.depth-1)
		case text == "{":
			l.depth++
		case l.fresh && l.depth == 0 && topWords[text], l.fresh && l.depth > 0 && clauseWords[text]:
			l.semi(from)
		case l.fresh && l.depth > 0 && topWords[text]:
			// No clause can go on with such a word: the closing brace of the
			// rule is missing, and what follows is read as outside it.
			l.semi(from)
			l.depth = 0
		}
	}
	l.fresh = false
	l.toks = append(l.toks, Token{Kind: k, Text: text, Span: Span{from, l.at}})
}

func (l *lexer) bad(from, to int, msg, hint string) {
	l.fresh = false
	l.toks = append(l.toks, Token{Kind: illegal, Span: Span{from, to}, Text: l.src[from:to],
		err: l.f.Errorf(Lexical, Span{from, to}, hint, "%s", msg)})
}

// next reads one token, comment or run of space; false at the end.
func (l *lexer) next() bool {
	if l.at >= len(l.src) {
		return false
	}
	from := l.at
	c := l.src[l.at]
	switch {
	case c == '\n':
		l.fresh = true
		l.at++
		return true
	case c == ' ' || c == '\t' || c == '\r':
		l.at++
		return true
	case strings.HasPrefix(l.src[l.at:], "//"):
		end := strings.IndexByte(l.src[l.at:], '\n')
		if end < 0 {
			end = len(l.src) - l.at
		}
		l.at += end
		text := strings.TrimRight(l.src[from:l.at], "\r")
		l.f.Comments = append(l.f.Comments, Comment{Span: Span{from, from + len(text)}, Text: text, Own: l.fresh})
		if !utf8.ValidString(text) {
			l.bad(from, l.at, "this comment is not UTF-8", "")
			l.fresh = true
		}
		return true
	case c == '"':
		l.str()
		return true
	case c == '`':
		l.code()
		return true
	case c >= '0' && c <= '9':
		l.number()
		return true
	}
	r, size := utf8.DecodeRuneInString(l.src[l.at:])
	if r == utf8.RuneError && size <= 1 {
		l.at++
		l.bad(from, l.at, fmt.Sprintf("byte 0x%02x is not UTF-8", c), "")
		return true
	}
	if r == '_' || unicode.IsLetter(r) {
		l.word()
		return true
	}
	if strings.HasPrefix(l.src[l.at:], "<-chan") && !nameGoesOn(l.src[l.at+len("<-chan"):]) {
		l.at += len("<-chan")
		l.add(Word, from)
		return true
	}
	for _, s := range signs {
		if strings.HasPrefix(l.src[l.at:], s) {
			l.at += len(s)
			l.add(Word, from)
			return true
		}
	}
	l.at += size
	hint := ""
	switch r {
	case '=':
		hint = "equality is =="
	case '&':
		hint = "and is &&"
	case '\'':
		hint = `a string stands between "…"`
	case '#':
		hint = "a comment starts with //"
	case '≤', '≥', '≠', '⇒':
		hint = "write " + map[rune]string{'≤': "<=", '≥': ">=", '≠': "!=", '⇒': "=>"}[r]
	}
	l.bad(from, l.at, fmt.Sprintf("the language has no character %q", r), hint)
	return true
}

// nameGoesOn: s starts with what would continue a name before it.
func nameGoesOn(s string) bool {
	r, n := utf8.DecodeRuneInString(s)
	if r == '-' {
		r, _ = utf8.DecodeRuneInString(s[n:])
		return unicode.IsLetter(r)
	}
	return r == '_' || unicode.IsLetter(r) || unicode.IsDigit(r)
}

func (l *lexer) word() {
	from := l.at
	_, n := utf8.DecodeRuneInString(l.src[l.at:])
	l.at += n
	for nameGoesOn(l.src[l.at:]) {
		_, n = utf8.DecodeRuneInString(l.src[l.at:])
		l.at += n
	}
	text := l.src[from:l.at]
	switch n := len(l.toks); {
	case n > 0 && l.toks[n-1].Text == "." && l.toks[n-1].Kind == Word && text != "_":
		l.add(Name, from)
	case words[text]:
		if text == "chan" && strings.HasPrefix(l.src[l.at:], "<-") {
			l.at += len("<-")
		}
		l.add(Word, from)
	default:
		l.add(Name, from)
	}
}

func (l *lexer) number() {
	from := l.at
	for l.at < len(l.src) && (l.src[l.at] >= '0' && l.src[l.at] <= '9' || l.src[l.at] == '_') {
		l.at++
	}
	text := l.src[from:l.at]
	if r, n := utf8.DecodeRuneInString(l.src[l.at:]); unicode.IsLetter(r) {
		for ; unicode.IsLetter(r) || unicode.IsDigit(r) || r == '_'; r, n = utf8.DecodeRuneInString(l.src[l.at:]) {
			l.at += n
		}
		l.bad(from, l.at, fmt.Sprintf("%s is neither a number nor a name", l.src[from:l.at]), "numbers are decimal, names start with a letter")
		return
	}
	if strings.HasSuffix(text, "_") || strings.Contains(text, "__") {
		l.bad(from, l.at, fmt.Sprintf("in %s, _ does not stand between digits", text), "")
		return
	}
	l.add(Int, from)
}

func (l *lexer) str() {
	from := l.at
	for i := from + 1; ; i++ {
		if i >= len(l.src) || l.src[i] == '\n' {
			l.at = i
			l.bad(from, i, "this string does not end in its line", `a string stands between "…"`)
			return
		}
		if l.src[i] == '\\' && i+1 < len(l.src) && l.src[i+1] != '\n' {
			i++
			continue
		}
		if l.src[i] == '"' {
			l.at = i + 1
			break
		}
	}
	if _, err := strconv.Unquote(l.src[from:l.at]); err != nil || !utf8.ValidString(l.src[from:l.at]) {
		l.bad(from, l.at, "this is not a string as Go writes it", `\n, \t, \\, \" and \u00e9 are understood`)
		return
	}
	l.add(String, from)
}

func (l *lexer) code() {
	from := l.at
	n := run(l.src[from:])
	for i := from + n; i < len(l.src); {
		if l.src[i] != '`' {
			i++
			continue
		}
		m := run(l.src[i:])
		i += m
		if m == n {
			l.at = i
			if !utf8.ValidString(l.src[from:i]) {
				l.bad(from, from+n, "this code is not UTF-8", "")
				return
			}
			l.add(Code, from)
			return
		}
	}
	l.at = len(l.src)
	l.bad(from, from+n, "this code does not end", "it goes to the next run of "+Enumerate([]string{strings.Repeat("`", n)}, "")+" with as many back quotes")
	l.toks[len(l.toks)-1].To = l.at
}

// run is the number of back quotes that s starts with.
func run(s string) int { return len(s) - len(strings.TrimLeft(s, "`")) }
