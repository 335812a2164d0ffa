package level

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// What is said of LAME's gain is what it does to a real recording, by FFmpeg's own meter, which gives tenths.
func TestEncoderGain(t *testing.T) {
	dir := t.TempDir()
	wav := excerpt(t, dir, "x.wav", 0.5, "-c:a", "pcm_s24le")
	before, _ := secondOpinion(t, wav)
	for _, kbit := range []int{96, 128, 160, 192, 224, 256, 320} {
		path := filepath.Join(dir, "x.mp3")
		ffmpeg(t, nil, "-i", wav, "-c:a", "libmp3lame", "-b:a", fmt.Sprintf("%dk", kbit), path)
		after, _ := secondOpinion(t, path)
		e := encoderOf(media.Spec{Codec: "mp3", BitRate: kbit * 1000, Format: audio.Format{Rate: 44100, Layout: audio.Stereo}})
		if got := float64(after - before); math.Abs(got-float64(e.Gain)) > 0.11 {
			t.Errorf("%d kbit/s: LAME moves the loudness by %.1f LU, %.2f are expected", kbit, got, e.Gain)
		}
		os.Remove(path)
	}
}

// Lossless formats keep the sound; the less a lossy one has to spend, the more room it is given, up to a bound.
func TestEncoderOver(t *testing.T) {
	stereo := audio.Format{Rate: 44100, Layout: audio.Stereo}
	for _, c := range []struct {
		codec string
		kbit  int
		want  audio.DB
	}{
		{"flac", 0, 0}, {"pcm_s16le", 0, 0}, {"mp3", 128, 0.5}, {"mp3", 320, 0.2}, {"aac", 128, 1.3}, {"aac", 32, 2}, {"opus", 0, 0.475}, {"vorbis", 64, 1.6},
	} {
		if got := encoderOf(media.Spec{Codec: c.codec, BitRate: 1000 * c.kbit, Format: stereo}).Over; math.Abs(float64(got-c.want)) > 1e-9 {
			t.Errorf("%s at %d kbit/s: %v dB, want %v", c.codec, c.kbit, got, c.want)
		}
	}
}

// Real music that the ceiling has to hold needs one encoding, or two, and keeps the ceiling and the target by FFmpeg's
// own meter.
func TestLossyCopiesNeedFewEncodings(t *testing.T) {
	dir, e := t.TempDir(), &Engine{Media: media.Find()}
	p := named(t, "rotation")
	p.Target = -13
	for name, args := range map[string][]string{
		"x.mp3": {"-b:a", "192k"}, "y.mp3": {"-b:a", "96k"}, "x.m4a": {"-c:a", "aac", "-b:a", "160k"}, "x.opus": {"-ar", "48000", "-b:a", "128k"},
	} {
		source, target := excerpt(t, dir, name, 0.5, args...), filepath.Join(dir, "copy")
		o, err := e.Level(context.Background(), source, Task{Profile: p}, target)
		if err != nil {
			t.Fatal(err)
		}
		loudness, peak := secondOpinion(t, target)
		if o.Renders > 2 || math.Abs(float64(loudness-p.Target)) > 0.3 || float64(peak-p.Ceiling) > 0.1 {
			t.Errorf("%s: %d encodings, %.1f LUFS, %.1f dBTP: %s", name, o.Renders, loudness, peak, o.Verdict.Reason)
		}
		if left, _ := filepath.Glob(target + "*"); len(left) != 1 {
			t.Errorf("%s: %v are left", name, left)
		}
	}
}

// After as many encodings as are allowed the doubt says whose doing it is.
func TestEncoderIsNamed(t *testing.T) {
	p, before := named(t, "rotation"), reading(-30, -9)
	after := reading(-18.5, -0.8)
	r := rendering{Reading: after.Reading, anchored: after.Integrated, copies: mostRenders}
	v := judge(p, before, Plan{Gain: 12, Aim: p.Target, Ceiling: p.Ceiling}, r, treatmentOf(before, r))
	if v.State != Held || strings.Count(v.Reason, "the encoder") != 2 {
		t.Errorf("%v", v)
	}
}
