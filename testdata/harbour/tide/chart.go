package tide

import (
	"fmt"
	"sync"
)

// A Chart knows the depths of the fairways, in decimetres at low water.
type Chart struct {
	survey func(name string) (int, error)

	mu     sync.RWMutex
	depths map[string]int
}

// NewChart returns a chart with the given depths. It asks survey for others.
func NewChart(depths map[string]int, survey func(name string) (int, error)) *Chart {
	c := &Chart{survey: survey, depths: make(map[string]int)}
	for name, d := range depths {
		c.depths[name] = d
	}
	return c
}

// Depth returns the depth of the fairway called name.
func (c *Chart) Depth(name string) (int, error) {
	c.mu.RLock()
	d, ok := c.depths[name]
	defer c.mu.RUnlock()
	if ok {
		return d, nil
	}
	return c.measure(name)
}

// measure surveys a fairway and enters it into the chart.
func (c *Chart) measure(name string) (int, error) {
	d, err := c.survey(name)
	if err != nil {
		return 0, fmt.Errorf("survey of %s: %w", name, err)
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	c.depths[name] = d
	return d, nil
}

// Shallowest returns the least depth on the way, false if a part of it is not on
// the chart.
func (c *Chart) Shallowest(way ...string) (least int, ok bool) {
	c.mu.RLock()
	defer c.mu.RUnlock()
	for i, name := range way {
		d, ok := c.depths[name]
		if !ok {
			return 0, false
		}
		if i == 0 || d < least {
			least = d
		}
	}
	return least, len(way) > 0
}
