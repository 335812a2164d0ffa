package media

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"strings"
	"sync"
	"syscall"
	"time"
)

const (
	stallLimit = 60 * time.Second // a child that moves nothing for so long has hung
	keepStderr = 4 << 10          // of a child's complaints; a damaged hour of MP3 makes megabytes
)

// child is a running FFmpeg with one pipe to us: its output when it decodes, its input when it encodes.
// It dies with the context, on kill, at its limits, or by itself; wait reaps it in every case.
type child struct {
	cmd     *exec.Cmd
	pipe    *os.File // our end
	stderr  headBuffer
	stall   time.Duration
	limits  limits
	stopped func() error
	hung    error // why it was ended from here
	waited  sync.Once
	err     error
}

// startChild runs a tool. Files are its descriptors 3, 4, … and stay ours to close. If decode is set the
// pipe is its standard output, else its standard input.
func startChild(ctx context.Context, decode bool, files []*os.File, tool string, args ...string) (*child, error) {
	c := &child{cmd: exec.CommandContext(ctx, tool, args...), stall: stallLimit, stopped: stopped(ctx)}
	c.limits = limits{work: mostWork, writes: !decode}
	r, w, err := os.Pipe()
	if err != nil {
		return nil, err
	}
	widen(w)
	theirs := r
	if decode {
		c.pipe, theirs = r, w
		c.cmd.Stdout = w
	} else {
		c.pipe = w
		c.cmd.Stdin = r
	}
	c.cmd.Stderr = &c.stderr
	c.cmd.ExtraFiles = files
	c.cmd.Env = childEnv()
	c.cmd.Dir = "/" // a relative name in a hostile file means nothing there
	c.cmd.WaitDelay = 5 * time.Second
	err = c.cmd.Start()
	theirs.Close()
	if err != nil {
		c.pipe.Close()
		return nil, fmt.Errorf("FFmpeg cannot be started: %w", err)
	}
	c.limits.restrain(c.cmd.Process.Pid)
	return c, nil
}

// pipeBytes is how much a pipe holds: so much that neither side has to wait for the other at every write.
const pipeBytes = 1 << 20

// widen makes a pipe larger where the system has that and allows it (Linux, fcntl(2)).
func widen(pipe *os.File) {
	const setPipeSize = 1031 // F_SETPIPE_SZ
	if raw, err := pipe.SyscallConn(); err == nil {
		raw.Control(func(fd uintptr) { syscall.Syscall(syscall.SYS_FCNTL, fd, setPipeSize, pipeBytes) })
	}
}

// childEnv is the environment of FFmpeg: ours, minus what makes it write reports into files or colours
// into messages. Debian's FFmpeg is linked to a library of linear algebra that starts a thread for every core
// although nothing here uses it; that is a tenth of the cost of starting FFmpeg.
func childEnv() []string {
	var env []string
	for _, e := range os.Environ() {
		if !strings.HasPrefix(e, "FFREPORT=") && !strings.HasPrefix(e, "AV_LOG_FORCE_") {
			env = append(env, e)
		}
	}
	return append(env, "AV_LOG_FORCE_NOCOLOR=1", "OPENBLAS_NUM_THREADS=1")
}

// Read takes what a decoding child has made. A child that makes nothing for the stall limit is an error.
func (c *child) Read(p []byte) (int, error) {
	if err := c.pipe.SetReadDeadline(time.Now().Add(c.stall)); err != nil {
		return 0, err
	}
	n, err := c.pipe.Read(p)
	return n, c.explain(err)
}

// Write gives an encoding child its input. A child that takes nothing for the stall limit is an error.
func (c *child) Write(p []byte) (int, error) {
	if err := c.pipe.SetWriteDeadline(time.Now().Add(c.stall)); err != nil {
		return 0, err
	}
	n, err := c.pipe.Write(p)
	return n, c.explain(err)
}

func (c *child) explain(err error) error {
	if errors.Is(err, os.ErrDeadlineExceeded) {
		c.hung = fmt.Errorf("FFmpeg stood still for %v and was stopped", c.stall)
		c.kill()
		return c.hung
	}
	return err
}

// wait closes our end of the pipe and waits for the child to end. It returns nil if the child was
// content with itself, the context's cause if that ended it, else an error with the child's own words.
func (c *child) wait() error {
	c.waited.Do(func() {
		c.pipe.Close()
		err := c.cmd.Wait()
		switch cause := c.stopped(); {
		case err == nil:
		case cause != nil:
			c.err = cause
		case c.hung != nil:
			c.err = c.hung
		case overworked(c.cmd.ProcessState, c.limits.work): // which is no reason to try again
			c.err = fmt.Errorf("FFmpeg was stopped: it took more than %v of a processor", c.limits.work)
		case killed(c.cmd.ProcessState):
			c.err = ErrKilled
		case c.stderr.Len() > 0:
			c.err = fmt.Errorf("FFmpeg says: %s", c.stderr.text())
			if strings.Contains(c.stderr.text(), "Cannot allocate memory") {
				c.err = fmt.Errorf("%w (it may take %d GiB)", c.err, mostMemory>>30)
			}
		default:
			c.err = fmt.Errorf("FFmpeg ended early: %w", err)
		}
	})
	return c.err
}

// overworked tells whether a child ended at its limit of processor time. FFmpeg catches the signal; the kernel's two
// clocks, one of which counts ticks, differ by a tenth or so.
func overworked(state *os.ProcessState, limit time.Duration) bool {
	return state.UserTime()+state.SystemTime() >= limit-limit/4
}

// killed tells the signals that come from a person or the system from those of a crash, which the file
// may have caused. FFmpeg catches SIGTERM and then exits with 255.
func killed(state *os.ProcessState) bool {
	s, ok := state.Sys().(syscall.WaitStatus)
	return ok && (s.Signaled() && (s.Signal() == syscall.SIGKILL || s.Signal() == syscall.SIGTERM) || s.ExitStatus() == 255)
}

// kill ends the child at once and reaps it.
func (c *child) kill() {
	c.cmd.Process.Kill() // an error means that it has ended already
	c.wait()
}

// headBuffer keeps the beginning of what is written to it and drops the rest. The writer is package
// exec's goroutine; read it only after Wait.
type headBuffer struct{ b []byte }

func (h *headBuffer) Write(p []byte) (int, error) {
	h.b = append(h.b, p[:min(len(p), keepStderr-len(h.b))]...)
	return len(p), nil
}

func (h *headBuffer) Len() int { return len(h.b) }

// text returns the first few different complaints in one line, without the addresses FFmpeg puts before
// them ("[mp3 @ 0x55d0c0]"), the name of the pipe, and repetitions.
func (h *headBuffer) text() string {
	var kept []string
	seen := map[string]bool{}
	for line := range strings.Lines(string(h.b)) {
		line = strings.TrimSpace(line)
		if strings.HasPrefix(line, "[") {
			if _, rest, ok := strings.Cut(line, "] "); ok {
				line = rest
			}
		}
		if before, rest, ok := strings.Cut(line, inputFD); ok && (before == "" || strings.HasPrefix(before, "subfile,")) {
			line = strings.TrimPrefix(rest, ": ")
		}
		line, _, _ = strings.Cut(line, " at PTS ") // a count that means nothing to a person
		if line == "" || seen[line] || strings.HasPrefix(line, "Last message repeated") {
			continue
		}
		seen[line] = true
		if len(kept) == 3 {
			kept = append(kept, "…")
			break
		}
		kept = append(kept, line)
	}
	return strings.Join(kept, "; ")
}
