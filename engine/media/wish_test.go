package media

import (
	"math"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// A recording can be had in every format, of the same length and sound, and where a codec has not its rate, in the next
// higher one.
func TestWishedFormats(t *testing.T) {
	const frames = 44_100
	box, snd := withFFmpeg(t), programme(2, frames, 24, 0.5)
	source := filepath.Join(t.TempDir(), "a.wav")
	write(t, box, source, Spec{Container: "wav", BitDepth: 24, Format: stereo(44100)}, snd)
	_, info := decode(t, box, source)
	for _, test := range []struct {
		format, name string
		rate, bits   int
		note         string
	}{
		{"", "wav", 44100, 24, ""}, {"wav", "wav", 44100, 24, ""}, {"flac", "flac", 44100, 24, ""}, {"mp3", "mp3", 44100, 0, ""},
		{"m4a", "m4a aac", 44100, 0, ""}, {"ogg", "ogg vorbis", 44100, 0, ""}, {"opus", "opus", 48000, 0, "with 48000 Hz"},
	} {
		w := Wish{Format: test.format, BitRate: 192_000}
		spec := box.SpecFor(info, w)
		if (spec.Note == "") != (test.note == "") || !strings.Contains(spec.Note, test.note) {
			t.Errorf("%s: note %q", test.format, spec.Note)
		}
		spec.TagsFrom = source
		path := filepath.Join(t.TempDir(), "x"+spec.Extension)
		write(t, box, path, spec, snd)
		got, is := decode(t, box, path)
		if is.FormatName() != test.name || is.Format.Rate != test.rate || is.BitDepth != test.bits || !w.MetBy(is) {
			t.Errorf("%s: %+v", test.format, is)
		}
		if want := int(math.Round(float64(frames*test.rate) / 44100)); got.Frames() != want {
			t.Errorf("%s: %d frames, want %d", test.format, got.Frames(), want)
		}
		_, was := peakRMS(snd)
		if _, rms := peakRMS(got); math.Abs(20*math.Log10(rms/was)) > 0.3 {
			t.Errorf("%s: %.2f dB louder", test.format, 20*math.Log10(rms/was))
		}
	}
}

func TestWishesThatAreMet(t *testing.T) {
	five := audio.Format{Rate: 48000, Layout: audio.UsualLayout(6)}
	for _, test := range []struct {
		w    Wish
		is   Info
		want bool
	}{
		{Wish{}, Info{Container: "ogg", Codec: "vorbis"}, true},
		{Wish{Format: "flac"}, Info{Container: "flac", BitDepth: 16}, true},
		{Wish{Format: "flac"}, Info{Container: "wav", BitDepth: 16}, false},
		{Wish{Format: "mp3"}, Info{Container: "mp3", Codec: "mp2"}, false},
		{Wish{Format: "m4a"}, Info{Container: "mp4", Codec: "alac", BitDepth: 16}, false},
		{Wish{Format: "opus"}, Info{Container: "ogg", Codec: "opus"}, true},
		{Wish{Bits: 24}, Info{Container: "wav", BitDepth: 16}, false},
		{Wish{Bits: 32}, Info{Container: "flac", BitDepth: 24}, true},
		{Wish{Bits: 24}, Info{Container: "wav", BitDepth: 32, Float: true}, false},
		{Wish{Bits: 24}, Info{Container: "mp3", Codec: "mp3"}, true},
		{Wish{Stereo: true}, Info{Container: "flac", Format: five}, false},
		{Wish{Stereo: true}, Info{Container: "flac", Format: stereo(48000)}, true},
	} {
		if got := test.w.MetBy(test.is); got != test.want {
			t.Errorf("%+v of %+v: %v", test.w, test.is, got)
		}
	}
}

func TestRateFor(t *testing.T) {
	for _, test := range []struct {
		codec       string
		rate, wants int
	}{{"opus", 44100, 48000}, {"opus", 96000, 48000}, {"opus", 7000, 8000}, {"mp3", 44100, 44100}, {"vorbis", 96000, 96000}} {
		if got := lossyCodecs[test.codec].rateFor(test.rate); got != test.wants {
			t.Errorf("%s: %d Hz becomes %d, want %d", test.codec, test.rate, got, test.wants)
		}
	}
}
