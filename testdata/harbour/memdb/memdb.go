// Package memdb is a small database/sql driver that keeps the booking table in
// memory. It knows just the statements in this file; a transaction works on a
// copy and replaces the table when it commits.
package memdb

import (
	"database/sql"
	"database/sql/driver"
	"errors"
	"fmt"
	"io"
	"sync"
)

// The statements that the driver knows.
const (
	Insert = "INSERT INTO bookings (ship, slot, hours) VALUES (?, ?, ?)"
	Delete = "DELETE FROM bookings WHERE ship = ?"
	BySlot = "SELECT ship, hours FROM bookings WHERE slot = ?"
	Hours  = "SELECT SUM(hours) FROM bookings"
)

func init() { sql.Register("harbour-mem", &memDriver{tables: make(map[string]*table)}) }

type row struct {
	ship  string
	slot  string
	hours int64
}

type table struct {
	mu   sync.RWMutex
	rows []row
}

func (t *table) snapshot() []row {
	t.mu.RLock()
	defer t.mu.RUnlock()
	return append([]row(nil), t.rows...)
}

func (t *table) replace(rows []row) {
	t.mu.Lock()
	t.rows = rows
	t.mu.Unlock()
}

// memDriver has one table per data source name.
type memDriver struct {
	mu     sync.Mutex
	tables map[string]*table
}

func (d *memDriver) Open(name string) (driver.Conn, error) {
	d.mu.Lock()
	defer d.mu.Unlock()
	t, ok := d.tables[name]
	if !ok {
		t = new(table)
		d.tables[name] = t
	}
	return &conn{t: t}, nil
}

type conn struct {
	t     *table
	draft []row
	inTx  bool
}

func (c *conn) Prepare(query string) (driver.Stmt, error) {
	switch query {
	case Insert:
		return &stmt{c: c, query: query, args: 3}, nil
	case Delete, BySlot:
		return &stmt{c: c, query: query, args: 1}, nil
	case Hours:
		return &stmt{c: c, query: query}, nil
	}
	return nil, fmt.Errorf("memdb: cannot run %q", query)
}

func (c *conn) Close() error { return nil }

func (c *conn) Begin() (driver.Tx, error) {
	if c.inTx {
		return nil, errors.New("memdb: transaction in a transaction")
	}
	c.draft, c.inTx = c.t.snapshot(), true
	return c, nil
}

func (c *conn) Commit() error {
	c.t.replace(c.draft)
	c.draft, c.inTx = nil, false
	return nil
}

func (c *conn) Rollback() error {
	c.draft, c.inTx = nil, false
	return nil
}

// rows returns what the connection sees now.
func (c *conn) rows() []row {
	if c.inTx {
		return c.draft
	}
	return c.t.snapshot()
}

func (c *conn) store(rows []row) {
	if c.inTx {
		c.draft = rows
		return
	}
	c.t.replace(rows)
}

type stmt struct {
	c     *conn
	query string
	args  int
}

func (s *stmt) Close() error  { return nil }
func (s *stmt) NumInput() int { return s.args }

func (s *stmt) Exec(args []driver.Value) (driver.Result, error) {
	old := s.c.rows()
	switch s.query {
	case Insert:
		ship, _ := args[0].(string)
		slot, _ := args[1].(string)
		hours, ok := args[2].(int64)
		if !ok || hours <= 0 {
			return nil, fmt.Errorf("memdb: %v is no number of hours", args[2])
		}
		s.c.store(append(old, row{ship, slot, hours}))
		return driver.RowsAffected(1), nil
	case Delete:
		var kept []row
		for _, r := range old {
			if r.ship != args[0] {
				kept = append(kept, r)
			}
		}
		s.c.store(kept)
		return driver.RowsAffected(len(old) - len(kept)), nil
	}
	return nil, fmt.Errorf("memdb: %q returns rows", s.query)
}

func (s *stmt) Query(args []driver.Value) (driver.Rows, error) {
	switch s.query {
	case BySlot:
		res := &result{columns: []string{"ship", "hours"}}
		for _, r := range s.c.rows() {
			if r.slot == args[0] {
				res.values = append(res.values, []driver.Value{r.ship, r.hours})
			}
		}
		return res, nil
	case Hours:
		var sum int64
		for _, r := range s.c.rows() {
			sum += r.hours
		}
		return &result{columns: []string{"sum"}, values: [][]driver.Value{{sum}}}, nil
	}
	return nil, fmt.Errorf("memdb: %q returns no rows", s.query)
}

type result struct {
	columns []string
	values  [][]driver.Value
}

func (r *result) Columns() []string { return r.columns }
func (r *result) Close() error      { return nil }

func (r *result) Next(dest []driver.Value) error {
	if len(r.values) == 0 {
		return io.EOF
	}
	copy(dest, r.values[0])
	r.values = r.values[1:]
	return nil
}
