// Sparse vectors of big integers, shared and never changed.

package parikh

import (
	"math/big"
	"strings"
)

// entry is one coordinate of a vec.
type entry struct {
	c int32
	n *big.Int // not 0, never written
}

// vec is a sparse vector, ascending in c; nil is zero. Immutable.
type vec []entry

var bigOne = big.NewInt(1)

func vecOf(as []Amount) vec {
	var v vec
	for _, a := range as {
		v = append(v, entry{a.Count, big.NewInt(a.N)})
	}
	return v
}

func (v vec) add(w vec) vec {
	if len(v) == 0 {
		return w
	}
	if len(w) == 0 {
		return v
	}
	out := make(vec, 0, len(v)+len(w))
	i, j := 0, 0
	for i < len(v) || j < len(w) {
		switch {
		case j == len(w) || i < len(v) && v[i].c < w[j].c:
			out = append(out, v[i])
			i++
		case i == len(v) || w[j].c < v[i].c:
			out = append(out, w[j])
			j++
		default:
			if s := new(big.Int).Add(v[i].n, w[j].n); s.Sign() != 0 {
				out = append(out, entry{v[i].c, s})
			}
			i++
			j++
		}
	}
	return out
}

func (v vec) equal(w vec) bool {
	if len(v) != len(w) {
		return false
	}
	for i := range v {
		if v[i].c != w[i].c || v[i].n.Cmp(w[i].n) != 0 {
			return false
		}
	}
	return true
}

// key is equal for equal vectors only.
func (v vec) key(b *strings.Builder) {
	for _, e := range v {
		b.WriteString(itoa(int(e.c)))
		b.WriteByte(':')
		if e.n.IsInt64() {
			b.WriteString(itoa(int(e.n.Int64())))
		} else {
			b.WriteString(e.n.String())
		}
		b.WriteByte(' ')
	}
}

// dense gives the vector with n coordinates, as fresh numbers.
func (v vec) dense(n int) []*big.Int {
	out := make([]*big.Int, n)
	for i := range out {
		out[i] = new(big.Int)
	}
	for _, e := range v {
		out[e.c].Set(e.n)
	}
	return out
}
