package parikh

import (
	"bytes"
	"context"
	"flag"
	"fmt"
	"math/rand/v2"
	"os/exec"
	"strings"
	"testing"
	"time"
)

// family makes a random system of procedures as a grammar of about n productions:
// each procedure is a chain of points with branches, loops, calls (to any
// procedure if recursive, else to later ones), and events of three counts here
// and there. With tangle, jumps lead anywhere in the procedure, so that loops
// have several entries. Events come in balanced pairs in most procedures.
func family(seed uint64, n int, recursive, tangle bool) *Grammar {
	r := rand.New(rand.NewPCG(seed, 77))
	b := NewBuilder("a", "b", "c")
	const points = 12
	procs := max(2, n*10/(points*17))
	at := func(f, i int) NT { return b.NT(fmt.Sprintf("f%d.%d", f, i)) }
	for f := range procs {
		pair := r.IntN(3) > 0 // this procedure takes and gives back
		for i := range points {
			here := at(f, i)
			if i == points-1 {
				b.Add(here, nil)
				continue
			}
			next := at(f, i+1)
			var effect []int64
			switch {
			case pair && i == 2:
				effect = []int64{1, 0, 0}
			case pair && i == 9:
				effect = []int64{0, 1, 0}
			case r.IntN(12) == 0:
				effect = []int64{0, 0, 1}
			}
			switch k := r.IntN(10); {
			case k < 2:
				to := f + 1 + r.IntN(8)
				if recursive {
					to = r.IntN(procs)
				}
				if to < procs && to >= 0 {
					b.Add(here, effect, at(to, 0), next)
					if recursive && to <= f {
						b.Add(here, effect, next) // an end to the recursion
					}
					continue
				}
				b.Add(here, effect, next)
			case k < 4 && !(pair && i > 0 && i < 10):
				b.Add(here, effect, next)
				b.Add(here, nil, at(f, min(points-1, i+2)))
			case k < 5 && !(pair && (i <= 2 || i >= 9)):
				low := 3
				if !pair {
					low = 0
				}
				b.Add(here, effect, next)
				b.Add(here, nil, at(f, low+r.IntN(i-low+1)))
			case tangle && k < 7 && !(pair && (i <= 2 || i >= 8)):
				b.Add(here, effect, next)
				if pair {
					b.Add(here, nil, at(f, 3+r.IntN(6)))
				} else {
					b.Add(here, nil, at(f, r.IntN(points)))
				}
			default:
				b.Add(here, effect, next)
			}
		}
	}
	return b.Grammar()
}

// familyQuestions mix questions that hold and that do not.
var familyQuestions = []string{
	"a != b",
	"a > 3 * b",
	"a == b && c == 17 && a >= 4",
	"a % 2 == 1 && b % 2 == 0",
	"a >= 1 && a <= 3 && c % 3 == 2 && a + b > 4",
	"c < a || c == 2 * b + 1",
	"a >= 2 && c == a + 1",
	"b % 3 == 2 && c > 2 * a",
}

var familySize = flag.Int("family", 1700, "productions of the benchmark family")
var familyLimit = flag.Duration("cvc5-limit", 20*time.Second, "longest time for cvc5 on one question")

// BenchmarkFamily asks the questions about one family and prints our time beside
// that of cvc5 on the same question in the published encoding.
//
//	go test ./parikh -run - -bench Family -benchtime 1x -family 1700
func BenchmarkFamily(b *testing.B) {
	for _, kind := range []struct {
		name              string
		recursive, tangle bool
	}{{"calls", false, false}, {"tangled", false, true}, {"recursive", true, false}, {"both", true, true}} {
		b.Run(kind.name, func(b *testing.B) {
			g := family(1, *familySize, kind.recursive, kind.tangle)
			cvc5, _ := exec.LookPath("cvc5")
			if *familyLimit == 0 {
				cvc5 = ""
			}
			for b.Loop() {
				var ours, theirs time.Duration
				began := time.Now()
				im := New(g, Options{})
				build := time.Since(began)
				prods, nts, merged, mergedNTs, regions, multi := im.Size()
				b.Logf("%s: %d productions, %d nonterminals; merged %d, %d; %d regions, %d with several entries; built in %v",
					kind.name, prods, nts, merged, mergedNTs, regions, multi, build.Round(time.Millisecond/10))
				ours += build
				for _, q := range familyQuestions {
					f, err := im.Parse(q)
					if err != nil {
						b.Fatal(err)
					}
					began := time.Now()
					ctx, cancel := context.WithTimeout(context.Background(), *familyLimit+10*time.Second)
					a := im.Ask(ctx, f)
					cancel()
					d := time.Since(began)
					ours += d
					line := fmt.Sprintf("%-45s %-7s %10v", q, a.Status, d.Round(time.Millisecond/10))
					if a.Status == Unknown {
						line += " (" + a.Budget + ")"
					}
					if cvc5 != "" {
						st, theirs1 := askCVC5(b, cvc5, g, q, *familyLimit)
						theirs += theirs1
						line += fmt.Sprintf("   cvc5 %-7s %10v  x%.0f", st, theirs1.Round(time.Millisecond), float64(theirs1)/float64(max(1, d)))
						if st == "sat" && a.Status == No || st == "unsat" && a.Status == Yes {
							b.Errorf("%s: %v, cvc5 says %s", q, a.Status, st)
						}
					}
					b.Log(line)
				}
				cuts, ranked := im.Cuts()
				w := im.Work()
				b.Logf("ours %v, cvc5 %v; %d cuts, %d ranked, %d pivots, %d rounds, %d nodes", ours.Round(time.Millisecond), theirs.Round(time.Millisecond), cuts, ranked, w.Pivots, w.Rounds, w.Nodes)
				b.ReportMetric(float64(ours.Microseconds())/1000, "ours-ms")
				b.ReportMetric(float64(theirs.Microseconds())/1000, "cvc5-ms")
			}
		})
	}
}

// askCVC5 gives cvc5's answer, or "timeout".
func askCVC5(t testing.TB, path string, g *Grammar, question string, limit time.Duration) (string, time.Duration) {
	t.Helper()
	var script bytes.Buffer
	if err := WriteSMTLIB(&script, g, question); err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithTimeout(context.Background(), limit)
	defer cancel()
	cmd := exec.CommandContext(ctx, path, "--lang", "smt2", "-")
	cmd.Stdin = &script
	began := time.Now()
	out, err := cmd.CombinedOutput()
	d := time.Since(began)
	if ctx.Err() != nil {
		return "timeout", d
	}
	if err != nil {
		t.Fatalf("cvc5: %v\n%s", err, out)
	}
	return strings.TrimSpace(string(out)), d
}
