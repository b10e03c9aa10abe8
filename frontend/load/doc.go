// Package load turns package patterns into type-checked packages and SSA.
package load
