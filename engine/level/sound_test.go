package level

import (
	"context"
	"io"
	"os"
	"path/filepath"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// What is kept of a recording is, bit for bit, what a decoder gives, in blocks of any length, and leaves no file.
func TestKeptSoundIsWhatWasDecoded(t *testing.T) {
	dir, tmp := t.TempDir(), t.TempDir()
	t.Setenv("TMPDIR", tmp)
	e, ctx := &Engine{Media: media.Find()}, context.Background()
	for _, source := range []string{excerpt(t, dir, "x.flac", 0.5, "-sample_fmt", "s16"), excerpt(t, dir, "y.flac", 0.5, "-sample_fmt", "s32"), excerpt(t, dir, "x.mp3", 4)} {
		_, sound, err := e.analyse(ctx, source, Options{LoudnessOnly: true}, true)
		if err != nil || !sound.whole() {
			t.Fatal(err, "nothing was kept")
		}
		if left, _ := os.ReadDir(tmp); len(left) > 0 {
			t.Errorf("%v has a name", left)
		}
		src, err := e.Media.Open(ctx, source)
		if err != nil {
			t.Fatal(err)
		}
		kept := sound.source()
		a, b := audio.NewBlock(2, audio.BlockFrames), audio.NewBlock(2, 1000)
		var want, got []float32
		for err = nil; err == nil; {
			var n int
			n, err = src.ReadBlock(a)
			want = append(want, a[1][:n]...)
		}
		for err = nil; err == nil; {
			var n int
			n, err = kept.ReadBlock(b)
			got = append(got, b[1][:n]...)
		}
		if err != io.EOF || len(got) != len(want) {
			t.Fatalf("%s: %d frames of %d, %v", filepath.Base(source), len(got), len(want), err)
		}
		for i := range want {
			if got[i] != want[i] {
				t.Fatalf("%s: frame %d is %v, was %v", filepath.Base(source), i, got[i], want[i])
			}
		}
		src.Close()
		sound.close()
	}
}

// Where there is no room, or too little, the sound is decoded again.
func TestNoRoomForSound(t *testing.T) {
	dir := t.TempDir()
	source := excerpt(t, dir, "x.flac", 0.5)
	e := &Engine{Media: media.Find()}
	whole, err := e.Level(context.Background(), source, Task{Profile: named(t, "talk")}, filepath.Join(dir, "a"))
	if err != nil {
		t.Fatal(err)
	}
	t.Setenv("TMPDIR", filepath.Join(dir, "missing"))
	again, err := e.Level(context.Background(), source, Task{Profile: named(t, "talk")}, filepath.Join(dir, "b"))
	if err != nil || again.After.AudioHash != whole.After.AudioHash {
		t.Errorf("without a folder for it: %v", err)
	}
	sound := &decoded{f: must(os.Create(filepath.Join(dir, "full"))), format: audio.Format{Rate: 8000, Layout: audio.Mono}, room: 3 * 4096}
	for range 2 {
		sound.write(audio.NewBlock(1, 4096/2))
	}
	if sound.whole() {
		t.Error("more was kept than there is room for")
	}
	sound.write(audio.NewBlock(1, 10)) // and nothing happens
}

func must[T any](v T, err error) T {
	if err != nil {
		panic(err)
	}
	return v
}
