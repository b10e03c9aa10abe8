package lia

import (
	"math"
	"math/big"
	"math/bits"
)

// num is an exact rational: n/(dm+1) while b is nil, else b.
//
// Invariants: the fraction is in lowest terms with a positive denominator, and
// b is set only when numerator or denominator does not fit an int64 (or when
// bigOnly is on). A num is immutable: b is never written after construction.
// The zero value is 0, so make([]num, k) is a vector of zeros; that is why the
// denominator is stored minus one.
//
// Overflow never wraps: every operation checks and promotes that single number
// to math/big, and a result that fits again comes back down.
type num struct {
	n, dm int64
	b     *big.Rat
}

// bigOnly keeps every number in math/big. Tests set it to compare the machine
// path with the plain one; it must not change while a solver is in use.
var bigOnly bool

var one = num{n: 1}

func numInt(v int64) num {
	if bigOnly {
		return num{b: new(big.Rat).SetInt64(v)}
	}
	return num{n: v}
}

func numBig(v *big.Int) num { return numRat(new(big.Rat).SetInt(v)) }

// numRat takes ownership of r.
func numRat(r *big.Rat) num {
	if !bigOnly && r.Num().IsInt64() && r.Denom().IsInt64() {
		return num{n: r.Num().Int64(), dm: r.Denom().Int64() - 1}
	}
	return num{b: r}
}

func (a num) rat() *big.Rat {
	if a.b != nil {
		return a.b
	}
	return new(big.Rat).SetFrac64(a.n, a.dm+1)
}

func (a num) sign() int {
	if a.b != nil {
		return a.b.Sign()
	}
	switch {
	case a.n > 0:
		return 1
	case a.n < 0:
		return -1
	}
	return 0
}

func (a num) isZero() bool { return a.sign() == 0 }

func (a num) isInt() bool {
	if a.b != nil {
		return a.b.IsInt()
	}
	return a.dm == 0
}

// isUnit reports whether a is 1 or -1.
func (a num) isUnit() bool {
	if a.b != nil {
		return a.b.IsInt() && a.b.Num().IsInt64() && (a.b.Num().Int64() == 1 || a.b.Num().Int64() == -1)
	}
	return a.dm == 0 && (a.n == 1 || a.n == -1)
}

func (a num) neg() num {
	if a.b == nil && a.n != math.MinInt64 {
		return num{n: -a.n, dm: a.dm}
	}
	return numRat(new(big.Rat).Neg(a.rat()))
}

func (a num) abs() num {
	if a.sign() < 0 {
		return a.neg()
	}
	return a
}

func addOK(a, b int64) (int64, bool) {
	c := a + b
	return c, (c > a) == (b > 0)
}

func mulOK(a, b int64) (int64, bool) {
	if a == math.MinInt64 || b == math.MinInt64 {
		return 0, false
	}
	neg := (a < 0) != (b < 0)
	hi, lo := bits.Mul64(uabs(a), uabs(b))
	if hi != 0 || lo > math.MaxInt64 {
		return 0, false
	}
	if neg {
		return -int64(lo), true
	}
	return int64(lo), true
}

func uabs(a int64) uint64 {
	if a < 0 {
		return uint64(-a)
	}
	return uint64(a)
}

func gcd64(a, b uint64) uint64 {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// frac builds n/d in lowest terms; d > 0, n != MinInt64.
func frac(n, d int64) num {
	if d == 1 {
		return num{n: n}
	}
	if g := int64(gcd64(uabs(n), uint64(d))); g > 1 {
		n, d = n/g, d/g
	}
	return num{n: n, dm: d - 1}
}

func (a num) add(b num) num {
	if a.b == nil && b.b == nil {
		if a.dm == 0 && b.dm == 0 {
			if c, ok := addOK(a.n, b.n); ok {
				return num{n: c}
			}
		} else {
			x, ok1 := mulOK(a.n, b.dm+1)
			y, ok2 := mulOK(b.n, a.dm+1)
			d, ok3 := mulOK(a.dm+1, b.dm+1)
			if s, ok := addOK(x, y); ok && ok1 && ok2 && ok3 && s != math.MinInt64 {
				return frac(s, d)
			}
		}
	}
	return numRat(new(big.Rat).Add(a.rat(), b.rat()))
}

func (a num) sub(b num) num { return a.add(b.neg()) }

func (a num) mul(b num) num {
	if a.b == nil && b.b == nil {
		x, ok := mulOK(a.n, b.n)
		if ok {
			if a.dm == 0 && b.dm == 0 {
				return num{n: x}
			}
			if d, ok := mulOK(a.dm+1, b.dm+1); ok {
				return frac(x, d)
			}
		}
	}
	return numRat(new(big.Rat).Mul(a.rat(), b.rat()))
}

// inv is 1/a; a != 0.
func (a num) inv() num {
	if a.b == nil && a.n != math.MinInt64 && a.n != 0 {
		if a.n > 0 {
			return num{n: a.dm + 1, dm: a.n - 1}
		}
		return num{n: -(a.dm + 1), dm: -a.n - 1}
	}
	return numRat(new(big.Rat).Inv(a.rat()))
}

func (a num) div(b num) num { return a.mul(b.inv()) }

func (a num) cmp(b num) int {
	if a.b == nil && b.b == nil {
		x, y, ok := a.n, b.n, true
		if a.dm != b.dm {
			var ok2 bool
			x, ok = mulOK(a.n, b.dm+1)
			y, ok2 = mulOK(b.n, a.dm+1)
			ok = ok && ok2
		}
		if ok {
			switch {
			case x < y:
				return -1
			case x > y:
				return 1
			}
			return 0
		}
	}
	return a.rat().Cmp(b.rat())
}

func (a num) eq(b num) bool { return a.cmp(b) == 0 }

// floor is the greatest integer <= a.
func (a num) floor() num {
	if a.isInt() {
		return a
	}
	if a.b == nil {
		q := a.n / (a.dm + 1)
		if a.n < 0 {
			q--
		}
		return num{n: q}
	}
	// Denom is positive, so Euclidean division is floor division.
	return numBig(new(big.Int).Div(a.b.Num(), a.b.Denom()))
}

func (a num) ceil() num { return a.neg().floor().neg() }

// fracPart is a - floor(a), in [0, 1).
func (a num) fracPart() num { return a.sub(a.floor()) }

// big is the numerator of an integral a, as a fresh big.Int.
func (a num) big() *big.Int {
	if !a.isInt() {
		panic("lia: a fraction where an integer is needed: " + a.String())
	}
	return new(big.Int).Set(a.rat().Num())
}

// den is the denominator of a as an integer.
func (a num) den() num {
	if a.b == nil {
		return numInt(a.dm + 1)
	}
	return numBig(new(big.Int).Set(a.b.Denom()))
}

// gcd of two integers, >= 0.
func (a num) gcd(b num) num {
	if a.b == nil && b.b == nil && a.n != math.MinInt64 && b.n != math.MinInt64 {
		return numInt(int64(gcd64(uabs(a.n), uabs(b.n))))
	}
	return numBig(new(big.Int).GCD(nil, nil, a.abs().big(), b.abs().big()))
}

// lcm of two positive integers.
func (a num) lcm(b num) num { return a.div(a.gcd(b)).mul(b) }

func (a num) String() string { return a.rat().RatString() }
