// From a derivation to a run of the system.

package parikh

import (
	"errors"
	"fmt"
	"math/big"
	"slices"
	"strings"

	"pathtally/pds"
)

// Word is a run in compressed form: pieces one after the other.
type Word []Piece

// Piece is one step of a run, or a word that is repeated.
type Piece struct {
	Head    pds.Head // Step: where it is taken
	Step    pds.Choice
	Spawned []Word // what the step spawns, if anything

	Repeat Word // not nil: this word, Times times; else a step
	Times  *big.Int
}

// ErrTooLong says that a run has more steps than may be written out.
var ErrTooLong = errors.New("parikh: the run is too long to be written out")

// Word turns an answer's derivation into a run. Turns of a pump that are alike
// become one repeated piece, before what the pump surrounds and behind it: a loop
// has only the former, recursion both ("k times down, k times back"). The error is
// ErrTooLong for unlike turns beyond measure and for work that spawns itself more
// than maxNest times.
func (s *System) Word(d *Derivation) (Word, error) {
	w := &wordMaker{s: s, d: d, cuts: make([][]*big.Int, len(d.Groups)), left: 1_000_000, known: map[[2]int]parts{}}
	for i := len(d.Groups) - 1; i >= 0; i-- {
		w.cuts[i] = w.cutsOf(i)
		if w.left -= len(w.cuts[i]); w.left < 0 {
			return nil, ErrTooLong
		}
	}
	pre, _, err := w.word(0, new(big.Int))
	return pre, err
}

type wordMaker struct {
	s     *System
	d     *Derivation
	cuts  [][]*big.Int // by group: where, ascending, words of occurrences may change; from 0
	left  int
	known map[[2]int]parts // by group and cut
}

func (w *wordMaker) cutsOf(i int) []*big.Int {
	g := &w.d.Groups[i]
	var out []*big.Int
	for _, u := range g.Uses {
		out = append(out, u.From)
		for _, k := range u.Kids {
			if k.Group == Hole {
				continue
			}
			end := new(big.Int).Add(k.From, u.Times)
			for _, c := range w.cuts[k.Group] {
				if c.Cmp(k.From) > 0 && c.Cmp(end) < 0 {
					out = append(out, new(big.Int).Add(u.From, new(big.Int).Sub(c, k.From)))
				}
			}
		}
	}
	for _, p := range g.Pumps {
		out = append(out, p.At)
		if after := new(big.Int).Add(p.At, bigOne); after.Cmp(g.Size) < 0 {
			out = append(out, after)
		}
	}
	slices.SortFunc(out, (*big.Int).Cmp)
	return slices.CompactFunc(out, func(a, b *big.Int) bool { return a.Cmp(b) == 0 })
}

// parts is a word with a place where the turn of a pump goes on, if hole is set.
type parts struct {
	pre, post Word
	hole      bool
}

// add appends a word; a long one as one piece, so that words that occur often are
// kept once.
func (p *parts) add(w Word) {
	if len(w) > 4 {
		to := &p.pre
		if p.hole {
			to = &p.post
		}
		if n := len(*to); n > 0 {
			if last := &(*to)[n-1]; last.Repeat != nil && len(last.Repeat) == len(w) && &last.Repeat[0] == &w[0] {
				last.Times = new(big.Int).Add(last.Times, bigOne)
				return
			}
		}
		w = Word{{Repeat: w, Times: bigOne}}
	}
	if p.hole {
		p.post = append(p.post, w...)
	} else {
		p.pre = append(p.pre, w...)
	}
}

// word gives the word of one occurrence; post is what comes behind its hole.
func (w *wordMaker) word(group int, at *big.Int) (pre Word, post Word, err error) {
	p, err := w.occurrence(group, at)
	return p.pre, p.post, err
}

func repeat(u Word, times *big.Int) Word {
	if len(u) == 0 {
		return nil
	}
	if times.Cmp(bigOne) == 0 {
		return u
	}
	return Word{{Repeat: u, Times: times}}
}

func (w *wordMaker) occurrence(group int, at *big.Int) (parts, error) {
	// Occurrences between two cuts have one word.
	cuts := w.cuts[group]
	i, found := slices.BinarySearchFunc(cuts, at, (*big.Int).Cmp)
	if !found {
		i--
	}
	key := [2]int{group, i}
	if p, ok := w.known[key]; ok {
		return p, nil
	}
	p, err := w.make(group, cuts[i])
	if err == nil {
		w.known[key] = p
	}
	return p, err
}

func (w *wordMaker) make(group int, at *big.Int) (parts, error) {
	g := &w.d.Groups[group]
	var out parts
	var behind Word // what closes the pumps around this occurrence
	for _, p := range g.Pumps {
		if p.At.Cmp(at) != 0 {
			continue
		}
		cuts := w.cuts[p.Top]
		for i, from := range cuts {
			to := p.Times
			if i+1 < len(cuts) {
				to = cuts[i+1]
			}
			t, err := w.occurrence(p.Top, from)
			if err != nil {
				return parts{}, err
			}
			if !t.hole {
				// The turn goes on inside work that it spawns.
				return parts{}, ErrTooLong
			}
			times := new(big.Int).Sub(to, from)
			out.pre = append(out.pre, repeat(t.pre, times)...)
			behind = append(slices.Clone(repeat(t.post, times)), behind...)
		}
	}
	i := len(g.Uses) - 1
	for g.Uses[i].From.Cmp(at) > 0 {
		i--
	}
	u := &g.Uses[i]
	p := &w.s.Summary.Prods[u.Prod]
	if w.left--; w.left < 0 {
		return parts{}, ErrTooLong
	}
	offset := new(big.Int).Sub(at, u.From)
	kid := func(j int) *big.Int { return new(big.Int).Add(u.Kids[j].From, offset) }
	var step *Piece
	if none := (pds.Head{}); p.Rule.Head != none && !p.Before {
		out.pre = append(out.pre, Piece{Head: p.Rule.Head, Step: pds.Choice{Rule: p.Rule.Index, Doubt: p.Doubt}})
		step = &out.pre[len(out.pre)-1]
	}
	for j := p.Main; j < len(u.Kids); j++ {
		if u.Kids[j].Group == Hole {
			return parts{}, ErrTooLong
		}
		t, err := w.occurrence(u.Kids[j].Group, kid(j))
		if err != nil || t.hole {
			return parts{}, errors.Join(err, ErrTooLong)
		}
		if step == nil {
			panic("parikh: path: a production without a step spawns")
		}
		step.Spawned = append(step.Spawned, t.pre)
	}
	for j, k := range u.Kids[:min(p.Main, len(u.Kids))] {
		if k.Group == Hole {
			out.hole = true
			continue
		}
		t, err := w.occurrence(k.Group, kid(j))
		if err != nil {
			return parts{}, err
		}
		out.add(t.pre)
		if t.hole {
			out.hole = true
			out.add(t.post)
		}
	}
	out.add(behind)
	return out, nil
}

// Len is the number of steps, those of spawned work not counted.
func (w Word) Len() *big.Int { return w.length(map[*Piece]*big.Int{}) }

func (w Word) length(known map[*Piece]*big.Int) *big.Int {
	n := new(big.Int)
	for i := range w {
		p := &w[i]
		if p.Repeat == nil {
			n.Add(n, bigOne)
			continue
		}
		k, ok := known[&p.Repeat[0]]
		if !ok {
			k = p.Repeat.length(known)
			known[&p.Repeat[0]] = k
		}
		n.Add(n, new(big.Int).Mul(p.Times, k))
	}
	return n
}

// Choices writes a word out, repeating each piece at most most times (0: as often
// as it says). The error is ErrTooLong if there are more than limit steps.
func (w Word) Choices(limit int, most int64) ([]pds.Choice, error) {
	var out []pds.Choice
	var walk func(w Word, out *[]pds.Choice) error
	walk = func(w Word, out *[]pds.Choice) error {
		for _, p := range w {
			if p.Repeat != nil {
				times := p.Times
				if most > 0 && times.Cmp(big.NewInt(most)) > 0 {
					times = big.NewInt(most)
				}
				if !times.IsInt64() {
					return ErrTooLong
				}
				for range times.Int64() {
					if err := walk(p.Repeat, out); err != nil {
						return err
					}
				}
				continue
			}
			c := p.Step
			for _, s := range p.Spawned {
				var sub []pds.Choice
				if err := walk(s, &sub); err != nil {
					return err
				}
				c.Spawned = append(c.Spawned, sub)
			}
			*out = append(*out, c)
			if limit--; limit < 0 {
				return ErrTooLong
			}
		}
		return nil
	}
	err := walk(w, &out)
	return out, err
}

// tally adds up the effects of a word's steps.
func (s *System) tally(w Word, known map[*Piece][]*big.Int) []*big.Int {
	sum := make([]*big.Int, s.Table.NumCounts())
	for i := range sum {
		sum[i] = new(big.Int)
	}
	t := new(big.Int)
	for _, p := range w {
		if p.Repeat != nil {
			each, ok := known[&p.Repeat[0]]
			if !ok {
				each = s.tally(p.Repeat, known)
				known[&p.Repeat[0]] = each
			}
			for i, n := range each {
				sum[i].Add(sum[i], t.Mul(n, p.Times))
			}
			continue
		}
		r := s.Table.Rules(p.Head, nil)[p.Step.Rule]
		e := r.Effect
		if p.Step.Doubt {
			e = r.DoubtEffect
		}
		for i, n := range s.Table.Vector(e) {
			sum[i].Add(sum[i], t.SetInt64(n))
		}
		for _, sp := range p.Spawned {
			for i, n := range s.tally(sp, known) {
				sum[i].Add(sum[i], n)
			}
		}
	}
	return sum
}

// maxReplay is the number of steps up to which runs are replayed in full.
const maxReplay = 10_000

// Replay executes a word on the table and gives what its rules count (in systems
// with data: without the predicates). Up to 10,000 steps it is executed step by
// step; above that with every repeated piece twice, which shows that a turn can
// follow itself, and the counts are multiplied out.
func (s *System) Replay(w Word) ([]*big.Int, error) {
	most := int64(0)
	if w.Len().Cmp(big.NewInt(maxReplay)) > 0 {
		most = 2
	}
	choices, err := w.Choices(1_000_000, most)
	if err != nil {
		return nil, err
	}
	run, err := pds.Replay(s.Table, s.Start, choices)
	if err != nil {
		return nil, fmt.Errorf("parikh: the run cannot be executed: %w", err)
	}
	total := s.tally(w, map[*Piece][]*big.Int{})
	if most == 0 {
		for i, n := range run.Total {
			if total[i].Cmp(big.NewInt(n)) != 0 {
				return nil, fmt.Errorf("parikh: the run counts %v, not %v", run.Total, total)
			}
		}
	}
	return total, nil
}

// Text prints a word, one step a line, with turns indented under "×k".
func (s *System) Text(w Word) string {
	var b strings.Builder
	var walk func(w Word, indent string)
	walk = func(w Word, indent string) {
		for _, p := range w {
			if p.Repeat != nil && p.Times.Cmp(bigOne) == 0 {
				walk(p.Repeat, indent)
				continue
			}
			if p.Repeat != nil {
				fmt.Fprintf(&b, "%s×%v\n", indent, p.Times)
				walk(p.Repeat, indent+"  ")
				continue
			}
			r := s.Table.Rules(p.Head, nil)[p.Step.Rule]
			text := s.Table.LabelText(r.Label)
			if text == "" {
				text = fmt.Sprintf("%s %s, rule %d", s.Table.StateName(p.Head.State), s.Table.SymbolName(p.Head.Symbol), p.Step.Rule)
			}
			fmt.Fprintf(&b, "%s%s\n", indent, text)
			for _, sp := range p.Spawned {
				fmt.Fprintf(&b, "%s  spawned:\n", indent)
				walk(sp, indent+"    ")
			}
		}
	}
	walk(w, "")
	return b.String()
}

// Path is Derive, Word and Replay of an answer: a run of the system that has been
// executed, with its counts compared.
func (s *System) Path(a Answer) (Word, error) {
	d, err := Derive(s.Image.g, a.Productions())
	if err != nil {
		return nil, err
	}
	if _, err := d.Check(); err != nil {
		return nil, err
	}
	w, err := s.Word(d)
	if err != nil {
		return nil, err
	}
	total, err := s.Replay(w)
	if err != nil {
		return nil, err
	}
	if s.data == nil {
		for i, n := range total {
			if n.Cmp(a.Counts[i]) != 0 {
				return nil, fmt.Errorf("parikh: the run counts %v, the answer says %v", total, a.Counts)
			}
		}
	}
	return w, nil
}

// FromGrammar makes a table of one state whose ended runs are the leftmost
// derivations of a grammar; long right sides go through symbols of their own.
func FromGrammar(g *Grammar) *pds.Table {
	b := pds.NewBuilder(g.Counts...)
	b.Start("q", g.Names[g.Start])
	for i, p := range g.Prods {
		at := g.Names[p.Lhs]
		var opts []pds.Option
		for _, e := range p.Effect {
			opts = append(opts, pds.Adds(g.Counts[e.Count], e.N))
		}
		rest := p.Rhs
		for len(rest) > 2 {
			next := fmt.Sprintf("%s.%d.%d", g.Names[p.Lhs], i, len(rest)-1)
			b.Push("q", at, "q", g.Names[rest[0]], next, opts...)
			at, rest, opts = next, rest[1:], nil
		}
		switch len(rest) {
		case 0:
			b.Pop("q", at, "q", opts...)
		case 1:
			b.Step("q", at, "q", g.Names[rest[0]], opts...)
		case 2:
			b.Push("q", at, "q", g.Names[rest[0]], g.Names[rest[1]], opts...)
		}
	}
	return b.Table()
}
