package load

import (
	"runtime"
	"testing"
)

// Measured with go test -bench . -benchtime 1x, Go 1.26.8, linux/amd64, 2
// cores that other work kept busy in part:
//
//	std, all bodies     4.0 s   1.0 GB peak   362 packages, 22,345 functions
//	the same through golang.org/x/tools/go/packages, side by side: 5.5 s, 0.9 GB
func BenchmarkStd(b *testing.B) { benchmark(b, Config{Patterns: []string{"std"}}) }

// One package with bodies, its imports without.
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
