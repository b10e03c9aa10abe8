package parikh

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math/big"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"sort"
	"strconv"
	"strings"
	"testing"
	"time"

	"pathtally/parikh/lia"
	"pathtally/pds"
)

// oracle returns the path of an outside tool; without it the test is skipped,
// unless PATHTALLY_REQUIRE_ORACLES=1 asks for a failure.
func oracle(t *testing.T, name string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		if os.Getenv("PATHTALLY_REQUIRE_ORACLES") == "1" {
			t.Fatalf("%s is required and missing", name)
		}
		t.Skipf("%s is not installed", name)
	}
	return path
}

type textbook struct {
	File, Name, Source, Image string
	s                         *System
	f                         lia.Formula
}

// textbooks reads the table of grammars with known images.
func textbooks(t *testing.T) []textbook {
	t.Helper()
	dir := filepath.Join("..", "testdata", "images")
	data, err := os.ReadFile(filepath.Join(dir, "table.json"))
	if err != nil {
		t.Fatal(err)
	}
	var rows []textbook
	if err := json.Unmarshal(data, &rows); err != nil {
		t.Fatal(err)
	}
	for i := range rows {
		r := &rows[i]
		f, err := os.Open(filepath.Join(dir, r.File))
		if err != nil {
			t.Fatal(err)
		}
		table, err := pds.Read(f)
		f.Close()
		if err != nil {
			t.Fatalf("%s: %v", r.File, err)
		}
		if r.s, err = NewSystem(table, table.Starts()[0], SystemOptions{}); err != nil {
			t.Fatalf("%s: %v", r.File, err)
		}
		if r.f, err = r.s.Parse(r.Image); err != nil {
			t.Fatalf("%s: %v", r.File, err)
		}
		if r.Source == "" || r.Name == "" {
			t.Errorf("%s has no source or no name", r.File)
		}
	}
	return rows
}

// holds evaluates a row's image.
func (r *textbook) holds(v []*big.Int) bool {
	var fs []*big.Int
	most := lia.Var(0)
	for i := range v {
		most = max(most, r.s.counts[i])
	}
	fs = make([]*big.Int, most+1)
	for i := range fs {
		fs[i] = new(big.Int)
	}
	for i, n := range v {
		fs[r.s.counts[i]] = n
	}
	return lia.NewModel(fs, nil).Holds(r.f)
}

// TestTextbooks compares images with what the books say: nothing outside the
// stated image, everything inside up to a bound, also by enumeration; linear
// sets within it; a path for each answer.
func TestTextbooks(t *testing.T) {
	rows := textbooks(t)
	if len(rows) < 20 {
		t.Fatalf("only %d textbook grammars", len(rows))
	}
	for _, r := range rows {
		began := time.Now()
		if a := r.s.Ask(bg, lia.Not(r.f)); a.Status != No {
			t.Errorf("%s: outside the stated image: %v %v %s", r.File, a.Status, a.Counts, a.Budget)
		}
		k := len(r.s.Names())
		bound := map[int]int64{1: 60, 2: 9, 3: 5, 4: 2, 5: 2}[k]
		var want map[string]bool
		if r.File != "doubling.json" {
			want = brute(r.s.Image.g, bound)
		}
		box(k, bound, func(v []int64) {
			stated := r.holds(bigs(v...))
			if want != nil && want[fmt.Sprint(v)] != stated {
				t.Fatalf("%s: %v: enumeration says %v, the book %v", r.File, v, !stated, stated)
			}
			if a := r.s.Member(bg, bigs(v...)); (a.Status == Yes) != stated || a.Status == Unknown {
				t.Fatalf("%s: %v: %v, the book says %v", r.File, v, a.Status, stated)
			}
		})
		a := r.s.Ask(bg, lia.True())
		if a.Status == Yes && r.File != "doubling.json" {
			if _, err := r.s.Path(a); err != nil {
				t.Errorf("%s: %v", r.File, err)
			}
		}
		u := r.s.LinearSets(bg, 60)
		for _, set := range u.Sets {
			for range 5 {
				v := set.Base
				for j, p := range set.Periods {
					v = sumOf(v, p, int64(7*j+3))
				}
				if !r.holds(v) {
					t.Errorf("%s: %v lies outside the stated image", r.File, set)
				}
			}
		}
		// For these two the proof that nothing else is left takes more steps than
		// LinearSets has.
		if !u.Complete && r.File != "nuggets.json" && r.File != "powers.json" {
			t.Errorf("%s: linear sets incomplete: %s", r.File, u.Budget)
		}
		if d := time.Since(began); d > time.Second {
			t.Logf("%s took %v", r.File, d)
		}
	}
}

func sumOf(v, p []*big.Int, n int64) []*big.Int {
	out := make([]*big.Int, len(v))
	for i := range v {
		out[i] = new(big.Int).Add(v[i], new(big.Int).Mul(p[i], big.NewInt(n)))
	}
	return out
}

// cvc5Batch asks many scripts at once.
func cvc5Batch(t *testing.T, scripts []string) []string {
	t.Helper()
	path := oracle(t, "cvc5")
	cmd := exec.Command(path, "--lang", "smt2", "--tlimit-per=2000", "-")
	cmd.Stdin = strings.NewReader(strings.Join(scripts, "(reset)\n"))
	out, err := cmd.CombinedOutput()
	if err != nil {
		t.Fatalf("cvc5: %v\n%s", err, out)
	}
	got := strings.Fields(string(out))
	if len(got) != len(scripts) {
		t.Fatalf("cvc5 gave %d answers to %d scripts:\n%s", len(got), len(scripts), out)
	}
	return got
}

// TestCVC5 asks another solver the same questions in the published encoding.
func TestCVC5(t *testing.T) {
	var scripts, names []string
	var ours []Status
	ask := func(name string, im *Image, question string) {
		f, err := im.Parse(question)
		if err != nil {
			t.Fatal(err)
		}
		var b bytes.Buffer
		if err := WriteSMTLIB(&b, im.g, question); err != nil {
			t.Fatal(err)
		}
		scripts, names, ours = append(scripts, b.String()), append(names, name+": "+question), append(ours, im.Ask(bg, f).Status)
	}
	for _, r := range textbooks(t) {
		ask(r.File, r.s.Image, "!("+r.Image+")")
		ask(r.File, r.s.Image, r.Image)
	}
	n := 250
	if testing.Short() {
		n = 50
	}
	for seed := range n {
		r := rand.New(rand.NewPCG(uint64(seed), 5))
		g := randomGrammar(r)
		im := New(g, Options{})
		last := g.Counts[len(g.Counts)-1]
		for _, q := range []string{"a == 2 * " + last + " + 1", "a % 3 == 1 && " + last + " > 4", "a < " + last + " || a == 7"} {
			ask(fmt.Sprint("seed ", seed), im, q)
		}
	}
	answers := map[string]int{}
	for i, a := range cvc5Batch(t, scripts) {
		answers[a]++
		if a == "sat" && ours[i] != Yes || a == "unsat" && ours[i] != No {
			t.Errorf("%s: cvc5 says %s, we say %v\n%s", names[i], a, ours[i], scripts[i])
		}
	}
	t.Logf("%v", answers)
	if answers["sat"] < n/5 || answers["unsat"] < n/5 || answers["unknown"] > n/10 {
		t.Errorf("lopsided: %v", answers)
	}
}

// TestNormaliz compares the periods of free commutative grammars S -> v S | eps
// (the image is the monoid of the v) with the Hilbert basis of their cone when
// the v are all its lattice points' generators, and rays with extreme rays.
func TestNormaliz(t *testing.T) {
	path := oracle(t, "normaliz")
	dir := t.TempDir()
	for seed := range 15 {
		r := rand.New(rand.NewPCG(uint64(seed), 6))
		k := 2 + r.IntN(2)
		var gens [][]int64
		var in strings.Builder
		n := k + r.IntN(3)
		fmt.Fprintf(&in, "amb_space %d\ncone %d\n", k, n)
		for range n {
			v := make([]int64, k)
			for i := range v {
				v[i] = int64(r.IntN(4))
			}
			v[r.IntN(k)]++
			gens = append(gens, v)
			for _, x := range v {
				fmt.Fprintf(&in, "%d ", x)
			}
			in.WriteByte('\n')
		}
		in.WriteString("HilbertBasis\nExtremeRays\n")
		name := filepath.Join(dir, "p")
		if err := os.WriteFile(name+".in", []byte(in.String()), 0o666); err != nil {
			t.Fatal(err)
		}
		if out, err := exec.Command(path, "-a", name).CombinedOutput(); err != nil {
			t.Fatalf("%v\n%s", err, out)
		}
		hilbert := normalizRows(t, name+".gen")
		rays := normalizRows(t, name+".ext")
		build := func(vs [][]int64) *Image {
			b := NewBuilder([]string{"a", "b", "c"}[:k]...)
			s := b.NT("S")
			for _, v := range vs {
				b.Add(s, v, s)
			}
			b.Add(s, nil)
			return New(b.Grammar(), Options{})
		}
		all := []int{0, 1, 2}[:k]
		got := build(gens).Rays(bg, all)
		if text(got.Rays) != text(rays) {
			t.Errorf("seed %d: rays %s, normaliz %s", seed, text(got.Rays), text(rays))
		}
		// Over the Hilbert basis the image is every lattice point of the cone: no
		// member of the basis is a sum of others, and lattice points are members.
		im := build(int64Rows(hilbert))
		for i, h := range hilbert {
			rest := append(append([][]*big.Int{}, hilbert[:i]...), hilbert[i+1:]...)
			if combination(bg, h, rest) != lia.Unsat {
				t.Errorf("seed %d: %s is not irreducible", seed, vectorText(h))
			}
		}
		facets, lines := dualCone(k, rays)
		for _, l := range lines {
			facets = append(facets, l, negated(l))
		}
		box(k, 3, func(v []int64) {
			in := true
			for _, f := range facets {
				in = in && dot(f, bigs(v...)).Sign() <= 0
			}
			lattice := in && k == len(rays[0]) && spans(hilbert, bigs(v...))
			if st := im.Member(bg, bigs(v...)).Status; (st == Yes) != lattice {
				t.Errorf("seed %d: %v: %v, in cone and lattice: %v", seed, v, st, lattice)
			}
		})
		u := im.LinearSets(bg, 12)
		if u.Complete {
			for _, h := range hilbert {
				found := false
				for _, s := range u.Sets {
					found = found || s.Contains(h)
				}
				if !found {
					t.Errorf("seed %d: %s is in no linear set", seed, vectorText(h))
				}
			}
		}
	}
}

// spans: v is an integer combination of vs.
func spans(vs [][]*big.Int, v []*big.Int) bool {
	s := lia.New(lia.Options{})
	for range vs {
		s.NewFree("")
	}
	for i := range v {
		var sum []lia.Lin
		for j := range vs {
			sum = append(sum, lia.TermBig(vs[j][i], lia.Var(j+1)))
		}
		s.Assert("", lia.EQ(lia.Sum(sum...), lia.ConstBig(v[i])))
	}
	r, _ := s.Check(bg)
	return r.Status == lia.Sat
}

func int64Rows(vs [][]*big.Int) (out [][]int64) {
	for _, v := range vs {
		var w []int64
		for _, n := range v {
			w = append(w, n.Int64())
		}
		out = append(out, w)
	}
	return out
}

func text(vs [][]*big.Int) string {
	var out []string
	for _, v := range vs {
		out = append(out, vectorText(v))
	}
	sort.Strings(out)
	return strings.Join(out, " ")
}

// normalizRows reads a matrix: rows, columns, numbers.
func normalizRows(t *testing.T, name string) [][]*big.Int {
	t.Helper()
	data, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	f := strings.Fields(string(data))
	rows, _ := strconv.Atoi(f[0])
	cols, _ := strconv.Atoi(f[1])
	f = f[2:]
	var out [][]*big.Int
	for range rows {
		var v []*big.Int
		for _, x := range f[:cols] {
			n, ok := new(big.Int).SetString(x, 10)
			if !ok {
				t.Fatalf("%s: %q", name, x)
			}
			v = append(v, n)
		}
		f = f[cols:]
		out = append(out, v)
	}
	return out
}
