package depot

import (
	"io"
	"os"
	"strings"
	"sync"
)

// A Handle is a shared, read-only view of a document. It counts its users.
type Handle struct {
	mu    sync.Mutex
	users int
	text  string
}

// NewHandle reads the document at path. The caller is its first user.
func NewHandle(path string) (*Handle, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	return &Handle{users: 1, text: string(text)}, nil
}

// Retain adds a user.
func (h *Handle) Retain() {
	h.mu.Lock()
	h.users++
	h.mu.Unlock()
}

// Release drops a user; the last one frees the text.
func (h *Handle) Release() {
	h.mu.Lock()
	defer h.mu.Unlock()
	if h.users--; h.users == 0 {
		h.text = ""
	}
}

// Read returns a reader over the text.
func (h *Handle) Read() io.Reader {
	h.mu.Lock()
	text := h.text
	h.mu.Unlock()
	return strings.NewReader(text)
}
