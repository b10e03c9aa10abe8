// Package config reads the settings of the harbour.
package config

import (
	"bufio"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"
)

// A Config is what the harbour can be told.
type Config struct {
	Slots int    // number of slots
	Depth int    // of each slot, decimetres
	Hands int    // workers of a shift
	Port  string // name in the tide tables
}

// Default returns the settings of a small harbour.
func Default() *Config {
	return &Config{Slots: 8, Depth: 60, Hands: 3, Port: "north"}
}

// Load reads settings from the file at path, or from harbour.conf if path is a
// folder. What the file does not say stays as in Default.
func Load(path string) (*Config, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	info, err := f.Stat()
	if err != nil {
		f.Close()
		return nil, err
	}
	if info.IsDir() {
		f, err = os.Open(filepath.Join(path, "harbour.conf"))
		if err != nil {
			return nil, err
		}
	}
	defer f.Close()
	return parse(f)
}

func parse(r io.Reader) (*Config, error) {
	c := Default()
	numbers := map[string]*int{"slots": &c.Slots, "depth": &c.Depth, "hands": &c.Hands}
	in := bufio.NewScanner(r)
	for in.Scan() {
		line := strings.TrimSpace(in.Text())
		if line == "" || strings.HasPrefix(line, "#") {
			continue
		}
		key, value, ok := strings.Cut(line, "=")
		if !ok {
			return nil, fmt.Errorf("no = in %q", line)
		}
		key, value = strings.TrimSpace(key), strings.TrimSpace(value)
		if key == "port" {
			c.Port = value
			continue
		}
		place, ok := numbers[key]
		if !ok {
			return nil, fmt.Errorf("unknown setting %q", key)
		}
		n, err := strconv.Atoi(value)
		if err != nil {
			return nil, fmt.Errorf("setting %s: %w", key, err)
		}
		*place = n
	}
	return c, in.Err()
}

// Save writes c to the file at path.
func Save(path string, c *Config) (err error) {
	var w io.WriteCloser
	if path == "-" {
		w = keepOpen{os.Stdout}
	} else if w, err = os.Create(path); err != nil {
		return err
	}
	_, err = fmt.Fprintf(w, "slots = %d\ndepth = %d\nhands = %d\nport = %s\n", c.Slots, c.Depth, c.Hands, c.Port)
	if cerr := w.Close(); err == nil {
		err = cerr
	}
	return err
}

// keepOpen is a writer that Close leaves alone.
type keepOpen struct{ io.Writer }

func (keepOpen) Close() error { return nil }
