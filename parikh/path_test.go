package parikh

import (
	"fmt"
	"math/big"
	"math/rand/v2"
	"strings"
	"testing"
)

// TestPaths turns answers about random systems into runs that replay.
func TestPaths(t *testing.T) {
	n, long := 0, 0
	for seed := range 200 {
		r := rand.New(rand.NewPCG(uint64(seed), 4))
		table := FromGrammar(randomGrammar(r))
		s, err := NewSystem(table, table.Starts()[0], SystemOptions{})
		if err != nil {
			t.Fatal(err)
		}
		for _, ask := range []string{"a >= 0", "a >= 3", "a >= 50 && a % 7 == 3", "a > 100000000000000000000"} {
			f, err := s.Parse(ask)
			if err != nil {
				t.Fatal(err)
			}
			a := s.Ask(bg, f)
			if a.Status == Unknown {
				t.Errorf("seed %d: %s: %s", seed, ask, a.Budget)
			}
			if a.Status != Yes {
				continue
			}
			w, err := s.Path(a)
			if err != nil {
				t.Fatalf("seed %d: %s: %v\n%s", seed, ask, err, table)
			}
			n++
			if w.Len().BitLen() > 62 {
				long++
			}
		}
	}
	if n < 100 || long < 20 {
		t.Errorf("only %d paths, %d of them long", n, long)
	}
}

// TestHuge: counts that no machine integer holds, in nonterminals that double.
func TestHuge(t *testing.T) {
	var text strings.Builder
	text.WriteString("counts a b\nS -> A79 | A79 b S\n")
	for i := 79; i > 0; i-- {
		fmt.Fprintf(&text, "A%d -> A%d A%d\n", i, i-1, i-1)
	}
	text.WriteString("A0 -> a\n")
	g := parse(t, text.String())
	power := new(big.Int).Lsh(bigOne, 79)
	for _, opt := range []Options{{}, {Plain: true}} {
		im := New(g, opt)
		a := im.Member(bg, []*big.Int{power, new(big.Int)})
		if a.Status != Yes {
			t.Fatalf("2^79: %v %s", a.Status, a.Budget)
		}
		checkYes(t, g, a)
		a = im.Member(bg, []*big.Int{new(big.Int).Mul(power, big.NewInt(1_000_001)), big.NewInt(1_000_000)})
		if a.Status != Yes {
			t.Fatalf("a million and one times: %v %s", a.Status, a.Budget)
		}
		checkYes(t, g, a)
		if a := im.Member(bg, []*big.Int{new(big.Int).Add(power, bigOne), nil}); a.Status != No {
			t.Fatalf("2^79+1: %v %s", a.Status, a.Budget)
		}
		b := im.Least(bg, Form{1, 0})
		if b.Status != Yes || b.Value.Cmp(power) != 0 {
			t.Fatalf("least: %+v", b)
		}
	}
}

// TestWordShape: a loop repeats once, recursion twice.
func TestWordShape(t *testing.T) {
	for text, want := range map[string]string{
		"S -> a S | b":                   "×5\n  q S, rule 0\nq S, rule 1\n",
		"S -> T R | b\nT -> a S\nR -> c": "×5\n  q S, rule 0\n  q T, rule 0\nq S, rule 1\n×5\n  q R, rule 0\n",
	} {
		table := FromGrammar(parse(t, text))
		s, err := NewSystem(table, table.Starts()[0], SystemOptions{})
		if err != nil {
			t.Fatal(err)
		}
		f, err := s.Parse("a == 5")
		if err != nil {
			t.Fatal(err)
		}
		w, err := s.Path(s.Ask(bg, f))
		if err != nil {
			t.Fatal(err)
		}
		if got := s.Text(w); got != want {
			t.Errorf("%s\ngot\n%swant\n%s", text, got, want)
		}
	}
}
