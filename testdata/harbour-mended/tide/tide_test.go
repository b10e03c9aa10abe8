package tide

import (
	"context"
	"net/http/httptest"
	"testing"
	"time"
)

func TestClientAgainstDemo(t *testing.T) {
	srv := httptest.NewServer(Demo())
	defer srv.Close()
	c := NewClient(srv.URL+"/", srv.Client())
	ctx := context.Background()
	if err := c.Ping(ctx); err != nil {
		t.Fatal(err)
	}
	if n, err := c.Level(ctx, "north"); n != 150 || err != nil {
		t.Errorf("level %d, %v", n, err)
	}
	if all, err := c.Table(ctx, "north"); len(all) != 4 || err != nil {
		t.Errorf("table %v, %v", all, err)
	}
	if n, err := c.Highest(ctx, "north", 2); n != 180 || err != nil {
		t.Errorf("highest %d, %v", n, err)
	}
	w := NewWeather(srv.URL+"/forecast", srv.Client())
	if f, err := w.Now(ctx); err != nil || !f.Calm() {
		t.Errorf("got %v, %v", f, err)
	}
	watch, err := NewWatch(ctx, c, "north", time.Minute)
	if err != nil {
		t.Fatal(err)
	}
	watch.Close()
}

func TestChart(t *testing.T) {
	c := NewChart(map[string]int{"outer": 90, "inner": 60}, func(string) (int, error) { return 40, nil })
	if d, err := c.Depth("outer"); d != 90 || err != nil {
		t.Errorf("got %d, %v", d, err)
	}
	if d, ok := c.Shallowest("outer", "inner"); d != 60 || !ok {
		t.Errorf("got %d, %v", d, ok)
	}
}
