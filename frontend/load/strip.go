package load

// stripBodies returns src with the contents of the bodies of its top-level
// functions blanked out: braces and line ends stay, so that every position
// outside of them is what it was. It returns src itself if something looks
// odd; the parser then judges.
//
// Most of the text of a package is function bodies, and parsing them is most
// of the cost of reading a package of which only the declarations matter.
func stripBodies(src []byte) []byte {
	out := make([]byte, len(src))
	copy(out, src)
	s := stripper{src: src}
	first := true // at the first word of a line or after a semicolon
	for s.i < len(src) {
		switch c := src[s.i]; {
		case c == '\n' || c == ';':
			first = true
			s.i++
		case c == ' ' || c == '\t' || c == '\r':
			s.i++
		case s.skipText():
		case isLetter(c):
			// Only declarations: the braces after "[...]func()" are no body,
			// and the length of the array is what is in them.
			declares := first
			first = false
			if word := s.word(); word == "func" && declares {
				open, ok := s.signature()
				if !ok {
					continue // a function type, or a declaration without a body
				}
				end := s.block()
				if end < 0 {
					return src
				}
				for k := open + 1; k < end; k++ {
					if out[k] != '\n' {
						out[k] = ' '
					}
				}
			}
		case c == '(' || c == '[' || c == '{':
			// Group declarations, types and literals are kept whole: function
			// literals in them are rare.
			first = false
			if s.block() < 0 {
				return src
			}
		default:
			first = false
			s.i++
		}
	}
	return out
}

// stripper walks over Go source at the level of brackets.
type stripper struct {
	src []byte
	i   int
}

func isLetter(c byte) bool {
	return c == '_' || 'a' <= c && c <= 'z' || 'A' <= c && c <= 'Z' || c >= 0x80
}

// word takes an identifier or keyword.
func (s *stripper) word() string {
	start := s.i
	for s.i < len(s.src) && (isLetter(s.src[s.i]) || '0' <= s.src[s.i] && s.src[s.i] <= '9') {
		s.i++
	}
	return string(s.src[start:s.i])
}

// skipText takes a comment, string or rune literal, if one starts here.
func (s *stripper) skipText() bool {
	src, i := s.src, s.i
	switch src[i] {
	case '/':
		if i+1 >= len(src) {
			return false
		}
		switch src[i+1] {
		case '/':
			for i < len(src) && src[i] != '\n' {
				i++
			}
		case '*':
			i += 2
			for i+1 < len(src) && (src[i] != '*' || src[i+1] != '/') {
				i++
			}
			i += 2
		default:
			return false
		}
	case '"', '\'':
		q := src[i]
		i++
		for i < len(src) && src[i] != q && src[i] != '\n' {
			if src[i] == '\\' {
				i++
			}
			i++
		}
		i++
	case '`':
		i++
		for i < len(src) && src[i] != '`' {
			i++
		}
		i++
	default:
		return false
	}
	s.i = min(i, len(src))
	return true
}

// block takes a bracket and everything up to its partner, and returns the
// partner's offset, or -1 if there is none.
func (s *stripper) block() int {
	depth := 0
	for s.i < len(s.src) {
		switch c := s.src[s.i]; {
		case s.skipText():
			continue
		case c == '(' || c == '[' || c == '{':
			depth++
		case c == ')' || c == ']' || c == '}':
			depth--
			if depth == 0 {
				s.i++
				return s.i - 1
			}
		}
		s.i++
	}
	return -1
}

// signature takes what follows the word func up to the opening brace of the
// body, which it does not take, and returns the brace's offset. ok is false
// if there is no body: then everything before the end of the line is taken.
func (s *stripper) signature() (open int, ok bool) {
	last := "" // the last word, if nothing but space followed it
	for s.i < len(s.src) {
		switch c := s.src[s.i]; {
		case c == ' ' || c == '\t' || c == '\r':
			s.i++
		case c == '\n':
			return 0, false
		case s.skipText():
		case isLetter(c):
			last = s.word()
		case c == '{':
			if last != "struct" && last != "interface" {
				return s.i, true
			}
			if s.block() < 0 {
				return 0, false
			}
			last = ""
		case c == '(' || c == '[':
			if s.block() < 0 {
				return 0, false
			}
			last = ""
		case c == ';' || c == '=' || c == '}' || c == ')' || c == ']':
			return 0, false
		default:
			s.i++
			last = ""
		}
	}
	return 0, false
}
