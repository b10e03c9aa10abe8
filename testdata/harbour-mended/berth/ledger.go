package berth

import "sync"

// An Entry is one line of a Ledger.
type Entry struct {
	Seq  int
	Text string
}

// A Ledger collects entries and hands them to a listener, which may add entries
// of its own.
type Ledger struct {
	listen func(Entry)

	mu      sync.Mutex
	seq     int
	pending []Entry
	paused  bool
}

// NewLedger returns a ledger that hands its entries to listen.
func NewLedger(listen func(Entry)) *Ledger {
	return &Ledger{listen: listen}
}

// Record adds an entry.
func (l *Ledger) Record(text string) {
	l.mu.Lock()
	l.seq++
	l.pending = append(l.pending, Entry{l.seq, text})
	if l.paused {
		l.mu.Unlock()
		return
	}
	l.drain()
}

// drain hands over what is pending. The caller must hold mu; drain releases it
// first, since the listener may call back.
func (l *Ledger) drain() {
	batch := l.pending
	l.pending = nil
	l.mu.Unlock()
	for _, e := range batch {
		l.listen(e)
	}
}

// Pause keeps entries back until Resume.
func (l *Ledger) Pause() {
	l.mu.Lock()
	l.paused = true
	l.mu.Unlock()
}

// Resume hands over what was kept back.
func (l *Ledger) Resume() {
	l.mu.Lock()
	l.paused = false
	l.drain()
}

// Pending returns the number of entries that were kept back.
func (l *Ledger) Pending() int {
	l.mu.Lock()
	defer l.mu.Unlock()
	return len(l.pending)
}
