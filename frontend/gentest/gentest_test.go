package gentest

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

var (
	long    = flag.Int("long", 0, "check this many programs instead of 100")
	seed    = flag.Int64("seed", 0, "first seed")
	without = flag.String("without", strings.Join(open, ","), "features to leave out, with commas between")
	strict  = flag.Bool("strict", false, "fail on spurious vectors and refuted claims too")
	shrink  = flag.Int("shrink", 0, "shrink this many failing programs")
	out     = flag.String("out", "", "folder for failing programs")
)

// open lists the features that the lowering is known to get wrong: run with
// -without= to see how. Each should leave this list; none may come back.
var open = []string{
	"field func", "func param", "set func", "returned func", "method value", // a call of a function value that is not known is dropped
	"set P", "named", "returned res", "two results", // what was stored into a field or result lacks a name
	"goexit", // a callee that may return is taken to return
}

// perBatch bounds what one build and one load hold in memory.
const perBatch = 200

// TestPrograms: every vector that a run shows is in the image.
func TestPrograms(t *testing.T) {
	if testing.Short() {
		t.Skip("builds programs")
	}
	n := 100
	if *long > 0 {
		n = *long
	}
	var left []string
	if *without != "" {
		left = strings.Split(*without, ",")
	}
	var total Result
	var failing []*Result
	kinds := map[Kind]int{}
	for first := 0; first < n; first += perBatch {
		var progs []*Program
		for i := first; i < min(n, first+perBatch); i++ {
			progs = append(progs, Generate(*seed+int64(i), i%3 == 0, left...))
		}
		dir := t.TempDir()
		results, err := CheckAll(dir, progs)
		if err != nil {
			t.Fatal(err)
		}
		os.RemoveAll(dir)
		for _, r := range results {
			total.add(r)
			bad := false
			for _, f := range r.Failures {
				kinds[f.Kind]++
				bad = bad || *strict || f.Kind == Missing || f.Kind == Crash
			}
			if bad {
				failing = append(failing, r)
			}
		}
	}
	t.Logf("%d programs, %d roots (%d run in every way), %d runs, %d starts; %d vectors looked for in images, %d images looked for in runs; missing %d, refuted %d, spurious %d",
		n, total.Roots, total.Complete, total.Runs, total.Starts, total.Compared, total.Exact, kinds[Missing], kinds[Refuted], kinds[Spurious])
	if total.Compared < 10*n || total.Exact < n/2 {
		t.Errorf("too little was compared")
	}
	if k := min(*shrink, len(failing)); k > 0 {
		small, err := Shrink(t.TempDir(), failing[:k])
		if err != nil {
			t.Error(err)
		}
		failing = append(small, failing[k:]...)
	}
	for i, r := range failing {
		if i < 10 {
			t.Errorf("%s", r.Report())
		}
		if *out != "" {
			if err := os.WriteFile(filepath.Join(*out, fmt.Sprintf("seed%d.go.txt", r.Program.Seed)), []byte(r.Report()), 0o666); err != nil {
				t.Error(err)
			}
		}
	}
	if len(failing) > 10 {
		t.Errorf("and %d programs more", len(failing)-10)
	}
}

// add sums what was compared.
func (r *Result) add(s *Result) {
	r.Roots += s.Roots
	r.Runs += s.Runs
	r.Complete += s.Complete
	r.Compared += s.Compared
	r.Exact += s.Exact
	r.Starts += s.Starts
}

// TestSeeds: a seed always gives the same program, and all compile.
func TestSeeds(t *testing.T) {
	for s := range int64(50) {
		p := Generate(s, s%2 == 0)
		if p.Source() != Generate(s, s%2 == 0).Source() {
			t.Fatalf("seed %d gives two programs", s)
		}
		if s%2 == 0 && strings.Contains(strings.SplitN(p.Source(), "var Glob", 2)[1], "rt.Flip") {
			t.Errorf("seed %d: an unknown branch in a known program", s)
		}
	}
}

// TestCatches: the comparison finds a model that lacks a path, one that has a
// path too many, and no fault in one that is right.
func TestCatches(t *testing.T) {
	var im image
	im.set(1, 1)
	two := im.sum(&im)
	if !two.has([2]int{2, 2}) || two.has([2]int{1, 1}) {
		t.Errorf("1/1 twice is %v", &two)
	}
	seen := Observed{Root: "Root0", Instance: "r0", Exit: "return", Ends: [][][2]int{{{1, 0}}}, Moments: [][2]int{{1, 0}}}
	model := func(t, g int64) *images {
		var v image
		v.set(t, g)
		return &images{ends: map[string]*image{"return": &v, "loss": {}}, sure: map[string]*image{"return": &v, "loss": {}}, moments: &v}
	}
	var right, wrong, none Result
	right.compareSeen(seen, model(1, 0))
	wrong.compareSeen(seen, model(1, 1))
	none.compareSeen(seen, nil)
	if len(right.Failures) != 0 || len(wrong.Failures) != 2 || len(none.Failures) != 2 {
		t.Errorf("failures: %v, %v, %v", right.Failures, wrong.Failures, none.Failures)
	}
}
