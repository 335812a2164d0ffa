package media

import (
	"time"

	"golang.org/x/sys/unix"
)

// restrain puts a process that has just been started under limits. What it has done so far counts; a system that
// refuses is left its way.
func (l limits) restrain(pid int) {
	seconds := uint64(l.work / time.Second)
	set := func(resource int, most, last uint64) {
		unix.Prlimit(pid, resource, &unix.Rlimit{Cur: most, Max: last}, nil)
	}
	set(unix.RLIMIT_CORE, 0, 0)
	set(unix.RLIMIT_AS, mostMemory, mostMemory)
	set(unix.RLIMIT_NOFILE, mostFiles, mostFiles)
	set(unix.RLIMIT_CPU, seconds, seconds+5) // then it is killed
	if !l.writes {
		set(unix.RLIMIT_FSIZE, 0, 0) // pipes do not count
	}
}
