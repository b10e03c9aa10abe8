// Package manifest reads and writes the cargo lists of ships.
package manifest

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"
)

// An Item is one line of cargo.
type Item struct {
	Name string `json:"name"`
	Tons int    `json:"tons"`
}

// A Manifest is the cargo of one ship.
type Manifest struct {
	Ship  string `json:"ship"`
	Items []Item `json:"items"`
}

// Tons returns the weight of the cargo.
func (m *Manifest) Tons() int {
	sum := 0
	for _, it := range m.Items {
		sum += it.Tons
	}
	return sum
}

const header = "ship\t"

// print writes m as text.
func (m *Manifest) print(w io.Writer) error {
	out := bufio.NewWriter(w)
	fmt.Fprintf(out, "%s%s\n", header, m.Ship)
	for _, it := range m.Items {
		fmt.Fprintf(out, "%s\t%d\n", it.Name, it.Tons)
	}
	return out.Flush()
}

// parse reads what print wrote.
func parse(r io.Reader) (*Manifest, error) {
	in := bufio.NewScanner(r)
	if !in.Scan() {
		if err := in.Err(); err != nil {
			return nil, err
		}
		return nil, io.ErrUnexpectedEOF
	}
	ship, ok := strings.CutPrefix(in.Text(), header)
	if !ok {
		return nil, fmt.Errorf("not a manifest: %q", in.Text())
	}
	m := &Manifest{Ship: ship}
	for in.Scan() {
		name, tons, _ := strings.Cut(in.Text(), "\t")
		n, err := strconv.Atoi(tons)
		if err != nil {
			return nil, fmt.Errorf("cargo %q: %w", name, err)
		}
		m.Items = append(m.Items, Item{name, n})
	}
	return m, in.Err()
}

// Write puts m into dir and returns its path. A manifest that was there before stays
// until the new one is complete.
func Write(dir string, m *Manifest) (path string, err error) {
	tmp, err := os.CreateTemp(dir, "new-*")
	if err != nil {
		return "", err
	}
	defer func() {
		if err != nil {
			os.Remove(tmp.Name())
		}
	}()
	if err := m.print(tmp); err != nil {
		tmp.Close()
		return "", err
	}
	if err := tmp.Sync(); err != nil {
		tmp.Close()
		return "", err
	}
	if err := tmp.Close(); err != nil {
		return "", err
	}
	path = filepath.Join(dir, m.Ship+".manifest")
	return path, os.Rename(tmp.Name(), path)
}

// Read reads the manifest at path, which may be compressed.
func Read(path string) (m *Manifest, err error) {
	r, err := open(path)
	if err != nil {
		return nil, err
	}
	defer func() {
		if cerr := r.Close(); err == nil {
			err = cerr
		}
	}()
	return parse(r)
}
