package crew

import "sync"

// A Beacon flashes a number of times a night and then rests.
type Beacon struct {
	mu    sync.Mutex
	count int
	night int
	lamp  bool
}

// Flash flashes once and reports whether the beacon still does.
func (b *Beacon) Flash() bool {
	return flash(&b.mu, &b.count, 6)
}

// flash counts up to most, guarded by l.
func flash(l sync.Locker, count *int, most int) bool {
	l.Lock()
	if *count >= most {
		l.Unlock()
		return false
	}
	*count++
	l.Unlock()
	return true
}

// guarded runs fn with l held.
func guarded(l sync.Locker, fn func()) {
	l.Lock()
	defer l.Unlock()
	fn()
}

// Rest ends the night.
func (b *Beacon) Rest() {
	guarded(&b.mu, func() {
		b.night++
		b.count = 0
		b.lamp = false
	})
}

// Light switches the lamp and reports whether that changed it.
func (b *Beacon) Light(on bool) (changed bool) {
	var l sync.Locker = &b.mu
	l.Lock()
	if b.lamp != on {
		b.lamp = on
		changed = true
	}
	l.Unlock()
	return changed
}
