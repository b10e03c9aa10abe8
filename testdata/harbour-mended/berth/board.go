package berth

import (
	"sort"
	"strings"
	"sync"
)

// A Row is one line of the board at the gate.
type Row struct {
	Slot string `json:"slot"`
	Ship string `json:"ship"`
	ETA  string `json:"eta,omitempty"`
}

// A Board shows who is expected where. It is read far more often than written.
type Board struct {
	mu   sync.RWMutex
	rows []Row
}

// Post adds a row or replaces the one of the same slot.
func (b *Board) Post(r Row) {
	b.mu.Lock()
	defer b.mu.Unlock()
	for i := range b.rows {
		if b.rows[i].Slot == r.Slot {
			b.rows[i] = r
			return
		}
	}
	b.rows = append(b.rows, r)
	sort.Slice(b.rows, func(i, j int) bool { return b.rows[i].Slot < b.rows[j].Slot })
}

// Snapshot returns a copy of the rows, nil if there are none.
func (b *Board) Snapshot() []Row {
	b.mu.RLock()
	if len(b.rows) == 0 {
		b.mu.RUnlock()
		return nil
	}
	rows := make([]Row, len(b.rows))
	copy(rows, b.rows)
	b.mu.RUnlock()
	return rows
}

// SlotOf returns the slot where ship is expected, "" if it is not on the board.
// Case does not matter.
func (b *Board) SlotOf(ship string) string {
	b.mu.RLock()
	for _, r := range b.rows {
		if r.Ship == ship {
			b.mu.RUnlock()
			return r.Slot
		}
		if strings.EqualFold(r.Ship, ship) {
			b.mu.RUnlock()
			return r.Slot
		}
	}
	b.mu.RUnlock()
	return ""
}

// view returns the rows themselves, to be read until done is called.
func (b *Board) view() (rows []Row, done func()) {
	b.mu.RLock()
	return b.rows, b.mu.RUnlock
}

// Expected returns how many rows have a time of arrival.
func (b *Board) Expected() int {
	rows, done := b.view()
	defer done()
	n := 0
	for _, r := range rows {
		if r.ETA != "" {
			n++
		}
	}
	return n
}

// Trim removes the rows that keep rejects, and reports whether there were any. It
// looks first with the read lock alone.
func (b *Board) Trim(keep func(Row) bool) bool {
	if !b.any(func(r Row) bool { return !keep(r) }) {
		return false
	}
	b.mu.Lock()
	defer b.mu.Unlock()
	kept := b.rows[:0]
	for _, r := range b.rows {
		if keep(r) {
			kept = append(kept, r)
		}
	}
	trimmed := len(kept) < len(b.rows)
	b.rows = kept
	return trimmed
}

func (b *Board) any(is func(Row) bool) (found bool) {
	b.mu.RLock()
	defer b.mu.RUnlock()
	for _, r := range b.rows {
		if found = is(r); found {
			break
		}
	}
	return found
}
