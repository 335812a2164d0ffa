//go:build race

package level_test

// The race detector has nothing to find in arithmetic: a few short programmes walk all the paths.
const (
	thorough = false
	decoded  = "15"
)
