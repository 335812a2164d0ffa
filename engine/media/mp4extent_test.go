package media

import (
	"bytes"
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"testing"

	"evenshelf/engine/audio"
)

var oddLengths = []int{1, 2, 1023, 1024, 1025, 2047, 2048, 2049, 4095, 4097, 44099, 44100, 44101}

// What is written in M4A is read back at the same length and place, whatever the length. FFmpeg's ALAC encoder breaks
// down over a last packet of one or two frames in six channels; there are none here.
func TestM4ALengthAndPlace(t *testing.T) {
	t.Parallel()
	check := func(codec string, rate, channels, n int) {
		spec := Spec{Container: "mp4", Codec: codec, Format: audio.Format{Rate: rate, Layout: audio.UsualLayout(channels)}}
		if codec == "alac" {
			spec.BitDepth = 16
		}
		snd, path := programme(channels, n, 16, 0.5), filepath.Join(t.TempDir(), "a.m4a")
		write(t, withFFmpeg(t), path, spec, snd)
		got, info := decode(t, withFFmpeg(t), path)
		what := fmt.Sprintf("%s, %d Hz, %d channels, %d frames", codec, rate, channels, n)
		if got.Frames() != n || info.Frames != int64(n) || info.Format.Rate != rate {
			t.Errorf("%s: %d frames, promised %d, at %d Hz", what, got.Frames(), info.Frames, info.Format.Rate)
		} else if codec == "alac" {
			sameSound(t, got, snd)
		} else if d := lag(snd[0], got[0]); n > 4000 && d != 0 {
			t.Errorf("%s: %d frames late", what, d)
		}
	}
	for _, codec := range []string{"aac", "alac"} {
		for i, rate := range []int{8000, 11025, 16000, 22050, 32000, 48000, 88200, 96000} {
			check(codec, rate, 1+i%2, 30_011)
		}
		for i, n := range oddLengths {
			check(codec, 44100, 1+i%2, n)
		}
		check(codec, 48000, 6, 44_099)
	}
}

// An edit list that counts in milliseconds, as FFmpeg's and most others do, loses nothing: the last packet says how
// long it is. The same where it counts in the 1/600 s of QuickTime, or in frames.
func TestM4AEditListInMilliseconds(t *testing.T) {
	t.Parallel()
	box, dir := withFFmpeg(t), t.TempDir()
	for _, codec := range []string{"aac", "alac"} {
		for _, scale := range []string{"1000", "600", "90000"} {
			for _, n := range []int{1, 1025, 2047, 44_101} {
				snd := programme(1, n, 16, 0.5)
				path := filepath.Join(dir, "a.m4a")
				run(t, "ffmpeg", "-v", "error", "-y", "-i", writeWAV(t, snd, 44100), "-c:a", codec, "-movie_timescale", scale, path)
				got, info := decode(t, box, path)
				if got.Frames() != n || info.Frames != int64(n) {
					t.Errorf("%s, 1/%s s, %d frames: %d, promised %d", codec, scale, n, got.Frames(), info.Frames)
				}
				if d := lag(snd[0], got[0]); codec == "aac" && n > 4000 && d != 0 {
					t.Errorf("%s, 1/%s s, %d frames: %d late", codec, scale, n, d)
				}
			}
		}
	}
}

// hideBox makes every box of a kind in a file one of another kind, so that nobody reads it.
func hideBox(file []byte, kind string) []byte {
	return bytes.ReplaceAll(file, []byte(kind), []byte("skip"))
}

// Without an edit list the note of players says where the sound is; without that too, all packets are sound.
func TestM4AWithoutEditList(t *testing.T) {
	t.Parallel()
	const n = 50_001
	dir := t.TempDir()
	source, tagged := filepath.Join(dir, "a.m4a"), filepath.Join(dir, "b.m4a")
	snd := programme(1, n, 16, 0.5)
	run(t, "ffmpeg", "-v", "error", "-i", writeWAV(t, snd, 44100), "-c:a", "aac", source)
	bare := hideBox(load(t, source), "edts")
	save := func(b []byte) string { return saveAs(t, tagged, b) }

	got, info := decode(t, withFFmpeg(t), save(bare))
	if got.Frames() != n+1024 && got.Frames() != 50*1024 || lag(snd[0], got[0]) != 1024 {
		t.Errorf("neither: %d frames, promised %d, %d late", got.Frames(), info.Frames, lag(snd[0], got[0]))
	}
	save(bare)
	run(t, "/usr/bin/python3", "-c", `
import sys
from mutagen.mp4 import MP4
f = MP4(sys.argv[1])
f["----:org.example:testSMPB"] = (" 00000000 00000400 %08X %016X 00000000 00000000" % (50*1024-1024-50001, 50001)).encode()
f.save()`, tagged)
	got, info = decode(t, withFFmpeg(t), tagged)
	if got.Frames() != n || info.Frames != n || lag(snd[0], got[0]) != 0 {
		t.Errorf("with a note: %d frames, promised %d, %d late", got.Frames(), info.Frames, lag(snd[0], got[0]))
	}
}

// Cut by a person with an edit list: what was cut off at the front stays off, to the frame.
func TestM4ATrimmedByEditList(t *testing.T) {
	t.Parallel()
	snd := programme(1, 50_001, 16, 0.5)
	path := filepath.Join(t.TempDir(), "a.m4a")
	run(t, "ffmpeg", "-v", "error", "-i", writeWAV(t, snd, 44100), "-c:a", "aac", "-movie_timescale", "44100", path)
	file := load(t, path)
	at := bytes.Index(file, []byte("elst")) + 12
	for _, test := range []struct{ start, length, frames int }{{1024 + 3001, 50_001 - 3001, 50_001 - 3001}, {1024 + 777, 48_000, 48_000}} {
		binary.BigEndian.PutUint32(file[at:], uint32(test.length))
		binary.BigEndian.PutUint32(file[at+4:], uint32(test.start))
		got, info := decode(t, withFFmpeg(t), saveAs(t, path, file))
		if d := lag(snd[0][test.start-1024:], got[0]); got.Frames() != test.frames || info.Frames != int64(test.frames) || d != 0 {
			t.Errorf("%+v: %d frames, promised %d, %d late", test, got.Frames(), info.Frames, d)
		}
	}
}

// A file whose end is missing is torn, as before.
func TestM4ATornInFront(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a.m4a")
	run(t, "ffmpeg", "-v", "error", "-i", writeWAV(t, programme(1, 200_000, 16, 0.5), 44100), "-c:a", "aac", "-movflags", "+faststart", path)
	file := load(t, path)
	r, err := withFFmpeg(t).Open(context.Background(), saveAs(t, path, file[:len(file)*3/4]))
	if err == nil {
		_, err = drain(r, 4096)
		r.Close()
	}
	if !errors.Is(err, io.ErrUnexpectedEOF) {
		t.Errorf("%v", err)
	}
}

// Bare AAC (ADTS) says nothing of its length: its copy in M4A is as long as what it decodes to.
func TestBareAACToM4A(t *testing.T) {
	t.Parallel()
	box, dir := withFFmpeg(t), t.TempDir()
	source, path := filepath.Join(dir, "a.aac"), filepath.Join(dir, "b.m4a")
	for _, n := range []int{1, 1025, 44101} {
		run(t, "ffmpeg", "-v", "error", "-y", "-i", writeWAV(t, programme(2, n, 16, 0.5), 44100), "-c:a", "aac", source)
		all, info := decode(t, box, source)
		spec := box.SpecFor(info, Wish{})
		spec.TagsFrom = source
		write(t, box, path, spec, all)
		got, _ := decode(t, box, path)
		if d := lag(all[0], got[0]); spec.Container != "mp4" || got.Frames() != all.Frames() || n > 4000 && d != 0 {
			t.Errorf("%d frames: %d of %d, %d late", n, got.Frames(), all.Frames(), d)
		}
	}
}
