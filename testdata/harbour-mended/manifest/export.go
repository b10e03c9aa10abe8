package manifest

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
)

// Export writes manifests as JSON into a new file at path. The file is whole only
// if the error is nil.
func Export(path string, all []*Manifest) (err error) {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			f.Close()
			return
		}
		err = f.Close()
	}()
	enc := json.NewEncoder(f)
	enc.SetIndent("", "  ")
	err = enc.Encode(all)
	return err
}

// Copy copies the manifest at from to a new file at to.
func Copy(to, from string) error {
	in, err := os.Open(from)
	if err != nil {
		return err
	}
	out, err := os.OpenFile(to, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if err != nil {
		in.Close()
		return err
	}
	_, err = io.Copy(out, in)
	in.Close()
	if cerr := out.Close(); err == nil {
		err = cerr
	}
	return err
}

// openAll opens all of the paths or none.
func openAll(paths []string) ([]*os.File, error) {
	var files []*os.File
	for _, p := range paths {
		f, err := os.Open(p)
		if err != nil {
			return nil, errors.Join(err, closeAll(files))
		}
		files = append(files, f)
	}
	return files, nil
}

func closeAll(files []*os.File) error {
	var errs []error
	for _, f := range files {
		errs = append(errs, f.Close())
	}
	return errors.Join(errs...)
}

// Merge reads the manifests at paths, all for one ship, into one.
func Merge(ship string, paths ...string) (*Manifest, error) {
	files, err := openAll(paths)
	if err != nil {
		return nil, err
	}
	defer closeAll(files)
	sum := &Manifest{Ship: ship}
	for _, f := range files {
		m, err := parse(f)
		if err != nil {
			return nil, err
		}
		if m.Ship != ship {
			return nil, fmt.Errorf("%s belongs to %s", f.Name(), m.Ship)
		}
		sum.Items = append(sum.Items, m.Items...)
	}
	return sum, nil
}

// Weigh returns the tons of all the manifests at paths together; those that do not
// exist weigh nothing.
func Weigh(paths []string) (int, error) {
	sum := 0
	for _, p := range paths {
		f, err := os.Open(p)
		if errors.Is(err, os.ErrNotExist) {
			continue
		}
		if err != nil {
			return 0, err
		}
		m, err := parse(f)
		f.Close()
		if err != nil {
			return 0, err
		}
		sum += m.Tons()
	}
	return sum, nil
}

// Newest opens the first of paths that exists and that is not empty.
func Newest(paths ...string) (*os.File, error) {
	for _, p := range paths {
		f, err := os.Open(p)
		if err != nil {
			continue
		}
		if info, err := f.Stat(); err != nil || info.Size() == 0 {
			f.Close()
			continue
		}
		return f, nil
	}
	return nil, os.ErrNotExist
}
