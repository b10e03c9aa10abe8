package main

import (
	"encoding/json"
	"fmt"
	"os"
	"runtime"
	"time"
)

// timings measures the stages of a run. Times are in no other output.
type timings struct {
	began  time.Time
	stages []timedStage
}

type timedStage struct {
	Name    string  `json:"name"`
	Seconds float64 `json:"seconds"`
}

// done closes a stage that began at from.
func (t *timings) done(name string, from time.Time) {
	t.stages = append(t.stages, timedStage{name, time.Since(from).Seconds()})
}

// write stores the measurements; memory is what the Go runtime has taken from
// the system, which never shrinks, so it is the peak.
func (t *timings) write(file string) error {
	var m runtime.MemStats
	runtime.ReadMemStats(&m)
	data, err := json.MarshalIndent(struct {
		Seconds    float64      `json:"seconds"`
		Stages     []timedStage `json:"stages"`
		PeakMemory uint64       `json:"peakMemoryBytes"`
	}{time.Since(t.began).Seconds(), t.stages, m.Sys}, "", " ")
	if err != nil {
		return err
	}
	if err := os.WriteFile(file, append(data, '\n'), 0o644); err != nil {
		return fmt.Errorf("writing timings: %w", err)
	}
	return nil
}
