package depot

import (
	"errors"
	"fmt"
)

// A Change is a batch of lines that reaches its store as a whole or not at all.
type Change struct {
	store    *Store
	lines    []string
	prepared bool
}

// Begin starts a change of s. The caller ends it with Commit or Undo.
func Begin(s *Store) (*Change, error) {
	if s == nil {
		return nil, errors.New("depot: change without a store")
	}
	return &Change{store: s}, nil
}

// Add puts a line into the batch.
func (c *Change) Add(format string, args ...any) {
	c.lines = append(c.lines, fmt.Sprintf(format, args...))
}

// Prepare checks the batch. Commit wants a prepared change.
func (c *Change) Prepare() error {
	for i, l := range c.lines {
		if l == "" {
			return fmt.Errorf("depot: line %d of the change is empty", i+1)
		}
	}
	c.prepared = true
	return nil
}

// Commit writes the batch.
func (c *Change) Commit() error {
	if !c.prepared {
		return errors.New("depot: change was not prepared")
	}
	for _, l := range c.lines {
		if err := c.store.Append(l); err != nil {
			return err
		}
	}
	c.lines = nil
	return nil
}

// Undo forgets the batch.
func (c *Change) Undo() { c.lines = nil }

// Apply makes one change of s with the lines that fill adds.
func Apply(s *Store, fill func(*Change) error) error {
	c, err := Begin(s)
	if err != nil {
		return err
	}
	if err := fill(c); err != nil {
		c.Undo()
		return err
	}
	if err := c.Prepare(); err != nil {
		c.Undo()
		return err
	}
	return c.Commit()
}
