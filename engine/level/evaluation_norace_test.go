//go:build !race

package level_test

const (
	thorough = true  // the whole evaluation runs, not only its shortest programmes
	decoded  = "150" // seconds of a recording at the most
)
