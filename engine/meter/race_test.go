//go:build race

package meter

// The race detector has nothing to find in a rate; two of them walk all the paths.
func init() { rates = []int{44100, 48000} }
