//go:build !race

package level

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"io"
	"maps"
	"net"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

const (
	hostileLimit = 60 * time.Second // for one file; each takes well under one on its own
	hostileHeap  = 96 << 20         // bytes of Go's heap above what it was before
	hostileChild = 600 << 10        // KiB that any FFmpeg may have had in memory
)

// Every damaged or hostile file goes through probing, measuring and levelling. Each ends as done, held or failed with a
// reason, in time and in bounded memory; the file stays as it was, and nothing but the file is read or asked.
func TestHostileFiles(t *testing.T) {
	listener, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer listener.Close()
	go func() {
		for {
			c, err := listener.Accept()
			if err != nil {
				return
			}
			t.Errorf("somebody asked the network: %v", c.RemoteAddr())
			c.Close()
		}
	}()
	files := whole(t)
	away := filepath.Join(t.TempDir(), "away.wav")
	ffmpeg(t, nil, "-f", "lavfi", "-i", "sine=997:d=2", away)
	corpus := damaged(files)
	maps.Copy(corpus, lies(files, away, "http://"+listener.Addr().String()+"/away.wav"))
	for lie, file := range map[string]string{"elsewhere.m4a": "aac.m4a", "elsewhere.mov": "a.mov"} {
		if bytes.Equal(corpus[lie], files[file]) {
			t.Errorf("%s leads nowhere else", lie)
		}
	}
	if len(corpus) < 200 {
		t.Fatalf("only %d files", len(corpus))
	}
	e, states, shelf := &Engine{Media: media.Find()}, make(chan State, len(corpus)), t.TempDir()
	sound := analysed(t, e, away).AudioHash
	runtime.GC()
	var before runtime.MemStats
	runtime.ReadMemStats(&before)
	t.Run("files", func(t *testing.T) {
		for _, name := range slices.Sorted(maps.Keys(corpus)) {
			t.Run(name, func(t *testing.T) {
				t.Parallel()
				path := filepath.Join(shelf, strings.ReplaceAll(name, "/", "-"))
				save(t, path, corpus[name])
				defer os.Remove(path)
				states <- survives(t, e, path, sound)
			})
		}
	})
	close(states)
	ends := map[State]int{}
	for s := range states {
		ends[s]++
	}
	t.Logf("%d files: %v", len(corpus), ends)
	for _, s := range []State{Done, Held, Failed} {
		if ends[s] < 10 {
			t.Errorf("only %d of %d files ended %s: the corpus is not what it is meant to be", ends[s], len(corpus), s)
		}
	}
	var after runtime.MemStats
	runtime.ReadMemStats(&after)
	if grown := int64(after.HeapSys) - int64(before.HeapSys); grown > hostileHeap {
		t.Errorf("Go's heap grew by %d MiB", grown>>20)
	}
	var children syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_CHILDREN, &children); err != nil || children.Maxrss > hostileChild {
		t.Errorf("an FFmpeg had %d MiB in memory (%v)", children.Maxrss>>10, err)
	}
}

// survives takes a file through the engine and returns how it ended. away is the hash of a sound that is not in it.
func survives(t *testing.T, e *Engine, path, away string) State {
	ctx, cancel := context.WithTimeout(t.Context(), hostileLimit)
	defer cancel()
	was := sha256.Sum256(load(t, path))

	probe(t, ctx, e, path)
	a, err := e.Analyse(ctx, path, Options{})
	switch {
	case ctx.Err() != nil:
		t.Fatalf("measuring did not end within %v", hostileLimit)
	case err != nil:
		names(t, err, path)
	case a.AudioHash == away:
		t.Error("what was measured is a file outside of the shelf")
	}
	scratch := path + ".scratch"
	o, err := e.Level(ctx, path, Task{Profile: named(t, "rotation")}, scratch)
	if ctx.Err() != nil {
		t.Fatalf("levelling did not end within %v", hostileLimit)
	}
	if err != nil {
		t.Fatalf("a file is no reason to try again: %v", err)
	}
	_, there := os.Stat(scratch)
	switch v := o.Verdict; v.State {
	case Done:
		if there != nil || o.After == nil {
			t.Errorf("done, but there is no copy: %v", there)
		}
	case Held:
		if there != nil || o.After == nil || v.Reason == "" || len(v.Doubts) == 0 {
			t.Errorf("held: %+v, %v", v, there)
		}
	case Failed:
		if !errors.Is(there, os.ErrNotExist) || v.Reason == "" || strings.Contains(v.Reason, "panic") {
			t.Errorf("failed: %+v, %v", v, there)
		}
	default:
		t.Errorf("ended %q", v.State)
	}
	if sha256.Sum256(load(t, path)) != was {
		t.Error("the file was changed")
	}
	os.Remove(scratch)
	return o.Verdict.State
}

// probe opens a file and reads no more than a block of it.
func probe(t *testing.T, ctx context.Context, e *Engine, path string) {
	r, err := e.Media.Open(ctx, path)
	if err != nil {
		names(t, err, path)
		return
	}
	defer r.Close()
	if f := r.Format(); f.Rate <= 0 || f.Layout.Channels <= 0 {
		t.Errorf("opened with %+v", f)
	}
	_, err = r.ReadBlock(audio.NewBlock(r.Format().Layout.Channels, audio.BlockFrames))
	if err != nil && err != io.EOF {
		names(t, err, path)
	}
}

// names checks that an error names the file and says more than that.
func names(t *testing.T, err error, path string) {
	if rest, ok := strings.CutPrefix(err.Error(), path+": "); !ok || len(rest) < 10 {
		t.Errorf("the error does not name the file and the reason: %v", err)
	}
}

// What is not a file at all ends at once, too: nobody waits for a pipe that nothing is written to.
func TestHostilePlaces(t *testing.T) {
	dir := t.TempDir()
	pipe, folder, nowhere := filepath.Join(dir, "pipe.wav"), filepath.Join(dir, "folder.wav"), filepath.Join(dir, "link.wav")
	for _, err := range []error{syscall.Mkfifo(pipe, 0o600), os.Mkdir(folder, 0o700), os.Symlink(filepath.Join(dir, "gone.wav"), nowhere)} {
		if err != nil {
			t.Fatal(err)
		}
	}
	e := &Engine{Media: media.Find()}
	for _, path := range []string{pipe, folder, nowhere, "/dev/zero", "/proc/self/mem", dir + "/" + strings.Repeat("x", 300) + ".wav"} {
		ctx, cancel := context.WithTimeout(t.Context(), 10*time.Second)
		o, err := e.Level(ctx, path, Task{Profile: named(t, "rotation")}, filepath.Join(dir, "scratch"))
		if err != nil || o.Verdict.State != Failed || o.Verdict.Reason == "" || ctx.Err() != nil {
			t.Errorf("%s: %+v, %v", path, o.Verdict, err)
		}
		cancel()
	}
}

func save(t *testing.T, path string, b []byte) {
	t.Helper()
	if err := os.WriteFile(path, b, 0o600); err != nil {
		t.Fatal(err)
	}
}

func load(t *testing.T, path string) []byte {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func analysed(t *testing.T, e *Engine, path string) *Analysis {
	t.Helper()
	a, err := e.Analyse(t.Context(), path, Options{})
	if err != nil {
		t.Fatal(err)
	}
	return a
}
