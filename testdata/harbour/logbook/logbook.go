// Package logbook writes the harbour's log in segments.
package logbook

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"sort"
	"sync"
)

// A Book is a folder of segments, the last of which is open.
type Book struct {
	dir   string
	limit int64 // bytes of a segment

	mu   sync.Mutex
	cur  *os.File // nil after Close
	size int64
	next int
}

// Open opens the book in dir and starts a new segment.
func Open(dir string, limit int64) (*Book, error) {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, err
	}
	b := &Book{dir: dir, limit: limit}
	names, err := b.Segments()
	if err != nil {
		return nil, err
	}
	b.next = len(names)
	if b.cur, err = b.create(); err != nil {
		return nil, err
	}
	return b, nil
}

// create makes the file of the next segment. The caller must hold mu.
func (b *Book) create() (*os.File, error) {
	f, err := os.Create(filepath.Join(b.dir, fmt.Sprintf("log-%06d", b.next)))
	if err != nil {
		return nil, err
	}
	b.next++
	b.size = 0
	return f, nil
}

// Segments returns the paths of the segments, the oldest first.
func (b *Book) Segments() ([]string, error) {
	names, err := filepath.Glob(filepath.Join(b.dir, "log-*"))
	sort.Strings(names)
	return names, err
}

// Write writes a line and starts a new segment where the line would not fit.
func (b *Book) Write(line string) error {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.cur == nil {
		return errors.New("logbook is closed")
	}
	if b.size > 0 && b.size+int64(len(line)) >= b.limit {
		if err := b.rotate(); err != nil {
			return err
		}
	}
	n, err := fmt.Fprintln(b.cur, line)
	b.size += int64(n)
	return err
}

// rotate replaces the open segment. The caller must hold mu.
func (b *Book) rotate() error {
	f, err := b.create()
	if err != nil {
		return err
	}
	old := b.cur
	b.cur = f
	return old.Close()
}

// Close closes the open segment.
func (b *Book) Close() error {
	b.mu.Lock()
	cur := b.cur
	b.cur = nil
	b.mu.Unlock()
	if cur == nil {
		return nil
	}
	return cur.Close()
}

// Stamp checks that every segment can be read to its end, and writes text at the
// end of the last one. It returns the size of all segments.
func (b *Book) Stamp(text string) (int64, error) {
	names, err := b.Segments()
	if err != nil {
		return 0, err
	}
	var (
		f     *os.File
		total int64
	)
	for _, name := range names {
		f, err = os.OpenFile(name, os.O_RDWR|os.O_APPEND, 0o644)
		if err != nil {
			return 0, err
		}
		n, err := io.Copy(io.Discard, f)
		if err != nil {
			f.Close()
			return 0, err
		}
		total += n
	}
	if f == nil {
		return 0, nil
	}
	_, err = fmt.Fprintln(f, text)
	f.Close()
	return total, err
}

// Tail opens the last segment near its end. The caller closes it.
func (b *Book) Tail(bytes int64) (*os.File, error) {
	names, err := b.Segments()
	if err != nil {
		return nil, err
	}
	if len(names) == 0 {
		return nil, os.ErrNotExist
	}
	f, err := os.Open(names[len(names)-1])
	if err != nil {
		return nil, err
	}
	if _, err := f.Seek(-bytes, io.SeekEnd); err != nil {
		if _, err := f.Seek(0, io.SeekStart); err != nil {
			f.Close()
			return nil, err
		}
	}
	return f, nil
}
