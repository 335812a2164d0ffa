package media

import (
	"errors"
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
		{"AAC", lossyInfo("mp4", "aac", 128_000, stereo(44100)), "mp4 aac 0 .m4a", "flac flac 16 .flac", "", "ffmpeg"},
		{"AAC 5.1", lossyInfo("mp4", "aac", 384_000, audio.Format{Rate: 48000, Layout: five}), "mp4 aac 0 .m4a", "flac flac 16 .flac", "", "ffmpeg"},
		{"AAC 4.0", lossyInfo("mp4", "aac", 256_000, oddLayout), "flac flac 16 .flac", "flac flac 16 .flac", "loudspeaker positions", "ffmpeg"},
		{"bare AAC", lossyInfo("aac", "aac", 128_000, stereo(44100)), "mp4 aac 0 .m4a", "flac flac 16 .flac", "in M4A", "ffmpeg"},
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

// A film is delivered in its own container where that can be written, else as Matroska, its levelled track in the source's
// codec where there is an encoder that takes its rate and channels.
func TestSpecForFilms(t *testing.T) {
	surround := audio.Format{Rate: 48000, Layout: audio.Layout{Channels: 6, Mask: 0x60F}}
	odd := audio.Format{Rate: 48000, Layout: audio.Layout{Channels: 4, Mask: 0x107}}
	seven := audio.Format{Rate: 48000, Layout: audio.UsualLayout(8)}
	for _, c := range []struct {
		container, codec string
		depth            int
		format           audio.Format
		want, note       string
	}{
		{"mp4", "aac", 0, stereo(48000), "mp4 aac 0 .mp4", ""},
		{"mp4", "ac3", 0, surround, "mp4 ac3 0 .mp4", ""},
		{"mp4", "dts", 0, surround, "mp4 aac 0 .mp4", "dts is not written"},
		{"mp4", "aac", 0, odd, "mp4 flac 16 .mp4", "loudspeaker positions"},
		{"mov", "pcm_s16le", 16, stereo(48000), "mov pcm_s16le 16 .mov", ""},
		{"mov", "pcm_s24be", 24, surround, "mov pcm_s24be 24 .mov", ""},
		{"mov", "pcm_f32le", 32, stereo(48000), "mov pcm_f32le 32 .mov", ""},
		{"matroska", "ac3", 0, surround, "matroska ac3 0 .mkv", ""},
		{"matroska", "ac3", 0, odd, "matroska ac3 0 .mkv", ""},
		{"matroska", "eac3", 0, seven, "matroska aac 0 .mkv", "no room for 8 channels"},
		{"matroska", "truehd", 24, surround, "matroska flac 24 .mkv", "truehd is not written"},
		{"matroska", "dts", 0, surround, "matroska aac 0 .mkv", "dts is not written"},
		{"webm", "opus", 0, stereo(48000), "webm opus 0 .webm", ""},
		{"avi", "mp3", 0, stereo(44100), "matroska mp3 0 .mkv", "as Matroska"},
		{"mpegts", "mp2", 0, stereo(48000), "matroska aac 0 .mkv", "as Matroska"},
	} {
		box := withFFmpeg(t)
		info := Info{Container: c.container, Codec: c.codec, BitDepth: c.depth, Format: c.format, Video: true, Float: strings.HasPrefix(c.codec, "pcm_f")}
		s := box.SpecFor(info, Wish{Format: "", Title: "x"})
		s.TagsFrom = "a.film"
		if got := fmt.Sprint(s.Container, " ", s.Codec, " ", s.BitDepth, " ", s.Extension); got != c.want {
			t.Errorf("%s %s: %s, want %s", c.container, c.codec, got, c.want)
		}
		if c.note == "" && s.Note != "" || !strings.Contains(s.Note, c.note) {
			t.Errorf("%s %s: note %q, want %q in it", c.container, c.codec, s.Note, c.note)
		}
		if err := box.checkSpec(s); err != nil {
			t.Errorf("%s %s: what SpecFor says cannot be written: %v", c.container, c.codec, err)
		}
		if s := withoutFFmpeg().SpecFor(info, Wish{}); withoutFFmpeg().checkSpec(s) == nil {
			t.Errorf("%s %s: without FFmpeg it can be written as %+v", c.container, c.codec, s)
		}
	}
	for ext, want := range map[string]string{".m4v": ".m4v", ".MP4": ".MP4", ".mkv": ".mp4", "": ".mp4"} {
		film := Info{Container: "mp4", Codec: "aac", Format: stereo(48000), Video: true}
		if got := withFFmpeg(t).SpecFor(film, Wish{}).ExtensionFor("a" + ext); got != want {
			t.Errorf("an MP4 called %q is delivered as %q, want %q", ext, got, want)
		}
	}
	// Matroska without pictures is no film: its sound takes the place of what it was made from, or another format's.
	sound := Info{Container: "matroska", Codec: "vorbis", Format: stereo(44100), Track: 1}
	if s := withFFmpeg(t).SpecFor(sound, Wish{}); !s.Film.InPlace || s.ExtensionFor("a.mka") != ".mka" || s.Codec != "vorbis" {
		t.Errorf("%+v", s)
	}
	if s := withFFmpeg(t).SpecFor(sound, Wish{Format: "mp3"}); s.Film != nil || s.Extension != ".mp3" {
		t.Errorf("%+v", s)
	}
	if s := withFFmpeg(t).SpecFor(Info{Container: "mp4", Codec: "aac", Format: stereo(48000), Video: true}, Wish{Format: "mp3"}); s.Film == nil || !strings.Contains(s.Note, "stays a film") {
		t.Errorf("%+v", s)
	}
}

// A film plays the track that is marked, and what was added to it before is neither levelled nor kept beside another.
func TestWhichTrackIsLevelled(t *testing.T) {
	track := func(title string, preferred int) probeStream {
		return probeStream{Type: "audio", Codec: "aac", SampleRate: "48000", Channels: 2, Tags: map[string]string{"title": title}, Disposition: map[string]int{"default": preferred}}
	}
	ours := LevelledTitle("film")
	for _, c := range []struct {
		streams              []probeStream
		number               int
		want, without, after int
	}{
		{[]probeStream{track("a", 0), track("b", 1)}, 0, 2, 0, 3},
		{[]probeStream{track("a", 0), track("b", 0)}, 0, 1, 0, 2},
		{[]probeStream{track("a", 1), track("b", 1)}, 2, 2, 0, 3},
		{[]probeStream{track("a", 1), track(ours, 0), track("b", 0)}, 0, 1, 2, 2},
		{[]probeStream{track(ours, 1), track("a", 0)}, 0, 2, 1, 2},
		{[]probeStream{track(LevelledTitle("talk"), 1), track("a", 0)}, 0, 2, 0, 3},
		{[]probeStream{track(ours, 1)}, 0, 1, 0, 2},
	} {
		p := &probe{Streams: append(c.streams, probeStream{Type: "video", Codec: "h264"})}
		info, _, err := p.info(kind{container: "matroska"}, c.number)
		if err != nil {
			t.Fatal(err)
		}
		film := withFFmpeg(t).SpecFor(info, Wish{Title: ours}).Film
		without := 0
		for _, n := range film.Without {
			without += n
		}
		if info.Track != c.want || without != c.without || film.Delivered() != c.after {
			t.Errorf("%+v: track %d, without %v, delivered as %d", c, info.Track, film.Without, film.Delivered())
		}
	}
	if _, _, err := (&probe{Streams: []probeStream{track("a", 0)}}).info(kind{container: "matroska"}, 2); !errors.Is(err, ErrUnsupported) {
		t.Errorf("track 2 of one: %v", err)
	}
}

// A delivery is of the same kind as its source: read, SpecFor, Create, read again.
func TestSourceToDelivery(t *testing.T) {
	t.Parallel()
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
