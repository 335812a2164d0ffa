//go:build !linux

package media

// restrain does nothing: this system cannot put limits on another process.
func (l limits) restrain(int) {}
