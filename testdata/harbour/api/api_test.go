package api

import (
	"context"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"example/harbour/config"
	"example/harbour/tide"
)

func TestBookOverHTTP(t *testing.T) {
	tides := httptest.NewServer(tide.Demo())
	defer tides.Close()
	h, err := New(context.Background(), config.Default(), t.TempDir(), tides.URL)
	if err != nil {
		t.Fatal(err)
	}
	defer h.Close()
	for _, c := range []struct {
		method, path, body string
		status             int
		want               string
	}{
		{"POST", "/bookings", `{"ship":"Alma","slot":"n1","hours":2}`, http.StatusOK, `{"price":300}`},
		{"POST", "/bookings", `{"ship":"Brig","slot":"n1","hours":2}`, http.StatusConflict, "taken"},
		{"POST", "/bookings", `{"ship":"Brig","slot":"x1","hours":2}`, http.StatusNotFound, "no such slot"},
		{"GET", "/bookings/n1", "", http.StatusOK, `"Alma"`},
		{"GET", "/board/Alma", "", http.StatusOK, `"n1"`},
		{"GET", "/tide", "", http.StatusOK, `"level":150`},
		{"POST", "/manifests", `{"ship":"Alma","items":[{"name":"rope","tons":2}]}`, http.StatusOK, "Alma.manifest"},
		{"GET", "/manifests/Alma", "", http.StatusOK, `rope\t2`},
		{"POST", "/gate/open", "", http.StatusOK, `"open"`},
		{"DELETE", "/bookings/Alma", "", http.StatusNoContent, ""},
		{"GET", "/gauges", "", http.StatusOK, `harbour{"desk"} 0`},
	} {
		rec := httptest.NewRecorder()
		h.Handler().ServeHTTP(rec, httptest.NewRequest(c.method, c.path, strings.NewReader(c.body)))
		if rec.Code != c.status || !strings.Contains(rec.Body.String(), c.want) {
			t.Errorf("%s %s: got %d %q, want %d with %q", c.method, c.path, rec.Code, rec.Body, c.status, c.want)
		}
	}
}
