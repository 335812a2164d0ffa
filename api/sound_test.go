package api

import (
	"context"
	"net"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"evenshelf/engine/level"
	"evenshelf/store"
)

func TestSoundInRanges(t *testing.T) {
	h := open(t, nil)
	path := at("/recordings/%d/sound", h.recording(quietSong).ID)
	r := h.get(path)
	if r.status != 200 || string(r.body) != "0123456789" {
		t.Fatalf("%d %q", r.status, r.body)
	}
	for name, want := range map[string]string{"Content-Type": "audio/wav", "Content-Disposition": "inline", "X-Content-Type-Options": "nosniff",
		"Accept-Ranges": "bytes", "Content-Length": "10"} {
		if got := r.header.Get(name); got != want {
			t.Errorf("%s: %q, want %q", name, got, want)
		}
	}
	part := h.get(path, "Range", "bytes=3-5", "If-Range", r.header.Get("ETag"))
	if part.status != 206 || string(part.body) != "345" || part.header.Get("Content-Range") != "bytes 3-5/10" {
		t.Errorf("range: %d %q %v", part.status, part.body, part.header)
	}
	if r := h.get(path, "Range", "bytes=50-"); r.status != 416 {
		t.Errorf("range past the end: %d", r.status)
	}
	if r := h.get(path, "If-None-Match", r.header.Get("ETag")); r.status != 304 {
		t.Errorf("known file: %d", r.status)
	}
	if r := h.ask("HEAD", path, ""); r.status != 200 || r.header.Get("Content-Length") != "10" {
		t.Errorf("HEAD: %d %v", r.status, r.header)
	}
	h.get(path+"?version=middle").wantProblem(t, kindBadRequest, "version")
	h.get(path+"?version=after").wantProblem(t, kindNotFound, "no copy")
	if err := os.Remove(filepath.Join(h.shelf.Root, quietSong)); err != nil {
		t.Fatal(err)
	}
	h.get(path).wantProblem(t, kindNotFound, "no longer there")
}

func TestResultIsTheLatestCopy(t *testing.T) {
	h := open(t, nil)
	_, jobs := h.start()
	for _, j := range jobs {
		h.get(at("/recordings/%d/result", j.RecordingID)).wantProblem(t, kindNotFound, "no copy")
		h.finish(j, level.Held)
	}
	for path, disposition := range map[string]string{
		quietSong: `attachment; filename="Quiet Song.wav"`,
		// RFC 6266 with RFC 8187: percent-encoded UTF-8, as Python's urllib.parse.quote("Лодка.flac") gives it.
		loudSong: `attachment; filename*=utf-8''%D0%9B%D0%BE%D0%B4%D0%BA%D0%B0.flac`,
	} {
		id := h.recording(path).ID
		r := h.get(at("/recordings/%d/result", id))
		if r.status != 200 || string(r.body) != "levelled "+path {
			t.Errorf("%s: %d %s", path, r.status, r.body)
		}
		if got := r.header.Get("Content-Disposition"); got != disposition {
			t.Errorf("disposition %q, want %q", got, disposition)
		}
		if after := h.get(at("/recordings/%d/sound?version=after", id)); string(after.body) != string(r.body) || after.header.Get("Content-Disposition") != "inline" {
			t.Errorf("sound after: %s", after.body)
		}
	}
	if got, ok := latestDelivery([]store.Job{{ID: 3}, {ID: 2, Output: "b"}, {ID: 1, Output: "a"}}); !ok || got.Output != "b" {
		t.Errorf("latest delivery %+v", got)
	}
}

// tampered is a store whose rows name files they should not: one copied recording, or one that was replaced.
type tampered struct {
	Store
	path     *string
	delivery *store.Delivery
}

func (s tampered) Recording(ctx context.Context, id int64) (store.Recording, error) {
	r, err := s.Store.Recording(ctx, id)
	r.Path = *s.path
	return r, err
}

func (s tampered) RecordingJobs(context.Context, int64) ([]store.Job, error) {
	return []store.Job{{ID: 1, State: store.Done, Output: *s.path}}, nil
}

func (s tampered) Run(context.Context, int64) (store.Run, error) {
	return store.Run{Delivery: *s.delivery}, nil
}

func (s tampered) Readings(context.Context, int64) (before, after *store.Reading, err error) {
	return &store.Reading{JobID: 1}, &store.Reading{JobID: 1}, nil
}

func (s tampered) Original(context.Context, int64) (store.Original, error) {
	if *s.delivery != store.Replace {
		return store.Original{}, store.ErrNotFound
	}
	return store.Original{JobID: 1, Stored: *s.path}, nil
}

func TestNoWayOutOfTheShelf(t *testing.T) {
	var path string
	var delivery store.Delivery
	h := open(t, func(o *Options) { o.Store = tampered{o.Store, &path, &delivery} })
	secret := filepath.Join(filepath.Dir(h.shelf.Root), "secret.wav")
	h.write(filepath.Dir(secret), "secret.wav", "a secret")
	for _, dir := range []string{h.shelf.Root, h.shelf.Copies, h.shelf.Attic()} {
		h.write(dir, "inside.wav", "fine "+dir)
		for name, target := range map[string]string{"link.wav": secret, "up.wav": "../secret.wav", "dir": filepath.Dir(secret), "loop.wav": "loop.wav",
			"good.wav": "inside.wav", "device.wav": "/dev/zero"} {
			if err := os.Symlink(target, filepath.Join(dir, name)); err != nil {
				t.Fatal(err)
			}
		}
		if err := syscall.Mkfifo(filepath.Join(dir, "pipe.wav"), 0o644); err != nil {
			t.Fatal(err)
		}
		socket, err := net.Listen("unix", filepath.Join(dir, "s.wav"))
		if err != nil {
			t.Fatal(err)
		}
		defer socket.Close()
	}
	for _, c := range []struct {
		delivery store.Delivery
		address  string
		dir      string
	}{
		{store.Copy, at("/recordings/1/sound"), h.shelf.Root},
		{store.Copy, at("/recordings/1/sound?version=after"), h.shelf.Copies},
		{store.Copy, at("/recordings/1/result"), h.shelf.Copies},
		{store.Replace, at("/recordings/1/sound"), h.shelf.Attic()},
		{store.Replace, at("/recordings/1/sound?version=after"), h.shelf.Root},
		{store.Replace, at("/recordings/1/result"), h.shelf.Root},
	} {
		address := c.address
		delivery = c.delivery
		for _, path = range []string{"inside.wav", "good.wav", "./inside.wav"} {
			if r := h.get(address); r.status != 200 || string(r.body) != "fine "+c.dir {
				t.Errorf("%s for %q: %d %s", address, path, r.status, r.body)
			}
		}
		for _, path = range []string{secret, "../secret.wav", "evening/../../secret.wav", "link.wav", "up.wav", "dir/secret.wav", "loop.wav", "device.wav",
			"/etc/hostname", "inside.wav\x00", "\x00", ".", "evening", "pipe.wav", "s.wav", "..", "no-such.wav", "inside.wav/x", strings.Repeat("x", 5000)} {
			start := time.Now()
			r := h.get(address)
			r.wantProblem(t, kindNotFound, "cannot be opened")
			if strings.Contains(string(r.body), "secret") || strings.Contains(string(r.body), filepath.Dir(secret)) {
				t.Errorf("%q: the reply tells paths: %s", path, r.body)
			}
			if time.Since(start) > 5*time.Second {
				t.Errorf("%q: hung", path)
			}
		}
	}
}

func TestSoundTypes(t *testing.T) {
	for name, want := range map[string]string{"a.WAV": "audio/wav", "a.b.mp3": "audio/mpeg", "a.opus": "audio/ogg", "a.m4a": "audio/mp4",
		"a.html": "application/octet-stream", "a.svg": "application/octet-stream", "a": "application/octet-stream"} {
		if got := soundType(name); got != want {
			t.Errorf("%s: %s, want %s", name, got, want)
		}
	}
}
