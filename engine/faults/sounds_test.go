package faults

import (
	"bytes"
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
// pocketsphinx-testdata, at their own rates. Tests must not change them.
func recordings(t testing.TB) []recording {
	t.Helper()
	all, err := decoded()
	if err != nil {
		t.Fatal(err)
	}
	return all
}

const (
	musicFiles  = "/usr/share/games/asc/music/*.mp3"
	speechFiles = "/usr/share/pocketsphinx/test/data/*/*.wav"
	musicRate   = 22050
	speechRate  = 16000
)

var decoded = sync.OnceValues(func() (all []recording, err error) {
	for _, set := range []struct {
		pattern        string
		rate, channels int
	}{{musicFiles, musicRate, 2}, {speechFiles, speechRate, 1}} {
		paths, err := filepath.Glob(set.pattern)
		if err != nil || len(paths) == 0 {
			return nil, fmt.Errorf("no recordings at %s: the tests need the Debian packages asc-music and pocketsphinx-testdata", set.pattern)
		}
		for _, path := range paths {
			sound, err := decode(path, set.rate, set.channels, "-t", "30")
			if err != nil {
				return nil, err
			}
			all = append(all, recording{path, set.rate, sound})
		}
	}
	return all, nil
})

// decode reads a file through FFmpeg, which is told how much of it, or how.
func decode(path string, rate, channels int, how ...string) (audio.Block, error) {
	return ffmpeg(nil, rate, channels, append(how, "-i", path)...)
}

// ffmpeg returns what FFmpeg makes of its input, at a rate.
func ffmpeg(input []byte, rate, channels int, args ...string) (audio.Block, error) {
	args = append(append([]string{"-v", "error"}, args...), "-map", "0:a:0", "-f", "f32le",
		"-ar", strconv.Itoa(rate), "-ac", strconv.Itoa(channels), "-")
	command := exec.Command("ffmpeg", args...)
	command.Stdin = bytes.NewReader(input)
	out, err := command.Output()
	if err != nil {
		return nil, fmt.Errorf("ffmpeg %v (is it installed?): %w", args, err)
	}
	b := audio.NewBlock(channels, len(out)/4/channels)
	for i := range b.Frames() * channels {
		b[i%channels][i/channels] = math.Float32frombits(binary.LittleEndian.Uint32(out[4*i:]))
	}
	return b, nil
}
