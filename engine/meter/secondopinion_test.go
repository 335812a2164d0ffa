package meter

import (
	"bufio"
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// FFmpeg's own meter (filter ebur128) reads real recordings: the music of the Debian package asc-music and
// the speech of pocketsphinx-testdata. It gets them at 48 kHz, the rate it has the printed filters for; this
// one reads them at their own low rate and at 44.1 kHz too. FFmpeg takes true peaks at 192 kHz.
const (
	tolOpinion      = 0.03 // LU
	tolOpinionPeak  = 0.1  // dB
	tolOpinionRange = 0.2  // LU: FFmpeg counts the windows that are not full yet, and percentiles differ by a rank
)

func TestSecondOpinion(t *testing.T) {
	for _, set := range []struct {
		pattern  string
		rates    []int
		channels int
	}{
		{"/usr/share/games/asc/music/*.mp3", []int{22050, 44100}, 2},
		{"/usr/share/pocketsphinx/test/data/*/*.wav", []int{16000}, 1},
	} {
		paths, err := filepath.Glob(set.pattern)
		if err != nil || len(paths) == 0 {
			t.Fatalf("no recordings at %s: this test needs the Debian packages asc-music and pocketsphinx-testdata", set.pattern)
		}
		for _, path := range paths {
			t.Run(filepath.Base(path), func(t *testing.T) {
				t.Parallel()
				opinion := ffmpegReads(t, path)
				for _, rate := range set.rates {
					compare(t, rate, decoded(t, path, rate, set.channels), opinion)
				}
			})
		}
	}
}

// compare measures a recording and holds the reading against FFmpeg's.
func compare(t *testing.T, rate int, b audio.Block, o opinion) {
	m := newMeter(t, rate, audio.UsualLayout(len(b)))
	m.Write(b)
	r, line := m.Finish()
	// FFmpeg takes the range without the silence that Tech 3342 puts after the programme
	lra := loudnessRange(course{rate, m.energies[:wholeSteps(r.Frames, rate)]}.whole(shortTermSteps))
	t.Logf("at %d Hz: integrated %.3f / %.3f, range %.2f / %.2f, true peak %.2f / %.2f",
		rate, r.Integrated, o.integrated, lra, o.lra, r.TruePeak, o.truePeak)
	near(t, "integrated", r.Integrated, o.integrated, tolOpinion)
	near(t, "true peak", r.TruePeak, o.truePeak, tolOpinionPeak)
	if r.Duration >= 30 {
		near(t, "range", lra, o.lra, tolOpinionRange)
	}
	for i := shortTermSteps - 1; i < min(len(line.ShortTerm)-1, len(o.shortTerm)); i++ {
		if o.momentary[i] > -60 {
			near(t, fmt.Sprint("momentary at step ", i), float64(line.Momentary[i]), o.momentary[i], tolOpinion)
		}
		if o.shortTerm[i] > -60 {
			near(t, fmt.Sprint("short-term at step ", i), float64(line.ShortTerm[i]), o.shortTerm[i], tolOpinion)
		}
	}
}

const opinionSeconds = "45"

// decoded returns the first part of a file as FFmpeg decodes it.
func decoded(t testing.TB, path string, rate, channels int) audio.Block {
	out := ffmpeg(t, "-t", opinionSeconds, "-i", path, "-map", "0:a:0", "-f", "f32le", "-ar", strconv.Itoa(rate), "-ac", strconv.Itoa(channels), "-")
	b := audio.NewBlock(channels, len(out)/4/channels)
	for i := range b.Frames() * channels {
		b[i%channels][i/channels] = math.Float32frombits(binary.LittleEndian.Uint32(out[4*i:]))
	}
	return b
}

type opinion struct {
	integrated, lra, truePeak float64
	momentary, shortTerm      []float64
}

// ffmpegReads returns what FFmpeg's meter says of the first part of a file.
func ffmpegReads(t *testing.T, path string) opinion {
	out := ffmpeg(t, "-t", opinionSeconds, "-i", path, "-map", "0:a:0", "-af",
		"aresample=48000,ebur128=metadata=1:peak=true,ametadata=mode=print:file=-", "-f", "null", "-")
	o := opinion{truePeak: math.Inf(-1)}
	lines := bufio.NewScanner(bytes.NewReader(out))
	for lines.Scan() {
		key, text, _ := strings.Cut(strings.TrimPrefix(lines.Text(), "lavfi.r128."), "=")
		value, err := strconv.ParseFloat(text, 64)
		if err != nil {
			continue
		}
		switch {
		case key == "I":
			o.integrated = value
		case key == "LRA":
			o.lra = value
		case key == "M":
			o.momentary = append(o.momentary, value)
		case key == "S":
			o.shortTerm = append(o.shortTerm, value)
		case strings.HasPrefix(key, "true_peaks_ch"):
			o.truePeak = max(o.truePeak, audio.ToDB(value))
		}
	}
	if len(o.shortTerm) == 0 {
		t.Fatalf("FFmpeg's meter said nothing of %s", path)
	}
	return o
}

// ffmpeg runs FFmpeg and returns what it writes.
func ffmpeg(t testing.TB, args ...string) []byte {
	t.Helper()
	var complaint bytes.Buffer
	cmd := exec.Command("ffmpeg", append([]string{"-v", "error", "-nostdin"}, args...)...)
	cmd.Stderr = &complaint
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("ffmpeg (is it installed?): %v\n%s", err, complaint.String())
	}
	return out
}
