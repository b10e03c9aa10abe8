package load

import (
	"runtime"
	"testing"
)

// Measured on Go 1.26.8, linux/amd64, 2 cores, go list included:
//
//	std, all bodies                       3.9 s, 1.0 GB   362 packages, 22,345 functions
//	the same by golang.org/x/tools/go/packages with syntax and types of all
//	dependencies, SSA, no function index  5.5 s, 0.9 GB
//	one package over net/http, database/sql, html/template, go/types
//	                                      1.2 s, 0.08 GB  209 packages, one with bodies
func BenchmarkStd(b *testing.B) { benchmark(b, Config{Patterns: []string{"std"}}) }

// A few packages of one module with bodies, all others without.
func BenchmarkWithoutBodies(b *testing.B) {
	benchmark(b, Config{Patterns: []string{"golang.org/x/tools/go/ssa"}})
}

func benchmark(b *testing.B, cfg Config) {
	for b.Loop() {
		prog, err := Load(cfg)
		if err != nil {
			b.Fatal(err)
		}
		b.ReportMetric(float64(prog.Stats.Packages), "packages")
		b.ReportMetric(float64(prog.Stats.WithBodies), "bodies")
		b.ReportMetric(float64(prog.Stats.Functions), "functions")
		b.ReportMetric(float64(prog.Stats.Files), "files")
		b.ReportMetric(prog.Stats.List.Seconds(), "list-s")
		b.ReportMetric(prog.Stats.Read.Seconds(), "read-s")
		b.ReportMetric(prog.Stats.Build.Seconds(), "build-s")
		var m runtime.MemStats
		runtime.ReadMemStats(&m)
		b.ReportMetric(float64(m.Sys>>20), "MB")
	}
}
