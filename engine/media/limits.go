package media

import (
	"fmt"
	"time"

	"evenshelf/engine/audio"
)

// What hostile input may make a child take of the machine. All of it is far from what any recording needs; where the
// system has no such limits the child goes without.
const (
	mostMemory = 4 << 30 // bytes of address space
	mostFiles  = 64
	mostWork   = 4 * time.Hour // of processor: longest takes about two
)

// longest is how long a recording may be, in seconds. Silence can be packed so small that a file of some megabytes would
// go on for years.
const longest = 100 * 3600

// limits of one child.
type limits struct {
	work   time.Duration
	writes bool // it writes a file: its length is what is handed to it, and has no bound here
}

// tooLong returns an error once more of a recording has been decoded than so many seconds.
func tooLong(path string, f audio.Format, got, seconds int64) error {
	if got <= seconds*int64(f.Rate) {
		return nil
	}
	return about(path, &FormatError{-1, fmt.Sprintf("it goes on for more than %d hours, which is the most that is read", seconds/3600)})
}
