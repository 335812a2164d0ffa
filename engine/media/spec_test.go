package media

import (
	"fmt"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

func TestSpecFor(t *testing.T) {
	five := audio.UsualLayout(6)
	info := func(container, codec string, depth int, f audio.Format) Info {
		return Info{Container: container, Codec: codec, BitDepth: depth, Format: f, Float: strings.HasPrefix(codec, "pcm_f")}
	}
	lossyInfo := func(container, codec string, rate int, f audio.Format) Info {
		return Info{Container: container, Codec: codec, BitRate: rate, Format: f}
	}
	film := lossyInfo("mp4", "aac", 128_000, stereo(48000))
	film.Video = true
	oddLayout := audio.Format{Rate: 48000, Layout: audio.Layout{Channels: 4, Mask: 0x107}}
	many := audio.Format{Rate: 48000, Layout: audio.Layout{Channels: 10}}
	longAIFF := info("aiff", "pcm_s24be", 24, stereo(48000))
	longAIFF.Frames = 1 << 30
	tests := []struct {
		name          string
		info          Info
		with, without string // container codec depth extension; with and without FFmpeg
		note, noteOut string // a part of the note; "" means none
	}{
		{"WAV 16", info("wav", "pcm_s16le", 16, stereo(44100)), "wav pcm_s16le 16 .wav", "wav pcm_s16le 16 .wav", "", ""},
		{"WAV 8", info("wav", "pcm_u8", 8, stereo(44100)), "wav pcm_s16le 16 .wav", "wav pcm_s16le 16 .wav", "", ""},
		{"WAV 20 in 24", info("wav", "pcm_s24le", 20, stereo(44100)), "wav pcm_s24le 24 .wav", "wav pcm_s24le 24 .wav", "", ""},
		{"WAV 24 in 32", info("wav", "pcm_s32le", 24, stereo(44100)), "wav pcm_s24le 24 .wav", "wav pcm_s24le 24 .wav", "", ""},
		{"WAV 32", info("wav", "pcm_s32le", 32, stereo(44100)), "wav pcm_s32le 32 .wav", "wav pcm_s32le 32 .wav", "", ""},
		{"WAV float", info("wav", "pcm_f32le", 32, stereo(44100)), "wav pcm_f32le 32 .wav", "wav pcm_f32le 32 .wav", "", ""},
		{"WAV float 64", info("wav", "pcm_f64le", 64, stereo(44100)), "wav pcm_f64le 64 .wav", "wav pcm_f64le 64 .wav", "", ""},
		{"WAV ADPCM", info("wav", "adpcm_ms", 0, stereo(44100)), "wav pcm_s16le 16 .wav", "wav pcm_s16le 16 .wav", "adpcm_ms", "adpcm_ms"},
		{"FLAC 16", info("flac", "flac", 16, stereo(44100)), "flac flac 16 .flac", "flac flac 16 .flac", "", ""},
		{"FLAC 32", info("flac", "flac", 32, stereo(44100)), "flac flac 24 .flac", "flac flac 24 .flac", "", ""},
		{"MP3", lossyInfo("mp3", "mp3", 128_000, stereo(44100)), "mp3 mp3 0 .mp3", "flac flac 16 .flac", "", "install the Debian package ffmpeg"},
		{"MP2", lossyInfo("mp3", "mp2", 192_000, stereo(48000)), "mp4 aac 0 .m4a", "flac flac 16 .flac", "mp2 is not written", "ffmpeg"},
		{"Vorbis", lossyInfo("ogg", "vorbis", 160_000, stereo(44100)), "ogg vorbis 0 .ogg", "flac flac 16 .flac", "", "ffmpeg"},
		{"Opus", lossyInfo("ogg", "opus", 96_000, stereo(48000)), "ogg opus 0 .opus", "flac flac 16 .flac", "", "ffmpeg"},
		{"Opus in WebM", lossyInfo("webm", "opus", 96_000, stereo(48000)), "mp4 aac 0 .m4a", "flac flac 16 .flac", "webm opus is not written", "ffmpeg"},
		{"AAC", lossyInfo("mp4", "aac", 128_000, stereo(44100)), "mp4 aac 0 .m4a", "flac flac 16 .flac", "", "ffmpeg"},
		{"AAC 5.1", lossyInfo("mp4", "aac", 384_000, audio.Format{Rate: 48000, Layout: five}), "mp4 aac 0 .m4a", "flac flac 16 .flac", "", "ffmpeg"},
		{"AAC 4.0", lossyInfo("mp4", "aac", 256_000, oddLayout), "flac flac 16 .flac", "flac flac 16 .flac", "loudspeaker positions", "ffmpeg"},
		{"bare AAC", lossyInfo("aac", "aac", 128_000, stereo(44100)), "mp4 aac 0 .m4a", "flac flac 16 .flac", "in M4A", "ffmpeg"},
		{"film", film, "mp4 aac 0 .m4a", "flac flac 16 .flac", "only the sound", "only the sound"},
		{"ALAC", info("mp4", "alac", 16, stereo(44100)), "mp4 alac 16 .m4a", "flac flac 16 .flac", "", "ffmpeg"},
		{"AIFF", info("aiff", "pcm_s24be", 24, stereo(44100)), "aiff pcm_s24be 24 .aiff", "aiff pcm_s24be 24 .aiff", "", ""},
		{"AIFF 8", info("aiff", "pcm_s8", 8, stereo(44100)), "aiff pcm_s16be 16 .aiff", "aiff pcm_s16be 16 .aiff", "", ""},
		{"AIFC sowt", info("aiff", "pcm_s16le", 16, stereo(44100)), "aiff pcm_s16le 16 .aiff", "aiff pcm_s16le 16 .aiff", "", ""},
		{"AIFC float", info("aiff", "pcm_f32be", 32, stereo(44100)), "aiff pcm_f32be 32 .aiff", "aiff pcm_f32be 32 .aiff", "", ""},
		{"AIFF 5.1", info("aiff", "pcm_s16be", 16, audio.Format{Rate: 48000, Layout: five}), "aiff pcm_s16be 16 .aiff", "aiff pcm_s16be 16 .aiff", "", ""},
		{"AIFC of µ-law", info("aiff", "pcm_mulaw", 0, stereo(44100)), "aiff pcm_s16be 16 .aiff", "aiff pcm_s16be 16 .aiff", "pcm_mulaw", "pcm_mulaw"},
		{"AIFF too long", longAIFF, "wav pcm_s24le 24 .wav", "wav pcm_s24le 24 .wav", "4 GiB", "4 GiB"},
		{"WavPack", info("wv", "wavpack", 24, stereo(44100)), "flac flac 24 .flac", "flac flac 24 .flac", "wavpack is not written", "wavpack is not written"},
		{"CAF of 10 channels", info("caf", "pcm_s24be", 24, many), "wav pcm_s24le 24 .wav", "wav pcm_s24le 24 .wav", "FLAC has no room", "FLAC has no room"},
	}
	for _, test := range tests {
		for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
			want, note := test.with, test.note
			if box.FFmpeg() == "" {
				want, note = test.without, test.noteOut
			}
			s := box.SpecFor(test.info, Wish{})
			if got := fmt.Sprint(s.Container, " ", s.Codec, " ", s.BitDepth, " ", s.Extension); got != want {
				t.Errorf("%s: %s, want %s", test.name, got, want)
			}
			if note == "" && s.Note != "" || !strings.Contains(s.Note, note) {
				t.Errorf("%s: note %q, want %q in it", test.name, s.Note, note)
			}
			if s.Format != test.info.Format {
				t.Errorf("%s: format %+v", test.name, s.Format)
			}
			if err := box.checkSpec(s); err != nil {
				t.Errorf("%s: what SpecFor says cannot be written: %v", test.name, err)
			}
		}
	}
}

// A delivery is of the same kind as its source: read, SpecFor, Create, read again.
func TestSourceToDelivery(t *testing.T) {
	box := withFFmpeg(t)
	for name, file := range formats(t) {
		source := save(t, "a."+name, file)
		snd, info := decode(t, box, source)
		spec := box.SpecFor(info, Wish{})
		spec.TagsFrom = source
		if spec.Note != "" || spec.Extension != filepath.Ext(source) {
			t.Errorf("%s: %+v", name, spec)
		}
		path := filepath.Join(t.TempDir(), "x")
		write(t, box, path, spec, snd)
		again, infoAgain := decode(t, box, path)
		if again.Frames() != snd.Frames() || infoAgain.FormatName() != info.FormatName() || infoAgain.Format != info.Format || infoAgain.BitDepth != info.BitDepth {
			t.Errorf("%s: %+v became %+v, %d frames became %d", name, info, infoAgain, snd.Frames(), again.Frames())
		}
	}
}

func TestBitRates(t *testing.T) {
	for _, test := range [][3]int{ // wanted, rate, the next of ISO/IEC 11172-3's or 13818-3's table
		{128_000, 44100, 128_000}, {187_412, 44100, 192_000}, {999_000, 48000, 320_000}, {1, 44100, 32_000},
		{63_000, 22050, 64_000}, {320_000, 22050, 160_000}, {96_000, 11025, 64_000},
	} {
		if got := mp3BitRate(test[0], test[1]); got != test[2] {
			t.Errorf("MP3 of %d bit/s at %d Hz: %d, want %d", test[0], test[1], got, test[2])
		}
	}
	if q := vorbisQuality(160_000, stereo(44100)); q != 5 {
		t.Errorf("Vorbis at 160 kbit/s: quality %v, want 5", q)
	}
}

func TestNames(t *testing.T) {
	if !slices.IsSorted(Extensions()) {
		t.Error("extensions are not sorted")
	}
	for name, want := range map[string]bool{
		"a.wav": true, "B.MP3": true, "c/d.Flac": true, "e.opus": true, "f.txt": false, "g.m3u": false, "mp3": false,
		".hidden.mp3": false, "c/._d.wav": false, "": false, "cover.jpg": false, "take.wav.part": false,
	} {
		if LooksLikeMedia(name) != want {
			t.Errorf("%q: %v", name, !want)
		}
	}
}

func TestToolboxWithoutTools(t *testing.T) {
	for _, path := range []string{"", "/nowhere/ffmpeg", "/bin/false"} {
		if box := New(path); box.FFmpeg() != "" || box.Version() != "" {
			t.Errorf("%q: %q", path, box.FFmpeg())
		}
	}
	if box := withFFmpeg(t); box.Version() == "" || strings.ContainsAny(box.Version(), " -") {
		t.Errorf("version %q", box.Version())
	}
	if v := versionIn("ffmpeg version 5.1.6-0+deb12u1 Copyright (c) 2000-2024"); v != "5.1.6" {
		t.Errorf("version %q", v)
	}
}

// A copy keeps the extension of its source where it says the same, or it could not take its place.
func TestExtensionFor(t *testing.T) {
	for _, test := range [][3]string{
		{".m4a", "a/book.m4b", ".m4b"}, {".m4a", "book.M4B", ".M4B"}, {".m4a", "film.mp4", ".m4a"}, {".m4a", "x.flac", ".m4a"},
		{".aiff", "x.aif", ".aif"}, {".ogg", "x.oga", ".oga"}, {".wav", "x.bwf", ".bwf"}, {".wav", "x.aif", ".wav"}, {".mp3", "x", ".mp3"},
		{".aiff", "a.AIFC", ".AIFC"}, {".flac", "B.FLAC", ".FLAC"}, {".flac", "a.aif", ".flac"},
	} {
		if got := (Spec{Extension: test[0]}).ExtensionFor(test[1]); got != test[2] {
			t.Errorf("%v: %q", test, got)
		}
	}
}
