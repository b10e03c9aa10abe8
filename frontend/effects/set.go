package effects

// This file holds hash-consed sets of places: equal sets are one pointer, and
// the union of two sets is remembered.

import "math/bits"

// set is an immutable bitset over placeID without trailing zero words. The
// empty set is the nil pointer.
type set struct {
	words []uint64
	id    int32 // dense, for the union memo
}

func (s *set) has(p placeID) bool {
	if s == nil {
		return false
	}
	w := int(p) >> 6
	return w < len(s.words) && s.words[w]>>(uint(p)&63)&1 != 0
}

// intersects says whether s holds a place of the list.
func (s *set) intersects(ps []placeID) bool {
	if s == nil {
		return false
	}
	for _, p := range ps {
		if s.has(p) {
			return true
		}
	}
	return false
}

// items returns the places in increasing order.
func (s *set) items() []placeID {
	if s == nil {
		return nil
	}
	var out []placeID
	for i, w := range s.words {
		for w != 0 {
			out = append(out, placeID(i<<6+bits.TrailingZeros64(w)))
			w &= w - 1
		}
	}
	return out
}

type sets struct {
	byHash map[uint64][]*set
	unions map[uint64]*set // key: the two IDs, smaller first
	next   int32
	buf    []uint64
}

func newSets() *sets {
	return &sets{byHash: map[uint64][]*set{}, unions: map[uint64]*set{}}
}

// intern returns the set of words; words stays the caller's.
func (st *sets) intern(words []uint64) *set {
	for len(words) > 0 && words[len(words)-1] == 0 {
		words = words[:len(words)-1]
	}
	if len(words) == 0 {
		return nil
	}
	h := uint64(14695981039346656037) // FNV-1a, a word at a time
	for _, w := range words {
		h = (h ^ w) * 1099511628211
		h ^= h >> 29
	}
next:
	for _, s := range st.byHash[h] {
		if len(s.words) != len(words) {
			continue
		}
		for i, w := range words {
			if s.words[i] != w {
				continue next
			}
		}
		return s
	}
	s := &set{words: append([]uint64(nil), words...), id: st.next}
	st.next++
	if st.next < 0 {
		panic("effects: more than 2^31 sets of places")
	}
	st.byHash[h] = append(st.byHash[h], s)
	return s
}

func (st *sets) of(ps ...placeID) *set {
	b := st.buf[:0]
	for _, p := range ps {
		for int(p)>>6 >= len(b) {
			b = append(b, 0)
		}
		b[p>>6] |= 1 << (uint(p) & 63)
	}
	st.buf = b
	return st.intern(b)
}

func (st *sets) union(a, b *set) *set {
	switch {
	case a == b || b == nil:
		return a
	case a == nil:
		return b
	}
	if a.id > b.id {
		a, b = b, a
	}
	key := uint64(a.id)<<32 | uint64(b.id)
	if s, ok := st.unions[key]; ok {
		return s
	}
	long, short := a, b
	if len(long.words) < len(short.words) {
		long, short = short, long
	}
	buf := append(st.buf[:0], long.words...)
	for i, w := range short.words {
		buf[i] |= w
	}
	st.buf = buf
	s := st.intern(buf)
	st.unions[key] = s
	return s
}
