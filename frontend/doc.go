// Package frontend lowers Go packages to pushdown systems.
package frontend
