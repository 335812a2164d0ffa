package media

import (
	"context"
	"errors"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"golang.org/x/sys/unix"
)

// shell starts a shell with a script as a child; the shell stands for FFmpeg.
func shell(t *testing.T, decode bool, script string) *child {
	t.Helper()
	sh, err := exec.LookPath("sh")
	if err != nil {
		t.Fatal(err)
	}
	c, err := startChild(context.Background(), decode, nil, sh, "-c", script)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// The limits are those that the kernel itself says a child has (prlimit(2)).
func TestChildrenHaveLimits(t *testing.T) {
	for _, decode := range []bool{true, false} {
		c := shell(t, decode, "sleep 600")
		defer c.kill()
		for resource, want := range map[int]uint64{
			unix.RLIMIT_CORE: 0, unix.RLIMIT_AS: mostMemory, unix.RLIMIT_NOFILE: mostFiles, unix.RLIMIT_CPU: uint64(mostWork / time.Second),
		} {
			var got unix.Rlimit
			if err := unix.Prlimit(c.cmd.Process.Pid, resource, nil, &got); err != nil || got.Cur != want {
				t.Errorf("decoding %v: limit %d is %d, want %d, %v", decode, resource, got.Cur, want, err)
			}
		}
		var size unix.Rlimit
		if err := unix.Prlimit(c.cmd.Process.Pid, unix.RLIMIT_FSIZE, nil, &size); err != nil || (size.Cur == 0) != decode {
			t.Errorf("decoding %v: files may have %d bytes, %v", decode, size.Cur, err)
		}
	}
}

// A child that only burns time ends at its limit, and whoever started it does not try again.
func TestEndlessWorkIsStopped(t *testing.T) {
	for _, script := range []string{"while :; do :; done", "trap 'exit 255' XCPU; while :; do :; done"} { // FFmpeg does the second
		c := shell(t, true, script)
		c.limits.work = time.Second
		c.limits.restrain(c.cmd.Process.Pid)
		if err := c.wait(); err == nil || errors.Is(err, ErrKilled) || !strings.Contains(err.Error(), "more than 1s of a processor") {
			t.Errorf("%s: %v", script, err)
		}
	}
}

// One that wants more memory than it may have does not get it, in Python's own words here.
func TestMemoryIsLimited(t *testing.T) {
	c := shell(t, true, "sleep 0.2; exec /usr/bin/python3 -c 'bytearray(5 << 30)'")
	if err := c.wait(); err == nil || !strings.Contains(err.Error(), "MemoryError") {
		t.Errorf("%v", err)
	}
}

// Silence packs so small that a few megabytes would decode for ever: reading stops where no recording goes on.
func TestTooLongIsRefused(t *testing.T) {
	t.Parallel()
	box, path := withFFmpeg(t), filepath.Join(t.TempDir(), "silence.ogg")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "anullsrc=r=8000:cl=mono", "-t", "4000", "-c:a", "libvorbis", path)
	r := open(t, box, path).(*ffReader)
	r.longest = 3600
	n, err := drain(r, 4096)
	var format *FormatError
	if !errors.As(err, &format) || !strings.Contains(err.Error(), path+": ") || !strings.Contains(err.Error(), "more than 1 hours") {
		t.Errorf("%v", err)
	}
	if n := n.Frames(); n > 3600*8000 {
		t.Errorf("%d frames were delivered", n)
	}
	if r.child.cmd.ProcessState == nil {
		t.Error("the decoder still runs")
	}
}
