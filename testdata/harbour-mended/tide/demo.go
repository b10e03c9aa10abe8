package tide

import (
	"encoding/json"
	"fmt"
	"net/http"
)

// Demo returns a service with invented figures, for trying things out.
func Demo() http.Handler {
	mux := http.NewServeMux()
	mux.HandleFunc("GET /{$}", func(w http.ResponseWriter, r *http.Request) {
		fmt.Fprintln(w, "tide service")
	})
	mux.HandleFunc("GET /level/{port}", func(w http.ResponseWriter, r *http.Request) {
		json.NewEncoder(w).Encode(map[string]int{"level": 100 + 10*len(r.PathValue("port"))})
	})
	mux.HandleFunc("GET /table/{port}", levels)
	mux.HandleFunc("GET /feed/{port}", levels)
	mux.HandleFunc("GET /forecast", func(w http.ResponseWriter, r *http.Request) {
		json.NewEncoder(w).Encode(Forecast{Wind: 12, Text: "light breeze"})
	})
	return mux
}

func levels(w http.ResponseWriter, r *http.Request) {
	if r.PathValue("port") == "inland" {
		w.WriteHeader(http.StatusNoContent)
		return
	}
	for _, n := range []int{120, 180, 240, 190} {
		fmt.Fprintln(w, n)
	}
}
