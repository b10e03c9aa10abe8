package logbook

import (
	"fmt"
	"io"
	"os"
	"sync"
)

// Ship sends one segment in the background. The channel gives the error if there
// was one, and is closed in the end.
func Ship(path string, send func(io.Reader) error) (<-chan error, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	done := make(chan error, 1)
	go func(f *os.File) {
		defer close(done)
		info, err := f.Stat()
		if err != nil {
			f.Close()
			done <- err
			return
		}
		if info.Size() == 0 {
			f.Close()
			return
		}
		err = send(io.LimitReader(f, info.Size()))
		f.Close()
		if err != nil {
			done <- fmt.Errorf("send %s: %w", path, err)
		}
	}(f)
	return done, nil
}

// ShipAll sends segments side by side and returns how many were sent.
func ShipAll(paths []string, send func(io.Reader) error) int {
	var (
		wg   sync.WaitGroup
		mu   sync.Mutex
		sent int
	)
	for _, p := range paths {
		f, err := os.Open(p)
		if err != nil {
			continue
		}
		wg.Add(1)
		go func() {
			defer wg.Done()
			defer f.Close()
			if send(f) != nil {
				return
			}
			mu.Lock()
			defer mu.Unlock()
			sent++
		}()
	}
	wg.Wait()
	mu.Lock()
	n := sent
	mu.Unlock()
	return n
}
