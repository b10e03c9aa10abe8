// Package tide asks the tide and weather service.
package tide

import (
	"bufio"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"strconv"
	"strings"
)

// A Client asks one service.
type Client struct {
	base string
	http *http.Client
}

// NewClient returns a client for the service at base.
func NewClient(base string, hc *http.Client) *Client {
	return &Client{base: strings.TrimSuffix(base, "/"), http: hc}
}

// get sends a request. The caller closes the body of the response, whatever its
// status is.
func (c *Client) get(ctx context.Context, path string) (*http.Response, error) {
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, c.base+path, nil)
	if err != nil {
		return nil, err
	}
	req.Header.Set("Accept", "application/json")
	return c.http.Do(req)
}

// Level returns the level at port now, in centimetres above low water.
func (c *Client) Level(ctx context.Context, port string) (int, error) {
	resp, err := c.get(ctx, "/level/"+url.PathEscape(port))
	if err != nil {
		return 0, err
	}
	if resp.StatusCode != http.StatusOK {
		resp.Body.Close()
		return 0, fmt.Errorf("level at %s: %s", port, resp.Status)
	}
	defer resp.Body.Close()
	var answer struct {
		Level int `json:"level"`
	}
	if err := json.NewDecoder(resp.Body).Decode(&answer); err != nil {
		return 0, fmt.Errorf("level at %s: %w", port, err)
	}
	return answer.Level, nil
}

// stream returns the body of a good answer; an answer without content has an empty
// one.
func (c *Client) stream(ctx context.Context, path string) (io.ReadCloser, error) {
	resp, err := c.get(ctx, path)
	if err != nil {
		return nil, err
	}
	switch {
	case resp.StatusCode == http.StatusNoContent:
		resp.Body.Close()
		return http.NoBody, nil
	case resp.StatusCode >= 300:
		resp.Body.Close()
		return nil, fmt.Errorf("%s: %s", path, resp.Status)
	}
	return resp.Body, nil
}

// Table returns the levels of the next hours at port.
func (c *Client) Table(ctx context.Context, port string) (levels []int, err error) {
	body, err := c.stream(ctx, "/table/"+url.PathEscape(port))
	if err != nil {
		return nil, err
	}
	defer func() {
		if cerr := body.Close(); cerr != nil && err == nil {
			levels, err = nil, cerr
		}
	}()
	in := bufio.NewScanner(body)
	for in.Scan() {
		n, err := strconv.Atoi(in.Text())
		if err != nil {
			return nil, err
		}
		levels = append(levels, n)
	}
	return levels, in.Err()
}

// Ping reports whether the service answers at all.
func (c *Client) Ping(ctx context.Context) error {
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, c.base+"/", nil)
	if err != nil {
		return err
	}
	resp, err := c.http.Do(req)
	if err != nil {
		return err
	}
	discard(resp)
	if resp.StatusCode >= 500 {
		return fmt.Errorf("tide service: %s", resp.Status)
	}
	return nil
}

// discard reads what is left of the answer, so that its connection can be used
// again.
func discard(resp *http.Response) {
	if resp.ContentLength == 0 {
		resp.Body.Close()
		return
	}
	io.Copy(io.Discard, io.LimitReader(resp.Body, 1<<16))
	resp.Body.Close()
}

// A Feed is a stream of levels that goes on until Close.
type Feed struct {
	body   io.ReadCloser
	in     *bufio.Scanner
	cancel context.CancelFunc
}

// Follow opens the feed of port.
func (c *Client) Follow(ctx context.Context, port string) (*Feed, error) {
	ctx, cancel := context.WithCancel(ctx)
	resp, err := c.get(ctx, "/feed/"+url.PathEscape(port))
	if err != nil {
		cancel()
		return nil, err
	}
	if resp.StatusCode != http.StatusOK {
		resp.Body.Close()
		cancel()
		return nil, fmt.Errorf("feed of %s: %s", port, resp.Status)
	}
	return &Feed{body: resp.Body, in: bufio.NewScanner(resp.Body), cancel: cancel}, nil
}

// Next returns the next level, false at the end of the feed.
func (f *Feed) Next() (int, bool) {
	if !f.in.Scan() {
		return 0, false
	}
	n, err := strconv.Atoi(f.in.Text())
	return n, err == nil
}

// Close ends the feed.
func (f *Feed) Close() error {
	err := f.body.Close()
	f.cancel()
	return err
}

// Highest reads the feed of port for n levels and returns the highest.
func (c *Client) Highest(ctx context.Context, port string, n int) (int, error) {
	feed, err := c.Follow(ctx, port)
	if err != nil {
		return 0, err
	}
	defer feed.Close()
	top := 0
	for range n {
		level, ok := feed.Next()
		if !ok {
			break
		}
		top = max(top, level)
	}
	return top, nil
}
