package gentest

import (
	"fmt"
	"os"
	"path/filepath"
)

// Shrinking looks at candidates of all programs together, so that one start of
// the go command serves many.
const (
	shrinkRounds     = 60
	shrinkCandidates = 24 // per program and round
)

// Shrink makes failing programs smaller as long as their first failure stays:
// same kind, same checkpoint. What it gives back is checked like the original.
func Shrink(dir string, failing []*Result) ([]*Result, error) {
	best := append([]*Result(nil), failing...)
	next := make([][]*Program, len(best)) // what is still to be tried
	done := make([]bool, len(best))
	for i, r := range best {
		next[i] = compiling(r.Program)
	}
	for round := range shrinkRounds {
		var batch []*Program
		var owner []int
		for i := range best {
			if done[i] {
				continue
			}
			n := min(shrinkCandidates, len(next[i]))
			for _, p := range next[i][:n] {
				batch = append(batch, p)
				owner = append(owner, i)
			}
			next[i] = next[i][n:]
			done[i] = n == 0
		}
		if len(batch) == 0 {
			break
		}
		sub := filepath.Join(dir, fmt.Sprintf("shrink%d", round))
		results, err := CheckAll(sub, batch)
		if err != nil {
			return best, err
		}
		os.RemoveAll(sub)
		smaller := make([]*Result, len(best))
		for k, r := range results {
			i := owner[k]
			want := failing[i].Failures[0]
			for j, f := range r.Failures {
				if f.same(want) {
					r.Failures[0], r.Failures[j] = r.Failures[j], r.Failures[0]
					if smaller[i] == nil || r.Program.size() < smaller[i].Program.size() {
						smaller[i] = r
					}
					break
				}
			}
		}
		for i, r := range smaller {
			if r != nil {
				best[i] = r
				next[i] = compiling(r.Program)
			}
		}
	}
	return best, nil
}

// compiling lists the smaller programs that compile.
func compiling(p *Program) (out []*Program) {
	seen := map[string]bool{p.Source(): true}
	for _, q := range p.Smaller() {
		if q.size() == 0 {
			continue
		}
		if s := q.Source(); !seen[s] {
			seen[s] = true
			if roots, err := q.Check(); err == nil && len(roots) > 0 {
				out = append(out, q)
			}
		}
	}
	return out
}
