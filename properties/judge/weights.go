package judge

import "pathtally/properties"

// dot is w·c. Weights are small and counts are lengths of printed paths, so
// the product stays far from the ends of int64.
func dot(w, c []int64) int64 {
	var s int64
	for i := range w {
		s += w[i] * c[i]
	}
	return s
}

func negated(w []int64) []int64 {
	n := make([]int64, len(w))
	for i := range w {
		n[i] = -w[i]
	}
	return n
}

// positive keeps the positive part of w.
func positive(w []int64) []int64 {
	p := make([]int64, len(w))
	for i := range w {
		p[i] = max(w[i], 0)
	}
	return p
}

// opens says that the first count that w speaks of has a positive weight: the
// question then asks for a surplus of what a rule names first (taken, opened),
// else for a deficit. Rules name the opening count first; the order of the
// counts in the rule is the only sign of direction that every rule has.
func opens(w []int64) bool {
	for _, x := range w {
		if x != 0 {
			return x > 0
		}
	}
	return true
}

// direction gives w with the sign that opens, divided by its content, so that
// the questions of a rule that speak of one difference share one ledger.
func direction(w []int64) []int64 {
	u := make([]int64, len(w))
	copy(u, w)
	var g int64
	for _, x := range u {
		g = gcd(g, x)
	}
	if g == 0 {
		return u
	}
	if !opens(u) {
		g = -g
	}
	for i := range u {
		u[i] /= g
	}
	return u
}

func gcd(a, b int64) int64 {
	if a < 0 {
		a = -a
	}
	if b < 0 {
		b = -b
	}
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// pair gives the two counts of a difference P - N with coefficients 1 and -1,
// and ok if w has that shape and no other.
func pair(w []int64) (pos, neg int, ok bool) {
	pos, neg = -1, -1
	for i, x := range w {
		switch x {
		case 0:
		case 1:
			if pos >= 0 {
				return 0, 0, false
			}
			pos = i
		case -1:
			if neg >= 0 {
				return 0, 0, false
			}
			neg = i
		default:
			return 0, 0, false
		}
	}
	return pos, neg, pos >= 0 && neg >= 0
}

// single gives the count of a question that speaks of one count only.
func single(w []int64) (int, bool) {
	at := -1
	for i, x := range w {
		if x != 0 {
			if at >= 0 {
				return 0, false
			}
			at = i
		}
	}
	return at, at >= 0
}

// isEnd says that a point is judged where a path ends.
func isEnd(p properties.Point) bool {
	return p <= properties.AtEnd
}

// pointText writes a checkpoint as a rule does; an event of before and after
// is not repeated.
func pointText(p properties.Point) string {
	switch p {
	case properties.AtReturn:
		return "at return"
	case properties.AtSuccess:
		return "at success"
	case properties.AtFailure:
		return "at failure"
	case properties.AtPanic:
		return "at panic"
	case properties.AtEnd:
		return "at end"
	case properties.Always:
		return "always"
	case properties.Before:
		return "before"
	default:
		return "after"
	}
}
