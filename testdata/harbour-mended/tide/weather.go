package tide

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"sync"
)

// A Forecast is the weather of the next hours.
type Forecast struct {
	Wind int    `json:"wind"` // knots
	Text string `json:"text"`
}

// Calm reports whether small ships may sail.
func (f Forecast) Calm() bool { return f.Wind < 22 }

// Weather asks for forecasts and remembers the last good one.
type Weather struct {
	url  string
	http *http.Client

	mu   sync.RWMutex
	last *Forecast
}

// NewWeather returns a client for the forecast at url.
func NewWeather(url string, hc *http.Client) *Weather {
	return &Weather{url: url, http: hc}
}

const tries = 3

// Ask asks for a forecast, up to three times.
func (w *Weather) Ask(ctx context.Context) (Forecast, error) {
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, w.url, nil)
	if err != nil {
		return Forecast{}, err
	}
	last := errors.New("not asked")
	for i := 0; i < tries; i++ {
		resp, err := w.http.Do(req)
		if err != nil {
			last = err
			continue
		}
		last = fmt.Errorf("forecast: %s", resp.Status)
		if resp.StatusCode == http.StatusServiceUnavailable {
			resp.Body.Close()
			continue
		}
		if resp.StatusCode != http.StatusOK {
			resp.Body.Close()
			break
		}
		f, err := decode(resp.Body)
		resp.Body.Close()
		if err != nil {
			return Forecast{}, err
		}
		w.remember(&f)
		return f, nil
	}
	return Forecast{}, last
}

func decode(r io.Reader) (f Forecast, err error) {
	err = json.NewDecoder(r).Decode(&f)
	return f, err
}

func (w *Weather) remember(f *Forecast) {
	w.mu.Lock()
	defer w.mu.Unlock()
	w.last = f
}

// Last returns the last good forecast, false if there was none.
func (w *Weather) Last() (Forecast, bool) {
	w.mu.RLock()
	defer w.mu.RUnlock()
	if w.last == nil {
		return Forecast{}, false
	}
	return *w.last, true
}

// Now returns the last good forecast and asks for one if there was none.
func (w *Weather) Now(ctx context.Context) (Forecast, error) {
	if f, ok := w.Last(); ok {
		return f, nil
	}
	return w.Ask(ctx)
}
