// Package meter keeps the few figures the harbour office watches.
package meter

import (
	"fmt"
	"io"
	"sort"
	"sync"
	"sync/atomic"
)

// A Gauge is a level that goes up and down. The zero value reads 0.
type Gauge struct {
	level atomic.Int64
}

// Inc raises the level by one.
func (g *Gauge) Inc() { g.level.Add(1) }

// Dec lowers the level by one.
func (g *Gauge) Dec() { g.level.Add(-1) }

// Level returns the current level.
func (g *Gauge) Level() int64 { return g.level.Load() }

// A Vec is a family of gauges told apart by one label.
type Vec struct {
	name string

	mu     sync.RWMutex
	gauges map[string]*Gauge
}

// NewVec returns an empty family called name.
func NewVec(name string) *Vec {
	return &Vec{name: name, gauges: make(map[string]*Gauge)}
}

// With returns the gauge for label, the same one for the same label each time.
func (v *Vec) With(label string) *Gauge {
	v.mu.RLock()
	if g, ok := v.gauges[label]; ok {
		v.mu.RUnlock()
		return g
	}
	v.mu.RUnlock()

	v.mu.Lock()
	defer v.mu.Unlock()
	if g, ok := v.gauges[label]; ok {
		return g
	}
	g := new(Gauge)
	v.gauges[label] = g
	return g
}

// WriteTo prints the family, one gauge a line, sorted by label.
func (v *Vec) WriteTo(w io.Writer) (int64, error) {
	v.mu.RLock()
	defer v.mu.RUnlock()
	labels := make([]string, 0, len(v.gauges))
	for l := range v.gauges {
		labels = append(labels, l)
	}
	sort.Strings(labels)
	var total int64
	for _, l := range labels {
		n, err := fmt.Fprintf(w, "%s{%q} %d\n", v.name, l, v.gauges[l].Level())
		total += int64(n)
		if err != nil {
			return total, err
		}
	}
	return total, nil
}
