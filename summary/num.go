// Exact numbers: machine integers that grow when they must.

package summary

import (
	"math/big"
	"math/bits"
	"strconv"
)

// num is an exact integer. big is nil while the number fits into 64 bits.
type num struct {
	small int64
	big   *big.Int // not shared for writing
}

func (a num) toBig() *big.Int {
	if a.big != nil {
		return a.big
	}
	return big.NewInt(a.small)
}

func norm(b *big.Int) num {
	if b.IsInt64() {
		return num{small: b.Int64()}
	}
	return num{big: b}
}

func (a num) add(b num) num {
	if a.big == nil && b.big == nil {
		s := a.small + b.small
		if (s > a.small) == (b.small > 0) {
			return num{small: s}
		}
	}
	return norm(new(big.Int).Add(a.toBig(), b.toBig()))
}

func (a num) neg() num {
	if a.big == nil && a.small != -1<<63 {
		return num{small: -a.small}
	}
	return norm(new(big.Int).Neg(a.toBig()))
}

func (a num) cmp(b num) int {
	if a.big == nil && b.big == nil {
		switch {
		case a.small < b.small:
			return -1
		case a.small > b.small:
			return 1
		}
		return 0
	}
	return a.toBig().Cmp(b.toBig())
}

func (a num) sign() int {
	if a.big != nil {
		return a.big.Sign()
	}
	return num{small: a.small}.cmp(num{})
}

// mul multiplies two machine integers.
func mul(a, b int64) num {
	ua, ub := uint64(a), uint64(b)
	if a < 0 {
		ua = -ua
	}
	if b < 0 {
		ub = -ub
	}
	hi, lo := bits.Mul64(ua, ub)
	if hi == 0 && lo < 1<<63 {
		if (a < 0) != (b < 0) {
			return num{small: -int64(lo)}
		}
		return num{small: int64(lo)}
	}
	return norm(new(big.Int).Mul(big.NewInt(a), big.NewInt(b)))
}

func (a num) String() string {
	if a.big != nil {
		return a.big.String()
	}
	return strconv.FormatInt(a.small, 10)
}
