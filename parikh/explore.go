// Shape of an image: bounds, rays, minimal vectors, members of a grid.

package parikh

import (
	"context"
	"errors"
	"fmt"
	"math/big"

	"pathtally/parikh/lia"
)

// Form is a linear form over the counts: one number per count.
type Form []int64

func (im *Image) lin(f Form) lia.Lin {
	var parts []lia.Lin
	for i, n := range f {
		if n != 0 {
			parts = append(parts, lia.Term(n, im.counts[i]))
		}
	}
	return lia.Sum(parts...)
}

// Bound is how large a form gets. Exact unless Status is Unknown.
type Bound struct {
	// Status is Yes if the bound is known, No if the image is empty.
	Status    Status
	Budget    string   // Unknown: see Answer
	Unbounded bool     // above any number
	Value     *big.Int // the greatest value, if not Unbounded
	Answer    Answer   // a derivation that reaches it, if not Unbounded
}

// Greatest finds the greatest value of a form over the image. It is unbounded iff
// a circulation gains: every circulation of a trimmed grammar can be added to some
// derivation.
func (im *Image) Greatest(ctx context.Context, f Form) Bound {
	if im.r.empty {
		return Bound{Status: No}
	}
	if im.data != nil && !im.data.fixed() {
		return Bound{Budget: "parameters"}
	}
	c := im.circulations()
	r, err := c.s.Check(ctx, lia.GE(c.lin(f), lia.Const(1)))
	if err != nil {
		panic(fmt.Sprintf("parikh: greatest: %v", err))
	}
	switch r.Status {
	case lia.Unknown:
		return Bound{Budget: r.Budget}
	case lia.Sat:
		return Bound{Status: Yes, Unbounded: true}
	}
	return im.most(ctx, f, lia.True())
}

// Least is Greatest of the opposite form: the least value, or Unbounded below.
func (im *Image) Least(ctx context.Context, f Form) Bound {
	neg := make(Form, len(f))
	for i, n := range f {
		neg[i] = -n
	}
	b := im.Greatest(ctx, neg)
	if b.Value != nil {
		b.Value = new(big.Int).Neg(b.Value)
	}
	return b
}

// most finds the greatest value of a form that is known to be bounded.
func (im *Image) most(ctx context.Context, f Form, also lia.Formula) Bound {
	if !im.exactSlots() {
		return Bound{Budget: "slots"}
	}
	o, err := im.s.Maximise(ctx, im.lin(f), also)
	if err != nil {
		panic(fmt.Sprintf("parikh: most: %v", err))
	}
	switch o.Status {
	case lia.Unsat:
		return Bound{Status: No}
	case lia.Unknown:
		return Bound{Budget: o.Budget}
	}
	return Bound{Status: Yes, Value: o.Value, Answer: im.answer(lia.Sat, "", o.Model)}
}

// circulation is the system of numbers of productions that can be added to
// derivations.
type circulation struct {
	*flow
	counts []lia.Var
}

func (im *Image) circulations() *circulation {
	if im.circ == nil {
		f := newFlow(im.r, im.opt, nil, false)
		im.circ = &circulation{flow: f, counts: f.countVars(im.g.Counts)}
		if im.data != nil {
			im.circ.counts = im.data.cells(f, im.circ.counts)
		}
	}
	return im.circ
}

func (c *circulation) lin(f Form) lia.Lin {
	var parts []lia.Lin
	for i, n := range f {
		if n != 0 {
			parts = append(parts, lia.Term(n, c.counts[i]))
		}
	}
	return lia.Sum(parts...)
}

// Vectors is a list of vectors that may be incomplete.
type Vectors struct {
	List   [][]*big.Int // one number per count, or per chosen count
	Proofs []Answer     // Minimal: a derivation of each
	// Complete: there are no more. If not, Budget names what ran out; it is "limit"
	// if there are more than were asked for.
	Complete bool
	Budget   string
}

// ErrNegative says that minimal vectors were asked of counts that can fall.
var ErrNegative = errors.New("parikh: minimal vectors need counts that never fall; a production takes away")

// Minimal lists vectors of the image that satisfy f and above which (in every
// count) lies no other such vector: at most limit, by least sum. The error is
// ErrNegative.
func (im *Image) Minimal(ctx context.Context, f lia.Formula, limit int) (Vectors, error) {
	for _, p := range im.r.prods {
		for _, e := range p.eff {
			if e.n.Sign() < 0 {
				return Vectors{}, ErrNegative
			}
		}
	}
	for _, p := range im.data.weights() {
		if p < 0 {
			return Vectors{}, ErrNegative
		}
	}
	if !im.exactSlots() {
		return Vectors{Budget: "slots"}, nil
	}
	var out Vectors
	sum := make([]lia.Lin, len(im.counts))
	for i := range sum {
		sum[i] = im.Count(i)
	}
	also := []lia.Formula{f}
	for {
		if len(out.List) == limit {
			// Is there one more?
			switch a := im.Ask(ctx, lia.And(also...)); a.Status {
			case No:
				out.Complete = true
			case Yes:
				out.Budget = "limit"
			default:
				out.Budget = a.Budget
			}
			return out, nil
		}
		o, err := im.s.Minimise(ctx, lia.Sum(sum...), also...)
		if err != nil {
			panic(fmt.Sprintf("parikh: minimal: %v", err))
		}
		switch o.Status {
		case lia.Unsat:
			out.Complete = true
			return out, nil
		case lia.Unknown:
			out.Budget = o.Budget
			return out, nil
		}
		a := im.answer(lia.Sat, "", o.Model)
		out.List = append(out.List, a.Counts)
		out.Proofs = append(out.Proofs, a)
		var below []lia.Formula
		for i, n := range a.Counts {
			below = append(below, lia.LT(im.Count(i), lia.ConstBig(n)))
		}
		also = append(also, lia.Or(below...))
	}
}

// Grid asks for two counts which pairs (x, y) from 0 to n the image has, whatever
// the other counts, among vectors that satisfy f: Cells[y][x].
type Grid struct {
	N      int
	Cells  [][]Status
	Budget string // of the first Unknown cell
}

// Grid fills a grid for counts i and j; see [Grid].
func (im *Image) Grid(ctx context.Context, i, j, n int, f lia.Formula) Grid {
	g := Grid{N: n}
	for range n + 1 {
		g.Cells = append(g.Cells, make([]Status, n+1))
	}
	// A row or column without members costs one question.
	empty := func(c int, v int) bool {
		return im.Ask(ctx, lia.And(f, lia.EQ(im.Count(c), lia.Const(int64(v))),
			lia.GE(im.Count(i), lia.Const(0)), lia.LE(im.Count(i), lia.Const(int64(n))),
			lia.GE(im.Count(j), lia.Const(0)), lia.LE(im.Count(j), lia.Const(int64(n))))).Status == No
	}
	for y := range g.Cells {
		if empty(j, y) {
			for x := range g.Cells[y] {
				g.Cells[y][x] = No
			}
			continue
		}
		for x := range g.Cells[y] {
			a := im.Ask(ctx, lia.And(f, lia.EQ(im.Count(i), lia.Const(int64(x))), lia.EQ(im.Count(j), lia.Const(int64(y)))))
			g.Cells[y][x] = a.Status
			if a.Status == Unknown && g.Budget == "" {
				g.Budget = a.Budget
			}
		}
	}
	return g
}

// MaxRayCounts is how many counts [Image.Rays] looks at.
const MaxRayCounts = 4

// Rays is the cone of directions in which an image extends, in some counts.
type Rays struct {
	// Rays are primitive vectors, one per extreme ray, in order. Each is pumped by
	// some derivation; not all by one.
	Rays [][]*big.Int
	// Lines span the directions that extend both ways.
	Lines  [][]*big.Int
	Status Status // Yes if complete; No if the image is empty
	Budget string
}

// Rays finds the extreme rays of the image, looking only at the given counts (at
// most MaxRayCounts, all different; the caller's duty). It keeps an inner cone and
// looks for circulations beyond its facets; each one found is split until it
// cannot be split any more, so that there are finitely many. Systems with data are
// expanded first ([Expand]).
func (im *Image) Rays(ctx context.Context, counts []int) Rays {
	if len(counts) > MaxRayCounts {
		panic(fmt.Sprintf("parikh: rays of %d counts", len(counts)))
	}
	if im.r.empty {
		return Rays{Status: No}
	}
	k := len(counts)
	if im.data != nil {
		return Rays{Budget: "data"}
	}
	inner, budget := im.circulations().cone(ctx, counts)
	if budget != "" {
		return Rays{Rays: inner, Budget: budget}
	}
	rays, lines := dualCone(k, inner)
	for _, l := range lines {
		rays = append(rays, l, negated(l))
	}
	ext, both := dualCone(k, rays)
	sortVectors(ext)
	return Rays{Rays: ext, Lines: both, Status: Yes}
}

// cone finds effects of elementary circulations that span the cone of all effects
// on some counts.
func (c *circulation) cone(ctx context.Context, counts []int) (inner [][]*big.Int, budget string) {
	k := len(counts)
	for {
		rays, lines := dualCone(k, inner)
		normals := rays
		for _, l := range lines {
			normals = append(normals, l, negated(l))
		}
		found := false
		for _, n := range normals {
			// n·r <= 0 for all of inner; is there more on the other side?
			form := make([]lia.Lin, k)
			for i, x := range n {
				form[i] = lia.V(c.counts[counts[i]]).ScaleBig(x)
			}
			r, err := c.s.Check(ctx, lia.GE(lia.Sum(form...), lia.Const(1)))
			if err != nil {
				panic(fmt.Sprintf("parikh: rays: %v", err))
			}
			if r.Status == lia.Unknown {
				return inner, r.Budget
			}
			if r.Status == lia.Unsat {
				continue
			}
			z := make([]*big.Int, len(c.y))
			for i, x := range c.y {
				z[i] = r.Model.Int(x)
			}
			z = c.r.elementary(z, func(z []*big.Int) int {
				return dot(n, c.r.effect(z, counts)).Sign()
			})
			inner = append(inner, c.r.effect(primitive(z), counts))
			found = true
			break
		}
		if !found {
			return inner, ""
		}
	}
}

// effect adds up the effects of numbers of reduced productions, for some counts.
func (r *reduced) effect(z []*big.Int, counts []int) []*big.Int {
	out := make([]*big.Int, len(counts))
	for i := range out {
		out[i] = new(big.Int)
	}
	t := new(big.Int)
	for p, n := range z {
		if n.Sign() == 0 {
			continue
		}
		for _, e := range r.prods[p].eff {
			for i, c := range counts {
				if int(e.c) == c {
					out[i].Add(out[i], t.Mul(n, e.n))
				}
			}
		}
	}
	return out
}

// elementary splits a circulation z with sign(z) > 0 until its support has only
// one circulation, keeping the sign; sign is that of a linear form.
func (r *reduced) elementary(z []*big.Int, sign func([]*big.Int) int) []*big.Int {
	for {
		var support []int
		for p, n := range z {
			if n.Sign() > 0 {
				support = append(support, p)
			}
		}
		d := r.direction(support)
		if d == nil {
			return z
		}
		// z = x + y with x, y >= 0 on the boundary along ±d; one of them keeps the sign.
		for _, s := range []int64{1, -1} {
			// The greatest t with z + s t d >= 0 is the least z_p / -(s d_p); scaled by its
			// denominator to stay integral.
			var num, den *big.Int
			for _, p := range support {
				m := new(big.Int).Mul(d[p], big.NewInt(-s))
				if m.Sign() > 0 && (num == nil || new(big.Int).Mul(z[p], den).Cmp(new(big.Int).Mul(num, m)) < 0) {
					num, den = z[p], m
				}
			}
			if num == nil {
				// d has one sign: it is a circulation itself.
				x := scaled(d, s)
				if sign(x) > 0 {
					z = x
					break
				}
				continue
			}
			x := make([]*big.Int, len(z))
			for p := range z {
				x[p] = new(big.Int).Mul(z[p], den)
				if d[p] != nil {
					x[p].Add(x[p], new(big.Int).Mul(new(big.Int).Mul(num, big.NewInt(s)), d[p]))
				}
			}
			if sign(x) > 0 {
				z = x
				break
			}
		}
		z = primitive(z)
	}
}

func scaled(d []*big.Int, s int64) []*big.Int {
	x := make([]*big.Int, len(d))
	for i, n := range d {
		x[i] = new(big.Int)
		if n != nil {
			x[i].Mul(n, big.NewInt(s))
		}
	}
	return x
}

// direction finds integers d, zero outside the support, that keep flow; nil if
// their space has dimension one or less. By elimination over the rationals; the
// support's unit vectors other than those of pivots are free, and of two free ones
// the first is taken.
func (r *reduced) direction(support []int) []*big.Int {
	row := map[int32]int{}
	var rows [][]*big.Rat
	at := func(a int32) []*big.Rat {
		i, ok := row[a]
		if !ok {
			i = len(rows)
			row[a] = i
			v := make([]*big.Rat, len(support))
			for j := range v {
				v[j] = new(big.Rat)
			}
			rows = append(rows, v)
		}
		return rows[i]
	}
	one := big.NewRat(1, 1)
	for j, p := range support {
		pr := &r.prods[p]
		v := at(pr.lhs)
		v[j].Sub(v[j], one)
		for _, b := range pr.rhs {
			v := at(b)
			v[j].Add(v[j], one)
		}
	}
	pivotOf := make([]int, len(support))
	rank := 0
	var free []int
	t := new(big.Rat)
	for j := range support {
		pivotOf[j] = -1
		best := -1
		for i := rank; i < len(rows); i++ {
			if rows[i][j].Sign() != 0 {
				best = i
				break
			}
		}
		if best < 0 {
			free = append(free, j)
			continue
		}
		rows[rank], rows[best] = rows[best], rows[rank]
		inv := new(big.Rat).Inv(rows[rank][j])
		for l := range rows[rank] {
			if rows[rank][l].Sign() != 0 {
				rows[rank][l].Mul(rows[rank][l], inv)
			}
		}
		for i := range rows {
			if i == rank || rows[i][j].Sign() == 0 {
				continue
			}
			f := new(big.Rat).Set(rows[i][j])
			for l := range rows[i] {
				if rows[rank][l].Sign() != 0 {
					rows[i][l].Sub(rows[i][l], t.Mul(f, rows[rank][l]))
				}
			}
		}
		pivotOf[j] = rank
		rank++
	}
	if len(free) < 2 {
		return nil
	}
	den := big.NewInt(1)
	v := make([]*big.Rat, len(support))
	for j := range support {
		v[j] = new(big.Rat)
		switch {
		case j == free[0]:
			v[j].SetInt64(1)
		case pivotOf[j] >= 0:
			v[j].Neg(rows[pivotOf[j]][free[0]])
		}
		g := new(big.Int).GCD(nil, nil, den, v[j].Denom())
		den.Mul(den, new(big.Int).Div(v[j].Denom(), g))
	}
	d := make([]*big.Int, len(r.prods))
	for p := range d {
		d[p] = new(big.Int)
	}
	for j, p := range support {
		d[p].Mul(v[j].Num(), new(big.Int).Div(den, v[j].Denom()))
	}
	return d
}
