package crew

import (
	"fmt"
	"sort"
	"sync"
)

// A Tug is a boat of the harbour.
type Tug struct {
	Name  string
	Power int // kilowatts
}

// A Register knows the tugs by name.
type Register struct {
	mu   sync.Mutex
	tugs map[string]*Tug
}

// NewRegister returns a register of the given tugs.
func NewRegister(tugs ...*Tug) *Register {
	r := &Register{tugs: make(map[string]*Tug)}
	for _, t := range tugs {
		r.tugs[t.Name] = t
	}
	return r
}

// Lookup returns the tug called name, nil if there is none.
func (r *Register) Lookup(name string) *Tug {
	r.mu.Lock()
	defer r.mu.Unlock()
	return r.tugs[name]
}

// lookup is Lookup for callers that hold mu.
func (r *Register) lookup(name string) *Tug {
	return r.tugs[name]
}

// Add puts t into the register.
func (r *Register) Add(t *Tug) error {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.lookup(t.Name) != nil {
		return fmt.Errorf("tug %s is registered", t.Name)
	}
	r.tugs[t.Name] = t
	return nil
}

// Rename gives a tug another name.
func (r *Register) Rename(from, to string) error {
	if from == to {
		return nil
	}
	r.mu.Lock()
	defer r.mu.Unlock()
	t, ok := r.tugs[from]
	if !ok {
		return fmt.Errorf("no tug %s", from)
	}
	other := r.Lookup(to)
	if other != nil {
		return fmt.Errorf("tug %s is registered", to)
	}
	delete(r.tugs, from)
	t.Name = to
	r.tugs[to] = t
	return nil
}

// Strongest returns the names of the tugs, the strongest first.
func (r *Register) Strongest() []string {
	r.mu.Lock()
	all := make([]*Tug, 0, len(r.tugs))
	for _, t := range r.tugs {
		all = append(all, t)
	}
	r.mu.Unlock()
	sort.Slice(all, func(i, j int) bool {
		if all[i].Power != all[j].Power {
			return all[i].Power > all[j].Power
		}
		return all[i].Name < all[j].Name
	})
	names := make([]string, len(all))
	for i, t := range all {
		names[i] = t.Name
	}
	return names
}

// Either looks name up in r and then in other; the two are never locked together.
func (r *Register) Either(other *Register, name string) *Tug {
	if t := r.Lookup(name); t != nil {
		return t
	}
	if other == nil || other == r {
		return nil
	}
	return other.Lookup(name)
}
