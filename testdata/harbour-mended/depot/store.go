package depot

import (
	"bufio"
	"errors"
	"fmt"
	"os"
	"sync"
)

const magic = "harbour store 1\n"

// ErrClosed is returned by the methods of a Store after Close.
var ErrClosed = errors.New("depot: store is closed")

// A Store is a file of lines that only grows.
type Store struct {
	path string

	mu sync.Mutex
	f  *os.File // nil after Close
}

// Open opens the store at path and creates it if there is none.
func Open(path string) (*Store, error) {
	f, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE|os.O_APPEND, 0o644)
	if err != nil {
		return nil, err
	}
	s := &Store{path: path, f: f}
	if err := s.check(); err != nil {
		f.Close()
		return nil, fmt.Errorf("open %s: %w", path, err)
	}
	return s, nil
}

// check reads the first line, or writes it into a new file.
func (s *Store) check() error {
	info, err := s.f.Stat()
	if err != nil {
		return err
	}
	if info.Size() == 0 {
		_, err := s.f.WriteString(magic)
		return err
	}
	head := make([]byte, len(magic))
	if _, err := s.f.ReadAt(head, 0); err != nil {
		return err
	}
	if string(head) != magic {
		return errors.New("not a harbour store")
	}
	return nil
}

// Append writes one line.
func (s *Store) Append(line string) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.f == nil {
		return ErrClosed
	}
	_, err := fmt.Fprintln(s.f, line)
	return err
}

// Lines calls fn for every line until fn returns false.
func (s *Store) Lines(fn func(string) bool) (err error) {
	f, err := os.Open(s.path)
	if err != nil {
		return err
	}
	defer func() {
		if cerr := f.Close(); err == nil {
			err = cerr
		}
	}()
	in := bufio.NewScanner(f)
	in.Scan() // the magic line
	for in.Scan() {
		if !fn(in.Text()) {
			return nil
		}
	}
	return in.Err()
}

// Close closes the file. A second call does nothing.
func (s *Store) Close() error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.f == nil {
		return nil
	}
	err := s.f.Close()
	s.f = nil
	return err
}
