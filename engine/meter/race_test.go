//go:build race

package meter

// The race detector has nothing to find in a rate or a depth; two rates walk all the paths.
func init() { rates, depths = []int{32000, 48000}, []depth{16} }
