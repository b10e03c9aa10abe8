// Package booking keeps the bookings in a database.
package booking

import (
	"context"
	"database/sql"
	"errors"
	"fmt"

	"example/harbour/memdb"
)

// A Booking is a stay of one ship in one slot.
type Booking struct {
	Ship  string `json:"ship"`
	Slot  string `json:"slot"`
	Hours int    `json:"hours"`
}

// ErrNone is returned when there is no such booking.
var ErrNone = errors.New("no such booking")

// Books is the table of bookings.
type Books struct {
	db *sql.DB
}

// NewBooks opens the table called name.
func NewBooks(name string) (*Books, error) {
	db, err := sql.Open("harbour-mem", name)
	if err != nil {
		return nil, err
	}
	return &Books{db: db}, nil
}

// Close closes the database.
func (b *Books) Close() error { return b.db.Close() }

// Add stores all of the bookings or none.
func (b *Books) Add(ctx context.Context, all ...Booking) (err error) {
	tx, err := b.db.BeginTx(ctx, nil)
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			tx.Rollback()
		}
	}()
	for _, k := range all {
		if _, err = tx.ExecContext(ctx, memdb.Insert, k.Ship, k.Slot, k.Hours); err != nil {
			return fmt.Errorf("booking of %s: %w", k.Ship, err)
		}
	}
	return tx.Commit()
}

// Remove deletes the bookings of ship.
func (b *Books) Remove(ctx context.Context, ship string) error {
	tx, err := b.db.BeginTx(ctx, nil)
	if err != nil {
		return err
	}
	defer tx.Rollback()
	res, err := tx.ExecContext(ctx, memdb.Delete, ship)
	if err != nil {
		return err
	}
	if n, err := res.RowsAffected(); err != nil {
		return err
	} else if n == 0 {
		return ErrNone
	}
	return tx.Commit()
}

// InSlot returns the bookings of one slot in the order they were made.
func (b *Books) InSlot(ctx context.Context, slot string) ([]Booking, error) {
	rows, err := b.db.QueryContext(ctx, memdb.BySlot, slot)
	if err != nil {
		return nil, err
	}
	defer rows.Close()
	var all []Booking
	for rows.Next() {
		k := Booking{Slot: slot}
		if err := rows.Scan(&k.Ship, &k.Hours); err != nil {
			return nil, err
		}
		all = append(all, k)
	}
	return all, rows.Err()
}

// Hours returns the hours of all bookings together.
func (b *Books) Hours(ctx context.Context) (int, error) {
	var n sql.NullInt64
	if err := b.db.QueryRowContext(ctx, memdb.Hours).Scan(&n); err != nil {
		return 0, err
	}
	return int(n.Int64), nil
}
