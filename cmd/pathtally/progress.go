package main

import (
	"fmt"
	"io"
	"sync"
	"time"
)

// progress is one line on a terminal, rewritten at most five times a second.
// A nil *progress shows nothing.
type progress struct {
	mu     sync.Mutex
	w      io.Writer
	last   time.Time
	shown  bool
	done   int
	broken int
}

const progressEvery = 200 * time.Millisecond

func newProgress(w io.Writer, terminal, quiet bool) *progress {
	if !terminal || quiet {
		return nil
	}
	return &progress{w: w}
}

// stage shows how far loading is.
func (p *progress) stage(name string, done, total int) {
	if p == nil {
		return
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	if total > 1 {
		p.show(fmt.Sprintf("%-10s%d of %d", name, done, total))
	} else {
		p.show(name)
	}
}

// judged counts a question that has its verdict.
func (p *progress) judged(broken bool, rules, of int) {
	if p == nil {
		return
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	p.done++
	if broken {
		p.broken++
	}
	p.show(fmt.Sprintf("judging   %d of %d rules   %d questions   %d broken", rules, of, p.done, p.broken))
}

func (p *progress) show(text string) {
	if now := time.Now(); now.Sub(p.last) >= progressEvery {
		p.last, p.shown = now, true
		fmt.Fprintf(p.w, "\r\x1b[K%s", text)
	}
}

// clear takes the line away again.
func (p *progress) clear() {
	if p == nil {
		return
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.shown {
		fmt.Fprint(p.w, "\r\x1b[K")
	}
	p.shown, p.last = false, time.Time{}
}
