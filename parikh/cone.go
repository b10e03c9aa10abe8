// Cones in few dimensions, over big integers.

package parikh

import (
	"math/big"
	"slices"
)

// dualCone gives generators of {n : n·g <= 0 for all generators g} in dimension
// k: extreme rays, and lines that span the space inside it. Double description
// (Motzkin, Raiffa, Thompson, Thrall, 1953), one generator at a time; two rays are
// adjacent iff no third is tight wherever both are.
func dualCone(k int, generators [][]*big.Int) (rays, lines [][]*big.Int) {
	for i := range k {
		v := make([]*big.Int, k)
		for j := range v {
			v[j] = new(big.Int)
		}
		v[i].SetInt64(1)
		lines = append(lines, v)
	}
	for done, g := range generators {
		// A line that is not orthogonal to g becomes a ray; everything else moves
		// along it onto g's hyperplane.
		at := slices.IndexFunc(lines, func(l []*big.Int) bool { return dot(l, g).Sign() != 0 })
		if at >= 0 {
			l := lines[at]
			if dot(l, g).Sign() > 0 {
				l = negated(l)
			}
			lines = slices.Delete(lines, at, at+1)
			for i := range lines {
				lines[i] = onto(lines[i], l, g)
			}
			for i := range rays {
				rays[i] = onto(rays[i], l, g)
			}
			rays = append(rays, l)
			continue
		}
		var next, up, down [][]*big.Int
		for _, r := range rays {
			switch dot(r, g).Sign() {
			case 0:
				next = append(next, r)
			case -1:
				next = append(next, r)
				down = append(down, r)
			default:
				up = append(up, r)
			}
		}
		for _, u := range up {
			for _, d := range down {
				if !adjacent(u, d, rays, generators[:done]) {
					continue
				}
				// (u·g) d - (d·g) u lies on the hyperplane.
				x, y := dot(u, g), dot(d, g)
				v := make([]*big.Int, k)
				for i := range v {
					v[i] = new(big.Int).Sub(new(big.Int).Mul(x, d[i]), new(big.Int).Mul(y, u[i]))
				}
				next = append(next, primitive(v))
			}
		}
		rays = next
	}
	return rays, lines
}

// onto moves v along l until v·g = 0; l·g < 0.
func onto(v, l, g []*big.Int) []*big.Int {
	x, y := dot(v, g), dot(l, g)
	if x.Sign() == 0 {
		return v
	}
	// -y v + x l, with -y > 0.
	out := make([]*big.Int, len(v))
	for i := range v {
		out[i] = new(big.Int).Sub(new(big.Int).Mul(x, l[i]), new(big.Int).Mul(y, v[i]))
	}
	return primitive(out)
}

func adjacent(u, d []*big.Int, rays, generators [][]*big.Int) bool {
	var tight [][]*big.Int
	for _, g := range generators {
		if dot(u, g).Sign() == 0 && dot(d, g).Sign() == 0 {
			tight = append(tight, g)
		}
	}
	for _, r := range rays {
		if &r[0] == &u[0] || &r[0] == &d[0] {
			continue
		}
		if !slices.ContainsFunc(tight, func(g []*big.Int) bool { return dot(r, g).Sign() != 0 }) {
			return false
		}
	}
	return true
}

func dot(a, b []*big.Int) *big.Int {
	s, t := new(big.Int), new(big.Int)
	for i := range a {
		s.Add(s, t.Mul(a[i], b[i]))
	}
	return s
}

func negated(v []*big.Int) []*big.Int {
	out := make([]*big.Int, len(v))
	for i, n := range v {
		out[i] = new(big.Int).Neg(n)
	}
	return out
}

// primitive divides by the greatest common divisor.
func primitive(v []*big.Int) []*big.Int {
	g := new(big.Int)
	for _, n := range v {
		if n.Sign() != 0 {
			g.GCD(nil, nil, g, new(big.Int).Abs(n))
		}
	}
	if g.Sign() == 0 || g.Cmp(bigOne) == 0 {
		return v
	}
	out := make([]*big.Int, len(v))
	for i, n := range v {
		out[i] = new(big.Int).Quo(n, g)
	}
	return out
}

// sortVectors sorts by the last coordinates first, so that (1,0) comes before
// (0,1).
func sortVectors(vs [][]*big.Int) {
	slices.SortFunc(vs, compareVectors)
}

func compareVectors(a, b []*big.Int) int {
	for i := len(a) - 1; i >= 0; i-- {
		if c := a[i].Cmp(b[i]); c != 0 {
			return c
		}
	}
	return 0
}
