package manifest

import (
	"bufio"
	"compress/gzip"
	"fmt"
	"io"
	"os"
	"strings"
)

// A packed file is read through its decompressor; both are closed together.
type packed struct {
	*gzip.Reader
	f *os.File
}

func (p *packed) Close() error {
	err := p.Reader.Close()
	if cerr := p.f.Close(); err == nil {
		err = cerr
	}
	return err
}

// open opens a manifest and unpacks it if its name says that it is compressed.
func open(path string) (io.ReadCloser, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	if !strings.HasSuffix(path, ".gz") {
		return f, nil
	}
	zr, err := gzip.NewReader(f)
	if err != nil {
		f.Close()
		return nil, fmt.Errorf("unpack %s: %w", path, err)
	}
	return &packed{Reader: zr, f: f}, nil
}

// openText opens a manifest that is not compressed.
func openText(path string) (io.ReadCloser, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	info, err := f.Stat()
	if err != nil {
		f.Close()
		return nil, err
	}
	if !info.Mode().IsRegular() {
		f.Close()
		return nil, fmt.Errorf("%s is no regular file", path)
	}
	return f, nil
}

// Preview returns the name of the ship and the first lines of its cargo.
func Preview(path string, lines int) (ship string, cargo []string, err error) {
	src, err := openText(path)
	if err != nil {
		return "", nil, err
	}
	in := bufio.NewScanner(src)
	in.Scan()
	ship, ok := strings.CutPrefix(in.Text(), header)
	if !ok {
		src.Close()
		return "", nil, fmt.Errorf("%s is no manifest", path)
	}
	for len(cargo) < lines && in.Scan() {
		cargo = append(cargo, in.Text())
	}
	if err := in.Err(); err != nil {
		src.Close()
		return "", nil, err
	}
	return ship, cargo, src.Close()
}
