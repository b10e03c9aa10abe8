package summary

import (
	"testing"
	"unsafe"
)

// The structures that there are most of must not grow unnoticed.
func TestSizes(t *testing.T) {
	for _, c := range []struct {
		name      string
		got, want uintptr
	}{
		{"pairInfo", unsafe.Sizeof(pairInfo{}), 12},
		{"prod", unsafe.Sizeof(prod{}), 12},
		{"cell", unsafe.Sizeof(cell{}), 32},
		{"searchItem", unsafe.Sizeof(searchItem{}), 16},
	} {
		if c.got > c.want {
			t.Errorf("%s takes %d bytes, was %d", c.name, c.got, c.want)
		}
	}
}
