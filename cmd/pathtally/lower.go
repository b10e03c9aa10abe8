package main

import (
	"pathtally/frontend"
	"pathtally/frontend/load"
	"pathtally/properties"
)

// A lowerer makes the model of a rule. Lower may be called, and its models may
// be used, by several goroutines at once, one model by one goroutine.
type lowerer interface {
	// Judge tells which rules the build has; it comes before the first Lower.
	Judge(rules []*properties.ResolvedRule)
	Lower(rule *properties.ResolvedRule) properties.Model
}

// analyze does what all rules share, once.
var analyze = func(prog *load.Program) lowerer { return frontend.Analyze(prog) }
