package faults

import (
	"encoding/binary"
	"fmt"
	"math"
	"os/exec"
	"path/filepath"
	"strconv"
	"sync"
	"testing"

	"evenshelf/engine/audio"
)

// recording is a real recording that comes with a Debian package.
type recording struct {
	path  string
	rate  int
	sound audio.Block
}

// recordings returns the first half minute of the music of the package asc-music and the speech of
// pocketsphinx-testdata. Tests must not change them.
func recordings(t testing.TB) []recording {
	t.Helper()
	all, err := decoded()
	if err != nil {
		t.Fatal(err)
	}
	return all
}

var decoded = sync.OnceValues(func() (all []recording, err error) {
	for _, set := range []struct {
		pattern        string
		rate, channels int
	}{
		{"/usr/share/games/asc/music/*.mp3", 44100, 2},
		{"/usr/share/pocketsphinx/test/data/*/*.wav", 16000, 1},
	} {
		paths, err := filepath.Glob(set.pattern)
		if err != nil || len(paths) == 0 {
			return nil, fmt.Errorf("no recordings at %s: the tests need the Debian packages asc-music and pocketsphinx-testdata", set.pattern)
		}
		for _, path := range paths {
			sound, err := decode(path, set.rate, set.channels)
			if err != nil {
				return nil, err
			}
			all = append(all, recording{path, set.rate, sound})
		}
	}
	return all, nil
})

// decode reads the first half minute of a file through FFmpeg.
func decode(path string, rate, channels int) (audio.Block, error) {
	out, err := exec.Command("ffmpeg", "-v", "error", "-t", "30", "-i", path, "-map", "0:a:0", "-f", "f32le",
		"-ar", strconv.Itoa(rate), "-ac", strconv.Itoa(channels), "-").Output()
	if err != nil {
		return nil, fmt.Errorf("ffmpeg cannot decode %s (is it installed?): %w", path, err)
	}
	b := audio.NewBlock(channels, len(out)/4/channels)
	for i := range b.Frames() * channels {
		b[i%channels][i/channels] = math.Float32frombits(binary.LittleEndian.Uint32(out[4*i:]))
	}
	return b, nil
}
