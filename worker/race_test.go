//go:build race

package worker

// raceDetector says that the tests run some ten times slower than the program does.
const raceDetector = true
