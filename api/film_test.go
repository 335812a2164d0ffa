package api

import (
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/level"
	"evenshelf/engine/media"
	"evenshelf/store"
)

// filmStore says of all readings that they are of a sound track of a film, half a second of 48 kHz.
type filmStore struct {
	Store
	before, after int
}

func (s filmStore) Readings(ctx context.Context, id int64) (before, after *store.Reading, err error) {
	before, after, err = s.Store.Readings(ctx, id)
	for r, track := range map[*store.Reading]int{before: s.before, after: s.after} {
		if r != nil {
			r.Stored, r.Frames = &level.Stored{Codec: "flac", Film: true, Track: track, Tracks: 3}, 24000
		}
	}
	return before, after, err
}

// Of a film the tracks are played that were read, before and after, not what it plays by itself: in the film here the
// nth track is n·8192 throughout, as FFmpeg's aevalsrc makes it. The result is the film.
func TestTracksOfAFilm(t *testing.T) {
	film := filepath.Join(t.TempDir(), "film.mkv")
	args := []string{"-v", "error", "-f", "lavfi", "-i", "testsrc2=s=64x64:r=25:d=0.5"}
	for _, level := range []string{"0.25", "0.5", "0.75"} {
		args = append(args, "-f", "lavfi", "-i", "aevalsrc="+level+":s=48000:d=0.5")
	}
	args = append(args, "-map", "0", "-map", "1", "-map", "2", "-map", "3", "-c:v", "mpeg4", "-c:a", "flac", "-disposition:a:0", "default", film)
	if out, err := exec.Command("ffmpeg", args...).CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	content, err := os.ReadFile(film)
	if err != nil {
		t.Fatal(err)
	}
	h := open(t, func(o *Options) { o.Store, o.Media = filmStore{o.Store, 2, 3}, media.Find() })
	_, jobs := h.start()
	for _, j := range jobs {
		h.finish(j, level.Held)
	}
	h.write(h.shelf.Root, quietSong, string(content))
	h.write(h.shelf.Copies, quietSong, string(content))
	id := h.recording(quietSong).ID
	tags := map[string]bool{}
	for version, want := range map[string]int{"before": 2 * 8192, "after": 3 * 8192} {
		path := at("/recordings/%d/sound?version=%s", id, version)
		r := h.get(path)
		if r.status != 200 || len(r.body) != 44+2*24000 || string(r.body[:4]) != "RIFF" || r.header.Get("Content-Type") != "audio/wav" || r.header.Get("Accept-Ranges") != "bytes" {
			t.Fatalf("%s: %d, %d bytes, %v", version, r.status, len(r.body), r.header)
		}
		tags[r.header.Get("ETag")] = true
		part := h.get(path, "Range", "bytes=24044-24143", "If-Range", r.header.Get("ETag"))
		if part.status != 206 || len(part.body) != 100 || part.header.Get("Content-Range") != "bytes 24044-24143/48044" {
			t.Fatalf("%s: %d, %d bytes, %v", version, part.status, len(part.body), part.header)
		}
		for what, b := range map[string][]byte{"whole": r.body[44:], "range": part.body} {
			for i := 0; i < len(b); i += 2 {
				if got := int(int16(uint16(b[i]) | uint16(b[i+1])<<8)); got < want-2 || got > want+2 { // dither
					t.Fatalf("%s, %s: sample %d is %d, want %d", version, what, i/2, got, want)
				}
			}
		}
		if r := h.get(path, "Range", "bytes=0-1,100-101"); r.status != 200 || len(r.body) != 48044 {
			t.Errorf("several ranges: %d, %d bytes", r.status, len(r.body))
		}
		if r := h.ask("HEAD", path, ""); r.status != 200 || r.header.Get("Content-Length") != "48044" {
			t.Errorf("HEAD: %d %v", r.status, r.header)
		}
		if r := h.get(path, "Range", "bytes=48044-"); r.status != 416 {
			t.Errorf("past the end: %d", r.status)
		}
	}
	if len(tags) != 2 {
		t.Error("two tracks of equal files have the same tag")
	}
	if r := h.get(at("/recordings/%d/result", id)); string(r.body) != string(content) {
		t.Error("the result is not the film")
	}
	h.api.heard.Store(maxHeard)
	h.get(at("/recordings/%d/sound", id)).wantProblem(t, kindUnavailable, "already")
	h.api.heard.Store(0)
	h.write(h.shelf.Root, quietSong, strings.Repeat("no film ", 100))
	h.get(at("/recordings/%d/sound", id)).wantProblem(t, kindNotFound, "cannot be decoded")
	waitFor(t, "all tracks done", func() bool { return h.api.heard.Load() == 0 })
}
