package media

import (
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// Whatever the bytes are, opening and reading them here, without FFmpeg, ends: with sound of the shape that was
// promised, or with an error that names the file.
func FuzzOpen(f *testing.F) {
	seed := f.TempDir()
	for _, name := range []string{"a.flac", "a.mp3", "a.wav"} {
		path := filepath.Join(seed, name)
		run(f, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "sine=440:d=0.2:r=8000", "-metadata", "title=x", "-fflags", "+bitexact", path)
		f.Add(load(f, path))
	}
	f.Add([]byte("ID3\x03\x00\x00\x00\x00\x00\x0Axxxxxxxxxx\xFF\xFB\x90\x00"))
	f.Add([]byte("fLaC\x80\x00\x00\x22"))
	dir := f.TempDir()
	f.Fuzz(func(t *testing.T, b []byte) {
		file, err := os.CreateTemp(dir, "x")
		if err != nil {
			t.Fatal(err)
		}
		path := file.Name()
		defer os.Remove(path)
		if _, err := file.Write(b); err != nil || file.Close() != nil {
			t.Fatal(err)
		}
		r, err := withoutFFmpeg().Open(t.Context(), path)
		if err != nil {
			if !strings.HasPrefix(err.Error(), path+": ") {
				t.Errorf("the error does not name the file: %v", err)
			}
			return
		}
		defer r.Close()
		format := r.Format()
		if err := checkFormat(format, 0); err != nil {
			t.Fatal(err)
		}
		block, got := audio.NewBlock(format.Layout.Channels, 512), int64(0)
		for got < 1<<20 { // a few bytes of FLAC can hold hours of silence
			n, err := r.ReadBlock(block)
			if n < 0 || n > 512 {
				t.Fatalf("a block of %d frames", n)
			}
			got += int64(n)
			if err != nil {
				if !errors.Is(err, io.EOF) && !strings.HasPrefix(err.Error(), path+": ") {
					t.Errorf("the error does not name the file: %v", err)
				}
				return
			}
		}
	})
}
